"""Counting loops for rows that do not count alike."""

import numpy as np

from bnx.kernels.compiling import kernel
from bnx.kernels.counting import number_cells

__all__ = ["weigh_families"]

_ROWS = 2048  # rows whose cell numbers are computed at a time


@kernel
def weigh_families(
    codes: np.ndarray,
    weights: np.ndarray,
    recode: np.ndarray,
    plain: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    which: np.ndarray,
    out_starts: np.ndarray,
    starts: np.ndarray,
    slots: np.ndarray,
    out: np.ndarray,
) -> None:
    """Sum the weights (N,) of rows by the joint levels of some families, as ``count_families`` counts the rows.

    out (slots, cells) float64.
    """
    cells = np.empty(_ROWS, np.int32)
    for k in range(which.size):
        f = which[k]
        own = depths[f]
        for s in range(starts.size - 1):
            slot = slots[s % slots.size]
            if slot < 0:
                continue
            into = out[slot, out_starts[k] :]
            for low in range(starts[s], starts[s + 1], _ROWS):
                rows = min(_ROWS, starts[s + 1] - low)
                number_cells(codes, recode, plain[f], members[f, :own], sizes[f, :own], low, rows, cells)
                for row in range(rows):
                    into[cells[row]] += weights[low + row]
