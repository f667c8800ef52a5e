"""How a campaign is merged: every choice in one frozen value, stored with the result."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from shpb.errors import InputError
from shpb.merge.prepare import CurveSettings
from shpb.merge.repeats import RepeatSettings

NO_MODELS = ("none",)


@dataclass(frozen=True, slots=True, kw_only=True)
class MergeSettings:
    """Choices of a merge; the defaults serve metals.

    Attributes
    ----------
    strains : tuple of float
        True plastic strains at which the table is made.
    indentation_out : bool
        Whether bar curves enter without the strain that the bar faces add. Quasi-static curves have none: left in, it
        costs 4 to 5 % of a rate sensitivity.
    models : tuple of str
        Keys of the laws to fit; empty for all that there are, ``NO_MODELS`` for none.
    facts : mapping of str to float
        Facts of the laws in SI, such as ``melting_temperature_k``; sheets state some.
    offset : float
        Plastic strain of the offset yield that is given for each quasi-static test.
    asked : tuple of (float, float)
        Rates [1/s] and temperatures [K] at which flow curves of the laws are wanted besides those of the campaign.
    reference_rate_per_s : float
        Of Johnson & Cook's C, without which it says nothing.
    allowances : mapping of str to float
        What inertia, friction and heating may make of an upturn at high rates, relative.
    course_decades : float
        Rates this near (in decades) count as one rate for the course over temperature.
    u_temperature_k : float
        Standard uncertainty of each temperature [K].
    leave_out : bool
        Whether each condition is left out in turn and predicted.
    """

    strains: tuple[float, ...] = (0.02, 0.05, 0.10, 0.15, 0.20)
    indentation_out: bool = True
    models: tuple[str, ...] = ()
    facts: Mapping[str, float] = field(default_factory=dict)
    offset: float = 0.002
    asked: tuple[tuple[float, float], ...] = ()
    reference_rate_per_s: float = 1.0
    allowances: Mapping[str, float] = field(default_factory=lambda: {"inertia": 0.02, "friction": 0.03})
    course_decades: float = 0.2
    u_temperature_k: float = 3.0
    seed: int = 1
    leave_out: bool = True
    curves: CurveSettings = field(default_factory=CurveSettings)
    repeats: RepeatSettings = field(default_factory=RepeatSettings)

    def __post_init__(self) -> None:
        if not self.strains or any(not (0 < e <= 3 and math.isfinite(e)) for e in self.strains):
            raise InputError(
                f"found {list(self.strains)}",
                where="strains of the merge",
                mend="Give true plastic strains above 0 and up to 3: 0.05 is 5 %",
            )
        object.__setattr__(self, "strains", tuple(sorted(set(self.strains))))
        if not 0 < self.offset < 0.2:
            raise InputError(
                f"found {self.offset:g}", where="merge, offset", mend="Give a strain: 0.002 is 0.2 %"
            )
        for rate, kelvin in self.asked:
            if not (rate > 0 and kelvin > 0 and math.isfinite(rate) and math.isfinite(kelvin)):
                raise InputError(
                    f"found {rate:g} /s, {kelvin:g} K",
                    where="merge, flow curves asked for",
                    mend="Give positive numbers",
                )
        for name in ("reference_rate_per_s", "course_decades"):
            if not (getattr(self, name) > 0 and math.isfinite(getattr(self, name))):
                raise InputError(
                    f"found {getattr(self, name)}", where=f"merge, {name}", mend="Give a positive number"
                )
