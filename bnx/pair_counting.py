"""Count the pairs of a tile by block and class, on several threads."""

from collections.abc import Callable, Iterable
from itertools import pairwise
from typing import Any

import numpy as np

from bnx.counts import PairCounts, PairLayout
from bnx.kernels.counting import count_joint
from bnx.kernels.planes import count_planes
from bnx.kernels.reducing import complete_tables
from bnx.tiles import Tile, tiles_of
from bnx.views import Refinement

__all__ = ["Run", "count_layout", "count_pair", "count_tile", "rows_of_groups", "shares"]

Run = Callable[[Callable[[Any], Any], Iterable[Any]], list[Any]]  # a function and its items -> results, on threads

Rows = tuple[np.ndarray, np.ndarray]  # first row of each run, one past its last

_CELLS = 32_000_000  # counts that are held at a time: 128 MB


def rows_of_groups(starts: np.ndarray, groups: int) -> list[Rows]:
    """List the rows of each group; segment s of ``starts`` (S + 1,) belongs to group s % groups."""
    return [(starts[:-1][g::groups], starts[1:][g::groups]) for g in range(groups)]


def count_tile(
    codes: np.ndarray, recode: np.ndarray, plain: np.ndarray, tile: Tile, groups: list[Rows], jobs: int, run: Run
) -> np.ndarray:
    """Count a tile in every group of rows, int32 (groups, cells); see ``count_planes``.

    Where groups are few, they are cut so that all threads have work.
    """
    parts = (
        _parts(groups, jobs) if jobs > 1 and len(groups) < 8 * jobs else [(g, rows) for g, rows in enumerate(groups)]
    )
    found = np.zeros((len(parts), tile.cells), np.int32)

    def count(part: int) -> None:
        lows, highs = parts[part][1]
        sides = (tile.members, tile.sizes, tile.columns, tile.width, tile.right, tile.needed)
        count_planes(codes, recode, plain, *sides, lows, highs, found[part])

    run(count, range(len(parts)))
    if len(parts) == len(groups):
        return found
    first = np.searchsorted([g for g, _ in parts], np.arange(len(groups)))
    return np.asarray(np.add.reduceat(found, first, axis=0, dtype=np.int32))


def count_pair(
    codes: np.ndarray, recode: np.ndarray, fine: Refinement, i: int, j: int, groups: list[Rows]
) -> np.ndarray:
    """Count one pair of fine levels in every group of rows, int32 (groups, cells)."""
    out = np.zeros((len(groups), int(fine.sizes[i] * fine.sizes[j])), np.int32)
    for g, (lows, highs) in enumerate(groups):
        count_joint(codes, recode, fine.plain, i, j, int(fine.sizes[j]), lows, highs, out[g])
    return out


def _parts(groups: list[Rows], jobs: int) -> list[tuple[int, Rows]]:
    """Cut groups into parts of about an eighth of a thread's share of all rows; a group has at least one part."""
    rows = sum(int((highs - lows).sum()) for lows, highs in groups)
    most = max(1, rows // (8 * jobs))
    parts: list[tuple[int, Rows]] = []
    for g, (lows, highs) in enumerate(groups):
        runs: list[tuple[int, int]] = []
        filled = 0
        for low, high in zip(lows.tolist(), highs.tolist(), strict=True):
            for start in range(low, max(high, low + 1), most):
                runs.append((start, min(start + most, high)))
                filled += runs[-1][1] - start
                if filled >= most:
                    parts.append((g, _rows(runs)))
                    runs, filled = [], 0
        if runs:
            parts.append((g, _rows(runs)))
    return parts


def _rows(runs: list[tuple[int, int]]) -> Rows:
    ends = np.array(runs, dtype=np.int64)
    return ends[:, 0].copy(), ends[:, 1].copy()


def shares(number: int, parts: int) -> list[tuple[int, int]]:
    """Cut a run of numbers into even shares, as (first, last) each."""
    bounds = np.linspace(0, number, min(parts, max(number, 1)) + 1).astype(int).tolist()
    return list(pairwise(bounds))


def count_layout(
    codes: np.ndarray,
    sizes: np.ndarray,
    starts: np.ndarray,
    margins: np.ndarray,
    layout: PairLayout,
    jobs: int,
    run: Run,
) -> PairCounts:
    """Count pairs of attributes, as stored, and write out their whole tables.

    starts (S + 1,): segments; margins (blocks, C, levels of all attributes): rows of each level.
    """
    blocks, classes = margins.shape[:2]
    flat = np.ascontiguousarray(margins.reshape(blocks * classes, -1))
    out = np.zeros((len(flat), int(layout.offsets[-1])), np.int32)
    wanted = np.zeros((len(sizes), len(sizes)), np.bool_)
    wanted[layout.left, layout.right] = True
    number = np.zeros(wanted.shape, np.int64)
    number[layout.left, layout.right] = np.arange(len(layout.left))
    level_starts = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    recode, plain = np.zeros((len(sizes), 1), codes.dtype), np.ones(len(sizes), np.bool_)
    groups = rows_of_groups(starts, len(flat))
    for tile in tiles_of(sizes, wanted, _CELLS // len(flat)):
        found = count_tile(codes, recode, plain, tile, groups, jobs, run)
        offsets = layout.offsets[number[tile.left_ends, tile.right_ends]]
        pairs = (found, tile.stride, tile.places, tile.left_ends, tile.right_ends, level_starts, flat, offsets)
        run(lambda share, pairs=pairs: complete_tables(*pairs, *share, out), shares(len(flat), 4 * jobs))
    return PairCounts(layout, out.reshape(blocks, classes, -1))
