from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.points import FlowPoints, SharedError


def six(**changes: Any) -> FlowPoints:
    """Two conditions of three points."""
    values: dict[str, Any] = {
        "plastic_strain": np.array([0.05, 0.1, 0.2, 0.05, 0.1, 0.2]),
        "stress_pa": np.array([200e6, 240e6, 300e6, 250e6, 290e6, 340e6]),
        "rate_per_s": np.array([1e-3, 1e-3, 1e-3, 900.0, 1000.0, 1100.0]),
        "temperature_k": np.full(6, 293.0),
        "u_own_pa": np.full(6, 2e6),
        "condition": np.array([3, 3, 3, 8, 8, 8]),
        "adiabatic": np.array([False, False, False, True, True, True]),
    }
    return FlowPoints(**{**values, **changes})


def changed(name: str, place: int, value: float) -> dict[str, Any]:
    array = np.array(getattr(six(), name), dtype=float)
    array[place] = value
    return {name: array}


def test_what_it_says_of_its_conditions() -> None:
    points = six(labels={8: "shot W-02"})
    assert len(points) == 6
    assert points.conditions == (3, 8)
    assert points.mean_rates_per_s() == pytest.approx([1e-3, (900 * 1000 * 1100) ** (1 / 3)])
    assert points.start_temperatures_k().tolist() == [293.0, 293.0]
    assert points.label(8) == "shot W-02"
    assert points.label(3) == "condition 3"


def test_arrays_are_copies_that_cannot_change() -> None:
    stress = np.full(6, 3e8)
    points = six(stress_pa=stress)
    stress[0] = 1.0
    assert points.stress_pa[0] == 3e8
    with pytest.raises(ValueError, match="read-only"):
        points.stress_pa[0] = 1.0


def test_selection_keeps_what_belongs_together() -> None:
    fast = np.array([False, False, False, True, True, True])
    rig = SharedError(name="rig", relative_u=0.02, members=fast)
    machine = SharedError(name="machine", relative_u=0.01, members=~fast)
    part = six(shared=(rig, machine)).select(fast)
    assert part.conditions == (8,)
    assert [error.name for error in part.shared] == ["rig"]
    assert part.shared[0].members.tolist() == [True, True, True]


def test_heating_from_the_measured_stress_is_the_work_done() -> None:
    # Constant stress: work is stress times strain (Taylor & Quinney 1934). Copper,
    # 300 MPa, strain 0.2, share 0.9, 8960 kg/m3, 385 J/(kg K): 15.654 K.
    points = six(stress_pa=np.full(6, 300e6), heat_k_m3_j=0.9 / (8960 * 385))
    heated = points.heated_k()
    assert heated[5] - 293 == pytest.approx(15.654, abs=5e-4)
    assert heated[:3].tolist() == [293.0] * 3


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        (changed("plastic_strain", 5, 20.0), r"point 5 .condition 8.: found 20.*per cent: divide by 100"),
        (changed("plastic_strain", 2, 0.08), r"condition 3: strain falls from 0.1 to 0.08 at its point 2.*unloading"),
        (changed("plastic_strain", 0, -0.01), "found -0.01, expected 0 or more.*true modulus"),
        (changed("stress_pa", 1, np.nan), "stress_pa, point 1: found nan, expected a number"),
        (changed("stress_pa", 1, -2e8), "loading is positive.*compressive stress as positive"),
        ({"stress_pa": np.full(6, 300.0)}, "greatest stress is 300 Pa.*looks like MPa"),
        (changed("rate_per_s", 0, 0.0), "rate_per_s, point 0.*more than 0 per second"),
        (changed("temperature_k", 0, -20.0), "Add 273.15"),
        (changed("temperature_k", 1, 473.0), "condition 3: mixed temperatures, 293 to 473 K"),
        (changed("u_own_pa", 4, 0.0), "u_own_pa, point 4.*needs an uncertainty"),
        ({"rate_per_s": np.ones(5)}, r"rate_per_s: shape \(5,\), expected \(6,\)"),
        ({"condition": np.array([0.0, 0, 0, 1, 1, 1])}, "condition must hold whole numbers"),
        ({"adiabatic": np.zeros(6)}, "adiabatic must hold True or False"),
        ({"adiabatic": np.array([True, False, True, True, True, True])}, "some points are adiabatic"),
        ({"heat_k_m3_j": -1.0}, "heat_k_m3_j: found -1"),
    ],
)  # fmt: skip
def test_refusals(changes: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        six(**changes)


def test_no_points_at_all() -> None:
    none: dict[str, Any] = dict.fromkeys(
        ("plastic_strain", "stress_pa", "rate_per_s", "temperature_k", "u_own_pa"), np.zeros(0)
    )
    with pytest.raises(InputError, match="at least one point"):
        FlowPoints(**none, condition=np.zeros(0, dtype=int), adiabatic=np.zeros(0, dtype=bool))


def test_refusals_of_shared_errors() -> None:
    yes = np.ones(6, dtype=bool)
    with pytest.raises(InputError, match="shared error rig: relative_u is 2, expected a fraction.*0.01"):
        SharedError(name="rig", relative_u=2.0, members=yes)
    with pytest.raises(InputError, match="members must be a bool array"):
        SharedError(name="rig", relative_u=0.02, members=np.ones(6))  # type: ignore[arg-type]
    rig = SharedError(name="rig", relative_u=0.02, members=yes)
    with pytest.raises(InputError, match="two shared errors have one name"):
        six(shared=(rig, rig))
    with pytest.raises(InputError, match=r"members of shape \(5,\)"):
        six(shared=(SharedError(name="rig", relative_u=0.02, members=yes[:5]),))
    with pytest.raises(InputError, match="0 True"):
        six(shared=(SharedError(name="rig", relative_u=0.02, members=~yes),))
    with pytest.raises(InputError, match="a selection is a bool array"):
        six().select(~yes)
