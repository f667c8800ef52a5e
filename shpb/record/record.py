"""The record of one shot: voltages on one even clock, and where they came from."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.errors import InputError


@dataclass(frozen=True, slots=True, kw_only=True)
class Source:
    """One file a record was read from."""

    name: str
    sha256: str
    size_bytes: int
    reader: str  # name of the reader that understood it


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Record:
    """Voltages of one shot.

    Attributes
    ----------
    voltage_v : float array, shape (channels, samples)
        Voltages [V], read-only.
    sample_interval_s : float
        Spacing of the samples [s].
    start_s : float
        Time of the first sample on the record's own clock [s] (the trigger offset).
    channels : tuple of str
        Name of each channel, as the file or the rig file calls it.
    sources : tuple of Source
        The files, with their hashes.
    remarks : tuple of str
        What the reader noticed and the user should know, in plain words.

    Examples
    --------
    >>> import numpy as np, shpb
    >>> record = shpb.Record(
    ...     voltage_v=np.zeros((2, 5)), sample_interval_s=2e-7, channels=("incident", "transmitted")
    ... )
    >>> record.samples, record.channel("incident").size
    (5, 5)
    """

    voltage_v: FloatArray
    sample_interval_s: float
    start_s: float = 0.0
    channels: tuple[str, ...]
    sources: tuple[Source, ...] = ()
    remarks: tuple[str, ...] = field(default=())

    def __post_init__(self) -> None:
        if self.voltage_v.ndim != 2 or len(self.channels) != self.voltage_v.shape[0]:
            raise InputError(
                f"voltages of shape {self.voltage_v.shape} for {len(self.channels)} channel names",
                where="record",
                mend="Give an array of shape (channels, samples) and one name a channel",
            )
        if not (self.sample_interval_s > 0 and np.isfinite(self.sample_interval_s)):
            raise InputError(
                f"sample interval is {self.sample_interval_s} s",
                where="record",
                mend="State the interval in the rig file or the shot sheet",
            )
        frozen(self.voltage_v)

    @property
    def samples(self) -> int:
        """Number of samples in each channel."""
        return int(self.voltage_v.shape[1])

    @property
    def time_s(self) -> FloatArray:
        """Time of every sample on the record's own clock [s], shape (samples,). A new array."""
        time_s: FloatArray = self.start_s + self.sample_interval_s * np.arange(self.samples, dtype=np.float64)
        return time_s

    def channel(self, which: str | int) -> FloatArray:
        """Return one channel's voltage by name or by position (1 is the first).

        Raises
        ------
        InputError
            If there is no such channel; the message lists those that there are.
        """
        row: FloatArray
        if isinstance(which, int) and 1 <= which <= len(self.channels):
            row = self.voltage_v[which - 1]
            return row
        if isinstance(which, str) and which in self.channels:
            row = self.voltage_v[self.channels.index(which)]
            return row
        listed = ", ".join(f"{i} {name!r}" for i, name in enumerate(self.channels, 1))
        raise InputError(
            f"there is no channel {which!r}; the record has {listed}",
            where="record",
            mend="Name one of these as the gauge's channel in the rig file",
        )
