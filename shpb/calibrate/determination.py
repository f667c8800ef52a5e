"""What one method says of one or several values of the rig."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.quantity import Quantity


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Determination:
    """Values with their covariance.

    Attributes
    ----------
    method : str
        In words, as it stands in the calibration file: "mode-1 phase of 4 passages".
    shots : tuple of str
        The shots behind it.
    names : tuple of str
        As in the uncertainty budget: "incident bar: wave speed", "transmitted gauge factor".
    values : float array, shape (values,)
        In SI.
    covariance : float array, shape (values, values)
    remarks : tuple of str
        What the technician should know, each a sentence.
    """

    method: str
    shots: tuple[str, ...]
    names: tuple[str, ...]
    values: FloatArray
    covariance: FloatArray
    remarks: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        size = len(self.names)
        assert self.values.shape == (size,), self.names
        assert self.covariance.shape == (size, size), self.names
        frozen(self.values)
        frozen(self.covariance)

    def quantity(self, name: str) -> Quantity:
        """One value with its standard uncertainty; the origin names method and shots."""
        at = self.names.index(name)
        origin = f"{self.method} ({', '.join(self.shots)})"
        return Quantity(float(self.values[at]), float(np.sqrt(self.covariance[at, at])), origin)

    def correlation(self, first: str, second: str) -> float:
        """Correlation coefficient of two values."""
        at, beside = self.names.index(first), self.names.index(second)
        scale = float(np.sqrt(self.covariance[at, at] * self.covariance[beside, beside]))
        return float(self.covariance[at, beside]) / scale if scale else 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationFinding:
    """Something that does not fit, and what to do about it.

    ``grave`` findings keep the calibration from being put in force without a second look; the others are notes.
    """

    check: str
    measured: str
    limit: str
    action: str
    grave: bool = False

    def __str__(self) -> str:
        return f"{self.check}: {self.measured} (limit {self.limit}). {self.action}"


def remarks_of(determinations: Sequence[Determination]) -> tuple[str, ...]:
    """All remarks, each once, in their order."""
    return tuple(dict.fromkeys(remark for one in determinations for remark in one.remarks))
