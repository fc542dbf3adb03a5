"""Tails of the distributions that tests compare X2 or G with, of very many values at once."""

import numpy as np
from scipy.special import chdtrc, erfc, erfcx, gammaincc

__all__ = ["chi_square_tail", "moment_tail"]

_FINITE = 8  # degrees of freedom up to which the tail is summed term by term
_FAR = 1200.0  # beyond it, terms and what they are multiplied by leave the range of numbers
_ROUGH = 8.0  # squares beyond which erfc loses more than a digit to rounding
_LEAST_SKEWNESS = 1e-3


def chi_square_tail(df: np.ndarray, x: np.ndarray) -> np.ndarray:
    """Compute the chance that chi-square with ``df`` degrees of freedom, whole, is at least x, (P,).

    With few degrees of freedom it is a finite sum. NaN where x is NaN.

    Source: Abramowitz & Stegun 1964, 26.4.4 and 26.4.5 (the finite sums).
    """
    df, x = np.broadcast_arrays(df, x)
    result = np.empty(x.shape)
    rest = np.ones(x.shape, np.bool_)
    near = ~(x > _FAR)
    for few in range(1, _FINITE + 1):
        chosen = (df == few) & near
        if chosen.all():
            return _summed(few, x)
        if chosen.any():
            result[chosen] = _summed(few, x[chosen])
            rest &= ~chosen
    result[rest] = chdtrc(df[rest], x[rest])
    return result


def _summed(df: int, x: np.ndarray) -> np.ndarray:
    """Sum the tail term by term: exp(-h) h^k / gamma(k + 1) for k to df / 2 - 1 in steps of 1, where h = x / 2.

    Even df begin with k = 0, odd ones with 1 / 2, and have erfc(root of h) besides.
    """
    half = 0.5 * x
    root = np.sqrt(half)
    result = _erfc(root, half) if df % 2 else np.exp(-half)
    if df <= 2:
        return result
    k, term = (0.5, root * (2.0 / np.sqrt(np.pi))) if df % 2 else (1.0, half)
    total = term.copy()
    while k < df / 2 - 1.0:
        k += 1.0
        term = term * half / k
        total += term
    return np.minimum(result + total * np.exp(-half), 1.0)


def _erfc(root: np.ndarray, square: np.ndarray) -> np.ndarray:
    """Compute erfc of the root of a square; far out as erfcx times exp, or the root's rounding would cost digits."""
    result = np.asarray(erfc(root))
    far = square > _ROUGH
    result[far] = erfcx(root[far]) * np.exp(-square[far])
    return result


def moment_tail(x: np.ndarray, mean: np.ndarray, variance: np.ndarray, third: np.ndarray) -> np.ndarray:
    """Compute the tail beyond x of the shifted gamma distribution with this mean, variance and third moment, (P,).

    Of one not skewed to the right, as X2 of a table of almost nothing but single records, the normal tail is taken.

    Source: Haldane 1940; Dawson 1954, Biometrika 41; Mielke & Berry 1985 (Pearson's type III).
    """
    spread = np.sqrt(np.where(variance > 0, variance, 1.0))
    skewness = np.maximum(third / spread**3, _LEAST_SKEWNESS)
    shape = 4.0 / skewness**2
    return np.asarray(gammaincc(shape, np.maximum(0.0, shape + 2.0 * (x - mean) / (spread * skewness))))
