"""The two waves of a bar as its gauge stations tell them apart, as values."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.zero_line import ZeroLine


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SeparatedBar:
    """Both waves of one bar at its first station; arrays over the stretch of the record that was worked on.

    "Right" is the way the loading pulse travels, towards the far end of the transmitted bar.

    Attributes
    ----------
    side : str
        "incident" or "transmitted".
    stations : tuple of str
        Their names in :attr:`shpb.rig.rig.Rig.gauges`; the waves stand at the first.
    positions_m : tuple of float
        Along the bar from the specimen's face, growing to the right [m].
    begin, begin_s : int, float
        Sample of the record with which the arrays begin, and its time on the record's clock [s].
    strain : float array, shape (stations, samples)
        Axial strain [1], zero line removed, at rest before the front.
    starts : tuple of int
        Sample of ``strain`` from which each station is no longer held at rest.
    zeros : tuple of ZeroLine
    noise : tuple of float
        Standard deviation of one sample at each station [1].
    right, left : float array, shape (stations, samples)
        What each station's strain gives to each wave [1]: the waves are linear in them, and their sums.
    right_gain, left_gain : float array, shape (samples,)
        Growth of noise: standard deviation of each wave by that of one station, both within the band.
    worst_gain, worst_gain_hz : float
        Greatest noise gain over frequency, of either wave, and where it lies [Hz].
    singular_hz : tuple of float
        Frequencies within the band that the stations cannot tell apart; zero first [Hz].
    stop_hz : float
        Frequency up to which the waves are whole [Hz].
    whole : int
        Samples up to which the end of the record is not felt.
    """

    side: str
    stations: tuple[str, ...]
    positions_m: tuple[float, ...]
    begin: int
    begin_s: float
    strain: FloatArray
    starts: tuple[int, ...]
    zeros: tuple[ZeroLine, ...]
    noise: tuple[float, ...]
    right: FloatArray
    left: FloatArray
    right_gain: FloatArray
    left_gain: FloatArray
    worst_gain: float
    worst_gain_hz: float
    singular_hz: tuple[float, ...]
    stop_hz: float
    whole: int

    @property
    def usual_noise(self) -> float:
        """Root mean square of the stations' noise [1]."""
        return float(np.sqrt(np.mean(np.square(self.noise))))

    def noise_at(self, sample: int, wave: str) -> float:
        """Noise of one wave, "right" or "left", at a sample of the record, as of white noise before a low-pass [1]."""
        gain = self.right_gain if wave == "right" else self.left_gain
        return self.usual_noise * float(gain[int(np.clip(sample - self.begin, 0, gain.size - 1))])

    def in_words(self) -> str:
        """Stations, growth of noise, and what rests on the start from rest alone."""
        places = ", ".join(f"{1e3 * abs(x):.0f}" for x in self.positions_m)
        lost = ", ".join(f"{1e-3 * f:.3g}" for f in self.singular_hz[1:5])
        more = f" and {len(self.singular_hz) - 5} more" if len(self.singular_hz) > 5 else ""
        alone = f"at {lost} kHz{more} and " if lost else ""
        return (
            f"waves of the {self.side} bar told apart by stations {places} mm from the specimen: noise grows to "
            f"{float(max(self.right_gain[self.whole - 1], self.left_gain[self.whole - 1])):.1f} times by the end; of "
            f"single frequencies {1e-3 * self.worst_gain_hz:.3g} kHz is lifted most ({self.worst_gain:.1f} times, the "
            f"start of the record weighing most); {alone}for slow changes the waves rest on the start from rest alone"
        )
