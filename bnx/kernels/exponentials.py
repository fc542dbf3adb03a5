"""The exponential function of many numbers at once, by plain arithmetic that is the same on every machine."""

import numpy as np
from numba import njit

__all__ = ["exponentials"]

_LOWEST = -708.0  # below, a double would lose digits
_LOG2_E = 1.4426950408889634
_LN2_HIGH = 0.693147180369123816490  # 33 bits of ln 2, so that its product with a small whole number is exact
_LN2_LOW = 1.90821492927058770002e-10
_ROUND = 6755399441055744.0  # 1.5 * 2 ** 52: adding it leaves the nearest whole number in the low bits


@njit(nogil=True, cache=True)
def exponentials(x: np.ndarray, work: np.ndarray) -> None:
    """Replace ``x`` (n,), at most 700, by e ** x; what lies below -708 counts as -708. work (3, n) float64.

    2 ** k times the Taylor polynomial of degree 13 of the rest, which is at most half of ln 2: within 1e-15, relative.
    """
    shifted, rest, scale = work[0], work[1], work[2]
    low_bits, exponent = shifted.view(np.int64), scale.view(np.int64)
    for i in range(x.size):
        whole = max(x[i], _LOWEST)
        shifted[i] = whole * _LOG2_E + _ROUND
        k = shifted[i] - _ROUND
        rest[i] = (whole - k * _LN2_HIGH) - k * _LN2_LOW
    for i in range(x.size):
        exponent[i] = (low_bits[i] + 1023) << 52
    for i in range(x.size):
        r = rest[i]
        p = 1.0 / 6227020800.0
        p = p * r + 1.0 / 479001600.0
        p = p * r + 1.0 / 39916800.0
        p = p * r + 1.0 / 3628800.0
        p = p * r + 1.0 / 362880.0
        p = p * r + 1.0 / 40320.0
        p = p * r + 1.0 / 5040.0
        p = p * r + 1.0 / 720.0
        p = p * r + 1.0 / 120.0
        p = p * r + 1.0 / 24.0
        p = p * r + 1.0 / 6.0
        p = p * r + 0.5
        p = p * r + 1.0
        p = p * r + 1.0
        x[i] = p * scale[i]
