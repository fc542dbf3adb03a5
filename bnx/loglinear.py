"""Fit the model that rows and columns are associated alike in every stratum: arrays in, one frozen value out.

It is the log-linear model of all three two-way margins (rows x columns, rows x strata, columns x strata), without a
three-way interaction.
"""

from dataclasses import dataclass

import numpy as np
from scipy.optimize import linprog
from scipy.sparse import csr_array, hstack

__all__ = ["Fit", "fit_homogeneous"]

_GAP = 1e-11  # of a fitted margin, as a share of the largest margin
_ROUNDS = 300
_STEPS = 50
_HALVINGS = 30
_LONGEST = 5.0  # step of a log fit
_SAFE = 1e-6  # a fitted count above this is not on its way to zero
_MOST_LINES = 1500
_AXES = (0, 2, 1)  # summing over one of them leaves a margin


@dataclass(frozen=True)
class Fit:
    """Fitted counts of homogeneous association.

    ``expected`` float (S, r, c). ``free`` bool (S, r, c): every other cell can take one value only, given the margins;
    it is fitted exactly and carries neither a residual nor a df. ``rounds`` of proportional fitting and steps of Newton
    were made; ``converged`` tells whether every margin is met to 1e-11 of the largest. ``df`` is None where the strata
    have so many rows and columns together (over 1,500) that finding the rank of the model would take minutes; then
    neither Newton's method nor the linear programme is tried.
    """

    expected: np.ndarray
    free: np.ndarray
    df: int | None
    rounds: int
    converged: bool


def fit_homogeneous(counts: np.ndarray) -> Fit:
    """Fit homogeneous association to counts, int (S, r, c), by iterative proportional fitting.

    Where that creeps, as it does on nearly deterministic tables, Newton's method goes on.

    Cells are set aside where the margins leave no choice: all cells of a margin that is zero, and a cell that is alone
    in a margin (so a stratum with one used row or column, and a level used in one stratum only, carry nothing). Other
    empty cells can still be fitted as zero together; where the fit runs towards zero they are found by a linear
    programme. The df is the number of free cells less the rank of the model on them.

    Source: Deming & Stephan 1940 (the fit); Bishop, Fienberg & Holland 1975, chapter 3 (zero margins and df); Haberman
    1974, appendix B, and Fienberg & Rinaldo 2012 (empty cells without a zero margin).
    """
    free = _undetermined(counts, np.ones(counts.shape, dtype=bool))
    small = int(free.any(1).sum() + free.any(2).sum()) <= _MOST_LINES
    expected, rounds, converged = _proportional(counts, free)
    if small and (not converged or (free & (counts == 0) & (expected < _SAFE)).any()):
        free = _undetermined(counts, free & ~_never_filled(counts, free))
        expected, rounds, converged = _proportional(counts, free)
    if small and not converged:
        expected, steps, converged = _newton(counts, free, expected)
        rounds += steps
    df = int(free.sum()) - _rank(free) if small else None
    return Fit(np.where(free, expected, counts), free, df, rounds, converged)


def _undetermined(counts: np.ndarray, free: np.ndarray) -> np.ndarray:
    """Set cells aside, as long as there are any, that are alone in a margin or in a margin that is zero."""
    while True:
        kept = free.copy()
        for axis in _AXES:
            alone = free.sum(axis, keepdims=True) == 1
            empty = np.where(free, counts, 0).sum(axis, keepdims=True) == 0
            kept &= ~(alone | empty)
        if (kept == free).all():
            return free
        free = kept


def _proportional(counts: np.ndarray, free: np.ndarray) -> tuple[np.ndarray, int, bool]:
    """Scale to the three margins of the free cells in turn; give the fit, the rounds, and whether it converged."""
    observed = np.where(free, counts, 0).astype(np.float64)
    margins = [observed.sum(axis, keepdims=True) for axis in _AXES]
    enough = _enough(observed)
    fitted = free.astype(np.float64)
    for rounds in range(1, _ROUNDS + 1):
        gap = 0.0
        for axis, margin in zip(_AXES, margins, strict=True):
            now = fitted.sum(axis, keepdims=True)
            gap = max(gap, float(np.abs(margin - now).max(initial=0.0)))
            fitted *= np.divide(margin, now, out=np.zeros(margin.shape), where=now > 0)
        if gap <= enough:
            return fitted, rounds, True
    return fitted, _ROUNDS, False


def _newton(counts: np.ndarray, free: np.ndarray, start: np.ndarray) -> tuple[np.ndarray, int, bool]:
    """Go on from a fit that creeps; give what `_proportional` gives."""
    pairs, strata = _incidence(free)
    observed, logs = counts[free].astype(np.float64), np.log(start[free])
    enough = _enough(np.where(free, counts, 0))
    for steps in range(_STEPS + 1):
        off = observed - np.exp(logs)
        gaps = np.concatenate([pairs.T @ off, strata.T @ off])
        if float(np.abs(gaps).max()) <= enough or steps == _STEPS:
            break
        logs += _uphill(pairs, strata, observed, logs)
    fitted = np.zeros(free.shape)
    fitted[free] = np.exp(logs)
    return fitted, steps, bool(np.abs(gaps).max() <= enough)


def _uphill(pairs: csr_array, strata: csr_array, observed: np.ndarray, logs: np.ndarray) -> np.ndarray:
    """Find the Newton step of the log fit, halved until the likelihood does not fall."""
    fitted = np.exp(logs)
    weighted = strata.multiply(fitted[:, None]).tocsr()
    sizes, shared = pairs.T @ fitted, (pairs.T @ weighted).toarray()
    inverse = np.divide(1.0, sizes, out=np.zeros(sizes.shape), where=sizes > 0)
    between = (strata.T @ weighted).toarray() - shared.T @ (inverse[:, None] * shared)
    of_pairs, of_strata = pairs.T @ (observed - fitted), strata.T @ (observed - fitted)
    shift = np.linalg.pinv(between, rcond=1e-13, hermitian=True) @ (of_strata - shared.T @ (inverse * of_pairs))
    step = strata @ shift + pairs @ (inverse * (of_pairs - shared @ shift))
    step *= min(1.0, _LONGEST / max(_LONGEST, float(np.abs(step).max())))
    for _ in range(_HALVINGS):
        if float((observed * step - fitted * np.expm1(step)).sum()) >= 0.0:
            break
        step /= 2.0
    return np.asarray(step)


def _enough(observed: np.ndarray) -> float:
    """Find the gap of a margin that counts as none."""
    return _GAP * max(1.0, *(float(observed.sum(axis).max(initial=0.0)) for axis in _AXES))


def _incidence(free: np.ndarray) -> tuple[csr_array, csr_array]:
    """Tell which free cell lies in which row x column pair, and in which row and column of which stratum."""
    strata, rows, columns = np.nonzero(free)
    _, height, width = free.shape
    cells, ones = np.arange(strata.size), np.ones(strata.size)
    pairs = csr_array((ones, (cells, rows * width + columns)), shape=(cells.size, height * width))
    down = csr_array((ones, (cells, strata * height + rows)), shape=(cells.size, free.shape[0] * height))
    across = csr_array((ones, (cells, strata * width + columns)), shape=(cells.size, free.shape[0] * width))
    return pairs, csr_array(hstack([down, across]))


def _rank(free: np.ndarray) -> int:
    """Count the independent margins of the free cells: the pairs, and what the strata add to them."""
    if not free.any():
        return 0
    s, r, c = (int(free.any(axes).sum()) for axes in ((1, 2), (0, 2), (0, 1)))
    if free.sum() == s * r * c:
        return s * r * c - (s - 1) * (r - 1) * (c - 1)
    pairs, strata = _incidence(free)
    sizes = np.asarray(pairs.sum(0)).ravel()
    inverse = np.divide(1.0, sizes, out=np.zeros(sizes.shape), where=sizes > 0)
    shared = (pairs.T @ strata).toarray()
    added = (strata.T @ strata).toarray() - shared.T @ (inverse[:, None] * shared)
    return int((sizes > 0).sum()) + int(np.linalg.matrix_rank(added, tol=1e-8, hermitian=True))


def _never_filled(counts: np.ndarray, free: np.ndarray) -> np.ndarray:
    """Find the empty free cells that no table of non-negative reals with these margins fills, bool (S, r, c).

    A change that keeps the margins may lower filled cells, any amount being a matter of scale, but not empty ones; the
    programme raises as many empty cells as it can, each to at most 1.
    """
    found = np.zeros(counts.shape, dtype=bool)
    empty = counts[free] == 0
    if not empty.any():
        return found
    pairs, strata = _incidence(free)
    margins = csr_array(hstack([pairs, strata])).T.tocsc()
    raised = margins[:, empty]
    system = hstack([margins[:, ~empty], raised, raised])
    number = int(empty.sum())
    filled = empty.size - number
    bounds = [(None, None)] * filled + [(0.0, 1.0)] * number + [(0.0, None)] * number
    gain = np.concatenate([np.zeros(filled), -np.ones(number), np.zeros(number)])
    solved = linprog(gain, A_eq=system, b_eq=np.zeros(system.shape[0]), bounds=bounds, method="highs")
    if solved.x is None:  # the solver gave up; the fit will then report that it did not converge
        return found
    never = np.zeros(empty.size, dtype=bool)
    never[empty] = solved.x[filled : filled + number] < 0.5
    found[free] = never
    return found
