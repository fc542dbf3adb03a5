"""The Monte Carlo tail of X2 beside its chi-square tail, where every expected count is large."""

from dataclasses import dataclass

import numpy as np
from simulated import measured, nudged
from simulations.judged_tables import plain_p

from bnx.kernels.montecarlo import ENOUGH, log_factorials, monte_carlo_tail

__all__ = ["Tail", "tails"]

_SHAPES = ((1, 3, 3), (2, 3, 4), (3, 2, 3), (5, 2, 2), (2, 5, 5), (4, 3, 6))  # strata, rows, columns
_PER_CELL = 100
_MOST = 4000


@dataclass(frozen=True)
class Tail:
    """One table: chi-square p, Monte Carlo p over many seeds and its standard error; df and smallest expected count."""

    shape: tuple[int, int, int]
    df: int
    smallest: float
    chi2: float
    monte_carlo: float
    error: float


def tails(tables: int, repeats: int, seed: int) -> list[Tail]:
    """Draw tables of several shapes that depend a little, and find both tails; ``repeats`` seeds are put together."""
    found: list[Tail] = []
    for shape in _SHAPES:
        random = np.random.default_rng([seed, *shape])
        for k in range(tables):
            shares = nudged(*shape, 0.02 * k, seed * 1000 + k)
            counts = random.multinomial(_PER_CELL * shares.size, shares.ravel()).reshape(shape[0], -1)
            found.append(_both(shape, counts.astype(np.int32), [len(found) * repeats + j for j in range(repeats)]))
    return found


def _both(shape: tuple[int, int, int], counts: np.ndarray, seeds: list[int]) -> Tail:
    """Find both tails of one table (S, height * width).

    Put together, the tables drawn under all seeds are one negative binomial sample.
    """
    _, height, width = shape
    chi2 = float(plain_p(counts[None], height, width, "chi2")[0])
    stats = measured(counts.reshape(1, *shape))
    logs = log_factorials(int(counts.sum()))
    drawn = extreme = 0.0
    for seed in seeds:
        p, tables = monte_carlo_tail(counts, height, width, logs, np.uint64(seed), _MOST)
        drawn += tables
        extreme += ENOUGH if tables < _MOST else p * (_MOST + 1) - 1
    p = extreme / drawn
    error = float(np.sqrt(p * p * (1 - p) / max(1.0, extreme)))
    return Tail(shape, int(stats.df[0]), float(stats.min_expected[0]), chi2, p, error)
