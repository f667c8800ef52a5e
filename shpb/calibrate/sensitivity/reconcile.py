"""All sources of sensitivity reconciled into one gauge factor a station, with covariance, and the odd one out named.

Weighted least squares in logarithms (:mod:`~.sayings`): what the rig file states, shunts (excitation and
gain alone), the striker's line (absolute), pulses of one station against another (ratios). What sources share - the
light gates, a wave speed, a resistor - is in their covariance, so it is not averaged away. The result holds the whole
chain: with excitation and gain as stated, the gauge factor k/q gives the right strain.

Where chi2 is too large for chance (1 %), sources are left out one at a time, and all shunts of a station together. One
that brings the rest into agreement, alone in that, and lies more than 3.5 of its standard uncertainties from what the
others say is the odd one out: it takes no part in the result, and the finding says so. Where several could be it, all
stay, are named, and every uncertainty grows until chi2 is what is expected (Birge).

References
----------
A. C. Aitken, Proc. R. Soc. Edinb. 55 (1936) 42-48 (generalised least squares); R. T. Birge, Phys. Rev. 40 (1932)
207-227; the largest consistent subset: M. G. Cox, Metrologia 44 (2007) 187-200 (from memory).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.determination import CalibrationFinding, Determination
from shpb.calibrate.sensitivity.joint_fit import fit_of, odd_ones
from shpb.calibrate.sensitivity.odd_words import (
    findings_of_contradiction,
    findings_of_exchange,
    findings_of_outliers,
)
from shpb.calibrate.sensitivity.sayings import (
    Saying,
    row_of,
    sayings_of,
)
from shpb.calibrate.sensitivity.sensitivity_ratio import SensitivityRatio
from shpb.calibrate.sensitivity.shunt import ShuntCheck
from shpb.calibrate.sensitivity.striker_line import StrikerLine
from shpb.errors import InputError
from shpb.pulse.bridge import bridge_form
from shpb.quantity import Quantity
from shpb.rig.calibration import IN_THE_CHAIN
from shpb.rig.rig import Rig, budget_name

METHOD = "striker line, pulses against each other, shunts and stated values, reconciled by least squares"


@dataclass(frozen=True, slots=True, kw_only=True)
class SourceLine:
    """One source beside all others, for the page.

    Attributes
    ----------
    name, said, kind, station, shots
        As in :class:`~shpb.calibrate.sensitivity.sayings.Saying`.
    q : float
        True by stated strain per volt of ``station``, if this source alone is believed beside what the others say of
        the rest.
    u : float
        Relative standard uncertainty of what it says.
    residual : float
        From what all the others say, by the standard uncertainty of that difference.
    weights : mapping of str to float
        Share in ln q of each station; they do not add up to one: a ratio carries another station's sources over.
    left_out : bool
    assumed : bool
        Its uncertainty is common practice, nobody has stated it.
    """

    name: str
    said: str
    kind: str
    station: str
    shots: tuple[str, ...]
    q: float
    u: float
    residual: float
    weights: Mapping[str, float]
    left_out: bool
    assumed: bool


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Reconciled:
    """One sensitivity a station.

    Attributes
    ----------
    determination : Determination
        Gauge factors that hold the whole chain, by their names in the budget.
    q : mapping of str to Quantity
        True by stated strain per volt, by station.
    strain_per_volt : mapping of str to Quantity
        For small signals [1/V], by station.
    shared : mapping of str to float array, shape (values of the determination,)
        Change of the gauge factors by one standard uncertainty of a thing other results rest on too ("bars: wave
        speed"); by this times that uncertainty is their covariance with it.
    chi2 : float
    freedom : int
        Of all sources together, none left out.
    birge : float
        By what every standard uncertainty was made larger.
    sources : tuple of SourceLine
    findings : tuple of CalibrationFinding
    """

    determination: Determination
    q: Mapping[str, Quantity]
    strain_per_volt: Mapping[str, Quantity]
    shared: Mapping[str, FloatArray]
    chi2: float
    freedom: int
    birge: float
    sources: tuple[SourceLine, ...]
    findings: tuple[CalibrationFinding, ...]


def reconcile(
    rig: Rig,
    ratios: Sequence[SensitivityRatio] = (),
    lines: Sequence[StrikerLine] = (),
    shunts: Sequence[ShuntCheck] = (),
) -> Reconciled:
    """Reconcile all that was measured with what the rig file states.

    Parameters
    ----------
    rig : Rig
        As stated (its gauges), with measured wave speeds.
    ratios, lines, shunts : sequences
        As :func:`~shpb.calibrate.sensitivity.sensitivity_ratio.sensitivity_ratio`,
        :func:`~shpb.calibrate.sensitivity.striker_line.striker_line` and
        :func:`~shpb.calibrate.sensitivity.shunt.shunt` give them.

    Raises
    ------
    InputError
        If there is nothing to reconcile, or a source says a sensitivity that is not above zero.
    """
    _require_sources(ratios, lines, shunts)
    sayings = sayings_of(rig, ratios, lines, shunts)
    shunted = {check.station for check in shunts}
    stations = tuple(dict.fromkeys(one.station for one in sayings if one.kind == "stated"))
    outliers, kept, possible = odd_ones(sayings)
    whole, fit = fit_of(sayings), fit_of(kept)
    birge = float(np.sqrt(fit.chi2 / fit.freedom)) if fit.contradicted else 1.0
    rows = np.array([fit.design_row(row_of(name, shunted)) for name in stations])
    ln_q, covariance, gain = rows @ fit.solution, birge**2 * rows @ fit.covariance @ rows.T, rows @ fit.gain
    determination = _determination(rig, stations, ln_q, covariance, sayings, kept)
    quantities = {
        name: Quantity(float(np.exp(value)), float(np.exp(value) * u), METHOD)
        for name, value, u in zip(stations, ln_q, np.sqrt(np.diag(covariance)), strict=True)
    }
    per_volt = _per_volt(rig, quantities)
    stated = {name: float(value / quantities[name]) for name, value in per_volt.items()}
    findings = [*findings_of_outliers(outliers), *findings_of_contradiction(fit, possible, birge)]
    findings += findings_of_exchange(stated, per_volt) if findings else []
    return Reconciled(
        determination=determination,
        q=quantities,
        strain_per_volt=per_volt,
        shared=_shared(determination.values, gain, kept),
        chi2=whole.chi2,
        freedom=whole.freedom,
        birge=birge,
        sources=_table(sayings, kept, stations, gain, shunted),
        findings=tuple(findings),
    )


def _shared(factors: FloatArray, gain: FloatArray, kept: Sequence[Saying]) -> dict[str, FloatArray]:
    """Change of the gauge factors by one standard uncertainty of everything that a source shares."""
    names = dict.fromkeys(term for one in kept for term in one.terms)
    return {
        name: frozen(-factors * (gain @ np.array([one.terms.get(name, 0.0) for one in kept])))
        for name in names
    }


def _determination(
    rig: Rig,
    stations: Sequence[str],
    ln_q: FloatArray,
    covariance: FloatArray,
    sayings: Sequence[Saying],
    kept: Sequence[Saying],
) -> Determination:
    """Gauge factors k/q with their covariance, from that of ln q."""
    factors = np.array([float(rig.gauges[name].gauge_factor) for name in stations]) * np.exp(-ln_q)
    return Determination(
        method=METHOD,
        shots=tuple(dict.fromkeys(shot for one in kept for shot in one.shots)),
        names=tuple(budget_name(name, "factor") for name in stations),
        values=factors,
        covariance=covariance * np.outer(factors, factors),
        remarks=_remarks(sayings, stations),
    )


def _require_sources(
    ratios: Sequence[SensitivityRatio], lines: Sequence[StrikerLine], shunts: Sequence[ShuntCheck]
) -> None:
    if not (ratios or lines or shunts):
        raise InputError(
            "nothing was measured of any station",
            where="sensitivities",
            mend="Fire bars together or bars apart with a striker speed, or shunt a bridge",
        )
    said = [(f"the ratio of {one.station} to {one.reference}", one.ratio) for one in ratios]
    said += [(f"the striker line of {one.station}", one.q) for one in lines]
    said += [(f"shunt {p.shot_id} of {one.station}", p.gain_ratio) for one in shunts for p in one.points]
    for name, value in said:
        if not (value > 0 and np.isfinite(value)):
            raise InputError(
                f"{name} is {value:.4g}",
                where="sensitivities",
                mend="It must be above zero: look at the shots behind it, and at the polarity of the channels",
            )


def _remarks(sayings: Sequence[Saying], stations: Sequence[str]) -> tuple[str, ...]:
    """What nobody has stated was assumed."""
    assumed = [one for one in sayings if one.kind == "stated" and one.assumed and one.station in stations]
    return tuple(
        f"{one.name}: an uncertainty is not stated and was assumed, {100 * one.u:.2g} % in all"
        for one in assumed
    )


def _per_volt(rig: Rig, q: Mapping[str, Quantity]) -> dict[str, Quantity]:
    """Strain by amplified volt for small signals, magnitudes."""
    found = {}
    for name, value in q.items():
        gauge = rig.gauges[name]
        form = bridge_form(gauge.arrangement, float(rig.bar_of(name).poisson_ratio))
        stated = form.n / (form.B * gauge.effective_gauge_factor * gauge.excitation_v * gauge.gain)
        found[name] = Quantity(stated * value, stated * (value.u or 0.0), IN_THE_CHAIN)
    return found


def _table(
    sayings: Sequence[Saying],
    kept: Sequence[Saying],
    stations: Sequence[str],
    gain: FloatArray,
    shunted: set[str],
) -> tuple[SourceLine, ...]:
    lines = []
    for one in sayings:
        others = [other for other in kept if other is not one]
        left_out = one not in kept
        away, u_away = fit_of(others).away(one)
        weights = {}
        if not left_out:
            column = gain[:, list(kept).index(one)]
            # A stated or shunted value points against ln q: a share is what it moves q by in its own direction.
            toward = one.toward_q
            weights = {name: float(toward * w) for name, w in zip(stations, column, strict=True)}
        without = fit_of(others)
        middle = float(without.design_row(row_of(one.station, shunted)) @ without.solution)
        lines.append(
            SourceLine(
                name=one.name,
                said=one.said,
                kind=one.kind,
                station=one.station,
                shots=one.shots,
                q=float(np.exp(middle + one.toward_q * away)),
                u=one.u_value,
                residual=away / u_away,
                weights=weights,
                left_out=left_out,
                assumed=one.assumed,
            )
        )
    return tuple(lines)
