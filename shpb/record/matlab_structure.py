"""Whether the variables of a MATLAB file up to version 7 are built as the format says.

The library that reads them trusts sizes and kinds of every element: a damaged file can end the interpreter there. So
the tags are walked first, within structures and compressed variables too; the numbers themselves are not looked at.

Reference: MATLAB MAT-File Format (The MathWorks), level 5: tags, data types, array types (from memory).
"""

from __future__ import annotations

import math
import mmap
import struct
import zlib
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

_HEADER_BYTES = 128
_SIZES = {1: 1, 2: 1, 3: 2, 4: 2, 5: 4, 6: 4, 7: 4, 9: 8, 12: 8, 13: 8, 16: 1, 17: 2, 18: 4}
_MATRIX, _COMPRESSED, _INT32, _UINT32 = 14, 15, 5, 6
_TEXT = (1, 2, 16)
_CELL, _STRUCT, _CHAR, _SPARSE = 1, 2, 4, 5
_NUMBERS = range(6, 16)
_COMPLEX = 0x0800
_DEEPEST = 64
_MOST_INFLATED = 1 << 28  # larger ones are left to the library: damage there shows when they are inflated

Bytes = bytes | mmap.mmap


class DamagedError(Exception):
    """What is wrong, and at which byte."""


class _Element(NamedTuple):
    kind: int
    start: int  # of its data
    size: int  # of its data [bytes]
    place: int  # of its tag


def require_sound(path: Path) -> None:
    """Walk all tags of a file.

    Raises
    ------
    DamagedError
        In words, with the byte.
    """
    with path.open("rb") as file, mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ) as data:
        order = "<" if data[126:128] == b"IM" else ">"
        for one in _elements(data, order, _HEADER_BYTES, len(data)):
            if one.kind == _COMPRESSED:
                _compressed(data, order, one)
            elif one.kind == _MATRIX:
                _matrix(data, order, one, 0)
            else:
                raise DamagedError(f"at byte {one.place} stands no variable")


def _elements(data: Bytes, order: str, place: int, end: int) -> Iterator[_Element]:
    """Elements that follow each other between two places."""
    while place < end:
        if place + 8 > end:
            raise DamagedError(f"at byte {place} an element has no room for its tag")
        kind, size = struct.unpack_from(order + "II", data, place)
        start, following = place + 8, place + 8 + size
        if kind >> 16:  # up to four bytes stand in the tag itself
            kind, size, start, following = kind & 0xFFFF, kind >> 16, place + 4, place + 8
            if size > 4:
                raise DamagedError(f"at byte {place} a short element is {size} bytes long")
        elif kind != _COMPRESSED:
            following += -size % 8
        if kind not in _SIZES and kind not in (_MATRIX, _COMPRESSED):
            raise DamagedError(f"at byte {place} stands an element of unknown kind {kind}")
        if start + size > end:
            raise DamagedError(f"at byte {place} an element is longer than what holds it")
        if kind in _SIZES and size % _SIZES[kind]:
            raise DamagedError(f"at byte {place} an element ends within a number")
        yield _Element(kind, start, size, place)
        place = following


def _compressed(data: Bytes, order: str, one: _Element) -> None:
    inflate = zlib.decompressobj()
    try:
        inside = inflate.decompress(data[one.start : one.start + one.size], _MOST_INFLATED)
    except zlib.error as error:
        raise DamagedError(f"at byte {one.place} a compressed variable cannot be unpacked: {error}") from None
    if inflate.unconsumed_tail:
        return
    if not inflate.eof:
        raise DamagedError(f"at byte {one.place} a compressed variable is cut short")
    for inner in _elements(inside, order, 0, len(inside)):
        if inner.kind != _MATRIX:
            raise DamagedError(f"at byte {one.place} a compressed variable holds no array")
        _matrix(inside, order, inner, 0)


def _matrix(data: Bytes, order: str, whole: _Element, depth: int) -> None:
    """An array of any class: flags, dimensions, name, and what its class holds."""
    if not whole.size:
        return
    if depth > _DEEPEST:
        raise DamagedError(f"at byte {whole.place} arrays are nested more than {_DEEPEST} deep")
    parts = list(_elements(data, order, whole.start, whole.start + whole.size))
    if not parts or parts[0].kind != _UINT32 or parts[0].size != 8:
        raise DamagedError(f"at byte {whole.place} an array has no flags")
    (flags,) = struct.unpack_from(order + "I", data, parts[0].start)
    of_class = flags & 0xFF
    if of_class not in (_CELL, _STRUCT, _CHAR, _SPARSE, *_NUMBERS):
        for part in parts:
            if part.kind == _MATRIX:
                _matrix(data, order, part, depth + 1)
        return
    if len(parts) < 3 or parts[1].kind != _INT32 or parts[1].size < 8 or parts[2].kind not in _TEXT:
        raise DamagedError(f"at byte {whole.place} an array has no dimensions or no name")
    dimensions = struct.unpack_from(f"{order}{parts[1].size // 4}i", data, parts[1].start)
    if min(dimensions) < 0 or len(dimensions) > 32:
        raise DamagedError(f"at byte {parts[1].place} the dimensions of an array cannot be")
    count, held = math.prod(dimensions), parts[3:]
    if of_class in _NUMBERS:
        _numbers(held, count, whole, 2 if flags & _COMPLEX else 1)
    elif of_class == _CHAR:
        if len(held) != 1 or held[0].kind not in _SIZES or count > max(held[0].size, 0):
            raise DamagedError(f"at byte {whole.place} a text is not as long as stated")
    elif of_class == _CELL:
        _arrays(data, order, held, count, whole, depth)
    elif of_class == _STRUCT:
        _structure(data, order, held, count, whole, depth)
    elif any(part.kind not in _SIZES for part in held) or len(held) != (4 if flags & _COMPLEX else 3):
        raise DamagedError(f"at byte {whole.place} a sparse matrix lacks a part")


def _numbers(held: list[_Element], count: int, whole: _Element, parts: int) -> None:
    """Numbers, as many as the dimensions say; twice where they are complex."""
    stated = len(held) == parts and all(
        part.kind in _SIZES and part.size == count * _SIZES[part.kind] for part in held
    )
    if not stated:
        raise DamagedError(
            f"at byte {whole.place} an array does not hold as many numbers as its dimensions say"
        )


def _structure(
    data: Bytes, order: str, held: list[_Element], count: int, whole: _Element, depth: int
) -> None:
    """Length of a field's name, the names, and an array for each field of each element."""
    if len(held) < 2 or held[0].kind != _INT32 or held[0].size != 4 or held[1].kind not in _TEXT:
        raise DamagedError(f"at byte {whole.place} a structure has no names of fields")
    (length,) = struct.unpack_from(order + "i", data, held[0].start)
    if length < 1 or held[1].size % length:
        raise DamagedError(f"at byte {held[0].place} the names of fields have no such length")
    _arrays(data, order, held[2:], count * (held[1].size // length), whole, depth)


def _arrays(data: Bytes, order: str, held: list[_Element], count: int, whole: _Element, depth: int) -> None:
    if len(held) != count or any(part.kind != _MATRIX for part in held):
        raise DamagedError(f"at byte {whole.place} stand {len(held)} arrays where {count} are stated")
    for part in held:
        _matrix(data, order, part, depth + 1)
