"""Frozen dataclasses to plain numbers and text, and back, by their annotations. Never pickle."""

from __future__ import annotations

import dataclasses
import types
import typing
from collections.abc import Mapping, Sequence
from enum import Enum
from pathlib import Path
from typing import Any

from shpb.errors import StoreError
from shpb.quantity import Quantity


def to_plain(value: object) -> Any:
    """Turn a value into what JSON can hold. Floats keep every bit (shortest round-trip form)."""
    if isinstance(value, Quantity):
        return {"value": float(value), "u": value.u, "origin": value.origin}
    if isinstance(value, Enum):
        return value.value
    if isinstance(value, Path):
        return value.as_posix()
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {f.name: to_plain(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return {str(key): to_plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [to_plain(item) for item in value]
    return value


def from_plain(kind: Any, data: Any) -> Any:
    """Rebuild a value of type ``kind`` from what :func:`to_plain` gave.

    Raises
    ------
    StoreError
        If the data do not fit the type.
    """
    origin = typing.get_origin(kind)
    if origin in (typing.Union, types.UnionType):
        return _from_union(typing.get_args(kind), data)
    if origin in (tuple, list) or origin is Sequence:
        return _from_sequence(typing.get_args(kind), data)
    if origin in (dict, Mapping):
        of = (typing.get_args(kind) or (str, object))[1]
        return {key: from_plain(of, item) for key, item in dict(data).items()}
    if kind is Quantity:
        if isinstance(data, dict):
            return Quantity(data["value"], data["u"], data["origin"])
        return Quantity(data)
    if isinstance(kind, type) and issubclass(kind, Enum):
        return kind(data)
    if kind is Path:
        return Path(data)
    if dataclasses.is_dataclass(kind):
        return _from_fields(kind, data)
    if kind is float and isinstance(data, int):
        return float(data)
    return data


def _from_union(options: tuple[Any, ...], data: Any) -> Any:
    if data is None:
        return None
    kinds = [option for option in options if option is not types.NoneType]
    for kind in kinds:
        if isinstance(kind, type) and type(data) is kind:
            return data
    return from_plain(kinds[0], data)


def _from_sequence(items: tuple[Any, ...], data: Any) -> tuple[Any, ...]:
    if len(items) == 2 and items[1] is Ellipsis:
        return tuple(from_plain(items[0], item) for item in data)
    return tuple(from_plain(kind, item) for kind, item in zip(items, data, strict=True))


def _from_fields(kind: Any, data: Any) -> Any:
    hints = typing.get_type_hints(kind)
    names = {f.name for f in dataclasses.fields(kind)}
    unknown = set(data) - names
    if unknown:
        raise StoreError(
            f"it holds {', '.join(sorted(unknown))} of {kind.__name__}, which this version does not know",
            where="stored inputs",
            mend="The file was written by a later version; update the program",
        )
    return kind(**{name: from_plain(hints[name], data[name]) for name in names if name in data})
