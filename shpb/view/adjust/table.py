"""The nine marks in numbers, what holds in equilibrium, and what the program has to say: plain lines of text."""

from __future__ import annotations

from shpb.adjust.desk import Desk
from shpb.adjust.marks import MARKS
from shpb.pulse.by_hand import ByHand
from shpb.view.text import fitted, printable, rounded

_US = 1e6
WIDE = 54  # letters of a line


def table_text(desk: Desk) -> str:
    """Number, name, time now, by the program, and how far it was moved; what is held has an arrow."""
    lines = [f"{'(µs)':<24}{'now':>9}{'program':>10}{'moved':>9}"]
    for number, mark in enumerate(MARKS, 1):
        now, own = desk.time(mark), desk.own_time(mark)
        held = ">" if mark == desk.mark else " "
        moved = "" if now is None or own is None or not desk.by_hand(mark) else f"{(now - own) * _US:+.2f}"
        if moved in ("+0.00", "-0.00"):
            moved = "0.00"
        lines.append(
            f"{held}{number} {mark.pulse + ' ' + mark.part:<21}{_us(now):>9}{_us(own):>10}{moved:>9}"
        )
    return "\n".join(lines)


def numbers_text(desk: Desk) -> str:
    """What the windows give, while the hand still moves: two lines."""
    response = desk.live.response
    if response is None:
        return "no curve from these windows\n"
    equilibrium = response.equilibrium
    strains = response.strain_span
    counts = "nothing counts" if strains is None else f"counts from {strains[0]:.4f} to {strains[1]:.4f}"
    return (
        f"R mean {100 * equilibrium.mean_ratio:.1f} %, limit {100 * equilibrium.limit:.0f} %, "
        f"{equilibrium.outcome.value}\n{counts}, mean rate {rounded(response.rate.mean_per_s)} /s"
    )


def history_text(history: tuple[ByHand, ...]) -> str:
    """Who moved something before, the last of them; empty where nobody did."""
    if not history:
        return ""
    last = history[-1]
    said = f"moved before: {printable(last.by)}, {printable(last.at_utc[:10])}, because {printable(last.why)}"
    return fitted(said, 2 * WIDE)


def _us(time_s: float | None) -> str:
    return "none" if time_s is None else f"{time_s * _US:.2f}"
