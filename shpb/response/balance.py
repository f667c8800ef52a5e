"""Work and momentum of a shot."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.pulse.pulse import Pulses
from shpb.response.bar_analysis import Curve
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen
from shpb.wave.faces import FacePulses
from shpb.wave.propagation import CarriedPulse


@dataclass(frozen=True, slots=True, kw_only=True)
class Balance:
    """Integrals over the loading that must close.

    ``work_j`` is W_I - W_R - W_T at the faces, equal to the work of the face forces; the specimen's
    own is the integral of three-wave stress over strain times its volume.
    """

    incident_work_j: float
    reflected_work_j: float
    transmitted_work_j: float
    work_j: float
    specimen_work_j: float
    incident_impulse_n_s: float  # over the whole incident window, or until the second loading comes
    striker_momentum_n_s: float | None


def work_balance(
    pulses: Pulses,
    faces: FacePulses,
    curve: Curve,
    rig: Rig,
    specimen: Specimen,
    loading: tuple[int, int],
    striker_speed_m_s: float | None,
) -> Balance:
    """Work and impulse from the pulses; exact for any pulse (momentum and energy identities)."""
    span = slice(*loading)
    dt = faces.interval_s

    def work(bar: Bar, pulse: CarriedPulse) -> float:
        power = pulse.force_strain[span] * pulse.velocity_strain[span]
        return float(bar.force_per_strain_n * bar.wave_speed_m_s * power.sum() * dt)

    incident = work(rig.incident_bar, faces.incident)
    reflected = work(rig.incident_bar, faces.reflected)
    transmitted = work(rig.transmitted_bar, faces.transmitted)
    volume = specimen.area_m2 * specimen.length_m
    own = float((curve.stress_pa[span] * curve.strain_rate_per_s[span]).sum() * dt * volume)
    at_gauge = pulses.incident.strain
    if pulses.separated:
        # The separated wave goes on after the striker's pulse: with what has come back from the impact end.
        until = pulses.arrivals.second_loading_s - pulses.incident.start_s
        at_gauge = at_gauge[: max(int(until / pulses.sample_interval_s), 1)]
    # At the gauge, over its whole window: dispersion keeps the impulse, a short record cuts the faces' clock.
    impulse = float(rig.incident_bar.force_per_strain_n * at_gauge.sum() * pulses.sample_interval_s)
    momentum = None
    if rig.striker is not None and striker_speed_m_s is not None:
        momentum = rig.striker.mass_kg * striker_speed_m_s
    return Balance(
        incident_work_j=incident,
        reflected_work_j=reflected,
        transmitted_work_j=transmitted,
        work_j=incident - reflected - transmitted,
        specimen_work_j=own,
        incident_impulse_n_s=impulse,
        striker_momentum_n_s=momentum,
    )
