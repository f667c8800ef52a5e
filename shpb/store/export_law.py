"""A fitted law taken back from a stored merge, so that it can be asked for flow curves again."""

from __future__ import annotations

from typing import Any

import numpy as np

from shpb.errors import InputError, StoreError
from shpb.merge.model_fit import ModelFit, ParameterEstimate, Standing
from shpb.merge.models.registry import model_named
from shpb.merge.points import FlowPoints
from shpb.store.merge_read import StoredMerge


def laws_in(merge: StoredMerge, number: int) -> list[str]:
    """Keys of the laws fitted to a material (``number`` from 1), the best first."""
    start = f"materials/{number}/laws/"
    keys = [name[len(start) :] for name in merge.attributes if name.startswith(start)]
    keys = [key for key in keys if "/" not in key]
    return sorted(keys, key=lambda key: int(merge.attributes[start + key].get("rank", 0)))


def stored_fit(merge: StoredMerge, number: int, key: str) -> ModelFit:
    """A law as it was fitted: constants, covariance, facts and the points that say where it holds.

    What the file does not hold (residuals by condition, shared errors) stays empty. A stress that depends on a constant
    that was not determined has an infinite uncertainty.

    Raises
    ------
    InputError
        If the law was not fitted to this material.
    StoreError
        If the file is of another version of the law.
    """
    base = f"materials/{number}/laws/{key}"
    facts = merge.attributes.get(base)
    if facts is None:
        fitted = ", ".join(laws_in(merge, number)) or "none"
        raise InputError(
            f"{key} was not fitted to {merge.materials[number - 1]}",
            where=str(merge.path),
            mend=f"Fitted laws: {fitted}",
        )
    model = model_named(key).with_facts(**{k: float(v) for k, v in merge.attributes[f"{base}/facts"].items()})
    if merge.texts[f"{base}/parameters/name"] != model.names:
        raise StoreError(
            f"the constants of {key} are not those of this version of the program",
            where=str(merge.path),
            mend="Merge again",
        )
    covariance = merge[f"{base}/covariance"].copy()
    silent = ~np.isfinite(np.diag(covariance))
    inside = covariance.copy()
    inside[silent, :] = inside[:, silent] = 0.0
    return ModelFit(
        model=model,
        points=_points(merge, base, facts),
        estimates=_estimates(merge, base),
        parameters=merge[f"{base}/parameters/value_used"].copy(),
        covariance=covariance,
        covariance_inside=inside,
        correlation=merge[f"{base}/correlation"].copy(),
        silent=np.eye(silent.size)[silent],
        shared=(),
        chi2=float(facts["chi2"]),
        degrees_of_freedom=int(facts["degrees_of_freedom"]),
        scatter_factor=float(facts["scatter_factor"]),
        shared_factor=float(facts["shared_factor"]),
        aicc=None if "aicc" not in facts else float(facts["aicc"]),
        left_out_rms=None if "left_out_rms" not in facts else float(facts["left_out_rms"]),
        conditions=(),
        stress_pa=merge[f"{base}/points/law_stress"].copy(),
        temperature_k=merge[f"{base}/points/temperature"].copy(),
        condition_number=float(facts["condition_number"]),
        converged=bool(facts["converged"]),
        warnings=tuple(str(one) for one in facts["warnings"]),
    )


def _points(merge: StoredMerge, base: str, facts: Any) -> FlowPoints:
    held = {
        name: merge[f"{base}/points/{name}"]
        for name in ("plastic_strain", "stress", "rate", "start_temperature", "temperature", "u_own_stress")
    }
    condition = merge[f"{base}/points/condition"].astype(int)
    warmed = held["temperature"] > held["start_temperature"]
    return FlowPoints(
        plastic_strain=held["plastic_strain"],
        stress_pa=held["stress"],
        rate_per_s=held["rate"],
        temperature_k=held["start_temperature"],
        u_own_pa=held["u_own_stress"],
        condition=condition,
        adiabatic=np.isin(condition, condition[warmed]),
        heat_k_m3_j=None if "heat" not in facts else float(facts["heat"]),
    )


def _estimates(merge: StoredMerge, base: str) -> tuple[ParameterEstimate, ...]:
    def text(name: str) -> tuple[str, ...]:
        return merge.texts[f"{base}/parameters/{name}"]

    def number(name: str, place: int) -> float | None:
        value = float(merge[f"{base}/parameters/{name}"][place])
        return value if np.isfinite(value) else None

    return tuple(
        ParameterEstimate(
            name=name, unit=text("unit")[i], meaning=text("meaning")[i], standing=Standing(text("standing")[i]),
            value=number("value", i), u=number("u", i), low=number("low", i), high=number("high", i),
            reason=text("reason")[i],
        )
        for i, name in enumerate(text("name"))
    )  # fmt: skip
