"""Wave speeds of bar materials from handbook moduli and densities, through the rig file.

The table's moduli and densities are handbook values (its header says which are from memory and which were compared with
public lists); its speeds were computed from them apart from the program.
"""

from __future__ import annotations

import numpy as np
import pytest

from shpb.rig.rig_file import rig_from_text
from shpb.wave.pochhammer import first_mode_at_wavelength
from tests.published.test_bridge import rows

BAR = """
[{name}]
material = "handbook"
diameter_mm = 20.0
length_m = 2.0
density_kg_m3 = {rho}
young_modulus_GPa = {E}
poisson_ratio = {nu}
"""
GAUGE = """
[{name}]
channel = {channel}
to_specimen_m = 1.0
gauge_factor = 2.0
arrangement = "half-opposite"
excitation_V = 5.0
gain = 100.0
voltage_under_compression = "negative"
"""


@pytest.mark.parametrize("row", rows("bar_materials.csv"), ids=lambda row: row["material"])
def test_bar_speed_and_impedance(row: dict[str, str]) -> None:
    text = '[rig]\nname = "handbook"\n' + "".join(
        BAR.format(name=name, **row) for name in ("incident_bar", "transmitted_bar")
    )
    text += GAUGE.format(name="incident_gauge", channel=1) + GAUGE.format(name="transmitted_gauge", channel=2)
    bar = rig_from_text(text, "handbook.toml").incident_bar
    assert bar.wave_speed_m_s == pytest.approx(float(row["c0"]), rel=1e-7)
    # Z of the table is rho c0 in MPa s/m.
    assert bar.impedance_n_s_m / bar.area_m2 == pytest.approx(1e6 * float(row["Z"]), rel=1e-7)
    assert bar.young_modulus_pa == pytest.approx(1e9 * float(row["E"]), rel=1e-12)
    # Short waves end near Rayleigh's speed, (0.87 + 1.12 nu)/(1 + nu) of c_T within 0.5 % (Viktorov 1967, from memory).
    nu = float(row["nu"])
    rayleigh = (0.87 + 1.12 * nu) / (1 + nu) * float(row["c_T"])
    short = float(first_mode_at_wavelength(np.array([50.0]), nu).phase_speed[0]) * bar.wave_speed_m_s
    assert short == pytest.approx(rayleigh, rel=5e-3)
