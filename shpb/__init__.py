"""Split Hopkinson pressure bar shots: from voltage records to curves that can be trusted.

The public names below load what they need when they are first used, so that ``import shpb`` stays light.

Examples
--------
>>> import shpb
>>> result = shpb.reduce(record, rig, sheet)  # doctest: +SKIP
>>> result.verdict.value  # doctest: +SKIP
'accept'
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING

from shpb.version import VERSION

if TYPE_CHECKING:
    from shpb.errors import InputError, ShpbError
    from shpb.quantity import Quantity
    from shpb.record.read import read_record
    from shpb.record.record import Record
    from shpb.reduction import ShotResult, reduce
    from shpb.rig.overrides import hints_for
    from shpb.rig.rig import Rig
    from shpb.rig.rig_file import read_rig
    from shpb.rig.sheet import ShotSheet
    from shpb.rig.sheet_file import read_sheet
    from shpb.rig.shot_list import read_shot_list
    from shpb.settings import Settings
    from shpb.store.curves_csv import export_csv
    from shpb.store.shot_file import load, save_shot
    from shpb.view.figure import save_figure

__version__ = VERSION

_HOME = {
    "InputError": "shpb.errors",
    "Quantity": "shpb.quantity",
    "Record": "shpb.record.record",
    "Rig": "shpb.rig.rig",
    "Settings": "shpb.settings",
    "ShotResult": "shpb.reduction",
    "ShotSheet": "shpb.rig.sheet",
    "ShpbError": "shpb.errors",
    "export_csv": "shpb.store.curves_csv",
    "hints_for": "shpb.rig.overrides",
    "load": "shpb.store.shot_file",
    "read_record": "shpb.record.read",
    "read_rig": "shpb.rig.rig_file",
    "read_sheet": "shpb.rig.sheet_file",
    "read_shot_list": "shpb.rig.shot_list",
    "reduce": "shpb.reduction",
    "save_figure": "shpb.view.figure",
    "save_shot": "shpb.store.shot_file",
}

__all__ = [
    "InputError",
    "Quantity",
    "Record",
    "Rig",
    "Settings",
    "ShotResult",
    "ShotSheet",
    "ShpbError",
    "__version__",
    "export_csv",
    "hints_for",
    "load",
    "read_record",
    "read_rig",
    "read_sheet",
    "read_shot_list",
    "reduce",
    "save_figure",
    "save_shot",
]


def __getattr__(name: str) -> object:
    if name not in _HOME:
        raise AttributeError(f"module 'shpb' has no attribute {name!r}")
    value = getattr(importlib.import_module(_HOME[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
