"""Numbers without false digits: rounded where the second digit of their standard uncertainty stands."""

from __future__ import annotations

import math

from shpb.view.text import NOT_KNOWN, rounded

_DIGITS = 2  # of the uncertainty, JCGM 100:2008, 7.2.6
_LEAST, _MOST = 1e-3, 1e7  # between these no exponent is written
_FINE = -5  # power of ten of the last digit, to which decimals can be read


def to_uncertainty(value: float | None, u: float | None) -> str:
    """Return ``value`` rounded to two significant digits of ``u``; to four of its own where there is no ``u``.

    Examples
    --------
    >>> to_uncertainty(506.615, 4.67), to_uncertainty(0.015234, 0.00066), to_uncertainty(4.7657e-5, 6e-6)
    ('506.6', '0.01523', '4.77e-05')
    >>> to_uncertainty(757.5, 84.5), to_uncertainty(7575.0, 845.0), to_uncertainty(3.0, 0.0996)
    ('758', '7580', '3.00')
    """
    if value is None or not math.isfinite(value):
        return NOT_KNOWN
    place = _place(u)
    if place is None:
        return rounded(value, 4)
    size = abs(value)
    magnitude = math.floor(math.log10(size)) if size > 0 else place
    tiny = size < _LEAST and place < _FINE
    if size > 0 and (tiny or size >= _MOST) and magnitude >= place:
        return f"{value:.{magnitude - place}e}"
    decimals = max(-place, 0)
    text = f"{round(value, -place):.{decimals}f}"
    return text.removeprefix("-") if float(text) == 0 else text


def uncertainty(u: float | None) -> str:
    """Return a standard uncertainty with two significant digits.

    Examples
    --------
    >>> uncertainty(4.672), uncertainty(0.00066), uncertainty(6e-6), uncertainty(846.0), uncertainty(None)
    ('4.7', '0.00066', '6.0e-06', '850', 'not known')
    """
    place = _place(u)
    if u is None or place is None:
        return NOT_KNOWN if u is None or not math.isfinite(u) else "0"
    if not 1e-2 * _LEAST <= u < _MOST:
        return f"{u:.1e}"
    return f"{round(u, -place):.{max(-place, 0)}f}"


def _place(u: float | None) -> int | None:
    """Power of ten of the last digit to keep; None where there is no uncertainty to go by."""
    if u is None or not math.isfinite(u) or u <= 0:
        return None
    first = math.floor(math.log10(u))
    # 0.0996 is 0.10: rounding may carry to the next power of ten.
    return math.floor(math.log10(float(f"{u:.{_DIGITS - 1}e}"))) - (_DIGITS - 1) if first > -300 else None
