"""Loops from counts to tables, from tables to evidence, and from evidence to losses."""

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.extending import intrinsic

from bnx.kernels.counting import number_cells
from bnx.kernels.exponentials import exponentials

__all__ = ["add_terms", "calibrated_loss", "smoothed_tables", "tempered_losses"]

_ROWS = 512  # rows that go through all families at a time, so that their evidence stays in the cache
_JOINED = 32  # rows of one weight whose losses are taken together


# Intrinsics take numba's own types, which have no annotations: hence the ignored errors.
@intrinsic
def _add_four(typing_context, out, i, terms, j):  # type: ignore[no-untyped-def]
    """Add ``terms[j:j + 4]`` to ``out[i:i + 4]``, one instruction where the machine has it."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        four = ir.VectorType(ir.DoubleType(), 4)

        places = []
        for k in (0, 2):
            array = context.make_array(signature.args[k])(context, builder, arguments[k])
            places.append(builder.bitcast(builder.gep(array.data, [arguments[k + 1]]), four.as_pointer()))
        into, added = places
        total = builder.fadd(builder.load(into, align=8), builder.load(added, align=8))
        builder.store(total, into, align=8)
        return context.get_dummy_value()

    return types.void(out, types.int64, terms, types.int64), generate


@njit(nogil=True, cache=True)
def add_terms(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    starts: np.ndarray,
    terms: np.ndarray,
    user_starts: np.ndarray,
    users: np.ndarray,
    first: int,
    last: int,
    out: np.ndarray,
) -> None:
    """Add the table terms of families to the evidence of rows ``first:last``, family by family.

    members, sizes (F, M): parents in the order taken, then the child, of which the first ``depths`` (F,) count; plain
    (F,) bool: used as stored; starts (F,): where a family's cells begin in terms (cells, T) float64, T a multiple of 4;
    ``users[user_starts[f]:user_starts[f + 1]]``: which structures hold family f; out (structures, last - first, T).
    """
    cells = np.empty(_ROWS, np.int32)
    width = terms.shape[1]
    flat, into = terms.reshape(-1), out.reshape(-1)
    for low in range(first, last, _ROWS):
        number = min(_ROWS, last - low)
        for f in range(depths.size):
            own = depths[f]
            number_cells(codes, recode, plain[f], members[f, :own], sizes[f, :own], low, number, cells)
            for u in range(user_starts[f], user_starts[f + 1]):
                at = (users[u] * (last - first) + low - first) * width
                for k in range(number):
                    term = (starts[f] + cells[k]) * width
                    for t in range(0, width, 4):
                        _add_four(into, at + t, flat, term + t)
                    at += width


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
    evidence: np.ndarray, log_prior: np.ndarray, truth: np.ndarray, weights: np.ndarray, out: np.ndarray
) -> None:
    """Sum the weighted log losses (nats) of rows at the temperatures 1, 3/4 and 1/2.

    evidence (N, at least V * C); log_prior (C,), minus infinity for a class that is left out, whose rows are skipped;
    truth, weights (N,); out (V, K) float64, added to: the first K temperatures. Powers of 3/4 and 1/2 are made of
    square roots, so that one exponential serves all.
    """
    prior = np.exp(log_prior)
    powers = np.empty((_JOINED, out.shape[0] * log_prior.size))
    work = np.empty((3, powers.size))
    joined, weight = 0, 0.0
    for row in range(truth.size):
        own = truth[row]
        if log_prior[own] == -np.inf:
            continue
        if joined == _JOINED or weights[row] != weight:
            _add_totals(powers[:joined], work, weight, prior, out)
            joined, weight = 0, weights[row]
        _powers(evidence[row], log_prior, own, weight, powers[joined], out)
        joined += 1
    _add_totals(powers[:joined], work, weight, prior, out)


@njit(nogil=True, cache=True)
def _powers(
    evidence: np.ndarray, log_prior: np.ndarray, own: int, weight: float, powers: np.ndarray, out: np.ndarray
) -> None:
    """Write one row's evidence below that of its likeliest class; subtract the log posterior of its own from out."""
    classes = log_prior.size
    for v in range(out.shape[0]):
        base = v * classes
        top = -np.inf
        for c in range(classes):
            if log_prior[c] > -np.inf:
                top = max(top, evidence[base + c])
        for c in range(classes):
            powers[base + c] = min(evidence[base + c] - top, 0.0)
        for k in range(out.shape[1]):
            out[v, k] -= weight * (log_prior[own] + (1.0 - 0.25 * k) * powers[base + own])


@njit(nogil=True, cache=True)
def _add_totals(powers: np.ndarray, work: np.ndarray, weight: float, prior: np.ndarray, out: np.ndarray) -> None:
    """Add the logs of rows' sums over classes to out (V, K); one logarithm for the product over rows (rows, V * C).

    Each sum lies between the smallest prior above 0 and 1.
    """
    exponentials(powers.reshape(-1), work)
    for v in range(out.shape[0]):
        whole = three_quarters = half = 1.0
        for row in range(powers.shape[0]):
            sums = (0.0, 0.0, 0.0)
            for c in range(prior.size):
                one = powers[row, v * prior.size + c]
                root = np.sqrt(one)
                sums = (sums[0] + prior[c] * one, sums[1] + prior[c] * root * np.sqrt(root), sums[2] + prior[c] * root)
            whole *= sums[0]
            three_quarters *= sums[1]
            half *= sums[2]
        products = (whole, three_quarters, half)
        for k in range(out.shape[1]):
            out[v, k] += weight * np.log(products[k])


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
