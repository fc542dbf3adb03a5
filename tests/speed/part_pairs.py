"""Pair tables and their tests: ours against each rival, in one run on the same rows."""

from collections.abc import Callable, Sequence
from functools import partial

import numpy as np
import pandas as pd
from counting import engine_of, layout_of, plane_words, same_tables, statistics_of, tables_of
from make_table import ROWS, make_table
from peak import clock_rate, popcount_peak, read_rate
from rivals import (
    bincounts,
    chi_squares,
    crosstab,
    frame_of,
    groupby,
    one_hot,
    one_hot_tables,
    products_of,
    sparse_one_hot,
    spread_cells,
)
from setting import Setting
from timing import Figures, processors, side_by_side, spread

from bnx.counts import PairLayout
from bnx.kernels.contingency import DF, X2
from bnx.kernels.contingency import ROWS as RECORDS

__all__ = ["STEPS"]

SAMPLED = 49  # pairs that pandas counts, spread evenly; its times are scaled up to all pairs
REPEATED = 5  # runs of the kernel beside each burst of the peak, of which the fastest counts
ONE, TWO = "bnx, one thread", "bnx, two threads"


class TablesDifferError(Exception):
    """Two ways to count, or to test, do not agree: nothing may be timed."""


def counting(setting: Setting) -> Figures:
    """Count all pairs by np.bincount, pandas, and ours."""
    table = make_table(setting.rows(ROWS))
    layout = layout_of(table)
    one, two, blocks = engine_of(table, 1), engine_of(table, 2), engine_of(table, 1, 40)
    ours = tables_of(two, layout)
    chosen = np.unique(np.linspace(0, len(layout.left) - 1, SAMPLED).round().astype(np.int64))
    names = [(f"a{layout.left[p]}", f"a{layout.right[p]}") for p in chosen]
    sampled: dict[str, Callable[[], Sequence[pd.Series[int] | pd.DataFrame]]] = {
        "pandas groupby(...).size(), small integers": partial(groupby, frame_of(table, False), names),
        "pandas groupby(...).size(), categories": partial(groupby, frame_of(table, True), names),
        "pandas crosstab, small integers": partial(crosstab, frame_of(table, False), names),
    }
    _same(tables_of(one, layout), layout, bincounts(table))
    _same(tables_of(blocks, layout), layout, bincounts(table))
    for task in sampled.values():
        shapes = [(table.classes, layout.heights[p], layout.widths[p]) for p in chosen]
        cells = [spread_cells(counted, shape) for counted, shape in zip(task(), shapes, strict=True)]
        _same(ours, layout, list(zip(chosen.tolist(), cells, strict=True)))
    times = side_by_side(
        {
            "one np.bincount per pair": lambda: bincounts(table),
            ONE: lambda: one.pair_counts(layout),
            TWO: lambda: two.pair_counts(layout),
            f"{ONE}, tables of 40 blocks apart": lambda: blocks.pair_counts(layout),
            f"{ONE}, sorting the rows included": lambda: engine_of(table, 1).pair_counts(layout),
            **sampled,
        },
        setting.runs,
    )
    for name in sampled:
        times[name] = _scaled(times[name], len(layout.left) / len(chosen))
    return {"rows": len(table.target), "pairs": len(layout.left), "sampled": len(chosen), "times": times}


def matrix(setting: Setting) -> Figures:
    """Multiply one-hot matrices, class by class."""
    table = make_table(setting.rows(ROWS))
    layout = layout_of(table)
    two = engine_of(table, 2)
    ours, planes, products = tables_of(two, layout), one_hot(table), sparse_one_hot(table)
    _same(ours, layout, one_hot_tables(table, layout, products_of(planes)))
    _same(ours, layout, one_hot_tables(table, layout, [product() for product in products]))
    times = side_by_side(
        {
            TWO: lambda: two.pair_counts(layout),
            "one-hot product, float32, all BLAS threads": lambda: products_of(planes),
            "the same, making the one-hot matrix included": lambda: products_of(one_hot(table)),
        },
        setting.runs,
    )
    times |= side_by_side({"one-hot product, scipy.sparse": lambda: [product() for product in products]}, 1)
    return {
        "times": times,
        "bytes": sum(plane.nbytes for plane in planes),
        "our_bytes": table.codes.nbytes,
    }


def testing(setting: Setting) -> Figures:
    """Test all pairs in all classes, from counts that are there."""
    table = make_table(setting.rows(ROWS))
    layout = layout_of(table)
    two = engine_of(table, 2)
    counts = tables_of(two, layout)
    if not np.allclose(statistics_of(counts, layout)[:, [X2, DF, RECORDS]], chi_squares(counts, layout), rtol=1e-9):
        raise TablesDifferError("the statistics differ from those of chi2_contingency; nothing was timed")
    times = side_by_side(
        {
            "chi2_contingency per pair and class, from counts": lambda: chi_squares(counts, layout),
            "bnx, one thread, from counts": lambda: statistics_of(counts, layout),
            "bnx, two threads, counting included": lambda: statistics_of(tables_of(two, layout), layout),
        },
        setting.runs,
    )
    return {"times": times}


def limit(setting: Setting) -> Figures:
    """Measure the peak of population counts beside the kernel, the clock, and reading from memory."""
    table = make_table(setting.rows(ROWS))
    layout = layout_of(table)
    engines = {jobs: engine_of(table, jobs) for jobs in (1, min(2, processors()))}
    for engine in engines.values():
        engine.pair_counts(layout)
    peaks: dict[int, list[dict[str, float]]] = {jobs: [] for jobs in engines}
    ours: dict[int, list[Figures]] = {jobs: [] for jobs in engines}
    for _ in range(setting.runs):
        for jobs, engine in engines.items():
            peaks[jobs].append(popcount_peak(jobs))
            ours[jobs].append(side_by_side({"": partial(engine.pair_counts, layout)}, REPEATED)[""])
    threads = {
        str(jobs): {
            "peak": {loop: max(peak[loop] for peak in peaks[jobs]) for loop in peaks[jobs][0]},
            "ours": spread([one["least"] for one in ours[jobs]], [one["processor"] for one in ours[jobs]]),
        }
        for jobs in engines
    }
    return {
        "rows": len(table.target),
        "attributes": len(table.sizes),
        "planes": int((table.sizes - 1).sum()),
        "plane_words": plane_words(table.sizes, len(table.target)),
        "code_bytes": table.codes.nbytes,
        "threads": threads,
        "cycles_per_second": clock_rate(),
        "bytes_per_second": read_rate(),
    }


def _same(ours: np.ndarray, layout: PairLayout, theirs: list[tuple[int, np.ndarray]]) -> None:
    if not same_tables(ours, layout, theirs):
        raise TablesDifferError("the pair tables of two ways to count differ; nothing was timed")


def _scaled(times: Figures, factor: float) -> Figures:
    return {name: value if name == "runs" else value * factor for name, value in times.items()}


STEPS = {"counting": counting, "matrix": matrix, "testing": testing, "limit": limit}
