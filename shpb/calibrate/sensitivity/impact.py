"""What a striker of known speed must put into the struck bar: strain, duration, impulse, and what these rest on."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.calibrate.sensitivity.common_terms import Terms, added, bar_term, bar_terms
from shpb.calibrate.session import FiredShot
from shpb.calibrate.struck import refuse
from shpb.quantity import Quantity
from shpb.rig.bar import Bar, Striker
from shpb.rig.rig import Rig
from shpb.trust.sources import relative_u

_ASSUMED_LENGTH = {"length": 0.0005}  # of a striker; common practice


@dataclass(frozen=True, slots=True, kw_only=True)
class Impact:
    """One striker on one bar.

    Attributes
    ----------
    speed_m_s : Quantity
    strain : float
        First plateau in the bar, V Z_s/((Z_s + Z_b) c0).
    duration_s : float
        2 L/c of the striker [s].
    impulse : float
        m V/(E A) [s]: the integral of strain, if the striker keeps nothing.
    impedance_ratio : float
        Z_s/Z_b.
    alike : bool
        The striker is taken as of the struck bar's stock.
    terms, impulse_terms : mapping
        Relative change of strain and impulse by one standard uncertainty of each thing they rest on, but the speed.
    """

    speed_m_s: Quantity
    strain: float
    duration_s: float
    impulse: float
    impedance_ratio: float
    alike: bool
    terms: Terms
    impulse_terms: Terms
    remarks: tuple[str, ...] = ()


def impact_of(fired: FiredShot, rig: Rig) -> Impact:
    """The impact of one shot.

    Raises
    ------
    InputError
        If the shot's speed or striker is not known.
    """
    shot, (striker, speed) = fired.shot, _fired_what(fired, rig)
    bar = rig.incident_bar if shot.bar == "incident" else rig.transmitted_bar
    alike = _of_one_stock(striker, bar)
    # What was measured of the bar then holds for the striker: only their diameters are left in the ratio.
    wave_speed = bar.wave_speed_m_s if alike else striker.wave_speed_m_s
    z_striker = striker.impedance_n_s_m * wave_speed / striker.wave_speed_m_s
    z_bar = bar.impedance_n_s_m
    share = float(z_striker / (z_striker + z_bar))
    rest = 1.0 - share  # d ln strain = rest (d ln Z_s - d ln Z_b) - d ln c
    striker_terms = _striker_terms(striker, rest, alike)
    of_bar = bar_terms(rig, shot.bar, impedance=-rest, speed=-1.0)
    if alike:
        diameter = bar_term(rig, shot.bar, "diameter")
        kept = {diameter: of_bar.get(diameter, 0.0)}
        of_bar = added(kept, bar_terms(rig, shot.bar, speed=-1.0))
    mass_terms = added(
        bar_terms(rig, shot.bar, impedance=-1.0, speed=-1.0),  # E A = Z c
        {
            "striker: length": relative_u(striker.length_m, "length", _ASSUMED_LENGTH),
            "striker: diameter": 2 * relative_u(striker.diameter_m, "bar diameter"),
            (bar_term(rig, shot.bar, "density") if alike else "striker: density"): relative_u(
                striker.density_kg_m3, "density"
            ),
        },
    )
    remark = "the striker is taken as of the struck bar's stock: same density, and the wave speed measured"
    return Impact(
        speed_m_s=speed,
        strain=float(speed * share / bar.wave_speed_m_s),
        duration_s=float(2 * striker.length_m / wave_speed),
        impulse=float(striker.mass_kg * speed / bar.force_per_strain_n),
        impedance_ratio=float(z_striker / z_bar),
        alike=alike,
        terms=added(striker_terms, of_bar),
        impulse_terms=mass_terms,
        remarks=(remark,) if alike else (),
    )


def _fired_what(fired: FiredShot, rig: Rig) -> tuple[Striker, Quantity]:
    """Striker and speed of a shot, or what is missing."""
    striker, speed = fired.shot.striker or rig.striker, fired.shot.striker_speed_m_s
    if speed is None or not speed > 0:
        found = "not stated" if speed is None else f"{float(speed):g} m/s"
        raise refuse(fired, f"its striker speed is {found}", "State striker_speed_m_s, above zero")
    if striker is None:
        raise refuse(
            fired,
            "no striker is described",
            "Describe it in the rig file under [striker], or with the shot",
        )
    return striker, speed


def _striker_terms(striker: Striker, power: float, alike: bool) -> Terms:
    terms = {"striker: diameter": 2 * power * relative_u(striker.diameter_m, "bar diameter")}
    if not alike:
        terms["striker: density"] = power * relative_u(striker.density_kg_m3, "density")
        terms["striker: wave speed"] = power * relative_u(striker.wave_speed_m_s, "wave speed")
    return terms


def _of_one_stock(striker: Striker, bar: Bar) -> bool:
    """Whether the striker's density is the very statement made of the bar, or its bare number alone."""

    def said(value: float) -> tuple[object, ...]:
        return getattr(value, "u", None), getattr(value, "origin", "")

    same_name = not striker.material or striker.material == bar.material
    same_number = float(striker.density_kg_m3) == float(bar.density_kg_m3)
    same_words = said(striker.density_kg_m3) in (said(bar.density_kg_m3), (None, ""))
    return same_name and same_number and same_words
