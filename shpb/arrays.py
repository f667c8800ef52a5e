"""Array types and the two guards that every stage uses."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from shpb.errors import InputError

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
BoolArray = NDArray[np.bool_]


def frozen(array: NDArray[Any]) -> NDArray[Any]:
    """Set ``array`` read-only and return it: results are values, not work space."""
    array.flags.writeable = False
    return array


def require_finite(array: FloatArray, *, where: str, mend: str) -> None:
    """Raise InputError naming the first sample of ``array`` that is NaN or infinite."""
    # One sum finds any NaN or infinity at memory speed; only a bad array pays for the search.
    with np.errstate(over="ignore", invalid="ignore"):
        if np.isfinite(array.sum()):
            return
    bad = np.flatnonzero(~np.isfinite(array.ravel()))
    if bad.size:
        raise InputError(
            f"{bad.size} of {array.size} samples are not finite",
            where=f"{where}, first at sample {bad[0]}",
            mend=mend,
        )


def dot(a: FloatArray, b: FloatArray) -> float:
    """Sum of products in this thread alone.

    The library behind ``a @ b`` spreads long vectors over threads that wait for each other: on a busy
    two-core machine that costs a hundred times the product itself.
    """
    return float(np.einsum("i,i->", a, b))
