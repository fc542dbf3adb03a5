"""Tables with fixed margins: all of them, and the exact distribution and moments of X2 from first principles."""

from collections import defaultdict
from collections.abc import Iterator, Sequence
from fractions import Fraction
from itertools import combinations_with_replacement, product
from math import comb, factorial, lcm, prod

import numpy as np

Margin = tuple[int, ...]

# x^p as a sum of falling factorials: coefficients (Stirling numbers of the second kind) of x, x(x-1), ...
_STIRLING = {2: (1, 1), 4: (1, 7, 6, 1), 6: (1, 31, 90, 65, 15, 1)}


def partitions(total: int, most: int) -> Iterator[Margin]:
    """List the ways to write a total as positive parts of at most ``most``, largest part first."""
    if total == 0:
        yield ()
    for first in range(min(total, most), 0, -1):
        for others in partitions(total - first, first):
            yield (first, *others)


def tables_with(down: Margin, across: Margin) -> Iterator[tuple[Margin, ...]]:
    """List every table with these margins."""
    if not down:
        yield ()
        return
    for first in rows_with(down[0], across):
        left = tuple(room - count for room, count in zip(across, first, strict=True))
        for others in tables_with(down[1:], left):
            yield (first, *others)


def rows_with(records: int, caps: Margin) -> Iterator[Margin]:
    """List every row of so many records that fits under the caps, provided that they hold as many."""
    if len(caps) == 1:
        if records <= caps[0]:
            yield (records,)
        return
    for count in range(max(0, records - sum(caps[1:])), min(records, caps[0]) + 1):
        for others in rows_with(records - count, caps[1:]):
            yield (count, *others)


def chance_of(table: Sequence[Sequence[int]]) -> Fraction:
    """Give the probability of a table given its margins: the factorials of these over N! and those of its cells."""
    margins = [sum(row) for row in table] + [sum(column) for column in zip(*table, strict=True)]
    cells = prod(factorial(count) for row in table for count in row)
    return Fraction(prod(map(factorial, margins)), factorial(sum(map(sum, table))) * cells)


def distribution(down: Margin, across: Margin) -> dict[Fraction, Fraction]:
    """Find the probability of every value of X2 given the margins, none of them 0.

    Row by row, the ways to fill it with records of each column are counted as whole numbers.
    """
    total, common = sum(down), lcm(*down) * lcm(*across)
    ways: dict[Margin, dict[int, int]] = {across: {0: 1}}
    for records in down:
        grown: dict[Margin, dict[int, int]] = defaultdict(lambda: defaultdict(int))
        for left, sums in ways.items():
            for row in rows_with(records, left):
                chosen = prod(comb(room, count) for room, count in zip(left, row, strict=True))
                after = tuple(room - count for room, count in zip(left, row, strict=True))
                step = sum(count * count * (common // (records * c)) for count, c in zip(row, across, strict=True))
                target = grown[after]
                for value, number in sums.items():
                    target[value + step] += number * chosen
        ways = grown
    (sums,) = ways.values()
    all_ways = sum(sums.values())
    return {total * (Fraction(value, common) - 1): Fraction(number, all_ways) for value, number in sums.items()}


def moments(chances: dict[Fraction, Fraction]) -> tuple[Fraction, Fraction, Fraction]:
    """Give the mean and the second and third central moment of a distribution."""
    mean = sum((x * share for x, share in chances.items()), Fraction(0))
    second, third = (sum(((x - mean) ** k * share for x, share in chances.items()), Fraction(0)) for k in (2, 3))
    return mean, second, third


def summed(parts: Sequence[dict[Fraction, Fraction]]) -> dict[Fraction, Fraction]:
    """Give the distribution of the sum of independent parts."""
    result = {Fraction(0): Fraction(1)}
    for part in parts:
        grown: dict[Fraction, Fraction] = defaultdict(Fraction)
        for (x, one), (y, other) in product(result.items(), part.items()):
            grown[x + y] += one * other
        result = grown
    return result


def tail(chances: dict[Fraction, Fraction], observed: Fraction) -> float:
    """Give the probability of a value at least as large as observed."""
    return float(sum(share for x, share in chances.items() if x >= observed))


def x2_of(table: Sequence[Sequence[int]]) -> Fraction:
    """Compute X2 of a table without an empty row or column."""
    down, across = [sum(row) for row in table], [sum(column) for column in zip(*table, strict=True)]
    quotients = (
        Fraction(count * count, r * c)
        for r, row in zip(down, table, strict=True)
        for c, count in zip(across, row, strict=True)
    )
    return sum(down) * (sum(quotients, Fraction(0)) - 1)


def moments_of_any_size(down: Margin, across: Margin) -> tuple[Fraction, Fraction, Fraction]:
    """Find the same moments for any number of records, by the expected products of falling factorials of cells.

    These are products of falling factorials of the margins over those of N; powers of a cell are sums of them.
    """
    total = sum(down)
    cells = list(product(range(len(down)), range(len(across))))
    raw = []
    for power in (1, 2, 3):
        found = Fraction(0)
        for chosen in combinations_with_replacement(cells, power):
            times = {cell: chosen.count(cell) for cell in chosen}
            orders = factorial(power) // prod(map(factorial, times.values()))
            weight = prod(Fraction(1, down[i] * across[j]) for i, j in chosen)
            found += orders * weight * _expected(down, across, {cell: 2 * k for cell, k in times.items()})
        raw.append(found)
    first, second, third = raw
    mean = total * (first - 1)
    variance = total**2 * (second - first**2)
    return mean, variance, total**3 * (third - 3 * first * second + 2 * first**3)


def _expected(down: Margin, across: Margin, powers: dict[tuple[int, int], int]) -> Fraction:
    """Find the expected product of even powers of different cells."""
    result = Fraction(0)
    for steps in product(*(range(1, power + 1) for power in powers.values())):
        weight = prod(_STIRLING[power][step - 1] for power, step in zip(powers.values(), steps, strict=True))
        by_row, by_column = [0] * len(down), [0] * len(across)
        for (i, j), step in zip(powers, steps, strict=True):
            by_row[i] += step
            by_column[j] += step
        above = prod(map(_falling, down, by_row)) * prod(map(_falling, across, by_column))
        below = _falling(sum(down), sum(steps))
        result += Fraction(weight * above, below) if above else 0
    return result


def _falling(number: int, steps: int) -> int:
    return prod(number - k for k in range(steps))


def corner_table(down: Sequence[int], across: Sequence[int]) -> np.ndarray:
    """Fill a table with these margins from its first corner on, int64 (rows, columns)."""
    table, left = np.zeros((len(down), len(across)), np.int64), np.array(across)
    for i, records in enumerate(down):
        for j in range(len(across)):
            table[i, j] = min(records - table[i].sum(), left[j])
        left = left - table[i]
    return table
