"""What the constants of a bar say in words: findings, remarks, method."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from shpb.calibrate.bars.passages import ShotPassages
from shpb.calibrate.bars.ways import bar_of
from shpb.calibrate.determination import CalibrationFinding
from shpb.quantity import Quantity
from shpb.rig.bar import Bar
from shpb.rig.rig import SIDES, Rig

FAR_OFF = (
    0.03  # relative: a handbook's modulus is uncertain by 1 to 3 %, c0 by half of that (common practice)
)
MISFIT = 0.01  # of the passages' root mean square, beyond noise; good bars and gauges reach 0.003 (common practice)
_MISFIT_BY_NOISE = 4.0


def method_in_words(shots: Iterable[ShotPassages]) -> str:
    """As it stands in the calibration file."""
    count = sum(len(shot.passages) for shot in shots)
    return f"mode-1 phase of {count} passages"


def position_finding(
    station: str, stated_m: Quantity, measured_m: float, u_m: float, limit: float
) -> CalibrationFinding:
    """A station that is not where the rig file has it."""
    name, off = station.replace("_", " "), 1e3 * (measured_m - float(stated_m))
    where = "nearer to" if off < 0 else "farther from"
    return CalibrationFinding(
        check="gauge position",
        measured=f"the {name} stands {abs(off):.1f} mm {where} the specimen than the rig file says "
        f"({1e3 * measured_m:.1f} mm, u {1e3 * u_m:.1f} mm, by travel times)",
        limit=f"{limit:g} standard uncertainties of both",
        action="The measured distance goes into the calibration. Measure it again, and the bar's length too.",
    )


def stock_finding(
    rig: Rig, speeds: tuple[float, float], u_difference: float, limit: float
) -> CalibrationFinding:
    """Bars of one stock that are two bars after all."""
    return CalibrationFinding(
        check="one stock",
        measured=f"the {rig.incident_bar.material} bars have wave speeds of {speeds[0]:.1f} and {speeds[1]:.1f} m/s, "
        f"u of the difference {u_difference:.1f} m/s",
        limit=f"{limit:g} standard uncertainties apart",
        action="Each bar gets its own wave speed. Measure both lengths again if they are of one melt.",
    )


def findings_of_bar(side: str, bar: Bar, speed: Quantity) -> list[CalibrationFinding]:
    """A wave speed that does not go with the modulus, or the wave speed, that the rig states."""
    stated_modulus = bar.stated_modulus_pa
    stated, what = float(bar.wave_speed_m_s), f"wave speed of {float(bar.wave_speed_m_s):.0f} m/s"
    if stated_modulus is not None:
        stated = float(np.sqrt(stated_modulus / bar.density_kg_m3))
        what = (
            f"modulus of {1e-9 * stated_modulus:.1f} GPa and density of {float(bar.density_kg_m3):.0f} kg/m3, "
            f"{stated:.0f} m/s"
        )
    off = float(speed) / stated - 1
    if abs(off) <= FAR_OFF:
        return []
    return [
        CalibrationFinding(
            check="wave speed against the rig file",
            measured=f"{side} bar: {float(speed):.0f} m/s, {100 * off:+.1f} % from the stated {what}",
            limit=f"{100 * FAR_OFF:g} %",
            action="Check material, length of the bar and the record's sample interval before this goes in force.",
            grave=True,
        )
    ]


def misfit_finding(
    misfit: float, chi2: float, freedom: int, shots: Iterable[ShotPassages]
) -> list[CalibrationFinding]:
    """Passages that are not the same pulse."""
    if misfit <= MISFIT or chi2 <= _MISFIT_BY_NOISE * freedom:
        return []
    names = ", ".join(shot.shot_id for shot in shots)
    return [
        CalibrationFinding(
            check="passages against each other",
            measured=f"carried to one place they differ by {100 * misfit:.1f} % ({names})",
            limit=f"{100 * MISFIT:g} %",
            action="Look for bending (record both sides), a bar that is not elastic (measure its propagation), loose "
            "gauges, or a bar that touches something.",
        )
    ]


def remarks_on_assumed(rig: Rig, lengths: Iterable[str], share: float) -> list[str]:
    """Lengths and distances whose uncertainty nobody has stated."""
    bars = {f"{side} bar's length": bar_of(rig, side).length_m for side in SIDES if side in set(lengths)}
    gauges = {
        f"{name.replace('_', ' ')}'s distance": gauge.to_specimen_m
        for name, gauge in rig.gauges.items()
        if name in set(lengths)
    }
    bare = [name for name, value in (bars | gauges).items() if value.u is None]
    if not bare:
        return []
    return [
        f"no uncertainty is stated of {', '.join(bare)}: {100 * share:g} % is assumed; c0 is no better known"
    ]
