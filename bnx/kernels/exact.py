"""The exact distribution of X2 over strata of 2 x 2 tables whose margins are fixed: plain arrays in, numbers out."""

import numpy as np

from bnx.kernels.compiling import kernel, part
from bnx.kernels.margins import used

__all__ = ["exact_tail"]

_SUMS = 4096  # sums of X2 kept apart
_FLOOR = 1e-22  # less likely tables of a stratum are left out where p is at least
_SMALL = 1e-9  # and in proportion where it is smaller


@kernel
def exact_tail(counts: np.ndarray, height: int, width: int) -> float:
    """Find the probability of an X2 at least as large as observed, given the margins of every stratum.

    The hypergeometric strata are convolved one after the other. Sums are kept apart while they are few, so the result
    is exact; beyond ``_SUMS`` of them they are gathered in so many equal steps, each at its mean.

    Args:
        counts: records, int32 (S, height * width), every stratum row by row; a stratum uses at most two rows and two
            columns of its own, and counts for nothing with fewer.
        height: rows of every table.
        width: columns of every table.

    Source: Fisher 1935 (the exact test of one table); over strata by definition.
    """
    tables = np.zeros((counts.shape[0], 4), np.int64)
    observed = 0.0
    for s in range(counts.shape[0]):
        _corner(counts[s], height, width, tables[s])
        observed += _distance(tables[s, 0], tables[s])
    most = observed - 1e-9 * (1.0 + observed)
    if most < 0.0:
        return 1.0
    tail = _tail(tables, most, _FLOOR)
    if tail < _SMALL:
        tail = _tail(tables, most, tail * _FLOOR / _SMALL)
    return min(1.0, tail)


@part
def _tail(tables: np.ndarray, most: float, floor: float) -> float:
    """Sum up the chances of reaching ``most``, but for tables that are less likely in their stratum than ``floor``."""
    values, masses = np.zeros(1), np.ones(1)
    tail = 0.0
    for s in range(tables.shape[0]):
        if _varies(tables[s]):
            values, masses, reached = _convolved(values, masses, tables[s], most, floor)
            tail += reached
    return tail


@part
def _corner(counts: np.ndarray, height: int, width: int, table: np.ndarray) -> None:
    """Copy the two used rows and columns of a stratum; leave zeros where it uses fewer."""
    down, across = np.zeros(height, np.int64), np.zeros(width, np.int64)
    for i in range(height):
        for j in range(width):
            down[i] += counts[i * width + j]
            across[j] += counts[i * width + j]
    if used(down, height) == 2 and used(across, width) == 2:
        place = 0
        for i in range(height):
            for j in range(width):
                if down[i] > 0 and across[j] > 0:
                    table[place] = counts[i * width + j]
                    place += 1


@part
def _varies(table: np.ndarray) -> bool:
    """Tell whether another table has the same margins."""
    down, across, total = table[0] + table[1], table[0] + table[2], table[0] + table[1] + table[2] + table[3]
    return bool(min(down, across, total - down, total - across) > 0)


@part
def _distance(first: int, table: np.ndarray) -> float:
    """Take X2 of a 2 x 2 table with the margins of ``table`` and this first cell; 0 where it cannot vary."""
    total = float(table[0] + table[1] + table[2] + table[3])
    down, across = float(table[0] + table[1]), float(table[0] + table[2])
    spread = down * (total - down) * across * (total - across)
    if spread == 0.0:
        return 0.0
    off = first * total - down * across
    return off * off * total / spread


@part
def _convolved(
    values: np.ndarray, masses: np.ndarray, table: np.ndarray, most: float, floor: float
) -> tuple[np.ndarray, np.ndarray, float]:
    """Add one stratum to sums below ``most``; give the new sums, their masses, and the mass that reached ``most``."""
    total = table[0] + table[1] + table[2] + table[3]
    down, across = table[0] + table[1], table[0] + table[2]
    low, high = max(0, down + across - total), min(down, across)
    chances = _hypergeometric(low, high, down, across, total)
    grown = values.size * chances.size
    steps = grown if grown <= _SUMS else _SUMS
    moments, mass = np.zeros(steps), np.zeros(steps)
    reached = 0.0
    place = 0
    for k in range(chances.size):
        if chances[k] <= floor:
            continue
        more = _distance(low + k, table)
        for m in range(values.size):
            value = values[m] + more
            joint = masses[m] * chances[k]
            if value >= most:
                reached += joint
                continue
            if grown > _SUMS:
                place = min(int(value / most * _SUMS), _SUMS - 1)
            moments[place] += joint * value
            mass[place] += joint
            place += 1
    kept = 0
    for k in range(steps):
        if mass[k] > 0.0:
            moments[kept], mass[kept] = moments[k] / mass[k], mass[k]
            kept += 1
    return moments[:kept], mass[:kept], reached


@part
def _hypergeometric(low: int, high: int, down: int, across: int, total: int) -> np.ndarray:
    """Tabulate the chances of first cells ``low`` to ``high``, outward from the mode so that none underflows early."""
    chances = np.zeros(high - low + 1)
    mode = min(max((down + 1) * (across + 1) // (total + 2), low), high)
    chances[mode - low] = 1.0
    for first in range(mode, high):
        ratio = (down - first) * (across - first) / ((first + 1.0) * (total - down - across + first + 1.0))
        chances[first + 1 - low] = chances[first - low] * ratio
    for first in range(mode, low, -1):
        ratio = first * (total - down - across + first) / ((down - first + 1.0) * (across - first + 1.0))
        chances[first - 1 - low] = chances[first - low] * ratio
    total_chance = chances.sum()
    for k in range(chances.size):
        chances[k] /= total_chance
    return chances
