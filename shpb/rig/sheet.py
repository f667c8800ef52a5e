"""The shot sheet: what was tested, how it was loaded, and what is to be done differently for this shot."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from shpb.rig.rig import RecordHints


@dataclass(frozen=True, slots=True, kw_only=True)
class Specimen:
    """A solid cylinder between the bars.

    Young's modulus, density and Poisson's ratio are *inputs* (quasi-static or handbook values):
    none of them is ever taken from the shot.
    """

    material: str
    diameter_m: Quantity
    length_m: Quantity
    length_after_m: Quantity | None = None  # micrometer reading after the shot
    young_modulus_pa: Quantity | None = None
    density_kg_m3: Quantity | None = None
    mass_kg: Quantity | None = None  # weighed before the shot
    poisson_ratio: Quantity | None = None
    heat_capacity_j_kg_k: Quantity | None = None
    heat_share: Quantity | None = None  # of plastic work (Taylor & Quinney 1934)
    # Temperature sensitivity of the flow stress, either way: relative slope, or the thermal factor of Johnson & Cook.
    stress_slope_per_k: Quantity | None = None
    melting_temperature_k: Quantity | None = None
    softening_exponent: Quantity | None = None
    lubricant: str = ""
    friction_coefficient: Quantity | None = None  # Coulomb, between specimen and bar faces

    def __post_init__(self) -> None:
        for name in ("diameter_m", "length_m"):
            value = getattr(self, name)
            if not (value > 0 and math.isfinite(value)):
                raise InputError(
                    f"value is {float(value)}", where=f"specimen {name}", mend="Give a positive number"
                )

    @property
    def area_m2(self) -> float:
        """Initial area of the section [m^2]."""
        return math.pi * self.diameter_m**2 / 4

    @property
    def elastic_wave_speed_m_s(self) -> float | None:
        """Bar wave speed sqrt(E/rho) [m/s], None where E or rho is not stated."""
        if self.young_modulus_pa is None or self.density_kg_m3 is None:
            return None
        return math.sqrt(self.young_modulus_pa / self.density_kg_m3)

    @property
    def transit_time_s(self) -> float | None:
        """One elastic transit L/c [s], None where E or rho is not stated."""
        speed = self.elastic_wave_speed_m_s
        return None if speed is None else self.length_m / speed


@dataclass(frozen=True, slots=True, kw_only=True)
class ShotSheet:
    """One shot as the operator wrote it down.

    Examples
    --------
    >>> import shpb
    >>> sheet = shpb.read_sheet(folder / "records" / "W-02.toml")
    >>> sheet.kind.value, round(1e3 * sheet.specimen.length_m, 2)
    ('compression', 4.5)
    """

    shot_id: str
    kind: TestKind
    specimen: Specimen
    temperature_k: Quantity = field(default_factory=lambda: Quantity(293.15))
    incident_face_temperature_k: Quantity | None = None  # of the bar's face, in a hot or cold test
    transmitted_face_temperature_k: Quantity | None = None
    heated_length_m: Quantity | None = None  # of each bar, from its face
    striker_speed_m_s: Quantity | None = None
    date: str = ""
    operator: str = ""
    remarks: str = ""
    record_files: tuple[Path, ...] = ()  # resolved against the sheet's own folder
    rig_file: Path | None = None
    record: RecordHints = field(default_factory=RecordHints)
    overrides: Mapping[str, object] = field(default_factory=dict)  # settings of this shot alone
    text: str = ""  # the sheet or list row, word for word, stored with the result
    source: str = ""  # the file it was read from, with the line of a list row, for messages
