"""Loops from tables to evidence, and from evidence under several smoothings to losses.

Evidence is that for each class against the first: C - 1 columns for each smoothing.
"""

from collections.abc import Callable

import numpy as np
from llvmlite import ir
from numba import types
from numba.extending import intrinsic

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.exponentials import exponentials

__all__ = ["add_terms", "tempered_losses"]

_ROOM = 4096  # evidence that rows gather at a time: 32 KiB, so that it stays in the first cache
_MOST_ROWS = 1024
_TOGETHER = 4  # families whose terms are added at a time, which saves reading and writing the evidence
_JOINED = 32  # rows of one weight whose losses are taken together


# Intrinsics take numba's own types, which have no annotations: hence the ignored errors.
def _adder(lanes: int) -> Callable[..., None]:
    """Make a function that adds four runs of so many numbers to one, an instruction each where the machine has it."""

    @intrinsic
    def add_four(typing_context, out, i, terms, a, b, c, d):  # type: ignore[no-untyped-def]
        """Add ``terms`` from a, b, c and d on to ``out`` from i on, in this order."""

        def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
            vector = ir.VectorType(ir.DoubleType(), lanes)
            arrays = [context.make_array(signature.args[k])(context, builder, arguments[k]) for k in (0, 2)]

            into, *added = (
                builder.bitcast(builder.gep(array.data, [number]), vector.as_pointer())
                for array, number in zip([arrays[0], *[arrays[1]] * 4], [arguments[1], *arguments[3:]], strict=True)
            )
            total = builder.load(into, align=8)
            for one in added:
                total = builder.fadd(total, builder.load(one, align=8))
            builder.store(total, into, align=8)
            return context.get_dummy_value()

        return types.void(out, types.int64, terms, *[types.int64] * 4), generate

    return add_four


_add_two_wide, _add_four_wide, _add_eight_wide = _adder(2), _adder(4), _adder(8)


@kernel
def add_terms(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    which: np.ndarray,
    starts: np.ndarray,
    terms: np.ndarray,
    first: int,
    last: int,
    out: np.ndarray,
) -> None:
    """Add the table terms of some families to the evidence of rows ``first:last``, family by family.

    members, sizes (F, M): parents in the order taken, then the child, of which the first ``depths`` (F,) count; plain
    (F,) bool: used as stored; which (K,): the families wanted; starts (K,): where the cells of each begin in terms
    (cells, T) float64, T 1, 2, 4 or a multiple of 8; row 0 of terms is zeros; out (last - first, T).
    """
    width = terms.shape[1]
    most = min(_MOST_ROWS, max(64, _ROOM // width))
    cells = np.zeros((_TOGETHER, most), np.int64)
    flat, into = terms.reshape(-1), out.reshape(-1)
    for low in range(first, last, most):
        rows = min(most, last - low)
        for k in range(0, which.size, _TOGETHER):
            for j in range(_TOGETHER):
                mine = cells[j, :rows]
                if k + j < which.size:
                    f = which[k + j]
                    own = depths[f]
                    _number(codes, recode, plain[f], members[f, :own], sizes[f, :own], low, starts[k + j], width, mine)
                else:
                    for row in range(rows):
                        mine[row] = 0
            _add(into, (low - first) * width, flat, cells[:, :rows], width)


@inlined
def _number(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: bool,
    members: np.ndarray,
    sizes: np.ndarray,
    low: int,
    start: int,
    width: int,
    places: np.ndarray,
) -> None:
    """Find where in a table of so many columns the joint level of each row from ``low`` on begins."""
    for m in range(members.size):
        i, size = members[m], sizes[m]
        row = codes[i, low : low + places.size]
        if m == 0:
            for k in range(places.size):
                places[k] = row[k] if plain else recode[i, row[k]]
        elif plain:
            for k in range(places.size):
                places[k] = places[k] * size + row[k]
        else:
            for k in range(places.size):
                places[k] = places[k] * size + recode[i, row[k]]
    for k in range(places.size):
        places[k] = (places[k] + start) * width


@inlined
def _add(into: np.ndarray, at: int, flat: np.ndarray, places: np.ndarray, width: int) -> None:
    """Add the terms of four families to rows of evidence from ``at`` on."""
    a, b, c, d = places[0], places[1], places[2], places[3]
    if width == 1:
        for k in range(a.size):
            into[at + k] = into[at + k] + flat[a[k]] + flat[b[k]] + flat[c[k]] + flat[d[k]]
    elif width == 2:
        for k in range(a.size):
            _add_two_wide(into, at + 2 * k, flat, a[k], b[k], c[k], d[k])
    elif width == 4:
        for k in range(a.size):
            _add_four_wide(into, at + 4 * k, flat, a[k], b[k], c[k], d[k])
    elif width == 8:
        for k in range(a.size):
            _add_eight_wide(into, at + 8 * k, flat, a[k], b[k], c[k], d[k])
    else:
        for k in range(a.size):
            for t in range(0, width, 8):
                _add_eight_wide(into, at + k * width + t, flat, a[k] + t, b[k] + t, c[k] + t, d[k] + t)


@kernel
def tempered_losses(
    evidence: np.ndarray, log_prior: np.ndarray, truth: np.ndarray, weights: np.ndarray, out: np.ndarray
) -> None:
    """Sum the weighted log losses (nats) of rows at the temperatures 1, 3/4 and 1/2.

    evidence (N, at least V * (C - 1)); log_prior (C,), minus infinity for a class that is left out, whose rows are
    skipped; truth, weights (N,); out (V, K) float64, added to: the first K temperatures. Powers of 3/4 and 1/2 are made
    of square roots, so that one exponential serves all.
    """
    prior = np.empty(log_prior.size)
    for c in range(prior.size):
        prior[c] = np.exp(log_prior[c])
    rows = np.empty(_JOINED, np.int64)
    columns = out.shape[0] * log_prior.size
    powers = np.zeros((columns, _JOINED))
    work = np.empty(3 * columns * _JOINED)
    joined, weight = 0, 0.0
    for row in range(truth.size):
        if log_prior[truth[row]] == -np.inf:
            continue
        if joined == _JOINED or weights[row] != weight:
            _add_joined(evidence, log_prior, prior, truth, rows[:joined], weight, powers, work, out)
            joined, weight = 0, weights[row]
        rows[joined] = row
        joined += 1
    _add_joined(evidence, log_prior, prior, truth, rows[:joined], weight, powers, work, out)


@part
def _add_joined(
    evidence: np.ndarray,
    log_prior: np.ndarray,
    prior: np.ndarray,
    truth: np.ndarray,
    rows: np.ndarray,
    weight: float,
    powers: np.ndarray,
    work: np.ndarray,
    out: np.ndarray,
) -> None:
    """Add the losses of a few rows of one weight; powers (V * C, 32) is room, work room for its exponentials."""
    if rows.size == 0:
        return
    classes = prior.size
    top = np.empty(_JOINED)
    for v in range(out.shape[0]):
        part = powers[v * classes : (v + 1) * classes]
        _below_likeliest(evidence, v * (classes - 1), log_prior, rows, top, part)
        for k in range(rows.size):
            own = truth[rows[k]]
            for t in range(out.shape[1]):
                out[v, t] -= weight * (log_prior[own] + (1.0 - 0.25 * t) * part[own, k])
    exponentials(powers.reshape(-1), work)
    for v in range(out.shape[0]):
        _add_totals(powers[v * classes : (v + 1) * classes], prior, rows.size, weight, out[v])


@inlined
def _below_likeliest(
    evidence: np.ndarray, column: int, log_prior: np.ndarray, rows: np.ndarray, top: np.ndarray, out: np.ndarray
) -> None:
    """Write the evidence of a few rows, from a column on, below that of their likeliest class: out (C, 32)."""
    for k in range(rows.size):
        out[0, k] = 0.0
        for c in range(1, log_prior.size):
            out[c, k] = evidence[rows[k], column + c - 1]
    for k in range(_JOINED):
        top[k] = -np.inf
    for c in range(log_prior.size):
        if log_prior[c] > -np.inf:
            for k in range(_JOINED):
                top[k] = max(top[k], out[c, k])
    for c in range(log_prior.size):
        for k in range(_JOINED):
            out[c, k] = min(out[c, k] - top[k], 0.0)


@inlined
def _add_totals(powers: np.ndarray, prior: np.ndarray, rows: int, weight: float, out: np.ndarray) -> None:
    """Add the logs of rows' sums over classes (C, 32) to out (K,); one logarithm for the product over rows.

    Each sum lies between the smallest prior above 0 and 1.
    """
    sums = np.zeros((3, _JOINED))
    for c in range(prior.size):
        for k in range(_JOINED):
            one = powers[c, k]
            root = np.sqrt(one)
            sums[0, k] += prior[c] * one
            sums[1, k] += prior[c] * (root * np.sqrt(root))
            sums[2, k] += prior[c] * root
    for t in range(out.size):
        product = 1.0
        for k in range(rows):
            product *= sums[t, k]
        out[t] += weight * np.log(product)
