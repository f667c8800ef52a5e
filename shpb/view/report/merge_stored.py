"""A stored merge as its report sees it."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Protocol

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.from_shot import LeftOut
from shpb.merge.settings import MergeSettings

_USUAL_STRAIN = 0.10
_ONE_TEMPERATURE_K = 20.0  # steps beyond which another group begins
_ONE_RATE = 0.15  # decades


class UsedFile(Protocol):
    """A file that went in."""

    @property
    def name(self) -> str:
        """Its name."""

    @property
    def sha256(self) -> str:
        """Of its bytes."""

    @property
    def place(self) -> str:
        """Where it lay."""


class Merge(Protocol):
    """What a merged file gives back."""

    @property
    def path(self) -> Path:
        """Where it lies."""

    @property
    def settings(self) -> MergeSettings:
        """Choices of the merge."""

    @property
    def used(self) -> Sequence[UsedFile]:
        """Files that went in."""

    @property
    def left_out(self) -> tuple[LeftOut, ...]:
        """Files that stayed out."""

    @property
    def materials(self) -> tuple[str, ...]:
        """Names, in the order of their groups from 1."""

    @property
    def arrays(self) -> Mapping[str, FloatArray]:
        """Numbers by their path."""

    @property
    def texts(self) -> Mapping[str, tuple[str, ...]]:
        """Words by their path."""

    @property
    def attributes(self) -> Mapping[str, Mapping[str, Any]]:
        """Attributes of groups by their path."""


@dataclass(frozen=True, slots=True, eq=False)
class Material:
    """One merged material: ``number`` is that of its group, from 1."""

    merge: Merge
    number: int

    def path(self, name: str) -> str:
        """Path in the file."""
        return f"materials/{self.number}/{name}"

    def __getitem__(self, name: str) -> FloatArray:
        """Numbers below the material's group."""
        return self.merge.arrays[self.path(name)]

    def column(self, name: str) -> FloatArray:
        """The same; empty where there is none."""
        return self.merge.arrays.get(self.path(name), np.zeros(0))

    def words(self, name: str) -> tuple[str, ...]:
        """Texts below the material's group; empty where there are none."""
        return self.merge.texts.get(self.path(name), ())

    def facts(self, name: str) -> Mapping[str, Any]:
        """Attributes below the material's group."""
        return self.merge.attributes.get(self.path(name), {})

    @property
    def name(self) -> str:
        """Of the material."""
        return str(self.merge.attributes[f"materials/{self.number}"]["material"])

    @property
    def kind(self) -> str:
        """Compression or tension."""
        return str(self.merge.attributes[f"materials/{self.number}"]["kind"])

    def below(self, name: str) -> list[str]:
        """Names of the groups directly below one, numbers as numbers."""
        start = self.path(name) + "/"
        found = [
            path.removeprefix(start)
            for path in self.merge.attributes
            if path.startswith(start) and "/" not in path.removeprefix(start)
        ]
        return sorted(found, key=lambda one: (int(one) if one.isdecimal() else 0, one))

    @property
    def conditions(self) -> list[Mapping[str, Any]]:
        """Attributes of every condition."""
        return [self.facts(f"conditions/{number}") for number in self.below("conditions")]

    @property
    def strain(self) -> float | None:
        """The plastic strain at which most conditions have a stress, of several the one nearest to 0.1."""
        counts = Counter(self.column("table/plastic_strain").tolist())
        if not counts:
            return None
        return float(max(counts, key=lambda strain: (counts[strain], -abs(strain - _USUAL_STRAIN))))

    @property
    def laws(self) -> list[str]:
        """Keys of the fitted laws, the best first."""
        return sorted(self.below("laws"), key=lambda key: int(self.facts(f"laws/{key}").get("rank", 0)))

    def temperature_groups(self) -> list[list[int]]:
        """Conditions of about one temperature, by their numbers."""
        return _groups([float(one["temperature"]) for one in self.conditions], _ONE_TEMPERATURE_K)

    def rate_groups(self) -> list[list[int]]:
        """Conditions of about one rate, by their numbers."""
        return _groups([float(np.log10(one["mean_rate"])) for one in self.conditions], _ONE_RATE)


def materials_of(merge: Merge) -> list[Material]:
    """All materials of a merge."""
    return [Material(merge, number) for number in range(1, len(merge.materials) + 1)]


def _groups(values: Sequence[float], step: float) -> list[list[int]]:
    """Places of values that follow each other within ``step``, in rising order."""
    groups: list[list[int]] = []
    before = -np.inf
    for place in sorted(range(len(values)), key=lambda i: values[i]):
        if values[place] - before > step:
            groups.append([])
        groups[-1].append(place)
        before = values[place]
    return groups
