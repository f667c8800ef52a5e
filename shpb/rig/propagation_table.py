"""Measured propagation of a bar that is not elastic: attenuation and phase speed over frequency."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.errors import InputError


@dataclass(frozen=True, slots=True, kw_only=True)
class PropagationTable:
    """Complex propagation coefficient xi = alpha + i w/c of one bar, as measured.

    Plain numbers, all tuples of one length, by rising frequency: the table is part of a calibration file and of every
    shot that used it.

    Attributes
    ----------
    frequency_hz : tuple of float
        At least four, rising, above zero [Hz].
    attenuation_per_m : tuple of float
        alpha [Np/m], of the amplitude.
    phase_speed_m_s : tuple of float
        c [m/s], with dispersion by the bar's section in it.
    u_attenuation_per_m, u_phase_speed_m_s : tuple of float
        Standard uncertainties.
    coherence : tuple of float
        Of the two passages that it was measured from, 0 to 1.

    References
    ----------
    C. Bacon, Exp. Mech. 38 (1998) 242-249.
    """

    frequency_hz: tuple[float, ...]
    attenuation_per_m: tuple[float, ...]
    phase_speed_m_s: tuple[float, ...]
    u_attenuation_per_m: tuple[float, ...]
    u_phase_speed_m_s: tuple[float, ...]
    coherence: tuple[float, ...]

    def __post_init__(self) -> None:
        points = len(self.frequency_hz)
        if any(len(getattr(self, name)) != points for name in COLUMNS):
            raise InputError(
                "the columns have different lengths",
                where="propagation table",
                mend="Give one number a frequency in each: " + ", ".join(COLUMNS),
            )
        rising = all(a < b for a, b in zip(self.frequency_hz, self.frequency_hz[1:], strict=False))
        if points < 4 or not rising or self.frequency_hz[0] <= 0:
            raise InputError(
                f"{points} frequencies, {'rising' if rising else 'not rising'}",
                where="propagation table",
                mend="Give four or more frequencies above zero, by rising frequency",
            )
        if not all(speed > 0 for speed in self.phase_speed_m_s):
            raise InputError(
                "a phase speed is not above zero", where="propagation table", mend="Measure the bar again"
            )


COLUMNS = (
    "frequency_hz",
    "attenuation_per_m",
    "phase_speed_m_s",
    "u_attenuation_per_m",
    "u_phase_speed_m_s",
    "coherence",
)
