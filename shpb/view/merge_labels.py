"""Numbers of a merge as a figure writes them: true minus, powers of ten, no false digits."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from shpb.view.digits import to_uncertainty
from shpb.view.text import rounded

_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def power_of_ten(power: int) -> str:
    """A power of ten in letters that need no formula."""
    return "10" + str(power).translate(_SUPERSCRIPT)


def rate_words(rate_per_s: float) -> str:
    """A rate to three digits.

    >>> rate_words(1642.0), rate_words(0.001), rate_words(1.2e-4)
    ('1640 /s', '0.001 /s', '1.2·10⁻⁴ /s')
    """
    digits = float(f"{rate_per_s:.3g}")
    if 1e-3 <= digits < 1e6:
        return f"{digits:.9f}".rstrip("0").rstrip(".") + " /s"
    power = int(np.floor(np.log10(digits) + 1e-12))
    mantissa = f"{digits / 10.0**power:.3g}"
    return ("" if mantissa == "1" else f"{mantissa}·") + power_of_ten(power) + " /s"


def kelvin_words(temperature_k: float) -> str:
    """A temperature in kelvin and in degrees Celsius."""
    return f"{temperature_k:.0f} K ({temperature_k - 273.15:.0f} °C)".replace("-", "−")


def stress_words(stress_pa: float) -> str:
    """A stress in MPa."""
    return f"{rounded(stress_pa / 1e6)} MPa"


def with_u(value: float, u: float, interval: tuple[float, float], factor: float = 1.0) -> str:
    """A value with its 95 % interval, to the second digit of its standard uncertainty.

    >>> with_u(0.01213, 0.00083, (0.0104, 0.0138))
    '0.01213 (0.01040 to 0.01380)'
    """

    def one(number: float) -> str:
        if not np.isfinite(number):
            return "no upper end" if number > 0 else "no lower end"
        return in_signs(to_uncertainty(number * factor, u * factor))

    return f"{one(value)} ({one(interval[0])} to {one(interval[1])})"


def plus_minus(value: float, half: float) -> str:
    """A value and half its 95 % interval, to the second digit of that.

    >>> plus_minus(-0.01213, 0.00174)
    '−0.0121 ± 0.0017'
    """
    return f"{in_signs(to_uncertainty(value, half))} ± {in_signs(to_uncertainty(half, half))}"


def in_signs(number: str) -> str:
    """A number with a true minus, and a power of ten in place of an exponent.

    >>> in_signs("-4.77e-05")
    '−4.77·10⁻⁵'
    """
    mantissa, _, power = number.partition("e")
    return mantissa.replace("-", "−") + (f"·{power_of_ten(int(power))}" if power else "")


def listed(words: Sequence[str], most: int = 6) -> str:
    """Words with commas between; more than ``most`` are counted."""
    more = len(words) - most
    return ", ".join(words[:most]) + (f" and {more} more" if more > 0 else "")
