"""Our side of the pair tables: an engine over a table that lies in memory, and proofs that its counts are right."""

from collections.abc import Iterable

import numpy as np
from make_table import CLASS_LEVELS, BenchTable

from bnx.counts import PairLayout
from bnx.domains import Domain, Schema
from bnx.engines import LocalEngine, start_local
from bnx.kernels.contingency import table_statistics
from bnx.tables import CodedTable, Lines

__all__ = ["PairTables", "engine_of", "layout_of", "plane_words", "statistics_of", "tables_of"]

PairTables = np.ndarray  # counts (C, cells) of all pairs, laid out by layout_of


def engine_of(table: BenchTable, jobs: int, blocks: int = 1) -> LocalEngine:
    """Sort the coded rows by block and class, ready to be counted."""
    domains = tuple(Domain(f"a{i}", tuple(map(str, range(size)))) for i, size in enumerate(table.sizes.tolist()))
    rows = np.arange(len(table.target))
    coded = CodedTable(
        Schema(domains, Domain("arrival", CLASS_LEVELS[: table.classes])),
        table.codes.view(np.uint8),
        table.target.view(np.uint8),
        Lines.all(len(rows)),
    )
    return start_local(coded, (rows % blocks).astype(np.uint16), blocks, jobs, lambda *_: None)


def layout_of(table: BenchTable) -> PairLayout:
    """Lay out all pairs of attributes."""
    left, right = (index.astype(np.int64) for index in np.triu_indices(len(table.sizes), 1))
    return PairLayout.of(table.sizes.astype(np.int64), left, right)


def tables_of(engine: LocalEngine, layout: PairLayout) -> PairTables:
    """Count all pairs by class, int32 (C, cells)."""
    return np.asarray(engine.pair_counts(layout).counts.sum(axis=0, dtype=np.int32))


def statistics_of(counts: PairTables, layout: PairLayout) -> np.ndarray:
    """Compute all that bnx knows of every pair given the class, (P, COLUMNS)."""
    return np.asarray(table_statistics(counts, layout.offsets[:-1], layout.heights, layout.widths))


def same_tables(ours: PairTables, layout: PairLayout, theirs: Iterable[tuple[int, np.ndarray]]) -> bool:
    """Compare with (pair, counts (C, cells of the pair)) of a rival, cell by cell; none at all is not the same."""
    pairs = [
        np.array_equal(ours[:, layout.offsets[p] : layout.offsets[p + 1]], counts.reshape(len(ours), -1))
        for p, counts in theirs
    ]
    return bool(pairs) and all(pairs)


def plane_words(sizes: np.ndarray, rows: int) -> float:
    """Words of 64 rows that must be ANDed and counted: planes of all levels but the last, pair by pair."""
    planes = sizes.astype(np.float64) - 1
    return float((planes.sum() ** 2 - (planes**2).sum()) / 2 * rows / 64)
