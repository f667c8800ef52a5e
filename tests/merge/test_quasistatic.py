from __future__ import annotations

import hashlib
from pathlib import Path

import numpy as np
import pytest

from shpb.errors import FileMistakes, InputError
from shpb.merge.quasistatic import read_quasistatic
from shpb.rig.gauge import TestKind

from .curves import FACTS, linear_hardening, write_table

DATA = Path(__file__).parent / "data"
EXAMPLES = Path(__file__).parents[2] / "examples" / "quasistatic"


def mistakes(path: Path) -> list[str]:
    with pytest.raises(FileMistakes) as caught:
        read_quasistatic(path)
    return [str(m) for m in caught.value.mistakes]


def only_mistake(path: Path) -> str:
    (found,) = mistakes(path)
    return found


def table(tmp_path: Path, names: str = "eng_strain,eng_stress_MPa", **facts: str) -> Path:
    strain, stress = linear_hardening()
    stated = {k: v for k, v in {**FACTS, **facts}.items() if v}
    return write_table(tmp_path / "t.csv", names, np.column_stack((strain, stress / 1e6)), stated)


def with_lines(path: Path, changes: dict[int, str]) -> Path:
    lines = path.read_text().splitlines()
    for number, line in changes.items():
        lines[number - 1] = line
    path.write_text("\n".join(lines) + "\n")
    return path


# --- what is read -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.csv")), ids=lambda p: p.stem)
def test_the_demo_files_are_read(path: Path) -> None:
    test = read_quasistatic(path)
    code, celsius, rate = path.stem.split("_", 2)
    assert test.material[0] == code
    assert test.kind is TestKind.COMPRESSION
    assert not any("taken from the words" in remark for remark in test.remarks)
    assert test.temperature_k == pytest.approx(int(celsius.removesuffix("C")) + 273.15)
    assert test.rate_per_s == float(rate)
    raw = np.loadtxt(path, delimiter=",", skiprows=7)
    assert np.array_equal(test.strain, raw[:, 0])
    np.testing.assert_allclose(test.stress_pa, raw[:, 1] * 1e6, rtol=1e-14)
    assert test.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


def test_the_words_of_the_test_tell_its_kind_where_nothing_else_does(tmp_path: Path) -> None:
    lines = (EXAMPLES / "W_20C_1e-3.csv").read_text(encoding="utf-8").splitlines()
    path = tmp_path / "words.csv"
    path.write_text(
        "\n".join(line for line in lines if not line.startswith("# kind")) + "\n", encoding="utf-8"
    )
    test = read_quasistatic(path)
    assert test.kind is TestKind.COMPRESSION
    assert any("taken from the words" in remark for remark in test.remarks)


def test_a_file_without_a_header_takes_its_facts_from_the_toml_file_beside_it() -> None:
    test = read_quasistatic(DATA / "virtual_rig_metal_1k_quasistatic.csv")
    raw = np.loadtxt(DATA / "virtual_rig_metal_1k_quasistatic.csv", delimiter=",", skiprows=1)
    # It holds engineering and true values; the true ones know of the elastic change of volume, and are taken.
    assert test.columns == ("true_strain", "true_stress_Pa")
    np.testing.assert_allclose(-np.log1p(-test.strain), raw[:, 2], rtol=1e-12, atol=1e-15)
    np.testing.assert_allclose(test.stress_pa * (1 - test.strain), raw[:, 3], rtol=1e-12)
    assert test.young_modulus_pa == 118e9
    # A change of the facts must be noticed as a change of the table would be.
    beside = DATA / "virtual_rig_metal_1k_quasistatic.toml"
    assert test.sources[1] == (beside.name, hashlib.sha256(beside.read_bytes()).hexdigest())


@pytest.mark.parametrize(
    ("mark", "decimal"), [(",", "."), (";", "."), (";", ","), ("\t", "."), ("\t", ","), (" ", ".")]
)
def test_separators_and_decimal_marks(tmp_path: Path, mark: str, decimal: str) -> None:
    strain, stress = linear_hardening()
    rows = np.column_stack((strain, stress / 1e6))
    path = write_table(
        tmp_path / "t.txt", mark.join(("eng_strain", "eng_stress_MPa")), rows, mark=mark, decimal=decimal,
        number="%.17g",
    )  # fmt: skip
    test = read_quasistatic(path)
    assert np.array_equal(test.strain, strain)
    np.testing.assert_allclose(test.stress_pa, stress, rtol=1e-15)


@pytest.mark.parametrize(
    ("names", "strain_scale", "stress_scale"),
    [
        ("eng_strain_percent,eng_stress_Pa", 100, 1),
        ("Engineering strain [%];Engineering stress [N/mm²]".replace(";", ","), 100, 1e-6),
        ("eng. strain [-],eng. stress (GPa)", 1, 1e-9),
        ("displacement_mm,force_kN", 6.0, 20e-6 * 1e-3),
        ("displacement_um,load [N]", 6000.0, 20e-6),
        ("eng_strain,force_N", 1, 20e-6),
    ],
)
def test_units_in_the_names(tmp_path: Path, names: str, strain_scale: float, stress_scale: float) -> None:
    strain, stress = linear_hardening()
    rows = np.column_stack((strain * strain_scale, stress * stress_scale))
    facts = {**FACTS, "gauge_length_mm": "6", "area_mm2": "20"}
    test = read_quasistatic(write_table(tmp_path / "t.csv", names, rows, facts, number="%.17g"))
    np.testing.assert_allclose(test.strain, strain, rtol=1e-14, atol=1e-18)
    np.testing.assert_allclose(test.stress_pa, stress, rtol=1e-14, atol=1e-6)


def test_a_line_of_units_below_the_names(tmp_path: Path) -> None:
    path = table(tmp_path, "strain_note,x")
    lines = path.read_text().splitlines()
    lines[5:6] = ["eng_strain,eng_stress", "-,MPa"]
    path.write_text("\n".join(lines))
    np.testing.assert_allclose(read_quasistatic(path).stress_pa.max(), 360e6)


def test_names_in_the_last_comment_line(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    path = tmp_path / "t.txt"
    head = "\n".join(f"{k} = {v}" for k, v in FACTS.items()) + "\neng_strain eng_stress_Pa"
    np.savetxt(path, np.column_stack((strain, stress)), header=head)  # numpy writes its header as comments
    assert np.array_equal(read_quasistatic(path).strain, strain)


def test_true_strain_becomes_engineering_strain(tmp_path: Path) -> None:
    # Constant volume in compression, in closed form: e = 1 - exp(-e_t), s = s_t exp(e_t).
    true = np.linspace(0, 0.3, 20)
    path = write_table(
        tmp_path / "t.csv", "true_strain,true_stress_MPa", np.column_stack((true, np.full(20, 250.0)))
    )
    test = read_quasistatic(path)
    np.testing.assert_allclose(test.strain, 1 - np.exp(-true), atol=1e-9)
    np.testing.assert_allclose(test.stress_pa, 250e6 * np.exp(true), rtol=1e-9)


def test_loading_counted_negative_is_turned_and_said(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    path = write_table(tmp_path / "t.csv", "eng_strain,eng_stress_Pa", -np.column_stack((strain, stress)))
    test = read_quasistatic(path)
    assert test.stress_pa.max() == pytest.approx(360e6)
    assert "turned: eng_strain, eng_stress_Pa" in test.remarks[0]


def test_a_note_column_and_free_remarks_are_no_mistake(tmp_path: Path) -> None:
    path = table(tmp_path, "eng_strain,eng_stress_MPa", weather="rain: heavy")
    lines = path.read_text().splitlines()
    lines = [f"{line},text" if i > 6 else line for i, line in enumerate(lines)]
    lines[6] = "eng_strain,eng_stress_MPa,note_seen"
    path.write_text("\n".join(lines))
    assert read_quasistatic(path).strain.size == 660


# --- what is refused --------------------------------------------------------------------------------------------


def test_strain_in_per_cent(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    path = write_table(
        tmp_path / "t.csv", "eng_strain,eng_stress_Pa", np.column_stack((strain * 100, stress))
    )
    found = only_mistake(path)
    assert "line 666, column eng_strain: found 20.3051" in found
    assert "call it eng_strain_percent" in found


def test_decreasing_strain_names_the_first_line(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    strain, stress = (np.concatenate((a, a[-1:-30:-1])) for a in (strain, stress))
    path = write_table(tmp_path / "t.csv", "eng_strain,eng_stress_Pa", np.column_stack((strain, stress)))
    # 5 facts, the names, 660 rows on the way up, the last of them twice: the way back begins on line 668.
    assert "line 668, column eng_strain: found strain that decreases" in only_mistake(path)


@pytest.mark.parametrize(
    ("names", "message"),
    [
        ("eng_strian,eng_stress_MPa", "Did you mean eng_strain?"),
        (
            "strain,eng_stress_MPa",
            "a name that could be engineering or true, expected eng_strain or true_strain",
        ),
        ("strain_percent,eng_stress_MPa", "expected eng_strain or true_strain"),
        ("eng_strain,eng_stress", "a column without a unit, expected eng_stress_MPa or eng_stress_Pa"),
        ("eng_strain,eng_strain", "eng_strain too, expected each quantity once"),
        ("eng_strain,banana", "an unknown column"),
    ],
)
def test_columns_that_cannot_be_used(tmp_path: Path, names: str, message: str) -> None:
    found = only_mistake(table(tmp_path, names))
    assert "t.csv: line 6, column" in found
    assert message in found


def test_missing_facts_all_at_once(tmp_path: Path) -> None:
    path = table(tmp_path, "displacement_mm,force_kN", rate_per_s="", temperature_C="", material="", kind="")
    keys = {line.split(": ")[1] for line in mistakes(path)}
    assert keys == {"material", "kind", "rate_per_s", "temperature_C", "gauge_length_mm", "area_mm2"}


def test_a_column_of_times_stands_for_the_rate(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    rows = np.column_stack((strain, stress / 1e6, np.arange(strain.size)))
    facts = {k: v for k, v in FACTS.items() if k != "rate_per_s"}
    test = read_quasistatic(
        write_table(tmp_path / "t.csv", "eng_strain,eng_stress_MPa,time_min", rows, facts)
    )
    assert test.rate_per_s is None
    assert test.time_s is not None
    assert test.time_s[1] == 60.0


def test_one_point(tmp_path: Path) -> None:
    path = write_table(tmp_path / "t.csv", "eng_strain,eng_stress_MPa", np.array([[0.1, 300.0]]))
    assert "line 7: found 1 row of numbers, expected at least 5" in only_mistake(path)


@pytest.mark.parametrize(
    ("row", "message"),
    [
        ("nan,12", 'line 20, column eng_strain: found "nan", which stands for no number'),
        ("0.001,1e999", "line 20, column eng_stress_MPa"),
        (
            "0.001,12 MPa",
            'line 20, column eng_stress_MPa: found "12 MPa", expected a number. Write the number alone',
        ),
        ("0.001,", "line 20, column eng_stress_MPa: found nothing"),
        ("0.001", "line 20: found 1 cell under 2 column names"),
    ],
)
def test_a_cell_that_is_no_number(tmp_path: Path, row: str, message: str) -> None:
    assert message in only_mistake(with_lines(table(tmp_path), {20: row}))


def test_a_text_in_the_first_row_is_not_taken_for_a_header(tmp_path: Path) -> None:
    assert "line 7, column eng_strain" in only_mistake(with_lines(table(tmp_path), {7: "zero,0"}))


def test_many_wrong_cells_are_counted(tmp_path: Path) -> None:
    found = mistakes(with_lines(table(tmp_path), dict.fromkeys(range(10, 40), "x,y")))
    assert len(found) == 9
    assert "52 more cells" in found[-1]


@pytest.mark.parametrize(
    ("facts", "message"),
    [
        (
            {"temprature_C": "20"},
            "line 6, temprature_C: found an unknown key, expected a known one. Did you mean temp",
        ),
        ({"temperature": "20"}, "Did you mean temperature_C?"),
        ({"strain_rate": "20"}, "Did you mean rate_per_s?"),
        ({"young_modulus_GPa": "118000"}, "If it is 118000 MPa, write young_modulus_GPa = 118"),
        ({"rate_per_s": "slow"}, 'line 3, rate_per_s: found "slow", expected a number in 1/s'),
        ({"kind": "bending"}, 'line 2, kind: found "bending", expected one of "compression", "tension"'),
        ({"diameter_mm": "6", "area_mm2": "20"}, "expected 28.27 mm², which the diameter gives"),
        (
            {"temperature_K": "500"},
            "line 6, temperature_K: found 500, expected the same as line 4, temperature_C",
        ),
        ({"compliance_mm_per_kN": "0.01"}, "expected a number, because a compliance is stated"),
        ({"blank_run": "no.csv", "gauge_length_mm": "6", "diameter_mm": "6"}, "there is no such blank run"),
        (
            {"slope_correction": "true", "young_modulus_GPa": ""},
            "the true modulus that the slope is corrected to",
        ),
    ],
)
def test_facts_that_cannot_be_used(tmp_path: Path, facts: dict[str, str], message: str) -> None:
    assert any(message in line for line in mistakes(table(tmp_path, **facts))), mistakes(
        table(tmp_path, **facts)
    )


def test_a_misspelt_fact_is_told_once(tmp_path: Path) -> None:
    found = only_mistake(table(tmp_path, temperature_C="", temprature_C="20"))
    assert "temprature_C: found an unknown key" in found


def test_mistakes_of_both_files_together(tmp_path: Path) -> None:
    path = table(tmp_path, "eng_strian,eng_stress_MPa")
    path.with_suffix(".toml").write_text('operater = "R. Vane"\nrate_per_s = 1.0\n')
    found = mistakes(path)
    assert any(line.startswith("t.csv: line 6") for line in found)
    assert any("t.toml: operater: found an unknown key" in line and "operator" in line for line in found)
    assert any(line.startswith("t.toml: rate_per_s: found 1, expected the same as line 3") for line in found)


def test_columns_that_contradict_each_other_mean_a_wrong_kind(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    rows = np.column_stack((strain, stress / 1e6, -np.log1p(-strain)))
    path = write_table(
        tmp_path / "t.csv", "eng_strain,eng_stress_MPa,true_strain", rows, {**FACTS, "kind": "tension"}
    )
    assert "a strain that differs by" in only_mistake(path)
    good = write_table(tmp_path / "u.csv", "eng_strain,eng_stress_MPa,true_strain", rows)
    assert read_quasistatic(good).strain.size == strain.size


def test_a_gauge_length_or_area_that_cannot_be(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    rows = np.column_stack((strain * 6, stress * 20e-9))
    facts = {**FACTS, "gauge_length_mm": "0.6", "area_mm2": "0.02"}
    found = mistakes(write_table(tmp_path / "t.csv", "displacement_mm,force_kN", rows, facts))
    assert len(found) == 2
    assert "line 668, column displacement_mm: found a strain of 2.03" in found[0]
    assert "line 668, column force_kN: found a stress of 360 GPa" in found[1]


def test_signs_that_disagree(tmp_path: Path) -> None:
    strain, stress = linear_hardening()
    path = write_table(tmp_path / "t.csv", "eng_strain,eng_stress_Pa", np.column_stack((strain, -stress)))
    assert "negative values, while eng_strain is positive" in only_mistake(path)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "is empty"),
        (b"\x89PNG\r\n\x1a\n\x00\x00\x00\x01", "this is no text"),
        (b"1,2\n3,4\n5,6\n", "no line with column names"),
        (b"# material: x\neng_strain,eng_stress_MPa\n", "no row below the column names"),
        (b"# material: x\n", "no line with column names"),
    ],
)
def test_files_that_are_no_table(tmp_path: Path, content: bytes, message: str) -> None:
    path = tmp_path / "t.csv"
    path.write_bytes(content)
    with pytest.raises(InputError, match=message):
        read_quasistatic(path)


def test_a_folder_and_a_missing_file(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="this is a folder"):
        read_quasistatic(tmp_path)
    with pytest.raises(InputError, match="there is no such quasi-static table"):
        read_quasistatic(tmp_path / "no.csv")


def test_mutated_files_never_escape_with_anything_but_our_own_error(tmp_path: Path) -> None:
    random = np.random.default_rng(5)
    original = table(tmp_path).read_bytes()[:1500]
    path = tmp_path / "mutant.csv"
    for _ in range(400):
        raw = bytearray(original)
        for _ in range(random.integers(1, 6)):
            place = int(random.integers(0, len(raw)))
            choice = random.integers(0, 3)
            if choice == 0:
                raw[place] = int(random.integers(0, 256))
            elif choice == 1:
                del raw[place : place + int(random.integers(1, 40))]
            else:
                raw[place:place] = bytes(random.integers(0, 256, 3).tolist())
        path.write_bytes(bytes(raw))
        try:
            test = read_quasistatic(path)
        except InputError:
            continue
        assert np.isfinite(test.strain).all()
        assert np.isfinite(test.stress_pa).all()
