"""What goes wrong between bar and scope in some demo shots."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray


def half_off(strain: FloatArray, time_s: FloatArray, from_s: float) -> FloatArray:
    """Reading of a gauge whose bond fails in the middle of a pulse.

    Within some 4 us of ``from_s`` it falls to 0.62 of the strain, and keeps a set of 0.14 of the largest.
    """
    failed = 0.5 * (1.0 + np.tanh((time_s - from_s) / 4e-6))
    return strain * (1.0 - 0.38 * failed) + 0.14 * float(np.abs(strain).max()) * failed
