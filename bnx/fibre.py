"""Walk at random among the tables that share all three two-way margins: arrays in, arrays out."""

from collections.abc import Iterator

import numpy as np
from numpy.random import PCG64, Generator
from scipy.special import gammaln

from bnx.loglinear import Fit

__all__ = ["walked"]

_STEPS = 100
_CELLS_AT_ONCE = 2**17  # stays in cache
_FEWEST_AT_ONCE = 50
_SIGNS = np.array([1, -1], dtype=np.int32)
_CUBE = (_SIGNS[:, None, None] * _SIGNS[:, None] * _SIGNS).reshape(8, 1, 1)  # added to 2 x 2 x 2 cells: margins stay


def walked(counts: np.ndarray, fit: Fit, draws: int, seed: int) -> Iterator[np.ndarray]:
    """Draw tables that are exchangeable with the observed one if association is homogeneous.

    The observed table walks back to a starting point and from there ``draws`` walks set out, each as long. Every step
    adds to or takes from 2 x 2 x 2 cells what keeps the margins, accepted by the chances of the tables (Metropolis), so
    a p-value from the drawn tables is exact however short the walk and whichever tables it can reach: a walk that mixes
    badly costs power, never size.

    Args:
        counts: records, int (S, r, c).
        fit: homogeneous association fitted to them.
        draws: number of tables.
        seed: of the walk.

    Yields:
        Blocks of tables, int32 (block, S, r, c), ``draws`` in all.

    Source: Besag & Clifford 1989, Biometrika 76 (the walk back); Diaconis & Sturmfels 1998 (walks among tables).
    """
    random = Generator(PCG64(seed))
    precision = np.divide(1.0, fit.expected, out=np.full(counts.shape, np.inf), where=fit.free).ravel()
    path = [_cubes(random, counts.shape, precision) for _ in range(_STEPS)]
    log_factorial = gammaln(np.arange(counts.sum() + 1) + 1.0)
    start = counts.reshape(-1, 1).astype(np.int32)
    for cells, longest in reversed(path):
        _step(start, cells, longest, log_factorial, random)
    block = max(_FEWEST_AT_ONCE, _CELLS_AT_ONCE // counts.size)
    for first in range(0, draws, block):
        tables = np.repeat(start, min(block, draws - first), axis=1)
        for cells, longest in path:
            _step(tables, cells, longest, log_factorial, random)
        yield np.ascontiguousarray(tables.T).reshape(-1, *counts.shape)


def _cubes(random: Generator, shape: tuple[int, ...], precision: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Pair strata, rows and columns at random (of an odd number one stays out) and cross the pairs.

    Gives the cells of every cube of free cells, int (8, cubes), and the longest step worth trying in each, (cubes, 1):
    three standard deviations. It depends on the fit alone, so that a step is as likely as its reverse.
    """
    _, height, width = shape
    strata, rows, columns = (random.permutation(size)[: size // 2 * 2].reshape(-1, 2).T for size in shape)
    down = strata[:, None, :, None] * height + rows[None, :, None, :]
    cells = down[:, :, None, :, :, None] * width + columns[None, None, :, None, None, :]
    cells = cells.reshape(8, -1)
    total = precision[cells].sum(0)
    movable = np.isfinite(total)
    longest = np.maximum(1.0, np.rint(3.0 / np.sqrt(total[movable])))
    return cells[:, movable], longest[:, None]


def _step(
    tables: np.ndarray, cells: np.ndarray, longest: np.ndarray, log_factorial: np.ndarray, random: Generator
) -> None:
    """Take one Metropolis step in all cubes of tables (cells, B), in place."""
    old = tables[cells]
    step = np.floor(random.random(old.shape[1:]) * (2.0 * longest)) - longest
    step += step >= 0.0
    new = old + step.astype(np.int32) * _CUBE
    possible = (new >= 0).all(0)
    np.maximum(new, 0, out=new)
    chance = log_factorial.take(old).sum(0) - log_factorial.take(new, mode="clip").sum(0)
    accepted = possible & (chance > -random.standard_exponential(chance.shape))
    tables[cells] = np.where(accepted, new, old)
