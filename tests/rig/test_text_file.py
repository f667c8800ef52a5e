"""Files that cannot be read at all, and TOML that breaks its own rules."""

from __future__ import annotations

import os

import pytest

from shpb.errors import InputError
from shpb.rig.rig_file import read_rig, rig_from_text
from shpb.rig.sheet_file import read_sheet
from shpb.rig.shot_list import read_shot_list
from shpb.rig.text_file import LARGEST_BYTES


@pytest.mark.parametrize(
    ("read", "what"), [(read_rig, "rig file"), (read_sheet, "shot sheet"), (read_shot_list, "shot list")]
)
def test_missing_folder_empty_and_large_files(tmp_path, read, what):
    with pytest.raises(InputError, match=f"gone: there is no such {what}. Check the name and the folder"):
        read(tmp_path / "gone")
    with pytest.raises(InputError, match=f"this is a folder, not a {what}. Name the {what} inside it"):
        read(tmp_path)
    for content in (b"", b"  \r\n\t\n", b"\xef\xbb\xbf"):
        (tmp_path / "empty").write_bytes(content)
        with pytest.raises(InputError, match=f"the {what} is empty. Fill it in"):
            read(tmp_path / "empty")
    (tmp_path / "record").write_bytes(b"0.1,0.2\n" * (LARGEST_BYTES // 8 + 1))
    with pytest.raises(InputError, match=f"4 MB are too many for a {what}. Name the {what}, not the record"):
        read(tmp_path / "record")
    with pytest.raises(InputError, match=f"the {what} cannot be read"):
        read("a\x00b")


@pytest.mark.skipif(os.name == "nt" or os.geteuid() == 0, reason="needs a user whom permissions bind")
def test_a_file_without_permission(tmp_path):
    path = tmp_path / "rig.toml"
    path.write_text("[rig]")
    path.chmod(0)
    with pytest.raises(InputError, match="the rig file cannot be read: Permission denied"):
        read_rig(path)


def test_wrong_encodings_are_named(tmp_path):
    path = tmp_path / "rig.toml"
    path.write_bytes('[rig]\nname = "Prüfstand"\n'.encode("latin-1"))
    with pytest.raises(
        InputError, match=r"rig.toml, line 2: the byte 0xfc is not UTF-8. Save the file with .* UTF-8"
    ):
        read_rig(path)
    path.write_bytes("[rig]\n".encode("utf-16"))
    with pytest.raises(InputError, match=r"the rig file is in UTF-16. Save the file with the encoding UTF-8"):
        read_rig(path)
    path.write_bytes(b"\xff\xfe\x00\xd8\x00")
    with pytest.raises(InputError, match=r"damaged UTF-16"):
        read_shot_list(path)


@pytest.mark.parametrize(
    ("line", "number", "mend"),
    [
        ("diameter_mm = 20,5", 3, "Write numbers with a decimal point"),
        ('record = "data\\shot.csv"', 3, "Write paths with / or put them in 'single quotes'"),
        ("diameter_mm = 20\ndiameter_mm = 21", 4, "a key or table stands twice.* Keep one of the two"),
        ("[rig]", 3, "a key or table stands twice.* Keep one of the two"),
        ("diameter_mm 20", 3, "Write key = value; a remark begins with #"),
        ("channel = CH1", 3, 'Put text in "quotes"'),
        ("flag = True", 3, "true or false in small letters"),
        ('name2 = "open', 3, 'Close the text with "'),
        ("[striker", 3, "Close the table's name with ]"),
        ("diameter_mm = 20 mm", 3, "Write the number alone; its unit is the end of the key"),
        ("poisson_ratio = .3", 3, "a digit on both sides of the decimal point"),
        ("diameter_mm = 020", 3, "no leading zero"),
        ("diameter_mm = ", 3, "Write key = value, text in quotes"),
        ("diameter_mm = [1, 2", 3, "Write key = value, text in quotes"),
        ("größe = 3", 3, "Write key = value"),
        ("diameter_mm = 1" + "0" * 5000, 3, "a number has thousands of digits"),
    ],
)
def test_toml_that_breaks_its_rules(line, number, mend):
    text = f'[rig]\nname = "x"\n{line}\n'
    with pytest.raises(InputError, match=mend) as caught:
        rig_from_text(text, "rig.toml")
    assert caught.value.where == f"rig.toml, line {number}"
    assert len(str(caught.value)) < 300


def test_brackets_without_end():
    with pytest.raises(InputError, match="brackets are nested too deeply"):
        rig_from_text("a = " + "[" * 20000, "rig.toml")
