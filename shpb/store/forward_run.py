"""What the corrections did and what the forward run predicts, as groups of the shot file."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from shpb.reduction import ShotResult

if TYPE_CHECKING:
    import h5py

_STRESSES = (("stress_1w_pa", "stress_1w"), ("stress_2w_pa", "stress_2w"), ("stress_3w_pa", "stress_3w"))


def write_corrections(response: h5py.Group, result: ShotResult) -> None:
    """Group ``corrections``: one group each, with its state in words and what it takes off the curves."""
    parent = response.create_group("corrections")
    for report in result.response.corrections:
        group = parent.create_group(report.correction.value.replace("-", "_"))
        group.attrs.update(
            {
                "applied": report.applied,
                "switched_on": report.switched_on,
                "refused": report.refused,
                "size": report.size,
                "holds_for": report.fact.holds_for,
                "source": report.fact.source,
            }
        )
        changes = [("strain", "strain", "", report.off.strain)]
        changes += [(field, name, "Pa", getattr(report.off, field)) for field, name in _STRESSES]
        for _, name, units, change in changes:
            if isinstance(change, np.ndarray):
                dataset = group.create_dataset(f"{name}_off", data=change)
                dataset.attrs.update({"units": units, "long_name": f"{name} taken off, engineering"})
    if result.response.heating_k is not None:
        rise = response.create_dataset("temperature_rise", data=result.response.heating_k)
        rise.attrs.update(
            {"units": "K", "long_name": "Adiabatic rise of temperature along the three-wave curve"}
        )


def write_closure(trust: h5py.Group, result: ShotResult) -> None:
    """Group ``closure``: measured and predicted pulses at the faces, and their misfits as attributes."""
    closure = result.closure
    if closure is None:
        return
    group = trust.create_group("closure")
    curves = {
        "time": ("s", "Time since the front reached the incident face", closure.time_s),
        "measured_reflected": ("", "Reflected strain at the face, measured", closure.measured_reflected),
        "predicted_reflected": ("", "Reflected strain at the face, forward run", closure.predicted_reflected),
        "measured_transmitted": (
            "",
            "Transmitted strain at the face, measured",
            closure.measured_transmitted,
        ),
        "predicted_transmitted": (
            "",
            "Transmitted strain at the face, forward run",
            closure.predicted_transmitted,
        ),
    }
    for name, (units, label, values) in curves.items():
        group.create_dataset(name, data=values).attrs.update({"units": units, "long_name": label})
    group.attrs.update({"NX_class": "NXdata", "signal": "predicted_reflected", "axes": ["time"]})
    for misfit in (closure.reflected, closure.transmitted):
        for name in ("rms", "expected", "delay_s", "u_delay_s", "scale", "excess"):
            group.attrs[f"{misfit.pulse}_{name.removesuffix('_s')}"] = getattr(misfit, name)
