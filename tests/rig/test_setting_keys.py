"""[settings] follows from the Settings dataclass: no field can be forgotten."""

from __future__ import annotations

import dataclasses
import typing
from enum import StrEnum

import pytest

from shpb.errors import FileMistakes, InputError
from shpb.limits import LIMIT_FACTS, Limits
from shpb.rig.key import Kind
from shpb.rig.overrides import settings_from
from shpb.rig.setting_keys import FACTS, LIMIT_KEYS, SETTING_KEYS, setting_key
from shpb.rig.shot_list import shot_list_from_text
from shpb.settings import DEFAULT, Correction, Settings


class Colour(StrEnum):
    RED = "red"
    BLUE = "blue"


def test_every_field_has_a_key_and_a_meaning():
    fields = [field.name for field in dataclasses.fields(Settings) if field.name != "limits"]
    assert [key.field for key in SETTING_KEYS] == fields
    assert sorted(FACTS) == sorted(fields), (
        "describe every field of Settings in shpb/rig/setting_keys.py, no others"
    )
    assert [key.field for key in LIMIT_KEYS] == [field.name for field in dataclasses.fields(Limits)]
    for name, fact in LIMIT_FACTS.items():
        assert fact.low < getattr(Limits(), name) < fact.high, name
        assert fact.meaning, name
        assert fact.source, name


@pytest.mark.parametrize(
    ("name", "hint", "default", "expected"),
    [
        ("some_window_s", tuple[float, float] | None, None, ("some_window_us", Kind.SPAN, 1e-6)),
        ("late_s", float, 1e-5, ("late_us", Kind.NUMBER, 1e-6)),
        ("edge_hz", float | None, None, ("edge_kHz", Kind.NUMBER, 1e3)),
        ("hum_hz", float, 50.0, ("hum_Hz", Kind.NUMBER, 1.0)),
        ("top_pa", float, 1e9, ("top_MPa", Kind.NUMBER, 1e6)),
        ("grip_m", float, 1e-3, ("grip_mm", Kind.NUMBER, 1e-3)),
        ("least_rate_per_s", float, 100.0, ("least_rate_per_s", Kind.NUMBER, 1.0)),
        ("speed_m_s", float, 5000.0, ("speed_m_s", Kind.NUMBER, 1.0)),
        ("share", float, 0.5, ("share", Kind.NUMBER, 1.0)),
        ("least_codes", int, 32, ("least_codes", Kind.INTEGER, 1.0)),
        ("padded", bool, True, ("padded", Kind.SWITCH, 1.0)),
        ("strains", tuple[float, ...], (0.1, 0.2), ("strains", Kind.NUMBERS, 1.0)),
        ("names", tuple[str, ...], ("a",), ("names", Kind.TEXTS, 1.0)),
        ("label", str, "x", ("label", Kind.TEXT, 1.0)),
        ("colour", Colour, Colour.RED, ("colour", Kind.CHOICE, 1.0)),
        ("colours", tuple[Colour, ...], (Colour.RED,), ("colours", Kind.CHOICES, 1.0)),
    ],
)  # fmt: skip
def test_the_rule_that_turns_a_field_into_a_key(name, hint, default, expected):
    made = setting_key(name, hint, default)
    assert (made.name, made.kind, made.units[0].factor) == expected
    assert made.automatic == (default is None)
    assert made.example  # something to put into the template
    if made.kind in {Kind.CHOICE, Kind.CHOICES}:
        assert made.choices == ("red", "blue")


def test_a_type_without_a_rule_is_noticed():
    with pytest.raises(TypeError, match=r"Settings.odd: no rule turns"):
        setting_key("odd", dict[str, float], {})


def test_every_default_can_be_written_in_its_key_and_comes_back():
    hints = typing.get_type_hints(Settings)
    for key in SETTING_KEYS:
        default = getattr(DEFAULT, key.field)
        if default is None:
            assert settings_from({key.name: "automatic"}) == DEFAULT
            continue
        unit = key.units[0]
        number = isinstance(default, float) and not isinstance(default, bool)
        written = unit.from_si(default) if number else default
        back = getattr(settings_from({key.name: written}), key.field)
        assert back == (pytest.approx(default, rel=1e-12) if number else default), key.name
        assert isinstance(back, type(default)), hints[key.field]


def test_settings_from_takes_fields_in_si_or_keys_in_peoples_units():
    assert settings_from({"cutoff_hz": 120e3}) == settings_from({"cutoff_kHz": 120})
    one = settings_from({"incident_window_us": [-10, 150], "dispersion": "none"})
    assert one.incident_window_s == pytest.approx((-1e-5, 1.5e-4))
    assert one.dispersion is type(one.dispersion).NONE
    assert settings_from({"incident_window_s": None}, one).incident_window_s is None
    assert settings_from({}, one) is not DEFAULT
    assert settings_from({"dispersion": "full"}, one).incident_window_s == one.incident_window_s


def test_settings_from_tells_all_mistakes():
    with pytest.raises(FileMistakes) as caught:
        settings_from(
            {"cutof_kHz": 3, "dispersion": "fulll", "cutoff_hz": -1.0, "flow_strains": "many",
             "limits": {"overlapp": 0.1, "noise": 7}}
        )  # fmt: skip
    assert [m.key for m in caught.value.mistakes] == [
        "cutof_kHz", "dispersion", "cutoff_hz", "flow_strains", "limits.overlapp", "limits.noise",
    ]  # fmt: skip
    assert "Did you mean overlap?" in str(caught.value)
    assert "Did you mean cutoff_kHz?" in str(caught.value)
    assert 'Did you mean "full"?' in str(caught.value)


def test_a_refusal_of_settings_itself_is_told_as_a_mistake_of_the_file(monkeypatch, sheet_mistakes):
    def refuse(self: Settings, **changes: object) -> Settings:
        raise InputError("hum is 3 Hz", mend="Give 50 or 60")

    monkeypatch.setattr(Settings, "replaced", refuse)
    (found,) = sheet_mistakes(("[specimen]", "[settings]\npulse_error = 0.1\n[specimen]"))
    assert str(found) == "shot.toml: settings.pulse_error: found hum is 3 Hz, expected Give 50 or 60"


def test_limits_are_refused_outside_their_range_wherever_they_come_from(sheet_mistakes):
    (found,) = sheet_mistakes(("[specimen]", "[limits]\nmisalignment_us = 4000\n[specimen]"))
    assert str(found).startswith(
        "shot.toml: limits.misalignment_us: found 4000 µs, expected a number in µs, 0.01 to 1000"
    )
    (found,) = sheet_mistakes(("[specimen]", "[limits]\noverlp = 0.1\n[specimen]"))
    assert "Did you mean overlap?" in str(found)
    for wrong in (0.0, -0.02, float("nan"), True, "2"):
        with pytest.raises(InputError, match=r"limits.overlap: found .* Give a number from 0.0001 to 1"):
            Limits(overlap=wrong)
    with pytest.raises(InputError, match="settings.limits"):
        Settings(limits={"overlap": 0.1})


def test_limits_of_a_row_of_the_shot_list():
    head = "shot_id,kind,record,material,diameter_mm,length_mm"
    (sheet,) = shot_list_from_text(
        f"{head},limit_noise,limit_misalignment_us,corrections\n"
        "1,tension,r,m,9,5,0.03,4,indentation | friction\n",
        "l", ".",
    )  # fmt: skip
    settings = settings_from(sheet.overrides)
    assert settings.limits == Limits(noise=0.03, misalignment_s=4e-6)
    assert settings.corrections == (Correction.INDENTATION, Correction.FRICTION)


@pytest.mark.parametrize(
    ("written", "meant"),
    [
        (["indentation", "friction"], (Correction.INDENTATION, Correction.FRICTION)),
        ("indentation, friction", (Correction.INDENTATION, Correction.FRICTION)),  # as on a command line
        ("heating", (Correction.HEATING,)),
        ([], ()),
        ("none", ()),
    ],
)
def test_a_list_of_choices(written, meant):
    assert settings_from({"corrections": written}).corrections == meant
    assert all(isinstance(one, Correction) for one in settings_from({"corrections": written}).corrections)


@pytest.mark.parametrize(
    ("written", "told"),
    [
        (["indentatoin"], 'found "indentatoin", expected a list of any of "indentation", "inertia"'),
        (["friction", "friction"], 'found "friction" twice, expected each at most once'),
        (3, "found 3, expected a list of any of"),
        ([["friction"]], "found a list of 1, expected a list of any of"),
    ],
)
def test_a_list_of_choices_is_checked(written, told):
    with pytest.raises(FileMistakes) as caught:
        settings_from({"corrections": written})
    assert told in str(caught.value)


@pytest.mark.parametrize("wrong", [("friction", "friction"), ("frictoin",), "friction", 3])
def test_settings_refuse_such_corrections_too(wrong):
    with pytest.raises(InputError, match="Give each at most once, in a list: indentation, inertia"):
        Settings(corrections=wrong)
