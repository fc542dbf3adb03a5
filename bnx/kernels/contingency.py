"""Test statistics of many stratified contingency tables at once: plain arrays in, plain arrays out.

A stratum without a row is skipped; empty rows and columns of a stratum are dropped; a stratum with one used row or
column is not *informative*: its records count, but it adds nothing to a statistic, a mean or a rule.
"""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.margins import margins, used
from bnx.kernels.skewness import third_moment

__all__ = [
    "BELOW_5",
    "CELLS",
    "COLUMNS",
    "DF",
    "INFORMATIVE",
    "LEVELS",
    "MIN_EXPECTED",
    "NATS",
    "NATS_SQUARED",
    "ROWS",
    "STRATA",
    "X2",
    "X2_CEILING",
    "X2_MEAN",
    "X2_THIRD",
    "X2_VARIANCE",
    "add_table",
    "one_table",
    "table_statistics",
]

ROWS = 0  # records of all strata
NATS = 1  # sum of n ln(n / E): nats x records, half of G
NATS_SQUARED = 2  # sum of n ln(n / E)^2
X2 = 3  # Pearson's statistic, without a continuity correction
DF = 4  # degrees of freedom
X2_MEAN = 5  # exact mean of X2 when every stratum keeps its margins
X2_VARIANCE = 6  # exact variance of X2 when every stratum keeps its margins
X2_THIRD = 7  # exact third central moment of X2 when every stratum keeps its margins
X2_CEILING = 8  # sum of records x (fewer used levels - 1): no table of these sizes has a larger X2
MIN_EXPECTED = 9  # smallest expected count of the informative strata, NaN without one
BELOW_5 = 10  # expected counts below 5 in the informative strata
CELLS = 11  # expected counts in the informative strata
STRATA = 12  # strata that hold a record
INFORMATIVE = 13  # strata with at least two used rows and two used columns
LEVELS = 14  # most used rows or columns in an informative stratum
COLUMNS = 15

_ROUNDING = 1e-13


@kernel
def table_statistics(counts: np.ndarray, offsets: np.ndarray, heights: np.ndarray, widths: np.ndarray) -> np.ndarray:
    """Compute the statistics of P tables, each over the same S strata.

    Stratum s of table p lies row by row in ``counts[s, offsets[p] : offsets[p] + heights[p] * widths[p]]``.

    Args:
        counts: records, int32 (S, cells), C-contiguous.
        offsets: first cell of each table, int64 (P,).
        heights: rows of each table, int64 (P,).
        widths: columns of each table, int64 (P,).

    Returns:
        float64 (P, COLUMNS); the constants of this module name its columns.

    Source: Kullback 1959 (G is twice the information); Haldane 1940 and Dawson 1954 (mean and variance of X2); Mielke
        & Berry 1985 (its third moment).
    """
    tables = offsets.size
    result = np.zeros((tables, COLUMNS))
    tallest, widest = np.int64(1), np.int64(1)
    for p in range(tables):
        tallest, widest = max(tallest, heights[p]), max(widest, widths[p])
    down, across = np.empty(tallest, np.int64), np.empty(widest, np.int64)
    for p in range(tables):
        add_table(counts, offsets[p], heights[p], widths[p], down, across, result[p])
    return result


@part
def add_table(
    counts: np.ndarray, offset: int, height: int, width: int, down: np.ndarray, across: np.ndarray, row: np.ndarray
) -> None:
    """Write the statistics of one table to a row (COLUMNS,) of zeros; down, across: room for its margins."""
    row[MIN_EXPECTED] = np.inf
    for s in range(counts.shape[0]):
        total = margins(counts, s, offset, height, width, down, across)
        if total > 0:
            row[ROWS] += total
            row[STRATA] += 1.0
            _add_stratum(counts, s, offset, height, width, down, across, total, row)
    row[NATS] = max(0.0, row[NATS])
    if row[INFORMATIVE] == 0.0:
        row[MIN_EXPECTED] = np.nan


def one_table(counts: np.ndarray, height: int, width: int) -> np.ndarray:
    """Compute the statistics (COLUMNS,) of one table, counts int32 (S, height * width)."""
    row: np.ndarray = table_statistics(counts, np.zeros(1, np.int64), np.array([height]), np.array([width]))[0]
    return row


@part
def _add_stratum(
    counts: np.ndarray,
    s: int,
    offset: int,
    height: int,
    width: int,
    down: np.ndarray,
    across: np.ndarray,
    total: int,
    row: np.ndarray,
) -> None:
    """Add one stratum that holds records to the statistics of its table."""
    r = used(down, height)
    c = used(across, width)
    if r < 2 or c < 2:
        return
    _add_cells(counts, s, offset, height, width, down, across, float(total), row)
    row[DF] += (r - 1) * (c - 1)
    row[X2_MEAN] += total / (total - 1.0) * (r - 1) * (c - 1)
    row[X2_VARIANCE] += _variance(down, height, r, across, width, c, float(total))
    row[X2_THIRD] += third_moment(down, height, across, width, float(total))
    row[X2_CEILING] += total * (min(r, c) - 1.0)
    row[CELLS] += r * c
    row[INFORMATIVE] += 1.0
    row[LEVELS] = max(row[LEVELS], float(max(r, c)))


@part
def _add_cells(
    counts: np.ndarray,
    s: int,
    offset: int,
    height: int,
    width: int,
    down: np.ndarray,
    across: np.ndarray,
    total: float,
    row: np.ndarray,
) -> None:
    """Add what is summed over cells: information, its square, X2 and the expected counts."""
    nats, squared, x2, smallest, below = 0.0, 0.0, 0.0, row[MIN_EXPECTED], 0
    for i in range(height):
        if down[i] == 0:
            continue
        records = float(down[i])
        cell = offset + i * width
        for j in range(width):
            if across[j] == 0:
                continue
            expected = records * across[j] / total
            inverse = 1.0 / expected
            count = float(counts[s, cell + j])
            x2 += (count - expected) * (count - expected) * inverse
            smallest = min(smallest, expected)
            below += expected < 5.0
            if count > 0.0:
                log = np.log(count * inverse)
                nats += count * log
                squared += count * log * log
    row[NATS] += nats
    row[NATS_SQUARED] += squared
    row[X2] += x2
    row[MIN_EXPECTED] = smallest
    row[BELOW_5] += below


@part
def _variance(down: np.ndarray, height: int, r: int, across: np.ndarray, width: int, c: int, total: float) -> float:
    """Compute the exact variance of X2 in one stratum whose margins are fixed.

    With 2 records X2 is constant. With 3 records the first term is absent: enumerated, only the 2 x 2 table varies,
    X2 = 3 with probability 1/3 and 3/4 with probability 2/3, variance 9/8, which is the second term.

    Source: Haldane 1940; Dawson 1954, Biometrika 41.
    """
    if total < 3.0:
        return 0.0
    even_down, uneven_down = _spread(down, height, r, total)
    even_across, uneven_across = _spread(across, width, c, total)
    variance = total * total / (total - 1.0) * uneven_down * uneven_across
    if total > 3.0:
        variance += 2.0 * total / (total - 3.0) * even_down * even_across
    return variance


@inlined
def _spread(totals: np.ndarray, size: int, used: int, total: float) -> tuple[float, float]:
    """Split a margin into v - w and w of the variance formula; both exactly 0 where they vanish.

    w (total - 2) = total x (sum of 1 / R) - used^2 is summed as squares, so that equal totals R give exactly 0.
    """
    w = 0.0
    for k in range(size):
        if totals[k] > 0:
            gap = used * totals[k] - total
            w += gap * gap / (total * totals[k])
    w /= total - 2.0
    v = (used - 1.0) * (total - used) / (total - 1.0)
    even = v - w
    return (even if abs(even) > _ROUNDING * v * used else 0.0), w
