from __future__ import annotations

import pickle
from pathlib import Path

import numpy as np
import pytest

from shpb.errors import FileMistakes, InputError
from shpb.merge.machine import (
    Compliance,
    averaged_by_load,
    pooled_rising,
    read_compliance,
    slope_corrected,
    specimen_displacement_m,
)  # fmt: skip
from shpb.merge.prepare import engineering_curve, from_quasistatic
from shpb.merge.quasistatic import read_quasistatic

from .curves import FACTS, linear_hardening, write_table

LENGTH_MM, AREA_MM2 = 6.0, 20.0


def contact(force_n: np.ndarray) -> np.ndarray:
    """A machine whose contacts stiffen: a linear part and one that saturates [m]; rising, in closed form."""
    return 1.2e-8 * force_n + 20e-6 * (1 - np.exp(-force_n / 1500))


def crosshead(tmp_path: Path, added_m: np.ndarray, **facts: str) -> Path:
    """The table of a test whose displacement was measured at the crosshead."""
    strain, stress = linear_hardening()
    rows = np.column_stack(((strain * LENGTH_MM + added_m * 1e3), stress * AREA_MM2 * 1e-9))
    stated = {**FACTS, "gauge_length_mm": f"{LENGTH_MM}", "area_mm2": f"{AREA_MM2}", **facts}
    return write_table(tmp_path / "t.csv", "displacement_mm,force_kN", rows, stated, number="%.15g")


def force() -> np.ndarray:
    return linear_hardening()[1] * AREA_MM2 * 1e-6


def test_a_number_is_taken_out_exactly(tmp_path: Path) -> None:
    # 0.012 mm/kN at 7.2 kN is 86 um: 1.4 % of strain at the end.
    test = read_quasistatic(crosshead(tmp_path, 1.2e-8 * force(), compliance_mm_per_kN="0.012"))
    strain, stress = linear_hardening()
    np.testing.assert_allclose(engineering_curve(test).strain, strain, atol=1e-9)
    curve = from_quasistatic(test)
    assert curve.plastic_strain[-1] == pytest.approx(
        -np.log1p(-strain[-1]) - stress[-1] * (1 - strain[-1]) / 118e9
    )


def test_a_curve_of_a_machine_that_is_no_single_number(tmp_path: Path) -> None:
    load = np.concatenate((np.linspace(0, 4000, 40), np.linspace(4200, 8000, 15)))
    write_table(
        tmp_path / "machine.csv",
        "force_kN,displacement_mm",
        np.column_stack((load / 1e3, contact(load) * 1e3)),
        {},
    )
    test = read_quasistatic(crosshead(tmp_path, contact(force()), compliance_curve="machine.csv"))
    assert [name for name, _ in test.sources] == ["t.csv", "compliance curve machine.csv"]
    strain, _ = linear_hardening()
    # A cubic between 40 points over the bend: within 0.1 um of 6 mm.
    np.testing.assert_allclose(engineering_curve(test).strain, strain, atol=2e-5)


def test_a_blank_run_with_noise_and_a_late_contact(tmp_path: Path) -> None:
    random = np.random.default_rng(3)
    load = np.linspace(0, 8000, 3000)
    moved = contact(load) + 0.25e-3 + 0.5e-6 * random.standard_normal(load.size)
    approach = np.column_stack((np.linspace(0.1, 0.25, 50), np.full(50, 0.0)))
    rows = np.concatenate((approach, np.column_stack((moved * 1e3, load / 1e3)), [[0.26, 5.0], [0.25, 0.1]]))
    write_table(tmp_path / "blank.csv", "displacement_mm,force_kN", rows, {})
    test = read_quasistatic(crosshead(tmp_path, contact(force()), blank_run="blank.csv"))
    strain, _ = linear_hardening()
    found = engineering_curve(test).strain
    # Contact below 1 % of the load is not seen: its 1 um shifts the zero, which the toe takes up.
    above = force() > 800
    np.testing.assert_allclose(found[above], strain[above], atol=3e-4)


def test_compliance_left_in_is_off_by_what_it_adds(tmp_path: Path) -> None:
    # The check can fail: without the statement, strain is 1.4 % too large at the end and the slope is told.
    curve = engineering_curve(read_quasistatic(crosshead(tmp_path, 1.2e-8 * force())))
    assert curve.strain[-1] - linear_hardening()[0][-1] == pytest.approx(1.2e-8 * 7200 / 6e-3, rel=1e-6)
    assert any("% of the modulus" in remark for remark in curve.remarks)


def test_slope_correction_gives_the_true_modulus_back(tmp_path: Path) -> None:
    # Whatever is proportional to load is taken out without knowing it (e - s (1/E_app - 1/E)).
    curve = engineering_curve(read_quasistatic(crosshead(tmp_path, 1.2e-8 * force(), slope_correction="yes")))
    strain, _ = linear_hardening()
    np.testing.assert_allclose(curve.strain, strain, atol=1e-9)
    assert any("slope corrected to 118 GPa: slope" in r and "between" in r for r in curve.remarks)


def test_slope_correction_in_numbers() -> None:
    # 300 MPa at 60 GPa is 0.5 %, at 200 GPa 0.15 %: the difference of 0.35 % is taken off.
    assert slope_corrected(np.array([0.01]), np.array([300e6]), 60e9, 200e9)[0] == pytest.approx(0.0065)
    with pytest.raises(InputError, match="above the modulus"):
        slope_corrected(np.zeros(3), np.zeros(3), 250e9, 200e9)
    with pytest.raises(InputError, match="must be positive"):
        slope_corrected(np.zeros(3), np.zeros(3), -1.0, 200e9)


def test_displacement_of_the_specimen_in_numbers() -> None:
    machine = Compliance.of_number(2e-8)
    assert specimen_displacement_m(np.array([1e-3]), np.array([10e3]), machine)[0] == pytest.approx(0.8e-3)


def test_curve_inverse_and_sign() -> None:
    load = np.linspace(0, 8000, 12)
    machine = Compliance(load_n=load, displacement_m=contact(load))
    at = np.linspace(-8000, 8000, 501)
    moved = machine.machine_displacement_m(at)
    assert (np.diff(moved) > 0).all()
    np.testing.assert_allclose(moved, -moved[::-1], atol=1e-15)
    np.testing.assert_allclose(machine.force_n(moved), at, rtol=1e-9, atol=1e-6)
    np.testing.assert_allclose(Compliance.of_number(2e-8).force_n(np.array([-2e-5])), [-1000.0])
    assert np.array_equal(pickle.loads(pickle.dumps(machine)).machine_displacement_m(at), moved)


def test_a_curve_is_never_carried_on() -> None:
    load = np.linspace(0, 8000, 12)
    machine = Compliance(load_n=load, displacement_m=contact(load), origin="blank run b.csv")
    with pytest.raises(InputError, match=r"blank run b.csv: the load reaches 9 kN, .* known up to 8 kN"):
        machine.machine_displacement_m(np.array([9000.0]))


@pytest.mark.parametrize(
    ("load", "moved", "message"),
    [
        ([0, 1, 2], [0, 1], "3 loads and 2 displacements"),
        ([0, 1, 2], [0, 2, 1], "does not rise"),
        ([1, 2, 3], [1, 2, 3], "does not rise from zero"),
        ([0, 1, np.nan], [0, 1, 2], "not finite"),
    ],
)
def test_curves_that_are_none(load: list[float], moved: list[float], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Compliance(load_n=np.array(load, dtype=float), displacement_m=np.array(moved, dtype=float))


@pytest.mark.parametrize("number", [0.0, -1e-8, np.inf, np.nan])
def test_numbers_that_are_none(number: float) -> None:
    with pytest.raises(InputError, match="Give a positive number"):
        Compliance.of_number(number)


def test_files_that_are_no_compliance(tmp_path: Path) -> None:
    path = write_table(
        tmp_path / "m.csv", "force_kN,displacement_mm", np.array([[0, 0], [2, 0.02], [4, 0.01]]), {}
    )
    with pytest.raises(FileMistakes, match="displacement rising with load"):
        read_compliance(path, blank_run=False)
    with pytest.raises(FileMistakes, match="no rising curve is left"):
        read_compliance(path, blank_run=True)
    with pytest.raises(FileMistakes, match="no column of loads"):
        read_compliance(
            write_table(tmp_path / "n.csv", "displacement_mm", np.ones((5, 1)), {}), blank_run=True
        )


def test_a_curve_of_secant_compliance(tmp_path: Path) -> None:
    rows = np.array([[1, 0.02], [2, 0.018], [4, 0.015]])
    machine = read_compliance(
        write_table(tmp_path / "m.csv", "force_kN,compliance_mm_per_kN", rows, {}), blank_run=False
    )
    np.testing.assert_allclose(machine.displacement_m, [0, 20e-6, 36e-6, 60e-6])


def test_pooling_keeps_the_mean_and_rises() -> None:
    # Barlow et al.: the isotonic fit of 1 3 2 4 is 1 2.5 2.5 4, and means are kept.
    other, rising = pooled_rising(np.array([0.0, 10, 20, 30]), np.array([1.0, 3, 2, 4]), np.ones(4))
    assert rising.tolist() == [1, 2.5, 4]
    assert other.tolist() == [0, 15, 30]


def test_averaging_by_load_ignores_the_way_down() -> None:
    load = np.concatenate((np.linspace(0, 5000, 500), np.linspace(5000, 0, 500)))
    moved = np.concatenate((2e-8 * np.linspace(0, 5000, 500), np.full(500, 1.0)))
    at, displacement = averaged_by_load(load, moved)
    np.testing.assert_allclose(displacement, 2e-8 * at, atol=1e-15)
