"""The tail of X2 by its moments, far out, beside random tables with the same margins."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import chdtrc, gammaincc
from scipy.stats import random_table
from simulations.judged_tables import statistics_of
from simulations.sizes import FAR_OUT, tables_of

from bnx.independence import Statistics, p_values

__all__ = ["LEVELS", "WAYS", "FarOut", "far_out", "sparse_tables"]

LEVELS = (1e-2, 1e-3, 1e-4, 1e-5)
WAYS = ("three moments", "two moments", "chi-square")
_AT_ONCE = 20_000
_UNEVEN = (
    ((90, 5, 5), (90, 5, 5), 1),
    ((90, 5, 5), (90, 5, 5), 3),
    ((450, 50), (400, 50, 25, 15, 10), 3),
    ((480, 5, 5, 5, 5), (300, 100, 60, 40), 2),
    ((490, *[1] * 10), (490, *[1] * 10), 3),
)  # margins of every stratum, strata


@dataclass(frozen=True)
class FarOut:
    """Of ``draws`` random tables with the margins of one, the number whose p is at most each level.

    ``reached[way][k]`` belongs to LEVELS[k].
    """

    name: str
    draws: int
    reached: dict[str, tuple[int, ...]]

    def ratio(self, way: str, k: int) -> float:
        """Divide the true chance by the level."""
        return self.reached[way][k] / self.draws / LEVELS[k]

    def error(self, way: str, k: int) -> float:
        """Find the standard error of the ratio."""
        return float(np.sqrt(self.reached[way][k])) / self.draws / LEVELS[k]


def sparse_tables(seed: int) -> dict[str, np.ndarray]:
    """Draw tables (S, h, w) from sparse situations, and some with margins that are very uneven, by name."""
    found = {}
    for cell in (cell for cell in FAR_OUT if cell.rows < 5000):
        (table,) = tables_of(cell, 1, seed)
        shares = "skewed" if cell.skewed else "even"
        name = f"{cell.rows:,} rows, {cell.levels} x {cell.levels} levels, {cell.classes} classes, {shares}"
        found[name] = table[0].reshape(-1, cell.levels, cell.levels)
    for down, across, strata in _UNEVEN:
        name = f"{_short(down)} by {_short(across)}, {strata} class{'es' * (strata > 1)}"
        found[name] = random_table(down, across).rvs(strata, random_state=np.random.default_rng(seed))
    return found


def _short(margin: tuple[int, ...]) -> str:
    """Write the totals of a margin."""
    return "490 and ten 1" if len(margin) > 10 else " ".join(map(str, margin))


def far_out(name: str, table: np.ndarray, draws: int, seed: int) -> FarOut:
    """Draw tables with the margins of (S, h, w), and give each a p in three ways."""
    stats = statistics_of(table.reshape(1, len(table), -1), *table.shape[1:])
    random = np.random.default_rng([seed, len(table), int(table.sum())])
    reached = {way: np.zeros(len(LEVELS), np.int64) for way in WAYS}
    for start in range(0, draws, _AT_ONCE):
        x2 = _x2(table, min(_AT_ONCE, draws - start), random)
        for way, p in _p(stats, x2).items():
            reached[way] += (p[:, None] <= np.array(LEVELS)).sum(axis=0)
    return FarOut(name, draws, {way: tuple(number.tolist()) for way, number in reached.items()})


def _x2(table: np.ndarray, draws: int, random: np.random.Generator) -> np.ndarray:
    """Draw tables with the margins of every stratum of (S, h, w); X2 of each, (draws,)."""
    total = np.zeros(draws)
    for stratum in table:
        used = stratum[np.ix_(stratum.any(axis=1), stratum.any(axis=0))]
        if min(used.shape) > 1:
            expected = np.outer(used.sum(axis=1), used.sum(axis=0)) / used.sum()
            drawn = random_table(used.sum(axis=1), used.sum(axis=0)).rvs(draws, random_state=random)
            total += np.einsum("kij,ij->k", np.square(drawn), 1 / expected) - used.sum()
    return total


def _p(stats: Statistics, x2: np.ndarray) -> dict[str, np.ndarray]:
    """Take the tail of each X2 in three ways; ``stats`` is that of one table with these margins."""
    many = replace(stats.take(np.zeros(len(x2), np.int64)), x2=x2)
    three = p_values(many, "auto")
    assert three.by_moments.all()
    rate = stats.x2_mean / stats.x2_variance
    return {
        "three moments": three.p,
        "two moments": gammaincc(rate * stats.x2_mean, rate * x2),
        "chi-square": chdtrc(stats.df, np.maximum(x2, 0.0)),
    }
