"""What the system refuses: said once in plain words, tried again at growing intervals, counted."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from shpb.watch.events import Remark, Tone
from shpb.watch.landing import BackOff


@dataclass(slots=True)
class Troubles:
    """Every place that refuses at present: the folder, the results, the figures, the journal."""

    _said: dict[str, str] = field(default_factory=dict)
    _back_offs: dict[str, BackOff] = field(default_factory=dict)

    def due(self, place: str, now: float) -> bool:
        """Whether a place may be tried."""
        return place not in self._back_offs or self._back_offs[place].due(now)

    def refused(self, place: str, text: str, now: float) -> Iterator[Remark]:
        """Note a refusal; a remark where its words are new."""
        self._back_offs.setdefault(place, BackOff()).failed(now)
        if self._said.get(place) != text:
            self._said[place] = text
            yield Remark(Tone.TROUBLE, f"{text.rstrip('.')}. It is tried again; the watch goes on")

    def went_well(self, place: str, text: str) -> Iterator[Remark]:
        """Note that a place takes things again; a remark where it had refused."""
        back_off = self._back_offs.pop(place, None)
        self._said.pop(place, None)
        if back_off is not None:
            tries = back_off.tries
            yield Remark(Tone.MENDED, f"{text} (after {tries} tr{'y' if tries == 1 else 'ies'} that failed)")

    @property
    def fewest_tries(self) -> int | None:
        """Of the trouble that is youngest, None where there is none."""
        return min((one.tries for one in self._back_offs.values()), default=None)

    @property
    def there(self) -> tuple[str, ...]:
        """What is refused at present, in words."""
        return tuple(self._said.values())
