"""What losses become when single families give way to smaller ones."""

import numpy as np

from bnx.kernels.compiling import inlined, kernel
from bnx.kernels.counting import number_cells
from bnx.kernels.posterior import below_top, block_loss

__all__ = ["changed_losses"]

_ROWS = 256  # of a block


@kernel
def changed_losses(
    codes: np.ndarray,
    recode: np.ndarray,
    old: tuple[np.ndarray, ...],
    new: tuple[np.ndarray, ...],
    first: int,
    evidence: np.ndarray,
    bias: np.ndarray,
    temperature: float,
    floor: float,
    shares: np.ndarray,
    truth: np.ndarray,
    weights: np.ndarray,
    out: np.ndarray,
) -> None:
    """Find by how much the weighted sum of log losses (nats) grows when one family gives way to another, one at a time.

    old: plain, members, sizes, depths of some families, as in ``add_terms``, then (K,): the family that goes each time,
    where its cells begin, and the table (cells, T); new: plain, members, sizes, depths, starts (K,) and the table of
    those that come; evidence (N, T): of rows from ``first`` on, with the old families; bias (1, C), temperature, floor,
    shares, truth, weights as in ``calibrated_loss``; out (K,), zeros.
    """
    classes = bias.shape[1]
    room, work = np.empty(classes * _ROWS), np.empty(3 * classes * _ROWS)
    base, own = np.empty((classes, _ROWS)), np.empty(_ROWS)
    going, coming = np.empty(_ROWS, np.int32), np.empty(_ROWS, np.int32)
    for low in range(0, truth.size, _ROWS):
        rows = min(_ROWS, truth.size - low)
        part = slice(low, low + rows)
        flat = room[: classes * rows]
        power = flat.reshape(classes, rows)
        for c in range(classes):
            for k in range(rows):
                base[c, k] = bias[0, c] + (temperature * evidence[low + k, c - 1] if c else 0.0)
        for c in range(classes):
            for k in range(rows):
                power[c, k] = base[c, k]
        below_top(power, own)
        before = block_loss(power, flat, work, own, floor, shares, truth[part], weights[part])
        for e in range(out.size):
            _number(codes, recode, old[0], old[1], old[2], old[3], old[4][e], first + low, going[:rows])
            _number(codes, recode, new[0], new[1], new[2], new[3], e, first + low, coming[:rows])
            gone, come = old[6][old[5][e] :], new[5][new[4][e] :]
            for k in range(rows):
                power[0, k] = base[0, k]
            for c in range(1, classes):
                for k in range(rows):
                    change = come[coming[k], c - 1] - gone[going[k], c - 1]
                    power[c, k] = base[c, k] + temperature * change
            below_top(power, own)
            out[e] += block_loss(power, flat, work, own, floor, shares, truth[part], weights[part]) - before


@inlined
def _number(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    f: int,
    low: int,
    cells: np.ndarray,
) -> None:
    """Number the joint level of one family in as many rows as there are cells."""
    own = depths[f]
    number_cells(codes, recode, plain[f], members[f, :own], sizes[f, :own], low, cells.size, cells)
