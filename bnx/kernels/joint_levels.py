"""Joint levels of families whose codes are those that a training set sees."""

import numpy as np

from bnx.kernels.compiling import inlined, part

__all__ = ["cells_of", "number_levels"]


@inlined
def cells_of(sizes: np.ndarray, f: int, depth: int) -> int:
    """Count the cells of a family."""
    cells = 1
    for m in range(depth):
        cells *= sizes[f, m]
    return cells


@part
def number_levels(
    codes: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    f: int,
    depth: int,
    low: int,
    high: int,
    cells: np.ndarray,
) -> None:
    """Number the joint level of some rows in family f, the last member fastest."""
    for row in range(high - low):
        cells[row] = 0
    for m in range(depth):
        size, own = np.uint32(sizes[f, m]), codes[members[f, m], low:high]
        for row in range(high - low):
            cells[row] = cells[row] * size + np.uint32(own[row])
