"""What is really true of a rig on the day of a demo's calibration session, and what was done there."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.forward.calibration_plan import NO_LOSSES, CalibrationPlan, Losses
from shpb.forward.solids import StandardLinearSolid
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.rig.rig_file import rig_from_text
from shpb.wave.pochhammer import first_mode_at_frequency


@dataclass(frozen=True, slots=True, kw_only=True)
class TrueShot:
    """One shot or shunt of a session: what was done, and what is written of it."""

    shot_id: str
    kind: str  # as in a session file
    bar: str = "incident"  # that was struck, or whose bridge was shunted
    at_specimen_end: bool = False
    striker_speed_m_s: float = 0.0
    shown_speed_m_s: float = 0.0  # by the light gates
    shunt_ohm: float = 0.0
    shown_shunt_ohm: float = 0.0
    peak_to_noise_db: float = 50.0

    @property
    def station(self) -> str:
        """The station that is shunted."""
        return f"{self.bar}_gauge"


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationTruth:
    """One session and the rig as it really was that day.

    Attributes
    ----------
    name : str
        Of the calibration; also the name of the session file behind ``session_``.
    rig_file, rig_text : str
        The rig file below the demo's folder, and its words.
    true : Rig
        The rig with its true values.
    speed_error : float
        Relative error of the light gates that all shots of the session share.
    losses : Losses
        Of bars alone and together.
    solid : StandardLinearSolid or None
        Material of bars that are not elastic; the wave speeds of ``true`` are then those of slow waves.
    """

    name: str
    date: str
    rig_file: str
    rig_text: str
    true: Rig
    speed_error: float
    shots: tuple[TrueShot, ...]
    temperature_c: float
    operator: str
    remarks: str
    losses: Losses = NO_LOSSES
    solid: StandardLinearSolid | None = None
    interval_us: float = 0.2
    samples: int = 7600
    pretrigger_us: float = 250.0
    rise_us: float = 20.0

    @property
    def session_file(self) -> str:
        """Name of the session file."""
        return f"session_{self.name}.toml"

    @property
    def stated(self) -> Rig:
        """The rig as its rig file has it."""
        return rig_from_text(self.rig_text, self.rig_file)

    @property
    def wave_speed_m_s(self) -> dict[str, float]:
        """True c0 by bar [m/s]; of a bar that is not elastic that of slow waves."""
        return {side: float(bar.wave_speed_m_s) for side, bar in bars_of(self.true).items()}

    @property
    def poisson_ratio(self) -> dict[str, float]:
        """True Poisson's ratio by bar."""
        return {side: float(bar.poisson_ratio) for side, bar in bars_of(self.true).items()}

    def sensitivity(self, station: str) -> float:
        """True strain per volt by the stated strain per volt, for small strain."""
        return _chain(self.stated.gauges[station]) / _chain(self.true.gauges[station])

    def gauge_factor(self, station: str) -> float:
        """Gauge factor that gives the true strain with the excitation and the gain that the rig file states."""
        return float(self.stated.gauges[station].gauge_factor) / self.sensitivity(station)

    def to_specimen_m(self, station: str) -> float:
        """True distance of a station from the specimen face [m]."""
        return float(self.true.gauges[station].to_specimen_m)

    def propagation(self, side: str, frequency_hz: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Phase speed [m/s] and attenuation [1/m] of a bar at each frequency, shape of ``frequency_hz``.

        Of a bar that is not elastic by its modulus in closed form, with the section's dispersion at its own speed.
        """
        bar = bars_of(self.true)[side]
        slowness = np.full(frequency_hz.shape, 1.0 / bar.wave_speed_m_s, dtype=np.complex128)
        if self.solid is not None:
            slowness = np.sqrt(float(bar.density_kg_m3) / self.solid.modulus_pa(frequency_hz))
        mode = first_mode_at_frequency(frequency_hz * bar.radius_m * slowness.real, bar.poisson_ratio)
        wavenumber = 2 * np.pi * frequency_hz * slowness / mode.phase_speed
        return mode.phase_speed / slowness.real, -wavenumber.imag

    def plan(self, shot: TrueShot) -> CalibrationPlan:
        """A fired shot for the forward model."""
        return CalibrationPlan(
            rig=self.true,
            striker_speed_m_s=shot.striker_speed_m_s,
            bar=shot.bar,
            at_specimen_end=shot.at_specimen_end,
            rise_s=self.rise_us * 1e-6,
            losses=self.losses,
            solid=self.solid,
        )


def bars_of(rig: Rig) -> dict[str, Bar]:
    """Both bars by side."""
    return {"incident": rig.incident_bar, "transmitted": rig.transmitted_bar}


def _chain(gauge: Gauge) -> float:
    """Volts per strain, but for what the arrangement does to both alike."""
    return float(gauge.effective_gauge_factor * gauge.excitation_v * gauge.gain)
