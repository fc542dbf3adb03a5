"""Exponentials, logarithms and sums of many numbers at once, by plain arithmetic that is the same on every machine."""

import numpy as np

from bnx.kernels.compiling import kernel

__all__ = ["exponentials", "logarithms", "total_of"]

_LOWEST = -708.0  # below, a double would lose digits
_LOG2_E = 1.4426950408889634
_LN2_HIGH = 0.693147180369123816490  # 33 bits of ln 2, so that its product with a small whole number is exact
_LN2_LOW = 1.90821492927058770002e-10
_ROUND = 6755399441055744.0  # 1.5 * 2 ** 52: adding it leaves the nearest whole number in the low bits
_ROUND_BITS = 0x4338000000000000  # its pattern
_ROOT_HALF = 0x3FE6A09E667F3BCD  # the pattern of the root of 1/2


@kernel
def exponentials(x: np.ndarray, work: np.ndarray) -> None:
    """Replace ``x`` (n,), at most 700, by e ** x; what lies below -708 counts as -708. work (at least 3 n,) float64.

    2 ** k times the Taylor polynomial of degree 13 of the rest, which is at most half of ln 2: within 1e-15, relative.
    """
    shifted, rest, scale = work[: x.size], work[x.size : 2 * x.size], work[2 * x.size : 3 * x.size]
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


@kernel
def logarithms(x: np.ndarray, work: np.ndarray) -> None:
    """Replace ``x`` (n,), normal numbers above 0, by ln x. work (at least 2 n,) float64.

    x = 2 ** k m with m around 1, and ln m = 2 artanh((m - 1) / (m + 1)) by its power series: within 4e-16 of ln x and
    of 4e-16, relative.
    """
    power, ratio = work[: x.size], work[x.size : 2 * x.size]
    bits, whole = x.view(np.int64), power.view(np.int64)
    for i in range(x.size):
        k = (bits[i] - _ROOT_HALF) >> 52
        bits[i] -= k << 52
        whole[i] = k + _ROUND_BITS
    for i in range(x.size):
        ratio[i] = (x[i] - 1.0) / (x[i] + 1.0)
    for i in range(x.size):
        k = power[i] - _ROUND
        r = ratio[i]
        s = r * r
        p = 2.0 / 21.0
        p = p * s + 2.0 / 19.0
        p = p * s + 2.0 / 17.0
        p = p * s + 2.0 / 15.0
        p = p * s + 2.0 / 13.0
        p = p * s + 2.0 / 11.0
        p = p * s + 2.0 / 9.0
        p = p * s + 2.0 / 7.0
        p = p * s + 2.0 / 5.0
        p = p * s + 2.0 / 3.0
        x[i] = k * _LN2_HIGH + (2.0 * r + (r * s * p + k * _LN2_LOW))


@kernel
def total_of(x: np.ndarray) -> float:
    """Sum numbers (n,) in an order that leaves eight sums to be made side by side, the same on every machine."""
    a = b = c = d = e = f = g = h = 0.0
    whole = x.size - x.size % 8
    for k in range(0, whole, 8):
        a += x[k]
        b += x[k + 1]
        c += x[k + 2]
        d += x[k + 3]
        e += x[k + 4]
        f += x[k + 5]
        g += x[k + 6]
        h += x[k + 7]
    rest = 0.0
    for k in range(whole, x.size):
        rest += x[k]
    return ((a + b) + (c + d)) + ((e + f) + (g + h)) + rest
