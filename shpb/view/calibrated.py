"""A calibration in plain text and for other programs: what was measured, beside what the rig file states."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from shpb.calibrate.calibration import Calibrated
from shpb.calibrate.sensitivity.reconcile import SourceLine
from shpb.quantity import Quantity, as_quantity
from shpb.rig.rig import Rig
from shpb.view.calibrated_pulses import pulses_json, pulses_text
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.summary import Json, calibration_json, head
from shpb.view.text import padded, printable, wrapped

_NAME = 21
_SOURCE = 43


@dataclass(frozen=True, slots=True)
class ValueLine:
    """One value, as stated and as measured, in SI."""

    table: str  # of the rig file
    what: str
    unit: str
    factor: float  # to the unit
    stated: Quantity
    measured: Quantity

    @property
    def change(self) -> float:
        """Relative change; not a number where nothing was stated."""
        return float(self.measured / self.stated - 1) if self.stated else math.nan

    @property
    def in_u(self) -> float | None:
        """Change by the joint standard uncertainty; None where one of them is not stated."""
        if self.stated.u is None or self.measured.u is None:
            return None
        joint = math.hypot(self.stated.u, self.measured.u)
        return float(self.measured - self.stated) / joint if joint else None


def value_lines(done: Calibrated) -> tuple[ValueLine, ...]:
    """Every measured value beside the stated one."""
    found: list[ValueLine] = []
    for table, bar in done.calibration.bars.items():
        stated = getattr(done.rig, table)
        for name, what, unit in (
            ("wave_speed_m_s", "wave speed", "m/s"),
            ("poisson_ratio", "Poisson's ratio", ""),
        ):
            measured = getattr(bar, name)
            if measured is not None:
                found.append(ValueLine(table, what, unit, 1.0, as_quantity(getattr(stated, name)), measured))
        if bar.wave_speed_m_s is not None:
            before, after = _modulus(done.rig, table), _modulus(done.measured, table)
            found.append(ValueLine(table, "modulus", "GPa", 1e-9, before, after))
    for table, gauge in done.calibration.gauges.items():
        station = done.rig.gauges[table]
        if gauge.gauge_factor is not None:
            found.append(ValueLine(table, "factor", "", 1.0, _chain(done.rig, table), gauge.gauge_factor))
        if gauge.to_specimen_m is not None:
            found.append(
                ValueLine(
                    table, "distance", "mm", 1e3, as_quantity(station.to_specimen_m), gauge.to_specimen_m
                )
            )
    return tuple(found)


def _chain(rig: Rig, station: str) -> Quantity:
    """Stated gauge factor with the uncertainty of the whole chain, which is what the measured one holds."""
    gauge = rig.gauges[station]
    parts = (gauge.gauge_factor, gauge.excitation_v, gauge.gain)
    if any(part.u is None for part in parts):
        return Quantity(float(gauge.gauge_factor))
    share = math.hypot(*(float((part.u or 0.0) / part) for part in parts))
    return Quantity(float(gauge.gauge_factor), float(gauge.gauge_factor) * share)


def _modulus(rig: Rig, table: str) -> Quantity:
    bar = getattr(rig, table)
    density, speed = bar.density_kg_m3, bar.wave_speed_m_s
    value = float(density * speed**2)
    if density.u is None or speed.u is None:
        return Quantity(value)
    return Quantity(value, value * math.hypot(density.u / density, 2 * speed.u / speed))


# --- text -----------------------------------------------------------------------------------------------------------


def calibrated_text(done: Calibrated, width: int = 80) -> str:
    """One screen: the values, what every source says of a sensitivity, what to look at."""
    calibration = done.calibration
    shots = len(done.session.shots)
    head = (
        f"{printable(calibration.rig)}, {printable(calibration.date)}: {shots} shot{'s' if shots != 1 else ''}, "
        f"holds {calibration.holds_days} days"
    )
    lines = wrapped(head, width, first="CALIBRATED  ", rest="            ")
    lines += ["", *_values(done)]
    if done.propagation:
        lines += ["", *_propagation(done, width)]
    if done.sensitivities is not None:
        lines += ["", *_sources(done, width)]
    pulses = pulses_text(done, width)
    if pulses:
        lines += ["", *pulses]
    if done.bending.pulses:
        lines += ["", *_bending(done, width)]
    lines += ["", *_findings(done, width)]
    if done.remarks:
        lines += ["", "REMARKS"]
        lines += [
            line for text in done.remarks for line in wrapped(_sentence(text), width, first="- ", rest="  ")
        ]
    return "\n".join(line.rstrip() for line in lines)


def _values(done: Calibrated) -> Iterator[str]:
    yield f"{'':<{_NAME}}{'stated':>11}{'measured':>12} {'u':>9} {'unit':<5}{'change':>9} {'in joint u':>10}"
    table = ""
    for line in value_lines(done):
        if line.table != table:
            table = line.table
            yield table.replace("_", " ")
        measured, stated = line.measured.scaled(line.factor), line.stated.scaled(line.factor)
        in_u = "" if line.in_u is None else f"{line.in_u:+.1f}"
        yield (
            f"  {line.what:<{_NAME - 2}}{to_uncertainty(stated, measured.u):>11}"
            f"{to_uncertainty(measured, measured.u):>12} {uncertainty(measured.u):>9} {line.unit:<5}"
            f"{100 * line.change:>+8.2f}%{in_u:>11}"
        )


def _propagation(done: Calibrated, width: int) -> Iterator[str]:
    for side, one in done.propagation.items():
        table = one.table
        k = min(range(len(table.frequency_hz)), key=lambda k: abs(table.frequency_hz[k] - 10e3))
        said = (
            f"{side} bar: {table.frequency_hz[0] / 1e3:.2g} to {table.frequency_hz[-1] / 1e3:.3g} kHz; at "
            f"{table.frequency_hz[k] / 1e3:.3g} kHz phase speed "
            f"{to_uncertainty(table.phase_speed_m_s[k], table.u_phase_speed_m_s[k])} m/s "
            f"(u {uncertainty(table.u_phase_speed_m_s[k])}), attenuation "
            f"{to_uncertainty(table.attenuation_per_m[k], table.u_attenuation_per_m[k])} Np/m "
            f"(u {uncertainty(table.u_attenuation_per_m[k])}); loss tangent "
            f"{to_uncertainty(one.loss_tangent, one.u_loss_tangent)} (u {uncertainty(one.u_loss_tangent)})"
        )
        yield from wrapped(said, width, first="PROPAGATION  ", rest="             ")


def _sources(done: Calibrated, width: int) -> Iterator[str]:
    assert done.sensitivities is not None
    yield from wrapped(
        "q: true strain by the stated strain per volt of a station. away: from what all other sources say, in standard "
        "uncertainties. share: how far q of the station follows this source.",
        width,
        first="SENSITIVITY  ",
        rest="             ",
    )
    yield f"{'':<{_SOURCE}}{'q':>9}{'u %':>8}{'away':>8}{'share':>8}"
    for station, q in done.sensitivities.q.items():
        name = station.replace("_", " ")
        yield f"{padded(name, _SOURCE)}{q:>9.4f}{_percent(q):>8}"
        for one in done.sensitivities.sources:
            if one.station == station:
                yield _source(one)


def _percent(q: Quantity) -> str:
    return f"{100 * (q.u or 0.0) / q:.2f}"


def _source(one: SourceLine) -> str:
    share = "left out" if one.left_out else f"{100 * one.weights.get(one.station, 0.0):.0f} %"
    name = printable(short_name(one))
    away = f"{one.residual:+.1f}" if abs(one.residual) < 100 else f"{one.residual:+.0f}"
    line = f"  {padded(name, _SOURCE - 2)}{one.q:>9.4f}{100 * one.u:>8.2f}{away:>8}{share:>8}"
    return line + ("  assumed" if one.assumed and not one.left_out else "")


def short_name(one: SourceLine) -> str:
    """Its name where the station stands above it already."""
    station = one.station.replace("_", " ")
    name = one.name.replace(f" of the {station}", "", 1)
    return name.replace(f"pulses {station} against", "pulses against")


def _bending(done: Calibrated, width: int) -> Iterator[str]:
    """The ratio of each pulse, by station: its range over the shots and the worst shot."""
    yield "BENDING  bending by axial strain, largest of all shots"
    groups: dict[tuple[str, str], list[float]] = {}
    worst: dict[tuple[str, str], tuple[float, str]] = {}
    for one in done.bending.pulses:
        key = one.station, one.pulse
        groups.setdefault(key, []).append(one.ratio)
        worst[key] = max(worst.get(key, (0.0, "")), (one.ratio, one.shot_id))
    for (station, pulse), ratios in groups.items():
        ratio, shot = worst[station, pulse]
        said = f"{station.replace('_', ' ')}, {pulse} pulse: {100 * ratio:.1f} % in {printable(shot)}"
        mean = sum(ratios) / len(ratios)
        yield from wrapped(
            f"{said}; mean of {len(ratios)}: {100 * mean:.1f} %", width, first="  ", rest="    "
        )


def _findings(done: Calibrated, width: int) -> list[str]:
    if not done.findings:
        return ["Nothing contradicts anything beyond its uncertainty."]
    # What several shots show alike is said once.
    alike: dict[tuple[bool, str, str, str], list[str]] = {}
    for one in done.findings:
        alike.setdefault((one.grave, one.check, one.limit, one.action), []).append(one.measured)
    lines = ["LOOK AT"]
    for (grave, check, limit, action), measured in alike.items():
        said = printable(f"{check}: {'; '.join(measured)} (limit: {limit}).")
        lines += wrapped(said, width, first="!! " if grave else "-  ", rest="   ")
        lines += wrapped(printable(f"To do: {action}"), width, first="   ", rest="   ")
    if done.grave:
        lines += wrapped(
            "!!: not to be put in force before this is understood.", width, first="   ", rest="   "
        )
    return lines


def _sentence(text: str) -> str:
    text = printable(text)
    return text if text.endswith(".") else f"{text}."


def in_force_text(done: Calibrated, file: str, rig_file: str, width: int = 80) -> str:
    """Where the calibration was written, and how a rig file puts it in force: the program never edits a rig file."""
    lines = wrapped(f"Written to {printable(file)}.", width)
    if done.grave:
        lines += wrapped("Look into what is marked !! before a rig file names it.", width)
    else:
        lines += wrapped(f"To put it in force, write into [rig] of {printable(rig_file)}:", width)
        lines.append(f'  calibration = "{done.calibration.name}.toml"')
        lines += wrapped(
            "Results stored before stay as they are; shpb recalibrate reduces them again beside.", width
        )
    return "\n".join(lines)


# --- for other programs ---------------------------------------------------------------------------------------------


def calibrated_json(done: Calibrated, file: str, figure: str) -> Json:
    """The same in SI."""
    sensitivities = done.sensitivities
    q_by_station = sensitivities.q if sensitivities is not None else {}
    return {
        **head("shpb calibration"),
        "calibration": calibration_json(done.calibration),
        "file": file,
        "figure": figure or None,
        "grave": done.grave,
        "values": [
            {
                "table": line.table,
                "what": line.what,
                "unit": "Pa" if line.unit == "GPa" else "m" if line.unit == "mm" else line.unit,
                "stated": float(line.stated),
                "stated_u": line.stated.u,
                "measured": float(line.measured),
                "u": line.measured.u,
                "in_joint_u": line.in_u,
            }
            for line in value_lines(done)
        ],
        "correlations": [
            {"first": one.first, "second": one.second, "coefficient": one.coefficient}
            for one in done.calibration.correlations
        ],
        "sources": [
            _source_json(one) for one in (sensitivities.sources if sensitivities is not None else ())
        ],
        "sensitivities": {name: {"q": float(q), "u": q.u} for name, q in q_by_station.items()},
        **pulses_json(done),
        "wave_speed_by_arrivals": [
            {
                "shot_id": one.shot_id,
                "cross_correlation": one.by_correlation_m_s,
                "foot_to_foot": one.by_foot_m_s,
            }
            for one in done.arrivals
        ],
        "bending": [
            {"shot_id": one.shot_id, "station": one.station, "pulse": one.pulse, "ratio": one.ratio}
            for one in done.bending.pulses
        ],
        "findings": [
            {
                "check": one.check,
                "measured": one.measured,
                "limit": one.limit,
                "action": one.action,
                "grave": one.grave,
            }
            for one in done.findings
        ],
        "remarks": list(done.remarks),
    }


def _source_json(one: SourceLine) -> Json:
    return {
        "name": one.name,
        "kind": one.kind,
        "said": one.said,
        "station": one.station,
        "shots": list(one.shots),
        "q": one.q,
        "u_relative": one.u,
        "away_in_u": one.residual,
        "shares": dict(one.weights),
        "left_out": one.left_out,
        "assumed": one.assumed,
    }
