"""The table of the benchmarks: many rows, 50 attributes of 2 to 12 levels, 3 classes, dependences planted.

``python tests/speed/make_table.py TABLE [ROWS]`` writes it with text levels: a CSV file where TABLE ends in ``.csv``,
else Parquet.
"""

import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet

ROWS = 1_000_000
ATTRIBUTES = 50
CLASS_SHARES = (0.6, 0.3, 0.1)
CLASS_LEVELS = ("sound", "downgraded", "rejected")
PULL = 0.3  # how far the class moves the levels of an attribute
ONE_PARENT = range(1, ATTRIBUTES, 4)  # these copy their neighbour in a share of the rows
TWO_PARENTS = range(3, ATTRIBUTES, 8)  # these follow the sum of two neighbours
COPIED = 0.3


@dataclass(frozen=True)
class BenchTable:
    """Codes (n, N) int8 of attributes with ``sizes`` (n,) levels, and the class (N,) int8 with ``classes`` levels."""

    codes: np.ndarray
    sizes: np.ndarray
    target: np.ndarray
    classes: int = len(CLASS_LEVELS)


def make_table(rows: int = ROWS, seed: int = 20) -> BenchTable:
    """Draw the table: levels given the class, then dependences on neighbours that are drawn already."""
    rng = np.random.default_rng(seed)
    sizes = rng.permutation(np.resize(np.arange(2, 13), ATTRIBUTES))
    target = rng.choice(len(CLASS_SHARES), rows, p=CLASS_SHARES).astype(np.int8)
    codes = np.empty((ATTRIBUTES, rows), np.int8)
    for i, size in enumerate(sizes):
        codes[i] = _levels(rng, int(size), target)
        if i in ONE_PARENT:
            source = codes[i - 1]
        elif i in TWO_PARENTS:
            source = codes[i - 1] + codes[i - 2]
        else:
            continue
        copied = rng.random(rows, np.float32) < COPIED
        codes[i, copied] = source[copied] % size
    return BenchTable(codes, sizes, target)


def _levels(rng: np.random.Generator, size: int, target: np.ndarray) -> np.ndarray:
    """Draw a level for every row, by shares that differ from class to class."""
    common = rng.dirichlet(np.full(size, 4.0))
    pulled = common * np.exp(PULL * rng.standard_normal((len(CLASS_SHARES), size)))
    bounds = np.cumsum(pulled / pulled.sum(axis=1, keepdims=True), axis=1).astype(np.float32)
    drawn = rng.random(len(target), np.float32)
    codes = np.zeros(len(target), np.int8)
    for level in range(size - 1):
        codes += drawn > bounds[:, level][target]
    return codes


def write_table(table: BenchTable, path: Path) -> None:
    """Write a table with text levels, the class last; a file that is there was written whole."""
    columns = {
        f"a{i:02d}": _texts(codes, [f"level {k}" for k in range(size)])
        for i, (codes, size) in enumerate(zip(table.codes, table.sizes.tolist(), strict=True))
    }
    columns["arrival"] = _texts(table.target, list(CLASS_LEVELS))
    unfinished = path.with_suffix(".unfinished")
    if path.suffix == ".csv":
        pa.csv.write_csv(pa.table(columns), unfinished, pa.csv.WriteOptions(quoting_style="none"))
    else:
        pa.parquet.write_table(pa.table(columns), unfinished)
    unfinished.replace(path)


def _texts(codes: np.ndarray, levels: list[str]) -> pa.Array:
    return pa.DictionaryArray.from_arrays(pa.array(codes), pa.array(levels)).dictionary_decode()


if __name__ == "__main__":
    write_table(make_table(int(sys.argv[2]) if len(sys.argv) > 2 else ROWS), Path(sys.argv[1]))
