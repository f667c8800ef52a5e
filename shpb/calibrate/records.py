"""The records of a calibration session, each read once."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator

from shpb.calibrate.session import FiredShot, Session
from shpb.errors import InputError
from shpb.record.read import read_record
from shpb.rig.rig import RecordHints, Rig


def fired_shots(session: Session, rig: Rig) -> Iterator[FiredShot]:
    """Read the record of every shot of a session, one after the other.

    Parameters
    ----------
    session : Session
        As :func:`~shpb.calibrate.session_file.session_on_rig` gives it.
    rig : Rig
        Its hints about the records hold where the session has none of its own.

    Yields
    ------
    FiredShot
        In the order of the session.

    Raises
    ------
    InputError
        If a record cannot be read; the message names the shot.
    """
    stated = {
        field.name: value
        for field in dataclasses.fields(RecordHints)
        if (value := getattr(session.hints, field.name)) is not None
    }
    hints = dataclasses.replace(rig.record, **stated)
    for shot in session.shots:
        try:
            record = read_record(shot.record_files, hints)
        except InputError as error:
            # The kind of error matters to nobody here; which of a dozen shots it is does.
            where = f"shot {shot.shot_id}: {error.where}" if error.where else f"shot {shot.shot_id}"
            raise InputError(error.what, where=where, mend=error.mend) from error
        yield FiredShot(shot=shot, record=record)
