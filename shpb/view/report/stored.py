"""A stored shot as its report sees it: numbers as they stand in the file, none of them worked out anew."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NamedTuple, Protocol

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.by_hand import ByHand
from shpb.record.record import Record
from shpb.response.equilibrium import Outcome
from shpb.response.flow import plastic_strain
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Analysis, Settings
from shpb.trust.budget import Contribution
from shpb.trust.finding import Finding, Verdict
from shpb.view.text import rounded
from shpb.view.wording import verdict_in_words

_NEVER = (Outcome.NOT_REACHED.value, Outcome.CANNOT_BE_DECIDED.value)


class Stored(Protocol):
    """What a shot file gives back."""

    @property
    def path(self) -> Path:
        """Where it lies."""

    @property
    def record(self) -> Record:
        """Voltages as acquired."""

    @property
    def rig(self) -> Rig:
        """What stood in the lab."""

    @property
    def sheet(self) -> ShotSheet:
        """What was tested."""

    @property
    def settings(self) -> Settings:
        """Choices and limits."""

    @property
    def by_hand(self) -> tuple[ByHand, ...]:
        """What hands have moved so far."""

    @property
    def findings(self) -> tuple[Finding, ...]:
        """What the checks said."""

    @property
    def arrays(self) -> Mapping[str, FloatArray]:
        """Curves and tables by their path."""

    @property
    def attributes(self) -> Mapping[str, Mapping[str, Any]]:
        """Attributes of groups by their path."""


class FlowLine(NamedTuple):
    """One flow stress; None where the strain lies outside what counts."""

    at_strain: float
    stress_pa: float | None
    u_pa: float | None
    rate_per_s: float | None
    drawn_pa: tuple[float, float] | None  # 95 % interval by the draws


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ReportedShot:
    """One stored shot with what stands beside it in its file.

    Attributes
    ----------
    stored : Stored
    budget : tuple of Contribution
        As ranked in the file; empty where it has none.
    sha256 : str
        Of the shot file.
    """

    stored: Stored
    budget: tuple[Contribution, ...]
    sha256: str

    def __getitem__(self, path: str) -> FloatArray:
        """An array by its path."""
        return self.stored.arrays[path]

    def has(self, path: str) -> bool:
        """Whether the file holds an array."""
        return path in self.stored.arrays

    def fact(self, group: str, name: str) -> Any:
        """An attribute; None where the file has none."""
        return self.stored.attributes.get(group, {}).get(name)

    @property
    def shot_id(self) -> str:
        """Name of the shot."""
        return self.stored.sheet.shot_id

    @property
    def verdict(self) -> Verdict:
        """As it was stored."""
        return Verdict(self.stored.attributes["/"]["verdict"])

    @property
    def wave(self) -> str:
        """Ending of the arrays of the analysis put forward."""
        return "1w" if self.analysis is Analysis.ONE_WAVE else "3w"

    @property
    def analysis(self) -> Analysis:
        """Which curve is put forward."""
        return Analysis(self.fact("response", "analysis"))

    @property
    def span(self) -> slice | None:
        """Samples that count; None where none do."""
        start, end = (self.fact("response", f"span_{which}_time") for which in ("start", "end"))
        return None if start is None or end is None else slice(self._sample(start), self._sample(end) + 1)

    @property
    def strain_span(self) -> tuple[float, float] | None:
        """True strain at both ends of what counts."""
        ends = [self.fact("response", f"span_{which}_true_strain") for which in ("start", "end")]
        return None if None in ends else (float(ends[0]), float(ends[1]))

    @property
    def loading(self) -> slice:
        """Samples from the front to the end of loading."""
        return slice(self._sample(0.0), self._sample(float(self.fact("response", "loading_end_time"))) + 1)

    @property
    def drawn(self) -> slice:
        """Samples that are drawn: the loading and a third of its length after it."""
        loading = self.loading
        more = (loading.stop - loading.start) // 3
        return slice(loading.start, min(loading.stop + more, self["response/time"].size))

    @property
    def middle(self) -> int:
        """The sample in the middle of what counts, or of the loading where nothing does."""
        part = self.span or self.loading
        return int(part.start + part.stop) // 2

    @property
    def plastic(self) -> bool:
        """Whether flow stresses are given at plastic strain."""
        return self.stored.sheet.specimen.young_modulus_pa is not None

    @property
    def coverage_factor(self) -> float:
        """Factor k of the intervals."""
        return float(self.fact("trust", "coverage_factor") or 2.0)

    def _sample(self, time_s: float) -> int:
        time = self["response/time"]
        return int(np.clip(np.searchsorted(time, time_s - 1e-12), 0, time.size - 1))

    def verdict_sentence(self) -> str:
        """The verdict in one sentence."""
        outcome = str(self.fact("response", "equilibrium_outcome"))
        return verdict_in_words(self.verdict, self.stored.findings, self.strain_span, outcome)

    def finding(self, check: str) -> Finding | None:
        """The finding of one check; None where it had nothing to look at."""
        return next((one for one in self.stored.findings if one.check == check), None)

    def equilibrium_words(self) -> str:
        """Outcome and mean R, briefly."""
        outcome = str(self.fact("response", "equilibrium_outcome"))
        mean = 100 * float(self.fact("response", "equilibrium_mean_ratio"))
        over = "over the whole loading" if outcome in _NEVER else "over what counts"
        return f"{outcome}; mean R {rounded(mean, 2)} % {over}"

    def band(self) -> tuple[FloatArray, FloatArray, str] | None:
        """Both ends of the interval of true stress [Pa] where it counts, and what it is; None where nothing does."""
        part = self.span
        if part is None:
            return None
        if self.has("trust/draws/low_true_stress"):
            time = self["response/time"][part]
            low, high = (
                np.interp(time, self["trust/draws/time"], self[f"trust/draws/{end}_true_stress"])
                for end in ("low", "high")
            )
            share, draws = self.fact("trust/draws", "probability"), self.fact("trust/draws", "draws")
            return low, high, f"{100 * share:.0f} % of {draws} draws"
        wide = self.coverage_factor * self["trust/u_true_stress"][part]
        stress = self["response/true_stress"][part]
        return stress - wide, stress + wide, f"k = {self.coverage_factor:g}, about 95 %"

    def flow(self) -> list[FlowLine]:
        """Flow stresses at the strains that were asked for."""
        drawn = {}
        if self.has("trust/draws/flow_stress"):
            drawn = {float(one[0]): (float(one[3]), float(one[4])) for one in self["trust/draws/flow_stress"]}
        lines = []
        for strain, stress, rate in self["response/flow_stress"].tolist():
            if not np.isfinite(stress):
                lines.append(FlowLine(strain, None, None, None, None))
                continue
            lines.append(FlowLine(strain, stress, self._u_at(strain), rate, drawn.get(strain)))
        return lines

    def _u_at(self, strain: float) -> float | None:
        """Standard uncertainty of true stress at a strain [Pa], as it was read when the shot was reduced."""
        part, modulus = self.span, self.stored.sheet.specimen.young_modulus_pa
        if part is None:
            return None
        axis = plastic_strain(self["response/true_strain"][part], self["response/true_stress"][part], modulus)
        u = self["trust/u_true_stress_at_strain"][part]
        return float(np.interp(strain, np.maximum.accumulate(axis), u))
