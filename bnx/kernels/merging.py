"""Joint levels of a family added up to coarser ones."""

import numpy as np

from bnx.kernels.compiling import kernel

__all__ = ["merge_cells"]


@kernel
def merge_cells(
    counts: np.ndarray, sizes: np.ndarray, starts: np.ndarray, levels: np.ndarray, seen: np.ndarray, out: np.ndarray
) -> None:
    """Add joint levels of ``sizes`` (m,), counts (C, cells), up to those of ``seen`` (m,), out (C, cells).

    Level x of member m becomes ``levels[starts[m] + x]``; -1: its records do not count.
    """
    for cell in range(counts.shape[1]):
        rest, place, step, counted = cell, 0, 1, True
        for m in range(sizes.size - 1, -1, -1):
            level = levels[starts[m] + rest % sizes[m]]
            counted = counted and level >= 0
            place += step * level
            step *= seen[m]
            rest //= sizes[m]
        if counted:
            for c in range(counts.shape[0]):
                out[c, place] += counts[c, cell]
