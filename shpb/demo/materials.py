"""The two alloys of the demo campaign: invented names, invented constants."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.forward.flow import FlowLaw
from shpb.forward.specimen import SpecimenModel


@dataclass(frozen=True, slots=True, kw_only=True)
class Alloy:
    """An alloy of the scenario: what its shot sheets state, and the law that it obeys."""

    name: str
    code: str  # first letter of its shots
    young_modulus_pa: float
    density_kg_m3: float
    poisson_ratio: float
    heat_capacity_j_kg_k: float
    law: FlowLaw
    quasistatic_temperatures_k: tuple[float, ...]

    def specimen(self, diameter_m: float, length_m: float) -> SpecimenModel:
        """Return a cylinder of this alloy for the forward model."""
        return SpecimenModel(
            diameter_m=diameter_m,
            length_m=length_m,
            young_modulus_pa=self.young_modulus_pa,
            density_kg_m3=self.density_kg_m3,
            flow=self.law,
            heat_capacity_j_kg_k=self.heat_capacity_j_kg_k,
        )


# Reminds of copper: hardens strongly, softens with temperature.
WRENMOOR = Alloy(
    name="Wrenmoor 3",
    code="W",
    young_modulus_pa=118e9,
    density_kg_m3=8900.0,
    poisson_ratio=0.34,
    heat_capacity_j_kg_k=385.0,
    law=FlowLaw(
        initial_pa=95e6,
        hardening_pa=240e6,
        hardening_exponent=0.55,
        rate_coefficient=0.014,
        reference_rate_per_s=1e-5,
        melting_temperature_k=1350.0,
        softening_exponent=1.05,
    ),
    quasistatic_temperatures_k=(293.15, 473.15, 673.15),
)

# A hypothetical ordered alloy: its strength rises to a peak between 800 and 1000 K, later at higher rates.
HEXALUNE = Alloy(
    name="Hexalune 7",
    code="H",
    young_modulus_pa=176e9,
    density_kg_m3=7600.0,
    poisson_ratio=0.31,
    heat_capacity_j_kg_k=480.0,
    law=FlowLaw(
        initial_pa=420e6,
        hardening_pa=520e6,
        hardening_exponent=0.70,
        rate_coefficient=0.018,
        reference_rate_per_s=1e-5,
        melting_temperature_k=1700.0,
        softening_exponent=2.0,
        peak_height=0.36,
        peak_temperature_k=900.0,
        peak_width_k=240.0,
        peak_rate_slope_per_k=1.4e-5,
    ),
    quasistatic_temperatures_k=(293.15, 673.15, 873.15, 1073.15),
)

ALLOYS = (WRENMOOR, HEXALUNE)
QUASISTATIC_RATES_PER_S = (1e-4, 1e-3, 1e-1)


def quasistatic_curve(
    alloy: Alloy,
    rate_per_s: float,
    temperature_k: float,
    random: np.random.Generator,
    noise: float = 0.0015,
) -> tuple[FloatArray, FloatArray]:
    """Engineering strain and stress [Pa] of a slow compression test: isothermal, with reading noise.

    The true plastic rate is the nominal rate; the elastic strain is that of the true modulus, as an
    extensometer on the specimen gives it. ``noise`` is that of each reading, by the largest stress.
    """
    plastic = np.concatenate((np.zeros(1), np.geomspace(2e-5, 0.35, 160)))
    true_stress = alloy.law.stress_pa(plastic, rate_per_s, temperature_k)
    # On the elastic line up to the first yield, then along the flow curve.
    true_strain = plastic + true_stress / alloy.young_modulus_pa
    rise = np.linspace(0.0, 1.0, 12)[:-1]
    true_strain = np.concatenate((rise * true_strain[0], true_strain))
    true_stress = np.concatenate((rise * true_stress[0], true_stress))
    strain = -np.expm1(-true_strain)
    stress = true_stress / (1.0 - strain)
    return strain, stress + noise * float(stress.max()) * random.standard_normal(stress.size) * np.minimum(
        1.0, 50 * strain
    )


def rate_words(rate_per_s: float) -> str:
    """Rate as it stands in file names: 1e-4."""
    return f"1e{round(math.log10(rate_per_s))}"
