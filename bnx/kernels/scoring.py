"""Loops from counts to tables, from tables to evidence, and from evidence to losses."""

import numpy as np
from numba import njit

from bnx.kernels.counting import number_cells

__all__ = ["add_terms", "calibrated_loss", "smoothed_tables", "tempered_losses"]

_ROWS = 2048  # rows whose cell numbers are computed at a time


@njit(nogil=True, cache=True)
def add_terms(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: bool,
    members: np.ndarray,
    sizes: np.ndarray,
    first: int,
    last: int,
    table: np.ndarray,
    out: np.ndarray,
) -> None:
    """Add a family's table terms to the evidence of rows ``first:last``.

    members (m,): parents in the order taken, then the child; table (cells, T) float64: T terms per cell;
    out (last - first, T) float64.
    """
    cells = np.empty(_ROWS, np.int64)
    terms = table.shape[1]
    for low in range(first, last, _ROWS):
        number = min(_ROWS, last - low)
        number_cells(codes, recode, plain, members, sizes, low, number, cells)
        for k in range(number):
            cell = cells[k]
            row = low - first + k
            for t in range(terms):
                out[row, t] += table[cell, t]


@njit(nogil=True, cache=True)
def smoothed_tables(
    counts: np.ndarray, sizes: np.ndarray, strengths: np.ndarray, laplace: np.ndarray, out: np.ndarray
) -> None:
    """Write the log table terms (nats) of one family under several smoothings.

    counts (C, cells) int32, cells numbered by ``sizes`` = (parents in the order taken..., child);
    strengths (V,), laplace (V,) bool: smoothing v is laplace with pseudo-count ``strengths[v]``, else back-off with
    that many records; out (cells, V * C): column ``v * C + c``.
    """
    classes, cells = counts.shape
    depth = sizes.size - 1
    levels = sizes[depth]
    marginal = np.zeros(levels)
    contexts = np.ones(depth + 1, np.int64)
    for d in range(depth):
        contexts[d + 1] = contexts[d] * sizes[d]
    for c in range(classes):
        for cell in range(cells):
            marginal[cell % levels] += counts[c, cell]
    total = marginal.sum()
    for x in range(levels):
        marginal[x] = (marginal[x] + 1.0) / (total + levels)
    for c in range(classes):
        _tables_of_class(counts[c], contexts, levels, marginal, strengths, laplace, c, classes, out)


@njit(nogil=True, cache=True)
def _tables_of_class(
    counts: np.ndarray,
    contexts: np.ndarray,
    levels: int,
    marginal: np.ndarray,
    strengths: np.ndarray,
    laplace: np.ndarray,
    c: int,
    classes: int,
    out: np.ndarray,
) -> None:
    """Fill one class's columns of ``smoothed_tables``."""
    depth = contexts.size - 1
    starts = np.zeros(depth + 2, np.int64)
    for d in range(depth + 1):
        starts[d + 1] = starts[d] + contexts[d] * levels
    sums = np.zeros(starts[depth + 1])
    sums[starts[depth] :] = counts
    for d in range(depth, 0, -1):
        spread = contexts[d] // contexts[d - 1]
        for k in range(contexts[d]):
            for x in range(levels):
                sums[starts[d - 1] + (k // spread) * levels + x] += sums[starts[d] + k * levels + x]
    shares = np.empty_like(sums)
    for v in range(strengths.size):
        s = strengths[v]
        for d in range(depth if laplace[v] else 0, depth + 1):
            spread = contexts[d] // contexts[d - 1] if d else 1
            for k in range(contexts[d]):
                at = starts[d] + k * levels
                rows = 0.0
                for x in range(levels):
                    rows += sums[at + x]
                for x in range(levels):
                    if laplace[v]:
                        shares[at + x] = (sums[at + x] + s) / (rows + s * levels)
                    else:
                        before = shares[starts[d - 1] + (k // spread) * levels + x] if d else marginal[x]
                        shares[at + x] = (sums[at + x] + s * before) / (rows + s)
        for cell in range(contexts[depth] * levels):
            out[cell, v * classes + c] = np.log(shares[starts[depth] + cell])


@njit(nogil=True, cache=True)
def tempered_losses(
    evidence: np.ndarray,
    log_prior: np.ndarray,
    truth: np.ndarray,
    weights: np.ndarray,
    temperatures: np.ndarray,
    out: np.ndarray,
) -> None:
    """Sum the weighted log losses (nats) of rows at several temperatures.

    evidence (N, V * C); log_prior (C,), minus infinity for a class that is left out, whose rows are skipped;
    truth, weights (N,); temperatures (K,); out (V, K) float64, added to.
    """
    classes = log_prior.size
    for row in range(truth.size):
        own = truth[row]
        if log_prior[own] == -np.inf:
            continue
        for v in range(out.shape[0]):
            base = v * classes
            for k in range(temperatures.size):
                t = temperatures[k]
                top = -np.inf
                for c in range(classes):
                    top = max(top, log_prior[c] + t * evidence[row, base + c])
                total = 0.0
                for c in range(classes):
                    total += np.exp(log_prior[c] + t * evidence[row, base + c] - top)
                loss = top + np.log(total) - log_prior[own] - t * evidence[row, base + own]
                out[v, k] += weights[row] * loss


@njit(nogil=True, cache=True)
def calibrated_loss(
    evidence: np.ndarray,
    bias: np.ndarray,
    temperature: float,
    floor: float,
    shares: np.ndarray,
    truth: np.ndarray,
    weights: np.ndarray,
) -> float:
    """Sum the weighted log losses (nats) of rows under a calibration.

    evidence (N, C); bias (C,): log prior plus offset, minus infinity for a class that is left out; shares (C,);
    truth, weights (N,).
    """
    total_loss = 0.0
    for row in range(truth.size):
        top = -np.inf
        for c in range(bias.size):
            top = max(top, bias[c] + temperature * evidence[row, c])
        total = 0.0
        for c in range(bias.size):
            total += np.exp(bias[c] + temperature * evidence[row, c] - top)
        own = truth[row]
        p = np.exp(bias[own] + temperature * evidence[row, own] - top) / total
        total_loss -= weights[row] * np.log((1.0 - floor) * p + floor * shares[own])
    return total_loss
