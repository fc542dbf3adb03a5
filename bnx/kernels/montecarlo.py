"""The tail of X2 by drawing tables at random with the margins of every stratum: plain arrays in, numbers out."""

import math

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part

__all__ = ["ENOUGH", "SHUFFLED", "log_factorials", "monte_carlo_tail"]

ENOUGH = 100  # tables at least as extreme as the observed one, after which drawing stops

SHUFFLED = 16  # a stratum with fewer records than this per cell is shuffled record by record, else drawn cell by cell
_TABULATED = 1_000_000
_GOLDEN = np.uint64(0x9E3779B97F4A7C15)
_FIRST, _SECOND = np.uint64(0xBF58476D1CE4E5B9), np.uint64(0x94D049BB133111EB)
_S30, _S27, _S31, _S32, _S11 = (np.uint64(bits) for bits in (30, 27, 31, 32, 11))


def log_factorials(most: int) -> np.ndarray:
    """Tabulate ln(k!) for k from 0 to ``most``, or to a million; beyond, it is computed when needed."""
    return np.concatenate([[0.0], np.cumsum(np.log(np.arange(1, min(most, _TABULATED) + 1)))])


@kernel
def monte_carlo_tail(
    counts: np.ndarray, height: int, width: int, log_factorial: np.ndarray, seed: int, most: int
) -> tuple[float, int]:
    """Estimate the probability of an X2 at least as large as observed, given the margins of every stratum.

    Tables are drawn until ``ENOUGH`` of them are that extreme, then p = ENOUGH / drawn; or until ``most`` are drawn,
    then p = (1 + extreme) / (most + 1).

    Args:
        counts: records, int32 (S, height * width), every stratum row by row.
        height: rows of every table.
        width: columns of every table.
        log_factorial: ln(k!) from `log_factorials`.
        seed: of the random numbers; the same seed draws the same tables.
        most: tables to draw at most.

    Returns:
        p, and how many tables were drawn.

    Source: Besag & Clifford 1991 (stopping); Patefield 1981 (a table cell by cell).
    """
    strata = counts.shape[0]
    down, across = np.zeros((strata, height), np.int64), np.zeros((strata, width), np.int64)
    shape, totals = np.zeros((strata, 2), np.int64), np.zeros(strata, np.int64)
    table = np.empty(height * width, np.int64)
    observed, most_records, all_records = 0.0, 0, 0
    for s in range(strata):
        r, c, total = _compact(counts[s], height, width, down[s], across[s], table)
        if r > 1 and c > 1:
            shape[s, 0], shape[s, 1], totals[s] = r, c, total
            observed += _statistic(table, down[s, :r], across[s, :c], total)
            most_records = max(most_records, total)
            all_records += total
    if all_records == 0:
        return 1.0, 0
    goal = observed - 1e-9 * (1.0 + observed) - 1e-15 * all_records  # ties count, whatever their rounding
    records = np.empty(most_records, np.int64)
    state = np.empty(1, np.uint64)
    state[0] = seed
    extreme = 0
    for drawn in range(1, most + 1):
        x2 = 0.0
        for s in range(strata):
            if totals[s] == 0:
                continue
            rows, columns = down[s, : shape[s, 0]], across[s, : shape[s, 1]]
            if totals[s] < SHUFFLED * rows.size * columns.size:
                _shuffle(rows, columns, totals[s], records, table, state)
            else:
                _draw(rows, columns, totals[s], table, log_factorial, state)
            x2 += _statistic(table, rows, columns, totals[s])
            if x2 >= goal:
                extreme += 1
                break
        if extreme == ENOUGH:
            return ENOUGH / drawn, drawn
    return (1.0 + extreme) / (most + 1.0), most


@part
def _compact(
    counts: np.ndarray, height: int, width: int, down: np.ndarray, across: np.ndarray, table: np.ndarray
) -> tuple[int, int, int]:
    """Put the used rows and columns of a stratum first, with their totals, the fullest row last; count them all."""
    total = 0
    for i in range(height):
        for j in range(width):
            down[i] += counts[i * width + j]
            across[j] += counts[i * width + j]
            total += counts[i * width + j]
    rows, columns = np.empty(height, np.int64), np.empty(width, np.int64)
    r, c = _used_first(down, rows), _used_first(across, columns)
    fullest = 0
    for i in range(r):
        if down[i] > down[fullest]:
            fullest = i
    if r > 0:
        rows[fullest], rows[r - 1] = rows[r - 1], rows[fullest]
        down[fullest], down[r - 1] = down[r - 1], down[fullest]
    for i in range(r):
        for j in range(c):
            table[i * c + j] = counts[rows[i] * width + columns[j]]
    return r, c, total


@inlined
def _used_first(totals: np.ndarray, places: np.ndarray) -> int:
    """Move the totals above 0 to the front, note where each stood, and count them; zeros follow."""
    found = 0
    for k in range(totals.size):
        total = totals[k]
        if total > 0:
            totals[k] = 0
            totals[found] = total
            places[found] = k
            found += 1
    return found


@inlined
def _statistic(table: np.ndarray, down: np.ndarray, across: np.ndarray, total: int) -> float:
    """Compute X2 of one table without empty rows or columns."""
    share = 0.0
    cell = 0
    for i in range(down.size):
        row = 0.0
        for j in range(across.size):
            count = float(table[cell])
            row += count * count / across[j]
            cell += 1
        share += row / down[i]
    return total * (share - 1.0)


@kernel
def _shuffle(
    down: np.ndarray, across: np.ndarray, total: int, records: np.ndarray, table: np.ndarray, state: np.ndarray
) -> None:
    """Draw a table by dealing the shuffled column labels of all records to the rows; the last row takes the rest."""
    place = 0
    for j in range(across.size):
        for _ in range(across[j]):
            records[place] = j
            place += 1
    width = across.size
    last = (down.size - 1) * width
    for cell in range(last):
        table[cell] = 0
    for j in range(width):
        table[last + j] = across[j]
    place = 0
    for i in range(down.size - 1):
        for _ in range(down[i]):
            other = place + _below(total - place, state)
            j = records[other]
            records[other] = records[place]
            table[i * width + j] += 1
            table[last + j] -= 1
            place += 1


@kernel
def _draw(
    down: np.ndarray,
    across: np.ndarray,
    total: int,
    table: np.ndarray,
    log_factorial: np.ndarray,
    state: np.ndarray,
) -> None:
    """Draw a table cell by cell, each from its hypergeometric distribution given the cells before it."""
    width = across.size
    last = (down.size - 1) * width
    for j in range(width):
        table[last + j] = across[j]
    remaining = total
    for i in range(down.size - 1):
        wanted, pool = down[i], remaining
        for j in range(width - 1):
            column = table[last + j]
            taken = _hypergeometric(wanted, column, pool, log_factorial, state)
            table[i * width + j] = taken
            table[last + j] -= taken
            wanted -= taken
            pool -= column
        table[i * width + width - 1] = wanted
        table[last + width - 1] -= wanted
        remaining -= down[i]


@part
def _hypergeometric(draws: int, marked: int, total: int, log_factorial: np.ndarray, state: np.ndarray) -> int:
    """Draw how many of ``draws`` records out of ``total`` are marked, by inversion outward from the mode."""
    low, high = max(0, draws + marked - total), min(draws, marked)
    if low == high:
        return low
    mode = min(max((draws + 1) * (marked + 1) // (total + 2), low), high)
    rest = total - draws - marked
    logarithm = _log(draws, log_factorial) + _log(total - draws, log_factorial) + _log(marked, log_factorial)
    logarithm += _log(total - marked, log_factorial) - _log(total, log_factorial) - _log(mode, log_factorial)
    logarithm -= _log(draws - mode, log_factorial) + _log(marked - mode, log_factorial)
    chance = np.exp(logarithm - _log(rest + mode, log_factorial))
    goal = _uniform(state) - chance
    up, down = mode, mode
    above, below = chance, chance
    while goal > 0.0 and (up < high or down > low):
        if up < high:
            above *= (draws - up) * (marked - up) / ((up + 1.0) * (rest + up + 1.0))
            up += 1
            goal -= above
            if goal <= 0.0:
                return up
        if down > low:
            below *= down * (rest + down) / ((draws - down + 1.0) * (marked - down + 1.0))
            down -= 1
            goal -= below
            if goal <= 0.0:
                return down
    return mode


@inlined
def _log(number: int, log_factorial: np.ndarray) -> float:
    """Look up ln(number!), or compute it beyond the table."""
    return float(log_factorial[number]) if number < log_factorial.size else math.lgamma(number + 1.0)


@inlined
def _next(state: np.ndarray) -> np.uint64:
    """Give the next 64 random bits.

    Source: Steele, Lea & Flood 2014 (SplitMix64).
    """
    state[0] += _GOLDEN
    bits = state[0]
    bits = (bits ^ (bits >> _S30)) * _FIRST
    bits = (bits ^ (bits >> _S27)) * _SECOND
    return np.uint64(bits ^ (bits >> _S31))


@inlined
def _uniform(state: np.ndarray) -> float:
    """Draw a number from 0 to 1, 0 included."""
    return np.float64(_next(state) >> _S11) * 2.0**-53


@inlined
def _below(bound: int, state: np.ndarray) -> int:
    """Draw a whole number from 0 to ``bound`` - 1, for bounds far below 2^32."""
    return int(((_next(state) >> _S32) * np.uint64(bound)) >> _S32)
