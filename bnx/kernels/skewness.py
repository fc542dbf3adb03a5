"""The exact third moment of X2 in a table whose margins are fixed: plain arrays in, numbers out.

With P the projection on the centred indicators of the rows, Q the same of the columns, and a random pairing of records,
X2 = N sum P[k, l] Q[k', l']. Its moments are sums over set partitions of the indices; since the rows of P sum to 0, a
margin enters only through its used levels less 1, a, and the sums of squares U and of cubes V of d = P[k, k] - a / N
over the N records. Both are 0 for equal totals.
"""

import numpy as np

from bnx.kernels.compiling import inlined, part

__all__ = ["third_moment"]

# Below 6 records the general formula has poles. Third moments by enumeration; row and column by a margin's sum of
# squared totals: 6, 8, 10 with 4 records, 7, 9, 11, 13, 15, 17 with 5 (15 does not occur).
_FOUR = np.array([[74 / 27, 16 / 27, 0.0], [16 / 27, 128 / 27, 0.0], [0.0, 0.0, 1024 / 243]])
_FIVE = np.array(
    [
        [75 / 16, 75 / 32, 25 / 9, 125 / 288, 0.0, -375 / 256],
        [75 / 32, 125 / 16, 0.0, 125 / 96, 0.0, 375 / 128],
        [25 / 9, 0.0, 500 / 81, 125 / 81, 0.0, 125 / 36],
        [125 / 288, 125 / 96, 125 / 81, 6125 / 1296, 0.0, 125 / 2304],
        [0.0, 0.0, 0.0, 0.0, 0.0, 0.0],
        [-375 / 256, 375 / 128, 125 / 36, 125 / 2304, 0.0, 10125 / 1024],
    ]
)


@part
def third_moment(down: np.ndarray, height: int, across: np.ndarray, width: int, total: float) -> float:
    """Compute the third central moment of X2 given the totals of all rows and columns, which may hold zeros.

    Source: Mielke & Berry 1985 (the moment); the form here is derived as the module says and checked by enumeration.
    """
    a, u, v, squares = _margin(down, height, total)
    b, s, t, squares_across = _margin(across, width, total)
    if a == 0.0 or b == 0.0 or a + 1.0 == total or b + 1.0 == total:
        return 0.0
    if total == 3.0:
        return 27.0 / 32.0
    if total == 4.0:
        return float(_FOUR[(squares - 6) // 2, (squares_across - 6) // 2])
    if total == 5.0:
        return float(_FIVE[(squares - 7) // 2, (squares_across - 7) // 2])
    return _general(total, a, u, v, b, s, t)


@inlined
def _margin(totals: np.ndarray, size: int, total: float) -> tuple[float, float, float, int]:
    """Summarise a margin: a, U, V, and the sum of squared totals."""
    used, squares = 0, 0
    for k in range(size):
        used += totals[k] > 0
        squares += totals[k] * totals[k]
    a = used - 1.0
    u, v = 0.0, 0.0
    for k in range(size):
        if totals[k] > 0:
            records = float(totals[k])
            d = (total - used * records) / (records * total)
            u += records * d * d
            v += records * d * d * d
    return a, u, v, squares


@part
def _general(n: float, a: float, u: float, v: float, b: float, s: float, t: float) -> float:
    """Sum the terms of the third moment, for at least 6 records."""
    n1 = n - 1.0
    a_free, b_free = a - n1, b - n1
    cubes = n**4 * (n + 1.0) * (n * n + 15.0 * n - 4.0) * v * t
    cubes += 2.0 * n**3 * (v * s * _mixed(n, b) + t * u * _mixed(n, a))
    cubes += 4.0 * n * n * (v * b * b_free * _even(n, b) + t * a * a_free * _even(n, a))
    squares = 2.0 * n * n * u * s * _both(n, a, b)
    squares += 4.0 * n * (u * b * b_free * _single(n, a, b) + s * a * a_free * _single(n, b, a))
    levels = 4.0 * a * b * a_free * b_free * _levels(n, a, b)
    return ((levels / n1 + squares) / n1 + cubes) / (n1 * (n - 2.0) * (n - 3.0) * (n - 4.0) * (n - 5.0))


@inlined
def _mixed(n: float, b: float) -> float:
    return ((-11.0 * n + 21.0 * b - 2.0) * n + 27.0 * b + 17.0) * n - 4.0 * (3.0 * b + 1.0)


@inlined
def _even(n: float, b: float) -> float:
    return ((b - 5.0) * n + 9.0 * (b + 1.0)) * n - 4.0 * (b + 1.0)


@inlined
def _both(n: float, a: float, b: float) -> float:
    high = (11.0 * n - 21.0 * (a + b) - 9.0) * n + 45.0 * a * b - 12.0 * (a + b) - 45.0
    low = (high * n + 45.0 * a * b + 123.0 * (a + b) + 89.0) * n - 198.0 * a * b - 114.0 * (a + b) - 54.0
    return low * n + 8.0 * (3.0 * a + 1.0) * (3.0 * b + 1.0)


@inlined
def _single(n: float, a: float, b: float) -> float:
    high = ((7.0 - b) * n + 3.0 * a * b - 15.0 * a - 12.0 * b - 32.0) * n + 21.0 * a * b + 57.0 * a + 43.0 * b + 55.0
    return (high * n - 2.0 * (33.0 * a + 19.0) * (b + 1.0)) * n + 8.0 * (3.0 * a + 1.0) * (b + 1.0)


@inlined
def _levels(n: float, a: float, b: float) -> float:
    high = ((2.0 * n + a * b - 5.0 * (a + b) - 17.0) * n + 4.0 * (a * b + 8.0 * (a + b) + 14.0)) * n
    low = (high - 37.0 * a * b - 71.0 * (a + b) - 85.0) * n + 60.0 * (a + 1.0) * (b + 1.0)
    return low * n - 16.0 * (a + 1.0) * (b + 1.0)
