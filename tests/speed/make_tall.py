"""The tall table of the benchmarks: a folder of Parquet files, 20 attributes of 2 to 8 levels, 3 classes.

``python tests/speed/make_tall.py FOLDER [ROWS]`` writes it with two processes, a million rows a file. Every file has a
seed of its own, so a folder with fewer rows is the beginning of one with more; what is there already stays.
"""

import multiprocessing
import shutil
import sys
from concurrent.futures import ProcessPoolExecutor
from functools import partial
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet
from make_table import CLASS_LEVELS, CLASS_SHARES, BenchTable

__all__ = ["BLOCK", "ROWS", "SizeError", "make_tall", "write_tall"]

ROWS = 100_000_000
BLOCK = 1_000_000  # rows of a file
SIZES = np.resize(np.arange(2, 9), 20)
PULL = 0.3  # how far the class moves the levels of an attribute
FOLLOWED = {3: 2, 8: 1, 13: 12, 17: 4}  # these copy another attribute in a share of the rows
COPIED = 0.3
SEED = 22
BYTES = 12  # that a row takes in a file, at most


class SizeError(Exception):
    """The table does not fit on the disk."""


def make_tall(rows: int, block: int = 0) -> BenchTable:
    """Draw the rows of one file."""
    common = np.random.default_rng(SEED)
    rng = np.random.default_rng([SEED, block])
    target = rng.choice(len(CLASS_SHARES), rows, p=CLASS_SHARES).astype(np.int8)
    codes = np.zeros((len(SIZES), rows), np.int8)
    for i, size in enumerate(SIZES.tolist()):
        pulled = common.dirichlet(np.full(size, 4.0)) * np.exp(PULL * common.standard_normal((len(CLASS_SHARES), size)))
        bounds = np.cumsum(pulled / pulled.sum(axis=1, keepdims=True), axis=1).astype(np.float32)
        drawn = rng.random(rows, np.float32)
        for level in range(size - 1):
            codes[i] += drawn > bounds[:, level][target]
        if i in FOLLOWED:
            copied = rng.random(rows, np.float32) < COPIED
            codes[i, copied] = codes[FOLLOWED[i], copied] % size
    return BenchTable(codes, SIZES, target)


def write_tall(folder: Path, rows: int, block: int = BLOCK) -> int:
    """Write the folder; give its size in bytes.

    Raises:
        SizeError: the disk has no room for it.
    """
    folder.mkdir(parents=True, exist_ok=True)
    parts = [(number, min(block, rows - first)) for number, first in enumerate(range(0, rows, block))]
    missing = [(number, size) for number, size in parts if not _path(folder, number).exists()]
    needed, free = BYTES * sum(size for _, size in missing), shutil.disk_usage(folder).free
    if needed > free:
        raise SizeError(f"{folder} needs {needed / 1e9:.1f} GB and has {free / 1e9:.1f} GB free")
    with ProcessPoolExecutor(2, multiprocessing.get_context("spawn")) as pool:
        list(pool.map(partial(_write, folder), missing))
    return sum(_path(folder, number).stat().st_size for number, _ in parts)


def _path(folder: Path, number: int) -> Path:
    return folder / f"rows{number:04d}.parquet"


def _write(folder: Path, part: tuple[int, int]) -> None:
    """Write one file, with text levels in a dictionary; a file that is there was written whole."""
    number, rows = part
    table = make_tall(rows, number)
    columns = {f"a{i:02d}": _texts(codes, SIZES[i]) for i, codes in enumerate(table.codes)}
    columns["arrival"] = pa.DictionaryArray.from_arrays(pa.array(table.target), pa.array(list(CLASS_LEVELS)))
    unfinished = _path(folder, number).with_suffix(".unfinished")
    pa.parquet.write_table(pa.table(columns), unfinished)
    unfinished.replace(_path(folder, number))


def _texts(codes: np.ndarray, size: int) -> pa.Array:
    return pa.DictionaryArray.from_arrays(pa.array(codes), pa.array([f"level {k}" for k in range(size)]))


if __name__ == "__main__":
    write_tall(Path(sys.argv[1]), int(sys.argv[2]) if len(sys.argv) > 2 else ROWS)
