"""What a record without a sheet lacks: what is asked, how an answer is checked, the sheet it becomes."""

from __future__ import annotations

import datetime
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from shpb.errors import FileMistakes, InputError, ShpbError
from shpb.quantity import Quantity
from shpb.rig.key import Key, Kind, Unit
from shpb.rig.keys import SHEET_FILE
from shpb.rig.sheet import ShotSheet
from shpb.rig.sheet_file import check_sheet_fits_rig, sheet_from_text
from shpb.rig.toml_text import toml_comment, toml_document, toml_value
from shpb.rig.values import Unreadable, value_in_si
from shpb.watch.shelf import Named, Shelf

LATER, ALL_LATER = "later", "all later"
LEAVE_OUT = "-"
_KEYS = {(table.name, key.stem): key for table in SHEET_FILE for key in table.keys}
# Never proposed from the shot before: it differs from shot to shot, and a wrong one spoils a check.
_FRESH = frozenset(("id", "striker_speed", "date"))
# Of the material, so taken along from an earlier sheet of the same material.
_OF_MATERIAL = (
    "young_modulus",
    "density",
    "poisson_ratio",
    "heat_capacity",
    "heat_share",
    "stress_slope",
    "melting_temperature",
    "softening_exponent",
)


@dataclass(frozen=True, slots=True)
class Question:
    """One thing that is asked."""

    table: str
    stem: str
    words: str
    optional: bool = False

    @property
    def key(self) -> Key:
        """The key of the shot sheet that it fills."""
        return _KEYS[self.table, self.stem]

    @property
    def unit(self) -> Unit:
        """The unit that is asked for."""
        return self.key.units[0]


QUESTIONS = (
    Question("shot", "id", "shot id"),
    Question("shot", "kind", "kind of test"),
    Question("specimen", "material", "material"),
    Question("specimen", "diameter", "diameter before the shot"),
    Question("specimen", "length", "length before the shot"),
    Question("shot", "temperature", "temperature", optional=True),
    Question("shot", "striker_speed", "striker speed", optional=True),
    Question("shot", "date", "day of the shot", optional=True),
)
RIG = Question("shot", "rig", "rig file, seen from this folder")


@dataclass(slots=True)
class Interview:
    """The questions about one record, one after the other.

    Parameters
    ----------
    records : tuple of Path
    stem : str
        The shot id that the file's name proposes.
    last : mapping
        Answers of the shot before, by the stem of the key.
    rig_file : Path or None
        Where it is known, it is not asked.
    today : str
        Proposed as the day of the shot; empty for none.
    """

    records: tuple[Path, ...]
    stem: str
    last: Mapping[str, str]
    rig_file: Path | None = None
    today: str = ""
    answers: dict[str, str] = field(default_factory=dict)
    _values: dict[str, object] = field(default_factory=dict)

    @property
    def folder(self) -> Path:
        """Where the sheet will lie."""
        return self.records[0].parent

    @property
    def questions(self) -> tuple[Question, ...]:
        """All that is asked."""
        return QUESTIONS if self.rig_file is not None else (*QUESTIONS, RIG)

    @property
    def question(self) -> Question | None:
        """The one that is open, None when all are answered."""
        return next((one for one in self.questions if one.stem not in self.answers), None)

    def proposed(self, question: Question) -> str:
        """What Enter alone stands for; empty where nothing is proposed."""
        if question.stem == "id":
            return self.stem
        if question.stem == "date":
            return self.today or LEAVE_OUT
        if question.stem in _FRESH:
            return LEAVE_OUT
        fallback = {"kind": "compression", "temperature": "20"}.get(question.stem, "")
        return self.last.get(question.stem, fallback)

    def answer(self, text: str) -> None:
        """Take the answer to the open question.

        Raises
        ------
        InputError
            If it cannot be used, with what was found and what is expected; the question stays open.
        """
        question = self.question
        assert question is not None
        text = text.strip() or self.proposed(question)
        if not text:
            raise InputError(f"needed: {question.key.expected(question.unit)}")
        if text == LEAVE_OUT:
            if not question.optional:
                raise InputError("this one is needed")
            self.answers[question.stem] = LEAVE_OUT
            return
        value = _read(text, question)
        if question is RIG:
            self._require_rig(str(value))
        self._values[question.stem] = value
        self.answers[question.stem] = text

    def _require_rig(self, name: str) -> None:
        from shpb.rig.rig_file import read_rig

        read_rig(self.folder / name)

    def sheet_text(self, shelf: Shelf) -> str:
        """The answers as a shot sheet.

        Raises
        ------
        InputError
            If they do not fit together or not the rig; the questions at fault are open again.
        """
        text = self._text(shelf)
        try:
            sheet = sheet_from_text(text, "these answers", self.folder)
            self._check_rig(sheet)
        except InputError as error:
            mistakes = error.mistakes if isinstance(error, FileMistakes) else ()
            for question in self.questions:
                if any(question.stem in mistake.key for mistake in mistakes):
                    self.answers.pop(question.stem, None)
            if self.question is None:
                self.answers.clear()
            raise
        return text

    def _check_rig(self, sheet: ShotSheet) -> None:
        from shpb.rig.rig_file import read_rig

        if sheet.rig_file is None:
            return
        try:
            rig = read_rig(sheet.rig_file)
        except ShpbError:
            return  # no answer is at fault: the shot waits until the rig file is mended, and that is said then
        check_sheet_fits_rig(sheet, rig)

    def _text(self, shelf: Shelf) -> str:
        tables: dict[str, dict[str, object]] = {"shot": {}, "specimen": {}}
        for question in self.questions:
            if question.stem in self._values and self.answers[question.stem] != LEAVE_OUT:
                tables[question.table][question.key.written(question.unit)] = self._values[question.stem]
        files = [path.name for path in self.records]
        tables["shot"]["record"] = files[0] if len(files) == 1 else files
        if self.rig_file is not None:
            tables["shot"]["rig"] = _seen_from(self.folder, self.rig_file)
        top = toml_comment("Written by shpb watch from answers at the terminal. Correct it here: the shot is")
        top += toml_comment("then reduced again. length_after_mm gives one check more.")
        before = shelf.latest_of(str(tables["specimen"]["material"]))
        return top + "\n" + toml_document(tables) + _of_material(before)


def _seen_from(folder: Path, path: Path) -> str:
    try:
        return Path(os.path.relpath(path, folder)).as_posix()
    except ValueError:  # another drive
        return path.resolve().as_posix()


def _read(text: str, question: Question) -> object:
    """What would stand in a sheet for what was typed; the right unit behind a number is understood."""
    key, unit = question.key, question.unit
    value: object = text
    if key.kind in (Kind.QUANTITY, Kind.NUMBER):
        value = _number(text, unit)
    elif key.kind is Kind.DATE:
        value = _day(text)
    elif key.kind is Kind.CHOICE:
        alike = [choice for choice in key.choices if choice.startswith(text.casefold())]
        value = str(alike[0]) if len(alike) == 1 else text
    try:
        value_in_si(value, key, unit)
    except Unreadable as bad:
        raise InputError(f"found {bad.found}, expected {bad.expected}", mend=bad.mend) from None
    return value


def _day(text: str) -> str:
    try:
        return datetime.date.fromisoformat(text).isoformat()
    except ValueError:
        raise InputError(f'found "{text}", expected year-month-day, such as 2024-05-17') from None


def _number(text: str, unit: Unit) -> float:
    plain = text
    for ending in (unit.symbol, unit.suffix.replace("_", "/"), unit.suffix):
        if ending and plain.casefold().endswith(ending.casefold()):
            plain = plain[: -len(ending)].strip()
            break
    if plain.count(",") == 1 and "." not in plain:
        plain = plain.replace(",", ".")
    try:
        return float(plain)
    except ValueError:
        asked = f" in {unit.symbol}" if unit.symbol else ""
        raise InputError(f'found "{text}", expected a number{asked}') from None


def _of_material(before: Named | None) -> str:
    """Lines for [specimen] with what an earlier sheet says of the same material."""
    if before is None:
        return ""
    lines = []
    for stem in _OF_MATERIAL:
        key = _KEYS["specimen", stem]
        value = _field_of(before.sheet, stem)
        if value is not None:
            lines.append(f"{key.name} = {toml_value(_in_unit(value, key.units[0]))}\n")
    return (
        toml_comment(f"Of the material, as for shot {before.sheet.shot_id}:") + "".join(lines)
        if lines
        else ""
    )


def _field_of(sheet: ShotSheet, stem: str) -> Quantity | None:
    names = [
        name for name in sheet.specimen.__dataclass_fields__ if name == stem or name.startswith(f"{stem}_")
    ]
    value = getattr(sheet.specimen, names[0]) if names else None
    return value if isinstance(value, Quantity) else None


def _in_unit(value: Quantity, unit: Unit) -> object:
    plain = float(f"{unit.from_si(value):.12g}")
    if value.u is None and not value.origin:
        return plain
    said: dict[str, object] = {"value": plain}
    if value.u is not None:
        said["u"] = float(f"{value.u / unit.factor:.12g}")
    if value.origin:
        said["origin"] = value.origin
    return said


def free_sheet_path(folder: Path, stem: str) -> Path:
    """A name for a new sheet beside the record: never that of a file that is there."""
    path, number = folder / f"{stem}.toml", 1
    while os.path.lexists(path):
        number += 1
        path = folder / f"{stem}_{number}.toml"
    return path


def last_of(shots: Sequence[Named], folder: Path) -> dict[str, str]:
    """Proposals from the sheet that was spoken of last, where nothing was answered yet."""
    if not shots:
        return {}
    sheet = shots[-1].sheet
    rig = {} if sheet.rig_file is None else {"rig": _seen_from(folder, sheet.rig_file)}
    return rig | {
        "kind": sheet.kind.value,
        "material": sheet.specimen.material,
        "diameter": f"{1e3 * sheet.specimen.diameter_m:.6g}",
        "length": f"{1e3 * sheet.specimen.length_m:.6g}",
        "temperature": f"{sheet.temperature_k - 273.15:.6g}",
    }
