"""Flow stress of a specimen: hardening, strain rate, temperature, and a strength peak where there is one."""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray

Number = float | FloatArray


@dataclass(frozen=True, slots=True, kw_only=True)
class FlowLaw:
    """True flow stress over plastic strain, plastic strain rate and temperature.

    ``(A + B e^n) (1 + C ln(1 + r/r0)) (1 - T*^m + P exp(-((T - Tp)/W)^2))`` with
    ``T* = (T - Tr)/(Tm - Tr)``, zero below Tr, and ``1/Tp = 1/Tp1 - q ln(r per s)``.

    Without the peak (P = 0) this is Johnson and Cook's law with the logarithm made smooth at rest.
    The peak is a plain description, not a mechanism: its temperature climbs with the rate as that of
    a thermally activated process does, ln r = const - Q/(k Tp), so q = k/Q. Keep
    C above the fall of the peak with ln r, else the law softens with rate and flows in bands.

    Fields may be arrays of one shape, so that several specimens are computed side by side.

    References
    ----------
    G. R. Johnson, W. H. Cook, Proc. 7th Int. Symp. on Ballistics, The Hague (1983) 541-547.
    """

    initial_pa: Number  # A
    hardening_pa: Number = 0.0  # B
    hardening_exponent: Number = 1.0  # n
    rate_coefficient: Number = 0.0  # C
    reference_rate_per_s: Number = 1.0  # r0
    reference_temperature_k: Number = 293.15  # Tr
    melting_temperature_k: Number = 1500.0  # Tm
    softening_exponent: Number = 1.0  # m
    peak_height: Number = 0.0  # P
    peak_temperature_k: Number = 1000.0  # Tp1, at 1 /s
    peak_width_k: Number = 200.0  # W
    peak_rate_slope_per_k: Number = 0.0  # q

    @property
    def has_peak(self) -> bool:
        """Whether any strength peak is set."""
        return bool(np.any(self.peak_height))

    def stress_pa(self, plastic_strain: Number, rate_per_s: Number, temperature_k: Number) -> FloatArray:
        """True flow stress [Pa]; arguments and fields broadcast against each other."""
        log_rate = np.log1p(np.asarray(rate_per_s) / self.reference_rate_per_s)
        stress, _ = self.at_log_rate(
            self.static_pa(np.asarray(plastic_strain, dtype=float)),
            self.softening(np.asarray(temperature_k, dtype=float)),
            log_rate,
            np.asarray(temperature_k, dtype=float),
        )
        return stress

    def static_pa(self, plastic_strain: FloatArray) -> FloatArray:
        """A + B e^n [Pa]."""
        return np.asarray(self.initial_pa + self.hardening_pa * plastic_strain**self.hardening_exponent)

    def softening(self, temperature_k: FloatArray) -> FloatArray:
        """1 - T*^m, held at 1 below the reference temperature and at 0 above the melting point."""
        warm = (temperature_k - self.reference_temperature_k) / (
            self.melting_temperature_k - self.reference_temperature_k
        )
        return np.asarray(1.0 - np.clip(warm, 0.0, 1.0) ** self.softening_exponent)

    def at_log_rate(
        self, static_pa: FloatArray, softening: FloatArray, log_rate: FloatArray, temperature_k: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Flow stress and its slope with ``log_rate`` = ln(1 + r/r0), all [Pa]."""
        rate_factor = 1.0 + self.rate_coefficient * log_rate
        if not self.has_peak:
            stress = static_pa * softening
            return stress * rate_factor, stress * self.rate_coefficient
        inverse_peak = 1.0 / self.peak_temperature_k - self.peak_rate_slope_per_k * (
            log_rate + np.log(self.reference_rate_per_s)
        )
        away = (temperature_k - 1.0 / inverse_peak) / self.peak_width_k
        peak = self.peak_height * np.exp(-(away**2))
        # d Tp/d log_rate = q Tp^2.
        climb = self.peak_rate_slope_per_k / inverse_peak**2
        peak_slope = peak * 2.0 * away * climb / self.peak_width_k
        thermal = softening + peak
        return (
            static_pa * thermal * rate_factor,
            static_pa * (thermal * self.rate_coefficient + peak_slope * rate_factor),
        )


# A specimen without a flow law never yields.
ELASTIC = FlowLaw(initial_pa=float("inf"))


def side_by_side(laws: Sequence[FlowLaw]) -> FlowLaw:
    """Return one law whose fields are columns, shape (laws, 1); a single law is returned as it is."""
    if len(laws) == 1:
        return laws[0]
    columns = {
        field.name: np.array([[getattr(law, field.name)] for law in laws], dtype=float)
        for field in dataclasses.fields(FlowLaw)
    }
    return FlowLaw(**columns)
