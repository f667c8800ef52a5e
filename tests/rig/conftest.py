"""A rig, a sheet and a list that are without mistakes; tests change one thing at a time."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from shpb.errors import FileMistakes, Mistake
from shpb.rig.rig_file import rig_from_text
from shpb.rig.sheet_file import sheet_from_text
from shpb.rig.shot_list import shot_list_from_text

RIG = """\
[rig]
name = "Test bench"

[incident_bar]
material = "steel"
diameter_mm = 20.0
length_mm = 2000
density_kg_m3 = 8000
wave_speed_m_s = 5000
poisson_ratio = 0.29

[transmitted_bar]
material = "aluminium"
diameter_mm = 20.0
length_mm = 1500
density_kg_m3 = 2810
young_modulus_GPa = 71.7
poisson_ratio = 0.33

[incident_gauge]
to_specimen_mm = 1000
channel = "CH1"
arrangement = "half-opposite"
gauge_factor = 2.08
excitation_V = 5.0
gain = 500
voltage_under_compression = "negative"

[transmitted_gauge]
to_specimen_mm = 600
channel = "CH2"
arrangement = "quarter"
gauge_factor = 2.11
excitation_V = 4.0
gain = 100
voltage_under_tension = "negative"

[striker]
length_mm = 300
"""

SHEET = """\
[shot]
id = "S-1"
kind = "compression"
record = "S-1.csv"

[specimen]
material = "copper"
diameter_mm = 10.0
length_mm = 6.0
"""

LIST = """\
shot_id,kind,record,material,diameter_mm,length_mm
S-1,compression,S-1.csv,copper,10.0,6.0
S-2,tension,S-2.csv,copper,10.1,6.1
"""


def changed(text: str, *pairs: tuple[str, str]) -> str:
    """``text`` with each first occurrence replaced; the old text must be there."""
    for old, new in pairs:
        assert old in text
        text = text.replace(old, new, 1)
    return text


def _mistakes_of(read: Callable[[], object]) -> tuple[Mistake, ...]:
    with pytest.raises(FileMistakes) as caught:
        read()
    return caught.value.mistakes


@pytest.fixture(name="rig_text")
def _rig_text() -> Callable[..., str]:
    return lambda *pairs: changed(RIG, *pairs)


@pytest.fixture(name="sheet_text")
def _sheet_text() -> Callable[..., str]:
    return lambda *pairs: changed(SHEET, *pairs)


@pytest.fixture(name="list_text")
def _list_text() -> Callable[..., str]:
    return lambda *pairs: changed(LIST, *pairs)


@pytest.fixture
def rig_mistakes() -> Callable[..., tuple[Mistake, ...]]:
    """Mistakes of the rig file with some text replaced."""
    return lambda *pairs: _mistakes_of(lambda: rig_from_text(changed(RIG, *pairs), "rig.toml"))


@pytest.fixture
def sheet_mistakes() -> Callable[..., tuple[Mistake, ...]]:
    """Mistakes of the shot sheet with some text replaced."""
    return lambda *pairs: _mistakes_of(lambda: sheet_from_text(changed(SHEET, *pairs), "shot.toml", "lab"))


@pytest.fixture
def list_mistakes() -> Callable[[str], tuple[Mistake, ...]]:
    """Mistakes of the text of a shot list."""
    return lambda text: _mistakes_of(lambda: shot_list_from_text(text, "shots.csv", "lab"))
