"""When each wave passes each gauge, from distances and wave speeds alone."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen


@dataclass(frozen=True, slots=True, kw_only=True)
class Arrivals:
    """Fronts at the gauges, on the record's clock [s].

    ``transmitted_s`` holds no specimen transit: the earliest that anything can arrive.
    """

    incident_s: float
    reflected_s: float
    transmitted_s: float
    transmitted_through_specimen_s: float
    second_loading_s: float  # the reflected pulse, back from the impact end, at the incident gauge
    end_reflection_s: float  # the transmitted pulse, back from the far end, at the transmitted gauge

    @property
    def spacing_s(self) -> float:
        """From incident to reflected front at the incident gauge: longest pulse without overlap."""
        return self.reflected_s - self.incident_s


def geometric_arrivals(incident_s: float, rig: Rig, specimen: Specimen) -> Arrivals:
    """Arrival times that follow from the incident front at the incident gauge.

    t_R = t_I + 2 x_i/c_i, t_T = t_I + x_i/c_i + x_t/c_t (+ L/c_s through the specimen), the second
    loading 2 (L_i - x_i)/c_i after t_R, the end reflection 2 (L_t - x_t)/c_t after t_T; c is the speed of fronts.
    """
    bar_i, bar_t = rig.incident_bar, rig.transmitted_bar
    x_i, x_t = rig.incident_gauge.to_specimen_m, rig.transmitted_gauge.to_specimen_m
    to_face = x_i / bar_i.front_speed_m_s
    from_face = x_t / bar_t.front_speed_m_s
    transmitted = incident_s + to_face + from_face
    return Arrivals(
        incident_s=incident_s,
        reflected_s=incident_s + 2 * to_face,
        transmitted_s=transmitted,
        transmitted_through_specimen_s=transmitted + (specimen.transit_time_s or 0.0),
        second_loading_s=incident_s + 2 * bar_i.length_m / bar_i.front_speed_m_s,
        end_reflection_s=transmitted + 2 * (bar_t.length_m - x_t) / bar_t.front_speed_m_s,
    )
