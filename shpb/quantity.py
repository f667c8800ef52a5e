"""A number that remembers its standard uncertainty and where it came from."""

from __future__ import annotations

from typing import Self


class Quantity(float):
    """A float with a standard uncertainty and an origin.

    Physics computes with it as with any float (the result of arithmetic is a plain float);
    the uncertainty budget walks over the quantities of a rig and a sheet and asks each for ``u``.

    Parameters
    ----------
    value : float
        The best estimate, in SI units.
    u : float or None
        Standard uncertainty in the same unit (JCGM 100:2008, 2.3.1); None when nobody has stated one.
    origin : str
        Where the number came from: an instrument, a certificate, a handbook, a calibration.

    Examples
    --------
    >>> d = Quantity(20.0, u=0.005, origin="micrometer").scaled(1e-3)
    >>> float(d), d.u, d.origin
    (0.02, 5e-06, 'micrometer')
    """

    __slots__ = ("origin", "u")

    u: float | None
    origin: str

    def __new__(cls, value: float, u: float | None = None, origin: str = "") -> Self:
        """Keep the float, and beside it ``u`` and ``origin``."""
        self = super().__new__(cls, value)
        self.u = None if u is None else float(u)
        self.origin = origin
        return self

    def __reduce__(self) -> tuple[object, ...]:
        return Quantity, (float(self), self.u, self.origin)

    def __repr__(self) -> str:
        if self.u is None and not self.origin:
            return float.__repr__(self)
        return f"Quantity({float(self)!r}, u={self.u!r}, origin={self.origin!r})"

    def scaled(self, factor: float, offset: float = 0.0) -> Quantity:
        """Return ``value * factor + offset`` with the uncertainty scaled along: a change of unit."""
        u = None if self.u is None else self.u * abs(factor)
        return Quantity(float(self) * factor + offset, u, self.origin)


def as_quantity(value: float) -> Quantity:
    """Return ``value`` itself if it is a Quantity, else wrap it without uncertainty or origin."""
    return value if isinstance(value, Quantity) else Quantity(float(value))
