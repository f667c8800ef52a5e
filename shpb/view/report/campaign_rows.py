"""What the list of a campaign holds of each shot: small, and fit to come from another process."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from shpb.trust.finding import Verdict, Weight
from shpb.view.report.stored import ReportedShot
from shpb.view.wording import telling

_USUAL_STRAIN = 0.10  # shown where several strains are known for as many shots
GRAVEST_FIRST = ("reject", "restrict", "accept")


@dataclass(frozen=True, slots=True, kw_only=True)
class CampaignRow:
    """One shot of the list.

    Attributes
    ----------
    flow : tuple of (strain, plastic, stress [Pa], standard uncertainty [Pa])
        Flow stresses that are known; none of a shot that does not count.
    reasons : str
        Checks that say something, gravest first.
    page, file : str
        Addresses of the shot's page and of its HDF5 file, relative to the campaign's page; empty where there is none.
    """

    shot_id: str
    material: str
    kind: str
    temperature_k: float
    date: str
    verdict: str
    rate_per_s: float
    strain_span: tuple[float, float] | None
    flow: tuple[tuple[float, bool, float, float], ...]
    coverage_factor: float
    outcome: str
    mean_ratio: float
    reasons: str
    page: str = ""
    file: str = ""


def campaign_row(shot: ReportedShot) -> CampaignRow:
    """The line of one stored shot."""
    sheet = shot.stored.sheet
    said = telling(shot.stored.findings)
    # A note does not matter beside what restricts or rejects.
    grave = tuple(one for one in said if one.weight is not Weight.NOTE) or said
    return CampaignRow(
        shot_id=shot.shot_id,
        material=sheet.specimen.material,
        kind=sheet.kind.value,
        temperature_k=float(sheet.temperature_k),
        date=sheet.date,
        verdict=shot.verdict.value,
        rate_per_s=float(shot.fact("response", "mean_strain_rate")),
        strain_span=shot.strain_span,
        flow=tuple(
            (one.at_strain, shot.plastic, one.stress_pa, one.u_pa)
            for one in shot.flow()
            if one.stress_pa is not None and one.u_pa is not None and shot.verdict is not Verdict.REJECT
        ),
        coverage_factor=shot.coverage_factor,
        outcome=str(shot.fact("response", "equilibrium_outcome")),
        mean_ratio=float(shot.fact("response", "equilibrium_mean_ratio")),
        reasons=", ".join(one.check for one in grave),
    )


def common_strain(rows: Iterable[CampaignRow]) -> float | None:
    """The strain at which most shots have a flow stress, of several the one nearest to 0.1."""
    counts = Counter(strain for row in rows for strain, _, _, _ in row.flow)
    if not counts:
        return None
    return max(counts, key=lambda strain: (counts[strain], -abs(strain - _USUAL_STRAIN)))


def stress_at(row: CampaignRow, strain: float | None) -> tuple[bool, float, float] | None:
    """Whether at plastic strain, flow stress and standard uncertainty [Pa] at a strain."""
    return next(((plastic, s, u) for e, plastic, s, u in row.flow if e == strain), None)


def orders(rows: Sequence[CampaignRow], strain: float | None) -> dict[str, tuple[str, list[int]]]:
    """The orders in which the list can stand: what the choice says, and the shots by their numbers."""

    def stress(row: CampaignRow) -> float:
        found = stress_at(row, strain)
        return float("inf") if found is None else found[1]

    keys = {
        "shot": ("shot", lambda _: ()),
        "date": ("date", lambda row: (row.date == "", row.date)),
        "material": ("material", lambda row: (row.material.casefold(), row.temperature_k, row.rate_per_s)),
        "temperature": ("temperature, low first", lambda row: (row.temperature_k, row.rate_per_s)),
        "rate": ("rate, low first", lambda row: (row.rate_per_s,)),
        "verdict": ("verdict, gravest first", lambda row: (GRAVEST_FIRST.index(row.verdict),)),
        "stress": ("flow stress, low first", lambda row: (stress(row),)),
        "ratio": ("R, worst first", lambda row: (-row.mean_ratio,)),
    }
    natural = sorted(range(len(rows)), key=lambda i: (_natural(rows[i].shot_id), i))
    return {
        name: (words, sorted(natural, key=lambda i, key=key: key(rows[i])))  # type: ignore[misc]
        for name, (words, key) in keys.items()
    }


def _natural(name: str) -> list[tuple[int, int, str]]:
    """A name with its numbers as numbers: S-2 before S-10."""
    import re

    parts = re.findall(r"\d{1,18}|\D+|\d", name.casefold())
    return [(0, int(part), "") if part.isdecimal() and part.isascii() else (1, 0, part) for part in parts]
