"""Where the joint counts of many pairs lie: the levels of some attributes against those of others, side by side."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from bnx.kernels.planes import ACROSS, DOWN

__all__ = ["Tile", "tiles_of"]

_WIDEST = 384  # planes on one side of a tile: the counts of one group then stay in the second-level cache


@dataclass(frozen=True)
class Tile:
    """Pairs counted together.

    ``members`` (m,): attributes; ``sizes``, ``columns`` (m,): their levels and first planes, of ``width``; ``right``:
    the first plane of the right side; ``needed``: see ``count_planes``; ``left_ends``, ``right_ends`` (P,): the two
    attributes of each pair; ``places`` (P,): its first cell, the next row of cells ``stride`` further on.
    """

    members: np.ndarray
    sizes: np.ndarray
    columns: np.ndarray
    width: int
    right: int
    needed: np.ndarray
    left_ends: np.ndarray
    right_ends: np.ndarray
    places: np.ndarray

    @property
    def stride(self) -> int:
        """Cells of one plane on the left."""
        return int(self.needed.shape[1]) * ACROSS

    @property
    def cells(self) -> int:
        """Cells of one group of rows."""
        return int(self.needed.size) * DOWN * ACROSS


def tiles_of(sizes: np.ndarray, wanted: np.ndarray, cells: int) -> Iterator[Tile]:
    """Cut the wanted pairs into tiles of at most about ``cells`` cells.

    sizes (n,): levels; wanted (n, n) bool, above the diagonal.
    """
    planes = sizes - 1
    side = max(ACROSS, min(_WIDEST, int(np.sqrt(cells))))
    used = np.flatnonzero(wanted.any(axis=0) | wanted.any(axis=1))
    blocks = _blocks(used, planes, side)
    for u, left in enumerate(blocks):
        for right in blocks[u:]:
            pairs = wanted[np.ix_(left, right)]
            if pairs.any():
                yield _tile(left, right, pairs, sizes)


def _blocks(used: np.ndarray, planes: np.ndarray, side: int) -> list[np.ndarray]:
    """Cut attributes into runs of at most ``side`` planes."""
    blocks: list[list[int]] = []
    filled = 0
    for attribute in used.tolist():
        if not blocks or filled + planes[attribute] > side:
            blocks.append([])
            filled = 0
        blocks[-1].append(attribute)
        filled += int(planes[attribute])
    return [np.array(block, dtype=np.int64) for block in blocks]


def _tile(left: np.ndarray, right: np.ndarray, pairs: np.ndarray, sizes: np.ndarray) -> Tile:
    """Lay out the pairs of two runs of attributes, which may be the same run."""
    same = bool(left[0] == right[0])
    starts, down = _starts(sizes[left] - 1, DOWN)
    right_starts, across = _starts(sizes[right] - 1, ACROSS)
    offset = 0 if same else -(-down // ACROSS) * ACROSS
    rows, columns = np.nonzero(pairs)
    needed = np.zeros((max(down, DOWN) // DOWN, max(across, ACROSS) // ACROSS), np.bool_)
    for row, column in zip(rows.tolist(), columns.tolist(), strict=True):
        height, width = sizes[left[row]] - 1, sizes[right[column]] - 1
        if height and width:
            a, b = starts[row], right_starts[column]
            needed[a // DOWN : (a + height - 1) // DOWN + 1, b // ACROSS : (b + width - 1) // ACROSS + 1] = True
    wide = max(offset + needed.shape[1] * ACROSS, needed.shape[0] * DOWN)
    wide = -(-wide // ACROSS)
    members = left if same else np.concatenate([left, right])
    return Tile(
        members=members,
        sizes=sizes[members],
        columns=starts if same else np.concatenate([starts, right_starts + offset]),
        width=(wide | 1) * ACROSS,  # an odd number of cache lines, so that words do not fall on the same places
        right=offset,
        needed=needed,
        left_ends=left[rows],
        right_ends=right[columns],
        places=starts[rows] * needed.shape[1] * ACROSS + right_starts[columns],
    )


def _starts(planes: np.ndarray, unit: int) -> tuple[np.ndarray, int]:
    """Place attributes one after the other; give the first plane of each, and all planes in whole units."""
    ends = np.cumsum(planes)
    return (ends - planes).astype(np.int64), int(-(-ends[-1] // unit) * unit)
