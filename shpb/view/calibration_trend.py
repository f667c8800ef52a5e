"""The history of a rig in words and for other programs: each calibrated value over time, and every step of it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from shpb.calibrate.history import Drift, Trend
from shpb.quantity import Quantity
from shpb.rig.calibration import Calibration
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.summary import head
from shpb.view.text import printable, wrapped

DRIFTED = 2.5  # a step beyond so many joint standard uncertainties is worth a line of its own
_MM = {"m": (1e3, "mm")}


def shown_value(trend: Trend, value: Quantity) -> tuple[str, str, str]:
    """Value, standard uncertainty and unit as people read them."""
    factor, unit = _MM.get(trend.unit, (1.0, trend.unit))
    u = None if value.u is None else value.u * factor
    return to_uncertainty(value * factor, u), uncertainty(u), unit


def trend_text(rig: str, trends: Sequence[Trend], width: int = 80) -> str:
    """One table: a line for each value at each calibration, with its step from the one before."""
    dates = sorted({point.date for trend in trends for point in trend.points})
    times = "once" if len(dates) == 1 else f"{len(dates)} times, {dates[0]} to {dates[-1]}"
    lines = wrapped(f"{printable(rig)}: calibrated {times}", width, first="HISTORY  ", rest="         ")
    lines += ["", f"{'':<12}{'value':>12} {'u':>9} {'unit':<5}{'step':>9}  {'in joint u':>10}"]
    for trend in trends:
        lines.append(printable(trend.name))
        steps: list[Drift | None] = [None, *trend.drifts]
        for point, step in zip(trend.points, steps, strict=True):
            value, u, unit = shown_value(trend, point.value)
            line = f"  {point.date:<10}{value:>12} {u:>9} {unit:<5}"
            lines.append((line + step_words(step)).rstrip())
            if step is not None and step.changed:
                changed = ", ".join(map(printable, step.changed))
                lines += wrapped(f"changed in the rig file before it: {changed}", width, first="    ")
    lines += ["", *wrapped(_closing(trends), width)]
    return "\n".join(lines)


def step_words(step: Drift | None) -> str:
    """Relative step and its size in joint standard uncertainties."""
    if step is None:
        return ""
    in_u = "" if step.in_u is None else f"{step.in_u:+.1f}"
    return f"{100 * step.relative:+8.2f}%  {in_u:>10}"


def _closing(trends: Sequence[Trend]) -> str:
    large = [
        f"{printable(trend.name)} on {step.later.date}"
        for trend in trends
        for step in trend.drifts
        if step.in_u is not None and abs(step.in_u) > DRIFTED and not step.changed
    ]
    if not large:
        return (
            f"No step is larger than {DRIFTED:g} joint standard uncertainties where the rig stood as it was."
        )
    return (
        f"Larger than {DRIFTED:g} joint standard uncertainties, with nothing changed in the rig file: "
        f"{'; '.join(large)}. Look for the cause before the next shots: a gauge that lets go, "
        "a bar that was exchanged, a gain knob."
    )


def trend_json(rig: str, calibrations: Sequence[Calibration], trends: Sequence[Trend]) -> dict[str, Any]:
    """The same for other programs, in SI."""
    return {
        **head("shpb calibration history"),
        "rig": rig,
        "calibrations": [{"name": one.name, "date": one.date, "sha256": one.sha256} for one in calibrations],
        "values": [
            {
                "name": trend.name,
                "unit": trend.unit,
                "points": [
                    {"calibration": p.calibration, "date": p.date, "value": float(p.value), "u": p.value.u}
                    for p in trend.points
                ],
                "steps": [
                    {
                        "from": s.earlier.date,
                        "to": s.later.date,
                        "relative": s.relative,
                        "in_joint_u": s.in_u,
                        "changed_in_rig_file": list(s.changed),
                    }
                    for s in trend.drifts
                ],
                "scatter": trend.scatter,
            }
            for trend in trends
        ],
    }
