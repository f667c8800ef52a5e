"""Rig files: what is read, and every refusal with its message."""

# ruff: noqa: E501  -- the table of refusals reads best with its texts unbroken

from __future__ import annotations

import math
import pickle
import re
import subprocess
import sys
from pathlib import Path

import pytest

from shpb.errors import FileMistakes, InputError
from shpb.limits import Limits
from shpb.quantity import Quantity
from shpb.rig.gauge import Arrangement, TestKind
from shpb.rig.overrides import hints_for, settings_for
from shpb.rig.rig_file import read_rig, rig_from_text, wave_speed_from_modulus
from shpb.rig.sheet_file import sheet_from_text

DEMO = Path(__file__).parents[2] / "calibration" / "bench_1.toml"


def test_a_rig_file_becomes_si_quantities(rig_text):
    text = rig_text(
        ("diameter_mm = 20.0", 'diameter_mm = { value = 20.0, u = 0.005, origin = "micrometer" }'),
        ("gauge_factor = 2.08", "gauge_factor = { value = 2.08, u_percent = 0.5 }"),
        (
            "gain = 500",
            "gain = 500\nbandwidth_kHz = 500\ngauge_length_mm = 2\nscope_range_V = 5\nscope_bits = 12",
        ),
        ("gain = 100", "gain = 100\nscope_range_mV = [-200, 2000]\noutput_proportional_to_strain = true"),
        ("[rig]\n", "[rig]\ncalibration_date = 2024-02-06\n"),
    )
    rig = rig_from_text(text, "rig.toml")
    bar = rig.incident_bar
    assert (float(bar.diameter_m), bar.diameter_m.u, bar.diameter_m.origin) == (0.02, 5e-6, "micrometer")
    # By hand: E = rho c0^2 = 200 GPa, Z = rho c0 A = 4e7 x pi 1e-4 = 12566.3706 N s/m.
    assert bar.young_modulus_pa == pytest.approx(200e9, rel=1e-12)
    assert bar.impedance_n_s_m == pytest.approx(12566.3706, rel=1e-8)
    assert rig.incident_gauge.gauge_factor.u == pytest.approx(0.0104)
    assert rig.incident_gauge.scope_range_v == (-5.0, 5.0)
    assert rig.transmitted_gauge.scope_range_v == pytest.approx((-0.2, 2.0))
    assert rig.incident_gauge.bandwidth_hz == 500e3
    assert rig.incident_gauge.length_m == 0.002
    assert rig.incident_gauge.scope_bits == 12
    assert rig.incident_gauge.arrangement is Arrangement.HALF_OPPOSITE
    assert rig.transmitted_gauge.linear_amplifier
    assert not rig.incident_gauge.linear_amplifier
    assert rig.calibration_date == "2024-02-06"
    assert rig.text == text


def test_polarity_is_the_sign_of_the_voltage_in_tension(rig_text):
    rig = rig_from_text(rig_text(), "rig.toml")
    # Negative under compression: positive under tension, and the loading pulse of a compression test
    # is turned positive by a factor -1.
    assert rig.incident_gauge.tension_sign == 1
    assert rig.incident_gauge.loading_sign(TestKind.COMPRESSION) == -1
    assert rig.transmitted_gauge.tension_sign == -1
    positive = ('voltage_under_compression = "negative"', 'voltage_under_compression = "positive"')
    assert rig_from_text(rig_text(positive), "rig.toml").incident_gauge.tension_sign == -1


@pytest.mark.parametrize(
    ("mm", "other"),
    [
        ("length_mm = 2000", "length_m = 2.0"),
        ("diameter_mm = 20.0", "diameter_m = 0.020"),
        ("density_kg_m3 = 8000", "density_g_cm3 = 8.0"),
        ("young_modulus_GPa = 71.7", "young_modulus_MPa = 71700"),
        ("to_specimen_mm = 1000", "to_specimen_m = 1"),
    ],
)
def test_a_quantity_may_be_written_in_its_other_units(rig_text, mm, other):
    one, two = (rig_from_text(text, "r") for text in (rig_text(), rig_text((mm, other))))
    for side in ("incident_bar", "transmitted_bar"):
        for name in ("length_m", "diameter_m", "density_kg_m3", "wave_speed_m_s"):
            assert getattr(getattr(two, side), name) == pytest.approx(
                getattr(getattr(one, side), name), rel=1e-14
            )
    assert two.incident_gauge.to_specimen_m == one.incident_gauge.to_specimen_m


@pytest.mark.parametrize(
    ("written", "channels"),
    [('"CH1"', ("CH1",)), ("1", (1,)), ('["CH1", "CH3"]', ("CH1", "CH3")), ("[1, 3]", (1, 3))],
)
def test_channels_by_name_or_position_one_or_two(rig_text, written, channels):
    rig = rig_from_text(rig_text(('channel = "CH1"', f"channel = {written}")), "rig.toml")
    assert rig.incident_gauge.channels == channels


def test_wave_speed_from_modulus_matches_the_handbook_table(rig_text):
    # Aluminium 7075-T6, E = 71.7 GPa, rho = 2810 kg/m^3: c0 = 5051.3379 m/s (computed with 30 digits).
    rig = rig_from_text(rig_text(), "rig.toml")
    assert rig.transmitted_bar.wave_speed_m_s == pytest.approx(5051.3379, rel=1e-8)


def test_wave_speed_from_modulus_propagates_the_uncertainty():
    # JCGM 100:2008, 5.1.2 with c = sqrt(E/rho): u(c)/c = 1/2 sqrt(0.02^2 + 0.001^2) = 1.00125 %.
    speed = wave_speed_from_modulus(
        Quantity(190e9, u=3.8e9, origin="handbook"), Quantity(8000, u=8, origin="weighed")
    )
    assert speed.u / speed == pytest.approx(0.0100125, rel=1e-5)
    assert speed.origin == "sqrt(E/rho); E: handbook; rho: weighed"
    one_known = wave_speed_from_modulus(Quantity(190e9, u=3.8e9), Quantity(8000))
    assert one_known.u / one_known == pytest.approx(0.01, rel=1e-9)
    assert wave_speed_from_modulus(Quantity(190e9), Quantity(8000)).u is None


def test_a_measured_wave_speed_rules_over_a_modulus_that_agrees(rig_text):
    both = ("wave_speed_m_s = 5000", "wave_speed_m_s = 5000\nyoung_modulus_GPa = 205")
    assert rig_from_text(rig_text(both), "r").incident_bar.wave_speed_m_s == 5000


def test_the_striker_is_as_the_incident_bar_where_nothing_is_said(rig_text):
    striker = rig_from_text(rig_text(), "r").striker
    assert striker.pulse_duration_s == pytest.approx(120e-6)
    # The impedance of the incident bar, 12566.3706 N s/m: a striker of like bar stops dead.
    assert striker.impedance_n_s_m == pytest.approx(12566.3706, rel=1e-8)
    assert striker.material == "steel"
    own = (
        "length_mm = 300",
        'length_mm = 300\nmaterial = "tool steel"\ndensity_kg_m3 = 7800\nyoung_modulus_GPa = 210',
    )
    striker = rig_from_text(rig_text(own), "r").striker
    assert striker.wave_speed_m_s == pytest.approx(math.sqrt(210e9 / 7800))
    assert rig_from_text(rig_text(("[striker]\nlength_mm = 300\n", "")), "r").striker is None


def test_settings_and_hints_of_the_rig_and_of_the_sheet_are_merged(rig_text, sheet_text):
    rig = rig_from_text(
        rig_text(("[striker]", "[record]\nsample_interval_us = 0.2\ntime_unit = 'µs'\n"
                  "[settings]\ncutoff_kHz = 120\ndispersion = 'full'\n[limits]\nnoise = 0.06\noverlap = 0.03\n[striker]")), "r"
    )  # fmt: skip
    sheet = sheet_from_text(
        sheet_text(("[specimen]", "[record]\nsample_interval_us = 0.1\n"
                    "[settings]\nincident_window_us = [-10, 150]\ncutoff_kHz = 'automatic'\n[limits]\nnoise = 0.05\nmisalignment_us = 4\n[specimen]")),
        "s", "lab",
    )  # fmt: skip
    settings = settings_for(rig, sheet)
    assert (settings.dispersion.value, settings.cutoff_hz) == ("full", None)
    assert settings.limits == Limits(noise=0.05, overlap=0.03, misalignment_s=4e-6)
    assert settings.incident_window_s == pytest.approx((-10e-6, 150e-6))
    assert rig.settings == {
        "cutoff_hz": 120e3,
        "dispersion": "full",
        "limits": {"noise": 0.06, "overlap": 0.03},
    }
    hints = hints_for(rig, sheet)
    assert hints.sample_interval_s == pytest.approx(0.1e-6)
    assert hints.time_unit == "us"


def test_a_rig_travels_to_worker_processes_and_back_from_its_text(rig_text):
    rig = rig_from_text(rig_text(), "rig.toml")
    assert repr(pickle.loads(pickle.dumps(rig))) == repr(rig)
    assert repr(rig_from_text(rig.text, "rig.toml")) == repr(rig)


def test_the_demo_rig_reads(tmp_path):
    rig = read_rig(DEMO)
    assert rig.incident_bar.wave_speed_m_s == 4870
    crlf_with_mark = tmp_path / "rig.toml"
    crlf_with_mark.write_bytes(b"\xef\xbb\xbf" + DEMO.read_bytes().replace(b"\n", b"\r\n"))
    again = read_rig(crlf_with_mark)
    assert repr(again.incident_gauge) == repr(rig.incident_gauge)


# --- refusals: (old text, new text, where, what the message says) ---------------------------------

REFUSALS = [
    pytest.param("diameter_mm = 20.0", "diameter_mm = 20000", "incident_bar.diameter_mm",
                 r"found 20000 mm, expected a number in mm, 0.5 to 200 mm", id="diameter of 20 m"),
    pytest.param("diameter_mm = 20.0", "diameter_m = 20", "incident_bar.diameter_m",
                 r"found 20 m, .* 0.0005 to 0.2 m. If it is 20 mm, write diameter_mm = 20", id="mm under a key in m"),
    pytest.param("poisson_ratio = 0.29", "poisson_ratio = 0.6", "incident_bar.poisson_ratio",
                 r"found 0.6, expected a number, 0 to 0.49. Metals lie near 0.3", id="Poisson's ratio 0.6"),
    pytest.param("wave_speed_m_s = 5000", "wave_speed_m_s = 5.1", "incident_bar.wave_speed_m_s",
                 r"found 5.1 m/s, .* If it is 5.1 mm/µs \(km/s\), write wave_speed_m_s = 5100", id="speed in km/s"),
    pytest.param("wave_speed_m_s = 5000", "wave_speed_m_s = 5000\nyoung_modulus_GPa = 170",
                 "incident_bar.wave_speed_m_s",
                 r"found 5000 m/s, while modulus and density give 4609.77 m/s \(-7.8 %\), expected agreement within 3 %",
                 id="modulus and speed disagree"),
    pytest.param("young_modulus_GPa = 71.7", "young_modulus_GPa = 0.2", "transmitted_bar.young_modulus_GPa",
                 r"found 0.2 GPa at 2810 kg/m³, which gives a wave speed of 266.8 m/s", id="modulus far too low"),
    pytest.param("young_modulus_GPa = 71.7", "young_modulus_GPa = 71700", "transmitted_bar.young_modulus_GPa",
                 r"If it is 71700 MPa, write young_modulus_GPa = 71.7", id="modulus in MPa"),
    pytest.param("wave_speed_m_s = 5000\n", "", "incident_bar.wave_speed_m_s",
                 r"found nothing, expected wave_speed_m_s or young_modulus_GPa", id="neither speed nor modulus"),
    pytest.param("density_kg_m3 = 8000", "density_kg_m3 = 8.0", "incident_bar.density_kg_m3",
                 r"If it is 8 g/cm³, write density_kg_m3 = 8000", id="density in g/cm3"),
    pytest.param("length_mm = 2000", "length_mm = 2.0", "incident_bar.length_mm",
                 r"found 2 mm, .* If it is 2 m, write length_mm = 2000", id="length in m"),
    pytest.param("length_mm = 1500", "length_mm = 0", "transmitted_bar.length_mm", r"found 0 mm", id="no length"),
    pytest.param("to_specimen_mm = 1000", "to_specimen_mm = 2500", "incident_gauge.to_specimen_mm",
                 r"found 2.5 m on a bar of 2 m, expected less than the bar's length", id="gauge beyond the end"),
    pytest.param("[striker]\nlength_mm = 300", "[striker]\nlength_mm = 1100", "striker.length_mm",
                 r"a striker of 1100 mm, whose pulse lasts 440 µs, while its reflection is back at the incident gauge "
                 r"after 400 µs, expected a striker shorter than 1000 mm, or incident_gauge.to_specimen_mm above 1100 mm",
                 id="pulse too long for the gauge position"),
    pytest.param("excitation_V = 5.0", "excitation_V = 5000", "incident_gauge.excitation_V",
                 r"found 5000 V, .* 0.1 to 100 V. If it is 5000 mV, write excitation_V = 5", id="excitation of 5000 V"),
    pytest.param("gain = 500", "gain = 0", "incident_gauge.gain", r"found 0, .* Without an amplifier the gain is 1",
                 id="gain 0"),
    pytest.param("gauge_factor = 2.08", "gauge_factor = 200", "incident_gauge.gauge_factor",
                 r"found 200, .* Metal foil lies near 2.1", id="gauge factor 200"),
    pytest.param("gauge_factor = 2.08", "gauge_factor = 20.8", "incident_gauge.gauge_factor",
                 r"found 20.8, .* Check the decimal point", id="gauge factor 20.8"),
    pytest.param('voltage_under_compression = "negative"\n', "", "incident_gauge.voltage_under_compression",
                 r"found nothing, expected voltage_under_compression or voltage_under_tension", id="no polarity"),
    pytest.param('voltage_under_compression = "negative"',
                 'voltage_under_compression = "negative"\nvoltage_under_tension = "positive"',
                 "incident_gauge.voltage_under_compression", r"expected exactly one of the two. Remove one",
                 id="both polarities"),
    pytest.param('voltage_under_compression = "negative"', 'voltage_under_compression = "neg"',
                 "incident_gauge.voltage_under_compression",
                 r'found "neg", expected one of "negative", "positive". Did you mean "negative"\?', id="polarity word"),
    pytest.param("gain = 500", "gain = 500\nscope_range_V = [5, -5]", "incident_gauge.scope_range_V",
                 r"found \[5, -5\], .* Give the lower number first", id="scope range reversed"),
    pytest.param("gain = 500", "gain = 500\nscope_range_V = 0", "incident_gauge.scope_range_V",
                 r"found 0 V, .* Write scope_range_V = 5.0 for a range from -5 to \+5", id="no scope range"),
    pytest.param("gain = 500", "gain = 500\nscope_range_V = [1, 2, 3]", "incident_gauge.scope_range_V",
                 r"found a list of 3", id="scope range of three"),
    pytest.param("gain = 500", "gain = 500\nscope_bits = 0", "incident_gauge.scope_bits",
                 r"found 0, expected a whole number, 4 to 32", id="0 bits"),
    pytest.param("gain = 500", "gain = 500\nscope_bits = 40", "incident_gauge.scope_bits", r"found 40", id="40 bits"),
    pytest.param("gain = 500", "gain = 500\nscope_bits = 12.5", "incident_gauge.scope_bits",
                 r"found 12.5, expected a whole number", id="half a bit"),
    pytest.param('arrangement = "half-opposite"', 'arrangement = "half opposite"', "incident_gauge.arrangement",
                 r'Did you mean "half-opposite"\?', id="arrangement misspelt"),
    pytest.param('channel = "CH1"', 'channel = "CH2"', "transmitted_gauge.channel",
                 r"a channel of the incident gauge too", id="one channel for both"),
    pytest.param('channel = "CH1"', "channel = 0", "incident_gauge.channel", r"found 0", id="channel 0"),
    pytest.param('channel = "CH1"', 'channel = ["CH1", "CH1"]', "incident_gauge.channel", r'"CH1" twice',
                 id="a side twice"),
    pytest.param('channel = "CH1"', 'channel = ["A", "B", "C"]', "incident_gauge.channel", r"a list of 3",
                 id="three sides"),
    pytest.param("gain = 500", "gain = 500\nlead_resistance_ohm = 0.4", "incident_gauge.resistance_ohm",
                 r"beside a lead resistance", id="leads without resistance"),
    pytest.param("gain = 500", "gain = 500\nresistance_ohm = 0.35", "incident_gauge.resistance_ohm",
                 r"If it is 0.35 kilohm, write resistance_ohm = 350", id="resistance in kilohm"),
    pytest.param("gain = 500", "gain = 500\noutput_proportional_to_strain = 'yes'",
                 "incident_gauge.output_proportional_to_strain", r"Write true or false without quotes", id="switch"),
    pytest.param("[striker]", "[striker]\nmaterial = 'aluminium'", "striker.material",
                 r'found "aluminium", while the incident bar is "steel", expected density and wave speed', id="striker"),
    pytest.param("length_mm = 2000", "length_mm = 2000\nlength_m = 2.0", "incident_bar.length_m",
                 r"found length_mm too, expected one of the two", id="one length in two units"),
    pytest.param("diameter_mm = 20.0", "diametre_mm = 20.0", "incident_bar.diametre_mm",
                 r"an unknown key, .* Did you mean diameter_mm\?", id="misspelt key"),
    pytest.param("young_modulus_GPa", "young_modulus_gpa", "transmitted_bar.young_modulus_gpa",
                 r"Did you mean young_modulus_GPa\?", id="capitals"),
    pytest.param("[transmitted_gauge]", "[transmited_gauge]", "[transmited_gauge]",
                 r"an unknown table, .* Did you mean \[transmitted_gauge\]\?", id="misspelt table"),
    pytest.param("material = \"steel\"", "material = \"steel\"\ngain = 1", "incident_bar.gain",
                 r"This key belongs in \[incident_gauge\] or \[transmitted_gauge\]", id="key in the wrong table"),
    pytest.param("[rig]\n", "gain = 1\n[rig]\n", "gain", r"a key outside any table", id="key outside any table"),
    pytest.param('[rig]\nname = "Test bench"', "rig = 'bench'", "rig", r'found "bench", expected a table', id="no table"),
    pytest.param('name = "Test bench"', "name = ' '", "rig.name", r"found empty text", id="empty name"),
    pytest.param("material = \"steel\"\n", "", "incident_bar.material",
                 r'found nothing, expected text. Add it, for example material = "maraging steel"', id="missing key"),
    pytest.param("diameter_mm = 20.0", 'diameter_mm = "20"', "incident_bar.diameter_mm",
                 r'found "20", .* Write the number without quotes', id="number in quotes"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = true", "incident_bar.diameter_mm", r"found true", id="true"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = nan", "incident_bar.diameter_mm", r"found nan", id="nan"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = inf", "incident_bar.diameter_mm", r"found inf", id="inf"),
    pytest.param("diameter_mm = 20.0", f"diameter_mm = 1{'0' * 400}", "incident_bar.diameter_mm",
                 r"a whole number of more than 60 digits", id="huge"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = { u = 0.1 }", "incident_bar.diameter_mm.value", r"no value",
                 id="no value"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = { value = 20, uu = 0.1 }", "incident_bar.diameter_mm.uu",
                 r"Did you mean u\?", id="unknown part of a quantity"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = { value = 20, u = 0.1, u_percent = 1 }",
                 "incident_bar.diameter_mm.u", r"both u and u_percent", id="u twice"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = { value = 20, u = -0.1 }", "incident_bar.diameter_mm.u",
                 r"found -0.1, expected a number in mm from 0", id="negative u"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = { value = 20, u = 19 }", "incident_bar.diameter_mm.u",
                 r"19 mm on a value of 20, expected a standard uncertainty below half the value", id="u too large"),
    pytest.param("diameter_mm = 20.0", "diameter_mm = { value = 20, origin = 3 }", "incident_bar.diameter_mm.origin",
                 r"found 3, expected text: where the number comes from", id="origin"),
    pytest.param("[rig]\n", "[rig]\ncalibration_date = 3\n", "rig.calibration_date", r"Write it as year-month-day",
                 id="date"),
    pytest.param("[striker]", "[settings]\ncutof_kHz = 3\n[striker]", "settings.cutof_kHz",
                 r"Did you mean cutoff_kHz\?", id="setting misspelt"),
    pytest.param("[striker]", "[settings]\nincident_window_us = [150, 10]\n[striker]", "settings.incident_window_us",
                 r"found \[150, 10\]", id="window reversed"),
    pytest.param("[striker]", "[record]\nchannel_names = ['A', 'A']\n[striker]", "record.channel_names",
                 r"the same name twice", id="channel name twice"),
    pytest.param("[striker]", "[record]\nvolts_per_code = [0.1, 'x']\n[striker]", "record.volts_per_code",
                 r'found "x"', id="volts per code"),
    pytest.param("[striker]", "[record]\nvolts_per_code = []\n[striker]", "record.volts_per_code",
                 r"found an empty list", id="empty list"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "where", "says"), REFUSALS)
def test_refusals(rig_mistakes, old, new, where, says):
    mistakes = rig_mistakes((old, new))
    assert len(mistakes) == 1, [str(m) for m in mistakes]
    assert mistakes[0].key == where
    assert re.search(says, str(mistakes[0])), str(mistakes[0])
    assert mistakes[0].file == "rig.toml"


def test_a_bar_thicker_than_long_is_refused(rig_mistakes):
    found = rig_mistakes(
        ("diameter_mm = 20.0\nlength_mm = 1500", "diameter_mm = 200\nlength_mm = 150"),
        ("to_specimen_mm = 600", "to_specimen_mm = 60"),
    )
    assert [m.expected for m in found] == ["a bar longer than it is thick"]


def test_all_mistakes_are_told_at_once(rig_text):
    text = rig_text(
        ("poisson_ratio = 0.29", "poisson_ratio = 0.6"),
        ("gain = 500", "gain = 0"),
        ("to_specimen_mm = 600", "to_specimen_mm = 1600"),
        ('arrangement = "quarter"', 'arrangement = "quater"'),
        ("[striker]\nlength_mm = 300", "[striker]\nlength_mm = 1100"),
        ("gauge_factor = 2.11\n", ""),
    )
    with pytest.raises(FileMistakes) as caught:
        rig_from_text(text, "rig.toml")
    assert {m.key for m in caught.value.mistakes} == {
        "incident_bar.poisson_ratio", "incident_gauge.gain", "transmitted_gauge.to_specimen_mm",
        "transmitted_gauge.arrangement", "transmitted_gauge.gauge_factor", "striker.length_mm",
    }  # fmt: skip
    message = str(caught.value)
    assert message.startswith("rig.toml: 6 mistakes")
    assert message.count("\n") == 6


def test_an_empty_table_of_tables_names_every_missing_one():
    with pytest.raises(FileMistakes) as caught:
        rig_from_text("# nothing yet", "rig.toml")
    assert [m.key for m in caught.value.mistakes] == [
        "[rig]", "[incident_bar]", "[transmitted_bar]", "[incident_gauge]", "[transmitted_gauge]"
    ]  # fmt: skip


def test_a_gauge_nearer_than_ten_diameters_is_no_mistake(rig_text):
    # Common practice wants 10 diameters; a nearer gauge is a finding of the shot, not a refusal.
    text = rig_text(("to_specimen_mm = 600", "to_specimen_mm = 100"))
    assert rig_from_text(text, "r").transmitted_gauge.to_specimen_m == pytest.approx(0.1)


def test_the_pulse_limit_lies_where_reflected_and_incident_pulse_touch(rig_text, rig_mistakes):
    # 2 x/c0 > 2 L/c: for equal wave speeds the gauge must lie beyond one striker length, x > L.
    near = ("[striker]\nlength_mm = 300", "[striker]\nlength_mm = 999")
    assert rig_from_text(rig_text(near), "r").striker.length_m == pytest.approx(0.999)
    assert len(rig_mistakes((near[0], "[striker]\nlength_mm = 1001"))) == 1


def test_reading_files_loads_no_numpy():
    code = (
        "import sys, shpb.rig.rig_file, shpb.rig.shot_list, shpb.rig.templates, shpb.rig.docs\n"
        "heavy = {'numpy', 'scipy', 'h5py', 'matplotlib', 'rich'} & set(sys.modules)\n"
        "sys.exit(', '.join(heavy) or 0)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


@pytest.mark.parametrize("error", [FileMistakes, InputError])
def test_mistakes_are_input_errors(error, rig_text):
    with pytest.raises(error):
        rig_from_text(rig_text(("gain = 500", "gain = 0")), "rig.toml")


def test_a_bar_that_softens_when_hot(rig_text, rig_mistakes):
    pair = ("wave_speed_m_s = 5000", "wave_speed_m_s = 5000\nmodulus_temperature_coefficient_per_K = -3.5e-4")
    rig = rig_from_text(rig_text(pair), "r")
    assert rig.incident_bar.modulus_temperature_coefficient_per_k == -3.5e-4
    assert rig.transmitted_bar.modulus_temperature_coefficient_per_k is None
    (found,) = rig_mistakes((pair[0], pair[1].replace("-3.5e-4", "-350")))
    assert "expected a number in 1/K, -0.02 to 0.02 1/K. Steels lie between" in str(found)
