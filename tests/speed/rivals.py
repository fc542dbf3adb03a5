"""Other ways to count every pair of attributes given the class, and to test it."""

from collections.abc import Callable, Iterable
from functools import partial

import numpy as np
import pandas as pd
from make_table import BenchTable
from scipy import sparse
from scipy.stats import chi2_contingency

from bnx.counts import PairLayout

__all__ = [
    "bincounts",
    "chi_squares",
    "crosstab",
    "frame_of",
    "groupby",
    "one_hot",
    "one_hot_tables",
    "products_of",
    "sparse_one_hot",
    "spread_cells",
]

Counted = list[tuple[int, np.ndarray]]  # (pair, counts (C, cells))


def bincounts(table: BenchTable) -> Counted:
    """Count every pair given the class by one ``np.bincount``.

    The part of the cell number that class and first attribute make is computed once per attribute, and no array is
    allocated per pair but the counts.
    """
    classes, sizes = table.target.astype(np.int64), table.sizes.tolist()
    cells = np.empty(len(classes), np.int64)
    counts: Counted = []
    for i, size in enumerate(sizes):
        contexts = classes * size + table.codes[i]
        for j in range(i + 1, len(sizes)):
            np.multiply(contexts, sizes[j], out=cells)
            np.add(cells, table.codes[j], out=cells)
            counts.append((len(counts), np.bincount(cells, minlength=table.classes * size * sizes[j])))
    return counts


def frame_of(table: BenchTable, categorical: bool) -> pd.DataFrame:
    """Put the codes into columns a0, a1, ... and the class into ``arrival``: small integers, or categories of them."""
    columns = {f"a{i}": pd.Series(codes) for i, codes in enumerate(table.codes)} | {"arrival": pd.Series(table.target)}
    if not categorical:
        return pd.DataFrame(columns)
    sizes = [*table.sizes.tolist(), table.classes]
    kinds = {name: pd.CategoricalDtype(list(range(size))) for name, size in zip(columns, sizes, strict=True)}
    return pd.DataFrame({name: series.astype(kinds[name]) for name, series in columns.items()})


def groupby(frame: pd.DataFrame, names: Iterable[tuple[str, str]]) -> "list[pd.Series[int]]":
    """Count some pairs given the class by ``groupby(...).size()``."""
    return [frame.groupby(["arrival", left, right], observed=False).size() for left, right in names]


def crosstab(frame: pd.DataFrame, names: Iterable[tuple[str, str]]) -> list[pd.DataFrame]:
    """Count some pairs by ``pd.crosstab``, class and left attribute down, right attribute across."""
    return [pd.crosstab([frame["arrival"], frame[left]], frame[right]) for left, right in names]


def spread_cells(counted: "pd.Series[int] | pd.DataFrame", shape: tuple[int, ...]) -> np.ndarray:
    """Put counts that are indexed by levels into a full table."""
    series = counted.stack() if isinstance(counted, pd.DataFrame) else counted
    cells = np.zeros(shape, np.int64)
    cells[tuple(series.index.get_level_values(k).to_numpy(np.int64) for k in range(3))] = series.to_numpy()
    return cells


def one_hot(table: BenchTable) -> list[np.ndarray]:
    """Spread the rows of each class over one column of ones and zeros per level, float32 (rows of the class, D)."""
    starts = np.concatenate([[0], np.cumsum(table.sizes)])
    planes = []
    for c in range(table.classes):
        chosen = np.flatnonzero(table.target == c)
        plane = np.zeros((len(chosen), starts[-1]), np.float32)
        rows = np.arange(len(chosen))
        for i, codes in enumerate(table.codes):
            plane[rows, starts[i] + codes[chosen]] = 1.0
        planes.append(plane)
    return planes


def one_hot_tables(table: BenchTable, layout: PairLayout, products: list[np.ndarray]) -> Counted:
    """Cut the products (D, D) of the classes into the tables of all pairs."""
    starts = np.concatenate([[0], np.cumsum(table.sizes)])
    return [
        (p, np.array([product[starts[i] : starts[i + 1], starts[j] : starts[j + 1]].ravel() for product in products]))
        for p, (i, j) in enumerate(zip(layout.left.tolist(), layout.right.tolist(), strict=True))
    ]


def products_of(planes: list[np.ndarray]) -> list[np.ndarray]:
    """Multiply each class's plane by itself; exact below 2^24 rows."""
    return [plane.T @ plane for plane in planes]


def sparse_one_hot(table: BenchTable) -> list[Callable[[], np.ndarray]]:
    """Do the same with sparse matrices of 32-bit integers: one product to run per class."""
    starts = np.concatenate([[0], np.cumsum(table.sizes)[:-1]])
    tasks: list[Callable[[], np.ndarray]] = []
    for c in range(table.classes):
        chosen = np.flatnonzero(table.target == c)
        columns = (table.codes[:, chosen].T + starts).astype(np.int32)
        pointers = np.arange(0, columns.size + 1, len(starts), dtype=np.int32)
        shape = (len(chosen), int(table.sizes.sum()))
        plane = sparse.csr_array((np.ones(columns.size, np.int32), columns.ravel(), pointers), shape=shape)
        tasks.append(partial(_sparse_product, plane))
    return tasks


def _sparse_product(plane: sparse.csr_array) -> np.ndarray:
    return np.asarray((plane.T @ plane).toarray())


def chi_squares(counts: np.ndarray, layout: PairLayout) -> np.ndarray:
    """Test every pair in every class by ``chi2_contingency``; sums over classes, (P, 3): X2, df, records.

    The function refuses empty rows and columns, so a table that has any goes without them.
    """
    found = np.zeros((len(layout.left), 3))
    for p in range(len(found)):
        for stratum in counts[:, layout.offsets[p] : layout.offsets[p + 1]]:
            square = stratum.reshape(layout.heights[p], layout.widths[p])
            used = square[square.any(axis=1)][:, square.any(axis=0)]
            found[p, 2] += used.sum()
            if min(used.shape, default=0) > 1:
                tested = chi2_contingency(used, correction=False)
                found[p, :2] += tested.statistic, tested.dof
    return found
