"""Two results of one shot held against each other: by one calibration and by another."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True, kw_only=True)
class Numbers:
    """What is compared of one result.

    Attributes
    ----------
    calibration, date : str
        Name and day of what it stands on; the name is empty for the values of the rig file.
    verdict : str
    flow_stress_pa : mapping of float to float
        True flow stresses that are known, by strain.
    strain : float
        True strain at the end of the loading.
    rate_per_s : float
        Mean engineering strain rate over what counts, or else over the whole loading.
    reasons : tuple of str
        Checks that restrict or reject.
    """

    calibration: str
    date: str
    verdict: str
    flow_stress_pa: Mapping[float, float]
    strain: float
    rate_per_s: float
    reasons: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Compared:
    """One shot by the earlier and by the new calibration.

    ``rate_change`` is that of the mean engineering strain rate, a share, over the time that counted before: what
    counts may change too.
    """

    shot_id: str
    before: Numbers
    after: Numbers
    rate_change: float | None
    flow_stress_changes: Mapping[float, float] = field(init=False)  # shares, by the strains that both know

    def __post_init__(self) -> None:
        before, after = self.before.flow_stress_pa, self.after.flow_stress_pa
        changes = {at: after[at] / stress - 1 for at, stress in before.items() if at in after and stress}
        object.__setattr__(self, "flow_stress_changes", changes)

    @property
    def flow_stress_change(self) -> float | None:
        """Mean change of the flow stresses, a share; None where no strain has both."""
        changes = self.flow_stress_changes.values()
        return sum(changes) / len(changes) if changes else None

    @property
    def strain_change(self) -> float | None:
        """Change of the strain at the end of the loading, a share."""
        return self.after.strain / self.before.strain - 1 if self.before.strain else None
