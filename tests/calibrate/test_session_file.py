"""A calibration session: what was fired, read with all its mistakes at once."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from shpb.calibrate.session import BarEnd, ShotKind
from shpb.calibrate.session_file import read_session, session_from_text, session_on_rig
from shpb.errors import FileMistakes, InputError, Mistake
from shpb.rig import session_keys
from tests.synthetic import rig

SESSION = """\
[calibration]
date = 2031-02-03
rig = "../calibration/bench.toml"
temperature_C = { value = 21, u = 0.5 }

[record]
time_unit = "us"

[[shot]]
id = "BA-1"
kind = "bars-apart"
record = "BA-1.csv"
bar = "transmitted"
struck_end = "specimen"

[[shot]]
id = "BT-1"
kind = "bars-together"
record = ["BT-1_CH1.csv", "BT-1_CH2.csv"]
striker_speed_m_s = { value = 10.4, u_percent = 0.2, origin = "light gates" }

[[shot]]
id = "SH-1"
kind = "shunt"
record = "SH-1.csv"
station = "incident_gauge"
shunt_kohm = 174.65
"""


def changed(*pairs: tuple[str, str]) -> str:
    text = SESSION
    for old, new in pairs:
        assert old in text
        text = text.replace(old, new, 1)
    return text


@pytest.fixture(name="mistakes")
def _mistakes() -> Callable[..., tuple[Mistake, ...]]:
    def of(*pairs: tuple[str, str]) -> tuple[Mistake, ...]:
        with pytest.raises(FileMistakes) as caught:
            session_from_text(changed(*pairs), "day.toml", "lab")
        return caught.value.mistakes

    return of


def test_a_session_is_read_in_si(tmp_path: Path) -> None:
    path = tmp_path / "day.toml"
    path.write_text(SESSION, encoding="utf-8")
    session = read_session(path)
    assert session.date == "2031-02-03"
    assert session.rig_file == tmp_path / "../calibration/bench.toml"
    assert session.holds_days == 365
    assert session.temperature_k == pytest.approx(294.15)
    assert session.hints.time_unit == "us"
    assert session.text == SESSION
    apart, together, shunt = session.shots
    assert (apart.kind, apart.bar, apart.struck_end) == (
        ShotKind.BARS_APART,
        "transmitted",
        BarEnd.SPECIMEN,
    )
    assert (together.bar, together.struck_end) == ("incident", BarEnd.FAR)
    assert together.record_files == (tmp_path / "BT-1_CH1.csv", tmp_path / "BT-1_CH2.csv")
    assert together.striker_speed_m_s is not None
    assert together.striker_speed_m_s.u == pytest.approx(0.0208)
    assert together.striker_speed_m_s.origin == "light gates"
    assert together.striker is None
    assert shunt.station == "incident_gauge"
    assert shunt.shunt_ohm == pytest.approx(174650)


def test_the_words_of_the_keys_are_those_of_the_session() -> None:
    assert tuple(kind.value for kind in ShotKind) == session_keys.KINDS
    assert tuple(end.value for end in BarEnd) == session_keys.ENDS


def test_another_striker_must_stand_whole(mistakes: Callable[..., tuple[Mistake, ...]]) -> None:
    speed = "striker_speed_m_s = {"
    found = mistakes((speed, f"striker_length_mm = 250\n{speed}"))
    assert [m.key for m in found] == [
        f"shot 2.striker_{key}" for key in ("diameter_mm", "density_kg_m3", "wave_speed_m_s")
    ]
    whole = "striker_diameter_mm = 18\nstriker_density_kg_m3 = 8000\nstriker_wave_speed_m_s = 4900\n"
    session = session_from_text(
        changed((speed, f"striker_length_mm = 250\n{whole}{speed}")), "day.toml", "lab"
    )
    striker = session.shots[1].striker
    assert striker is not None
    assert (striker.length_m, striker.diameter_m) == pytest.approx((0.25, 0.018))


def test_the_rigs_striker_stands_where_no_other_is_named() -> None:
    lab = rig()
    session = session_on_rig(session_from_text(SESSION, "day.toml", "lab"), lab)
    assert [shot.striker for shot in session.shots] == [lab.striker, lab.striker, None]


def test_a_shunt_of_a_station_that_the_rig_has_not() -> None:
    text = changed(("incident_gauge", "incident_guage"))
    with pytest.raises(FileMistakes, match=r"shot SH-1: station.*Did you mean incident_gauge"):
        session_on_rig(session_from_text(text, "day.toml", "lab"), rig())


@pytest.mark.parametrize(
    ("old", "new", "key", "says"),
    [
        ("date = 2031-02-03\n", "", "calibration.date", "Add it"),
        ("2031-02-03", '"3 Feb 2031"', "calibration.date", "year-month-day"),
        ("2031-02-03", '"2031-02-30"', "calibration.date", "year-month-day"),
        ("rig =", "rigg =", "calibration.rigg", "Did you mean rig?"),
        ('"bars-apart"', '"bar-apart"', "shot 1.kind", 'Did you mean "bars-apart"?'),
        ('bar = "transmitted"', 'bar = "output"', "shot 1.bar", '"incident", "transmitted"'),
        ("struck_end", "struck_at", "shot 1.struck_at", "Did you mean struck_end?"),
        ('record = "BA-1.csv"\n', "", "shot 1.record", "Add it"),
        ('station = "incident_gauge"\n', "", "shot 3.station", "a shunt needs it"),
        ("shunt_kohm = 174.65\n", "", "shot 3.shunt_ohm", "a shunt needs it"),
        ("shunt_kohm = 174.65", "shunt_kohm = 0.05", "shot 3.shunt_kohm", "0.1 to"),
        ("shunt_kohm", "striker_speed_m_s = 9\nshunt_kohm", "shot 3.striker_speed_m_s", "nothing is fired"),
        ("shunt_kohm = 174.65", 'shunt_kohm = 175\nbar = "transmitted"', "shot 3.bar", "that of the station"),
        ('struck_end = "specimen"', "shunt_ohm = 1000", "shot 1.shunt_ohm", "bars-apart has none"),
        ('"bars-together"', '"bars-together"\nbar = "transmitted"', "shot 2.bar", "hits the incident bar"),
        ('id = "BT-1"', 'id = "ba-1"', "shot 2.id", "ids that differ"),
        ('"SH-1.csv"', '"BA-1.csv"', "shot 3.record", "Name each record once"),
        ('"SH-1.csv"', '"./BA-1.csv"', "shot 3.record", "Name each record once"),
        ("time_unit", "time_units", "record.time_units", "Did you mean time_unit?"),
    ],
)  # fmt: skip
def test_mistakes_are_named(
    mistakes: Callable[..., tuple[Mistake, ...]], old: str, new: str, key: str, says: str
) -> None:
    (found,) = mistakes((old, new))
    assert found.key == key
    assert says in str(found)


def test_all_mistakes_come_at_once(mistakes: Callable[..., tuple[Mistake, ...]]) -> None:
    found = mistakes(
        ("date", "day"), ('"bars-apart"', '"apart"'), ("shunt_kohm", "shunt_mohm"), ("BT-1", "BA-1")
    )
    assert len(found) >= 4
    assert {m.key.split(".")[0] for m in found} == {"calibration", "shot 1", "shot 2", "shot 3"}


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ('[calibration]\ndate = 2031-02-03\nrig = "r.toml"\n', r"at least one shot"),
        (SESSION.replace("[[shot]]", "[[shots]]"), r"Write \[\[shot\]\] for each shot"),
        (
            SESSION.split("[[shot]]", maxsplit=1)[0]
            + '[shot]\nid = "1"\nkind = "bars-apart"\nrecord = "r.csv"\n',
            "Double the brackets",
        ),
        ('[shot]\nid = "1"\n[specimen]\nmaterial = "steel"\n', "This is a shot sheet: reduce it"),
        ("[calibration\n", "Close the table's name"),
    ],
)
def test_what_is_no_session(text: str, says: str) -> None:
    with pytest.raises(InputError, match=says):
        session_from_text(text, "day.toml", "lab")


def test_no_such_file(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such calibration session"):
        read_session(tmp_path / "none.toml")


@settings(derandomize=True, deadline=None, max_examples=150)
@given(
    st.integers(0, 10**6),
    st.one_of(
        st.sampled_from(["true", "-1", "1e400", "nan", "2031-02-30", "[]", "{}", '""', "[[1]]", "['', 'a']"]),
        st.integers().map(str),
        st.text(st.characters(min_codepoint=32, max_codepoint=126), max_size=8),
    ),
)
def test_whatever_stands_in_a_line_only_plain_errors_come_out(number: int, value: str) -> None:
    lines = SESSION.splitlines()
    at = [i for i, line in enumerate(lines) if " = " in line]
    place = at[number % len(at)]
    lines[place] = f"{lines[place].split(' = ')[0]} = {value}"
    try:
        session_from_text("\n".join(lines), "day.toml", "lab")
    except InputError as error:
        assert "day.toml" in str(error)  # noqa: PT017
