"""Calibration files: written once, read back bit for bit, put in force by the rig file."""

from __future__ import annotations

import dataclasses
import hashlib
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from shpb.errors import FileMistakes, InputError, StoreError
from shpb.quantity import Quantity
from shpb.rig.calibration import (
    IN_THE_CHAIN,
    BarCalibration,
    Calibration,
    CalibrationRecord,
    GaugeCalibration,
    stated_of,
    stated_of_bar,
)
from shpb.rig.calibration_file import (
    calibration_from_text,
    free_name,
    is_calibration,
    read_calibration,
    write_calibration,
)
from shpb.rig.calibration_text import calibration_text
from shpb.rig.correlations import Correlation, correlations_after
from shpb.rig.propagation_table import COLUMNS, PropagationTable
from shpb.rig.rig import Rig
from shpb.rig.rig_file import read_rig, rig_from_text
from tests.rig.conftest import RIG, changed

Q = Quantity


def everything(value: object) -> object:
    """All that a value remembers; a Quantity alone compares as a number."""
    if isinstance(value, Quantity):
        return "quantity", float(value), value.u, value.origin
    if dataclasses.is_dataclass(value):
        return {f.name: everything(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, dict):
        return {key: everything(item) for key, item in value.items()}
    return [everything(item) for item in value] if isinstance(value, tuple) else value


def table() -> PropagationTable:
    points = tuple(1e3 + i * 1234.5678901 for i in range(40))
    return PropagationTable(
        frequency_hz=points,
        attenuation_per_m=tuple(0.1 + f / 3e5 for f in points),
        phase_speed_m_s=tuple(2200 + f / 3e3 for f in points),
        u_attenuation_per_m=tuple(1e-3 / 3 for _ in points),
        u_phase_speed_m_s=tuple(1 / 3 for _ in points),
        coherence=tuple(0.99 for _ in points),
    )


def calibration_of(rig: Rig, **changes: object) -> Calibration:
    """Every field used once, with numbers that no short decimal gives."""
    values: dict[str, object] = {
        "name": "test_2031-02-03",
        "rig": rig.name,
        "date": "2031-02-03",
        "holds_days": 200,
        "bars": {
            "incident_bar": BarCalibration(
                wave_speed_m_s=Q(5003.1 / 3 * 3.000001, 0.1 + 0.2, "mode-1 phase (BA-1, BA-2)"),
                poisson_ratio=Q(0.29 + 1e-13, 1 / 300),
                as_stated=stated_of_bar(rig.incident_bar),
            ),
            "transmitted_bar": BarCalibration(propagation=table()),
        },
        "gauges": {
            "incident_gauge": GaugeCalibration(
                gauge_factor=Q(2.08 * 1.013, 0.004, 'lines "striker" \\ and µ'),
                strain_per_volt=Q(1 / 3000, 1e-7 / 3),
                to_specimen_m=Q(1.0017 / 3 * 3, 0.0002, "travel times"),
                as_stated=stated_of(rig.incident_gauge),
            ),
            "transmitted_gauge": GaugeCalibration(
                gauge_factor=Q(2.11 * 0.987), as_stated=stated_of(rig.transmitted_gauge)
            ),
        },
        "correlations": (
            Correlation("incident gauge factor", "transmitted gauge factor", 0.8123456789012345),
            Correlation("incident bar: wave speed", "incident gauge distance", -0.1),
        ),
        "records": (CalibrationRecord(shot_id="BA-1", kind="bars-apart", file="µ.csv", sha256="0f" * 32),),
        "methods": {"incident bar: wave speed": "mode-1 phase of 4 passages", "shunt.": "linear\nto 0.1 %"},
        "findings": ("odd one out: the shunt", "linearity: 0.3 % (limit 0.2 %)"),
        "temperature_k": Q(294.15, 0.5, "thermometer"),
        "remarks": "after the move",
        "program_version": "1.2",
    }
    return Calibration(**{**values, **changes})  # type: ignore[arg-type]


@pytest.fixture(name="rig")
def _rig() -> Rig:
    return rig_from_text(RIG, "rig.toml")


def test_a_calibration_comes_back_bit_for_bit(rig: Rig, tmp_path: Path) -> None:
    calibration = calibration_of(rig)
    path = write_calibration(calibration, tmp_path / "c.toml")
    back = read_calibration(path)
    assert back.text == path.read_text(encoding="utf-8")
    assert back.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
    assert back.source == str(path)
    bare = dataclasses.replace(back, text="", source="", sha256="")
    assert everything(bare) == everything(calibration)
    assert is_calibration(path)
    # Written from what was read it is the same file.
    assert calibration_text(back) == back.text


@settings(derandomize=True, deadline=None, max_examples=60)
@given(
    st.floats(0.001, 49), st.none() | st.floats(0, 0.4), st.text(st.characters(min_codepoint=32, max_codepoint=126)),
    st.floats(-1, 1),
)  # fmt: skip
def test_any_number_comes_back(value: float, share: float | None, origin: str, r: float) -> None:
    rig = rig_from_text(RIG, "rig.toml")
    distance = Q(value, None if share is None else share * value, origin.strip())
    given_ = calibration_of(
        rig,
        gauges={"incident_gauge": GaugeCalibration(to_specimen_m=distance)},
        correlations=(Correlation("incident gauge factor", "incident gauge distance", r),),
    )
    back = calibration_from_text(calibration_text(given_), "c.toml")
    assert everything(back.gauges) == everything(given_.gauges)
    assert back.correlations == given_.correlations


def test_nothing_is_written_over(rig: Rig, tmp_path: Path) -> None:
    path = write_calibration(calibration_of(rig), free_name(tmp_path, "c"))
    before = path.read_bytes()
    with pytest.raises(StoreError, match=r"never written over. Take c_2.toml"):
        write_calibration(calibration_of(rig), path)
    assert path.read_bytes() == before
    write_calibration(calibration_of(rig), free_name(tmp_path, "c"))
    assert free_name(tmp_path, "c").name == "c_3.toml"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["c.toml", "c_2.toml"]


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"date": "3 Feb 2031"}, "calibration.date"),
        ({"holds_days": 0}, "holds_days"),
        ({"name": "a/b"}, "calibration.name"),
        ({"remarks": "a\x1b[31m"}, "calibration.remarks"),
        ({"gauges": {"incident_gauge": GaugeCalibration(gauge_factor=Q(float("nan")))}}, "read back"),
        ({"correlations": (Correlation("incident gain", "no such value", 0.1),)}, "unknown name"),
    ],
)
def test_what_would_not_come_back_is_not_written(
    rig: Rig, tmp_path: Path, changes: dict[str, object], says: str
) -> None:
    with pytest.raises(StoreError, match=says):
        write_calibration(calibration_of(rig, **changes), tmp_path / "c.toml")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ("wave_speed_m_s", "wave_sped_m_s", "Did you mean wave_speed_m_s"),
        ("[incident_gauge]", "[incident_guage]", r"Did you mean \[incident_gauge\]"),
        ("date = 2031-02-03", 'date = "Feb"', 'calibration.date: found "Feb"'),
        ("holds_days = 200\n", "", "calibration.holds_days: found nothing"),
        ("frequency_Hz = [", "frequency_Hz = [ 5e9,", "different lengths"),
        ('sha256 = "0f', 'sha256 = "0g', "record 1.sha256"),
        ('"shunt." = "', '"shunt." = 4 #', 'methods."shunt."'),
        ("0.8123456789012345", "1.5", "from -1 to 1"),
        ("excitation_V = 5.0", 'excitation_V = "5"', "incident_gauge.as_stated.excitation_V"),
    ],
)
def test_mistakes_are_named(rig: Rig, old: str, new: str, says: str) -> None:
    text = calibration_text(calibration_of(rig))
    assert old in text
    with pytest.raises(FileMistakes, match=says):
        calibration_from_text(text.replace(old, new, 1), "c.toml")


@pytest.mark.parametrize(
    ("text", "says"),
    [
        (RIG, "this is a rig file, not a calibration file"),
        ('[calibration]\ndate = 2031-02-03\n[[shot]]\nid = "1"\n', "not yet a calibration file"),
        ("a = 1\n", "this is not a calibration file"),
        ('[calibration]\nformat = "shpb-calibration"\nformat_version = 99\n', "format version 99"),
    ],
)
def test_what_is_no_calibration(text: str, says: str) -> None:
    with pytest.raises(InputError, match=says):
        calibration_from_text(text, "c.toml")


# --- in force -----------------------------------------------------------------------------------


def in_force(folder: Path, *pairs: tuple[str, str], **changes: object) -> Rig:
    """The rig of a file that names a calibration, changed after the calibration."""
    stated = rig_from_text(RIG, "rig.toml")
    (folder / "history").mkdir()
    write_calibration(calibration_of(stated, **changes), folder / "history" / "c.toml")
    named = ('name = "Test bench"', 'name = "Test bench"\ncalibration = "history/c.toml"')
    (folder / "rig.toml").write_text(changed(RIG, named, *pairs), encoding="utf-8")
    return read_rig(folder / "rig.toml")


def test_the_rig_file_puts_a_calibration_in_force(tmp_path: Path) -> None:
    rig = in_force(tmp_path)
    assert rig.calibration is not None
    assert rig.calibration.text == (tmp_path / "history" / "c.toml").read_text(encoding="utf-8")
    assert rig.calibration_date == "2031-02-03"
    assert rig.incident_gauge.gauge_factor == 2.08 * 1.013
    assert rig.incident_gauge.gain == 500
    assert rig.incident_gauge.gain.u == 0.0
    assert rig.incident_gauge.gain.origin == IN_THE_CHAIN
    assert rig.incident_bar.wave_speed_m_s.u == 0.1 + 0.2
    assert rig.transmitted_bar.propagation == table()
    assert rig.transmitted_bar.wave_speed_m_s == pytest.approx(
        (71.7e9 / 2810) ** 0.5
    )  # not measured: as stated
    assert rig.departures == ()
    assert read_rig(tmp_path / "rig.toml", as_stated=True).calibration is None
    assert read_rig(tmp_path / "rig.toml", as_stated=True).incident_gauge.gauge_factor == 2.08


def test_a_calibration_that_is_not_there(tmp_path: Path) -> None:
    named = ('name = "Test bench"', 'name = "Test bench"\ncalibration = "gone.toml"')
    path = tmp_path / "rig.toml"
    path.write_text(changed(RIG, named), encoding="utf-8")
    with pytest.raises(
        InputError, match=r"rig.toml, rig.calibration: there is no calibration file gone.toml"
    ):
        read_rig(path)
    assert read_rig(path, as_stated=True).calibration is None


def test_a_rig_file_in_place_of_the_calibration(tmp_path: Path) -> None:
    path = tmp_path / "rig.toml"
    path.write_text(
        changed(RIG, ('name = "Test bench"', 'name = "B"\ncalibration = "rig.toml"')), encoding="utf-8"
    )
    with pytest.raises(InputError, match="this is a rig file, not a calibration file"):
        read_rig(path)


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ("gain = 500", "gain = 200", "incident_gauge gain 200, at the calibration 500"),
        ("gauge_factor = 2.08", "gauge_factor = 2.09", "incident_gauge gauge_factor 2.09, at the calibration 2.08"),
        ('"quarter"', '"half-opposite"', "transmitted_gauge arrangement half-opposite, at the calibration quarter"),
        ('"CH2"', '"CH3"', "transmitted_gauge channel CH3, at the calibration CH2"),
        ("to_specimen_mm = 1000", "to_specimen_mm = 990", "incident_gauge to_specimen_m 0.99, at the calibration 1"),
        ("length_mm = 2000", "length_mm = 1995", "incident_bar length_m 1.995, at the calibration 2"),
        ("Test bench", "Other bench", "rig name Other bench, at the calibration Test bench"),
    ],
)  # fmt: skip
def test_what_changed_since_is_known(tmp_path: Path, old: str, new: str, says: str) -> None:
    rig = in_force(tmp_path, (old, new))
    (said,) = rig.departures
    assert str(said) == says
    assert said.grave


def test_copying_a_measured_value_into_the_rig_file_changes_nothing(tmp_path: Path) -> None:
    # 2.08 x 1.013 = 2.10704
    assert in_force(tmp_path, ("gauge_factor = 2.08", "gauge_factor = 2.1070")).departures == ()


def test_a_station_that_is_gone_is_no_grave_departure(tmp_path: Path) -> None:
    rig = in_force(tmp_path, gauges={"incident_gauge_2": GaugeCalibration(to_specimen_m=Q(0.5, 1e-4))})
    (said,) = rig.departures
    assert not said.grave
    assert "incident_gauge_2" in str(said)


def test_correlations_that_no_longer_hold_go() -> None:
    stated = (
        Correlation("incident gauge factor", "transmitted gauge factor", 0.9),  # both measured since
        Correlation("incident gain", "transmitted gain", 0.5),
        Correlation("bars: density", "bars: diameter", 0.2),
    )
    new = (Correlation("incident bar: wave speed", "transmitted bar: wave speed", 0.3),)
    measured = {
        "incident gauge factor", "transmitted gauge factor", "incident bar: wave speed", "transmitted bar: wave speed",
    }  # fmt: skip
    whole = correlations_after(stated, new, measured)
    assert [(one.first, one.second) for one in whole] == [
        ("incident gain", "transmitted gain"),
        ("bars: density", "bars: diameter"),
        ("incident bar: wave speed", "transmitted bar: wave speed"),
    ]
    # Once the bars are told apart by their speeds, what one stock gave both is still one value.
    parted = {
        (one.first, one.second): one.coefficient
        for one in correlations_after(stated, new, measured, ("density", "diameter", "wave speed"))
    }
    assert parted[("incident bar: density", "transmitted bar: density")] == 1.0
    assert parted[("incident bar: density", "transmitted bar: diameter")] == 0.2
    assert parted[("incident bar: wave speed", "transmitted bar: wave speed")] == 0.3
    assert not any(name.startswith("bars:") for pair in parted for name in pair)


def test_the_table_has_the_columns_of_the_file(rig: Rig) -> None:
    text = calibration_text(calibration_of(rig))
    assert all(name.replace("_hz", "_Hz") in text for name in COLUMNS)


scalars = st.one_of(
    st.sampled_from(["true", "-1", "1e400", "nan", "inf", "2031-02-30", "[]", "{}", '""', "'a'", "{ value = -1 }"]),
    st.integers().map(str),
    st.floats().map(repr),
    st.text(st.characters(min_codepoint=32, max_codepoint=126), max_size=8),
)  # fmt: skip


@settings(derandomize=True, deadline=None, max_examples=150)
@given(st.integers(0, 10**6), scalars)
def test_whatever_stands_in_a_line_only_plain_errors_come_out(number: int, value: str) -> None:
    lines = calibration_text(calibration_of(rig_from_text(RIG, "rig.toml"))).splitlines()
    at = [i for i, line in enumerate(lines) if " = " in line]
    place = at[number % len(at)]
    lines[place] = f"{lines[place].split(' = ')[0]} = {value}"
    try:
        calibration_from_text("\n".join(lines), "c.toml")
    except InputError as error:
        assert "c.toml" in str(error)  # noqa: PT017
