"""[settings] follows from the Settings dataclass: no field can be forgotten."""

from __future__ import annotations

import dataclasses
import typing
from enum import StrEnum

import pytest

from shpb.errors import FileMistakes, InputError
from shpb.rig.key import Kind
from shpb.rig.overrides import settings_from
from shpb.rig.setting_keys import FACTS, SETTING_KEYS, setting_key
from shpb.settings import DEFAULT, Settings


class Colour(StrEnum):
    RED = "red"
    BLUE = "blue"


def test_every_field_has_a_key_and_a_meaning():
    fields = [field.name for field in dataclasses.fields(Settings)]
    assert [key.field for key in SETTING_KEYS] == fields
    assert sorted(FACTS) == sorted(fields), (
        "describe every field of Settings in shpb/rig/setting_keys.py, no others"
    )


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
    ],
)  # fmt: skip
def test_the_rule_that_turns_a_field_into_a_key(name, hint, default, expected):
    made = setting_key(name, hint, default)
    assert (made.name, made.kind, made.units[0].factor) == expected
    assert made.automatic == (default is None)
    assert made.example  # something to put into the template
    if made.kind is Kind.CHOICE:
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
        settings_from({"cutof_kHz": 3, "dispersion": "fulll", "cutoff_hz": -1.0, "flow_strains": "many"})
    assert [m.key for m in caught.value.mistakes] == ["cutof_kHz", "dispersion", "cutoff_hz", "flow_strains"]
    assert "Did you mean cutoff_kHz?" in str(caught.value)
    assert 'Did you mean "full"?' in str(caught.value)


def test_a_refusal_of_settings_itself_is_told_as_a_mistake_of_the_file(monkeypatch, sheet_mistakes):
    def refuse(self: Settings, **changes: object) -> Settings:
        raise InputError("hum is 3 Hz", mend="Give 50 or 60")

    monkeypatch.setattr(Settings, "replaced", refuse)
    (found,) = sheet_mistakes(("[specimen]", "[settings]\nequilibrium_limit = 0.1\n[specimen]"))
    assert str(found) == "shot.toml: settings.equilibrium_limit: found hum is 3 Hz, expected Give 50 or 60"
