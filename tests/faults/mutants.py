"""Damage on purpose: seeded changes of a file, so that every mutant can be made again from its number."""

from __future__ import annotations

import io
import random
import zipfile
from collections.abc import Callable, Sequence

# What people, instruments and spreadsheets write, and what parsers stumble over.
_TOKENS = (
    b"nan", b"NaN", b"inf", b"-inf", b"1e999", b"-1e999", b"1e-999", b"-0", b"0", b"-1", b"1", b"9" * 400,
    b"0.1.2",     b"1,5", b"1.5", b"1e5", b"1d5", b"0x1F", b"1_000", b"****", b"--", b"+", b"-", b"e",
    b"=cmd()", b"#DIV/0!", b"1.#INF",     b"true", b"false", b"null", b"1979-05-27",
    b"1979-05-27T07:32:00Z", b"[", b"]", b"[[", b"]]", b"{", b"}", b"[" * 300,     b"=", b".", b",", b";",
    b"\t", b" ", b'"', b"'", b'"""', b"'''", b"#", b"\\", b"\\u0000", b"\\x1b", b"/", b"../../x",     b"\n",
    b"\r", b"\r\n", b"\n\n", b"\0", b"\x1a", b"\x0c", b"\x1b[31m", b"\xff", b"\xfe\xff", b"\xef\xbb\xbf",
    b"\xc2\xb5",     "\u221e".encode(), "\u202e".encode(), "\U0001f600".encode(), b"us", b"mV", b"Hz",
    b"MS/s", b"%", b"(V)", b"[s]",     b"Sample Interval", b"Record Length", b"Units", b"Time", b"a" * 5000,
    b"," * 500, b"id", b"value", b"u", b"u_percent",
)  # fmt: skip
_INTEGERS = (
    0,
    1,
    0x7F,
    0x80,
    0xFF,
    0x7FFF,
    0x8000,
    0xFFFF,
    2**31 - 1,
    2**31,
    2**32 - 1,
    2**63 - 1,
    2**64 - 1,
)


def mutant(seeds: Sequence[bytes], number: int, seed: int, *, binary: bool) -> tuple[int, bytes]:
    """Return the place of the seed file that mutant ``number`` comes from, and the mutant."""
    luck = random.Random(f"{seed}/{number}")
    which = luck.randrange(len(seeds))
    content = seeds[which]
    if content.startswith(b"PK\x03\x04") and luck.random() < 0.5:
        return which, _packed_again(content, luck)
    if not binary and content.startswith((b"\xff\xfe", b"\xfe\xff")) and luck.random() < 0.7:
        inside = content.decode("utf-16").encode()
        changed = _changed(inside, seeds, luck, _TEXT_CHANGES)
        return which, changed.decode("utf-8", "replace").encode("utf-16")
    return which, _changed(content, seeds, luck, _BINARY_CHANGES if binary else _TEXT_CHANGES)


_Change = Callable[[bytearray, Sequence[bytes], random.Random], None]


def _changed(content: bytes, seeds: Sequence[bytes], luck: random.Random, kinds: Sequence[_Change]) -> bytes:
    data = bytearray(content)
    for _ in range(luck.choice((1, 1, 1, 2, 3, 5))):
        luck.choice(kinds)(data, seeds, luck)
    return bytes(data)


def _packed_again(content: bytes, luck: random.Random) -> bytes:
    """Damage within an archive whose check sums are right."""
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as archive, zipfile.ZipFile(out, "w") as other:
        names = archive.namelist()
        damaged = luck.choice(names)
        for name in names:
            inside = archive.read(name)
            other.writestr(
                name, _changed(inside, [inside], luck, _BINARY_CHANGES) if name == damaged else inside
            )
    return out.getvalue()


# --- places ---------------------------------------------------------------------------------------------


def _place(data: bytearray, luck: random.Random) -> int:
    """Headers and directories stand at both ends; damage these most."""
    if not data:
        return 0
    where = luck.random()
    if where < 0.4:
        return luck.randrange(min(len(data), 1024))
    if where < 0.55:
        return len(data) - 1 - luck.randrange(min(len(data), 512))
    return luck.randrange(len(data))


def _span(data: bytearray, luck: random.Random, longest: int = 200) -> tuple[int, int]:
    start = _place(data, luck)
    return start, min(len(data), start + 1 + luck.randrange(longest))


def _line(data: bytearray, luck: random.Random) -> tuple[int, int]:
    place = _place(data, luck)
    start = data.rfind(b"\n", 0, place) + 1
    end = data.find(b"\n", place)
    return start, len(data) if end < 0 else end + 1


# --- changes --------------------------------------------------------------------------------------------


def _flip_bit(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    if data:
        data[_place(data, luck)] ^= 1 << luck.randrange(8)


def _set_byte(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    if data:
        data[_place(data, luck)] = luck.choice((0, 1, 0x7F, 0x80, 0xFF, luck.randrange(256)))


def _cut_out(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    start, end = _span(data, luck)
    del data[start:end]


def _cut_short(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    del data[_place(data, luck) :]


def _twice(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    start, end = _span(data, luck)
    data[start:start] = data[start:end]


def _zeros(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    start, end = _span(data, luck)
    data[start:end] = bytes([luck.choice((0, 0, 0xFF, 0x20))]) * (end - start)


def _noise(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    start, end = _span(data, luck, 40)
    data[start:end] = luck.randbytes(luck.randrange(60))


def _other_file(data: bytearray, seeds: Sequence[bytes], luck: random.Random) -> None:
    """The end of another file after the beginning of this one."""
    other = luck.choice(seeds)
    data[_place(data, luck) :] = other[luck.randrange(len(other)) :]


def _token(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    place = _place(data, luck)
    data[place:place] = luck.choice(_TOKENS)


def _cell(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    """Another value in place of a whole cell, word or number."""
    marks = b" ,;\t\r\n=\"'[](){}"
    start = end = _place(data, luck)
    while start > 0 and data[start - 1] not in marks:
        start -= 1
    while end < len(data) and data[end] not in marks:
        end += 1
    data[start:end] = luck.choice(_TOKENS)


def _line_gone(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    start, end = _line(data, luck)
    del data[start:end]


def _line_twice(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    start, end = _line(data, luck)
    line = bytes(data[start:end])
    place, _ = _line(data, luck)
    data[place:place] = line


def _line_moved(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    start, end = _line(data, luck)
    line = bytes(data[start:end])
    del data[start:end]
    place, _ = _line(data, luck)
    data[place:place] = line


def _other_marks(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    """One delimiter for another, through the file or from some place on."""
    marks = (b",", b";", b"\t", b".", b"\n", b"\r", b"\r\n", b" ", b"=", b'"')
    old, new = luck.sample(marks, 2)
    start = luck.choice((0, _place(data, luck)))
    data[start:] = data[start:].replace(old, new, luck.choice((1, 5, -1)))


def _integer(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    """A length, an address or a count of another size."""
    width = luck.choice((1, 2, 4, 8))
    value = luck.choice(_INTEGERS) % (1 << (8 * width))
    start = _place(data, luck) // width * width
    data[start : start + width] = value.to_bytes(width, luck.choice(("little", "little", "big")))


def _near(data: bytearray, _: Sequence[bytes], luck: random.Random) -> None:
    """A number a little larger or smaller."""
    if data:
        place = _place(data, luck)
        data[place] = (data[place] + luck.choice((-8, -4, -2, -1, 1, 2, 4, 8))) % 256


_BYTES: tuple[_Change, ...] = (
    _flip_bit,
    _set_byte,
    _cut_out,
    _cut_short,
    _twice,
    _zeros,
    _noise,
    _other_file,
)
_TEXT_CHANGES: tuple[_Change, ...] = (
    *_BYTES, _token, _token, _cell, _cell, _cell, _cell, _line_gone, _line_twice, _line_moved, _other_marks,
)  # fmt: skip
# Addresses and lengths hold when the file keeps its size: changes in place are the dangerous ones.
_BINARY_CHANGES: tuple[_Change, ...] = (
    *_BYTES, _flip_bit, _set_byte, _set_byte, _zeros, _integer, _integer, _integer, _near, _near,
)  # fmt: skip
