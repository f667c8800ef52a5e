"""The merged table as text: true stress with its uncertainty at the chosen plastic strains."""

from __future__ import annotations

from shpb.merge.campaign import MergedMaterial
from shpb.merge.flow_table import FlowRow
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.merge_words import rate_text
from shpb.view.text import wrapped

_HEAD, _CELL = 14, 13  # columns


def table_lines(material: MergedMaterial, width: int) -> list[str]:
    """Stress in MPa with u in brackets, one line a condition; below it what heating does, where that is known."""
    strains = sorted({row.plastic_strain for row in material.rows})
    if not strains:
        return wrapped("No condition is valid at any of the chosen plastic strains.", width)
    lines = wrapped(
        "True stress in MPa (standard uncertainty, own and shared parts) at true plastic strain; below it, where "
        "adiabatic: rise in K, isothermal stress at the start temperature",
        width,
    )
    wide = max(1, (width - _HEAD) // _CELL)
    for first in range(0, len(strains), wide):
        part = strains[first : first + wide]
        lines.append(f"{'rate 1/s':>8} {'T K':>4} " + "".join(f"{strain:>{_CELL}g}" for strain in part))
        for number, condition in enumerate(material.conditions):
            rows = {row.plastic_strain: row for row in material.rows if row.condition == number}
            head = f"{rate_text(condition.mean_rate_per_s):>8} {condition.temperature_k:>4.0f} "
            lines.append(head + "".join(f"{_stress(rows.get(strain)):>{_CELL}}" for strain in part))
            heated = [_heated(rows.get(strain)) for strain in part]
            if any(heated):
                lines.append(" " * len(head) + "".join(f"{cell:>{_CELL}}" for cell in heated))
    return lines


def _stress(row: FlowRow | None) -> str:
    if row is None:
        return "-"
    u = row.u_pa / 1e6
    return f"{to_uncertainty(row.stress_pa / 1e6, u)}({uncertainty(u)})"  # JCGM 100:2008, 7.2.2, third form


def _heated(row: FlowRow | None) -> str:
    """Rise and isothermal stress of a heated row; empty for an isothermal one."""
    if row is None or row.rise_k is None:
        return ""
    if row.isothermal_pa is None:
        return f"+{row.rise_k:.0f}"
    return f"+{row.rise_k:.0f} {to_uncertainty(row.isothermal_pa / 1e6, (row.u_isothermal_pa or row.u_pa) / 1e6)}"


def detail_lines(material: MergedMaterial) -> list[str]:
    """Every row of the table with all that belongs to it."""
    lines = [
        "Every point, in MPa: uncertainty by parts, scatter among repeats",
        f"{'no':>3} {'strain':>6} {'stress MPa':>10} {'u':>5} {'own':>5} {'shared':>6} {'scatter':>7} {'n':>2} "
        f"{'rate 1/s':>8} {'rise K':>6} {'isothermal':>10}",
    ]
    for row in material.rows:
        u = row.u_pa / 1e6
        scatter = "-" if row.scatter_pa is None else uncertainty(row.scatter_pa / 1e6)
        rise = "-" if row.rise_k is None else f"{row.rise_k:.1f}"
        same = "-" if row.isothermal_pa is None else to_uncertainty(row.isothermal_pa / 1e6, u)
        lines.append(
            f"{row.condition + 1:>3} {row.plastic_strain:>6g} {to_uncertainty(row.stress_pa / 1e6, u):>10} "
            f"{uncertainty(u):>5} {uncertainty(row.u_own_pa / 1e6):>5} {uncertainty(row.u_shared_pa / 1e6):>6} "
            f"{scatter:>7} {row.count:>2} {rate_text(row.rate_per_s):>8} {rise:>6} {same:>10}"
        )
    return lines
