"""One pass over a source that gathers its columns, on several threads; results and refusals do not depend on them."""

from collections.abc import Iterable, Iterator, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise

import numpy as np
import pyarrow as pa

from bnx.delimited import Delimited
from bnx.errors import DataError
from bnx.gathering import Gatherer
from bnx.reading import Source
from bnx.storing import Store

__all__ = ["gather"]

_COLUMNS = 256  # read at a time, at most, so that a block of a wide table stays small
_BYTES, _ROWS = 1 << 24, 1 << 16  # of text that is coded at a time: distinct texts are looked up once for all of it

Failure = tuple[int, int, DataError]  # rows read before, place of the column (-1: the block itself), why


def gather(source: Source, wishes: Mapping[str, bool | None], jobs: int, store: Store) -> dict[str, Gatherer]:
    """Gather columns as ``wishes`` say: as numbers (true), texts (false) or as they look (None).

    Raises:
        DataError: a cell or the file cannot be used; of several faults the one that comes first in the file.
    """
    gatherers = {name: Gatherer(name, wish, store, source.rows, source.row_of) for name, wish in wishes.items()}
    if not gatherers:
        return {}
    if isinstance(source.file_form, Delimited):
        _gather_blocks(source, list(gatherers.values()), jobs)
    else:
        _gather_columns(source, list(gatherers.values()), jobs)
    return gatherers


def _gather_columns(source: Source, gatherers: Sequence[Gatherer], jobs: int) -> None:
    """Read groups of columns side by side: a source by columns is cheap to read in parts."""
    groups = max(min(jobs, len(gatherers)), -(-len(gatherers) // _COLUMNS))
    bounds = np.linspace(0, len(gatherers), groups + 1).astype(int).tolist()

    failures: list[Failure] = []

    def read(bound: tuple[int, int]) -> None:
        first, last = bound
        rows, place = 0, -1
        try:
            for block in source.blocks([gatherer.name for gatherer in gatherers[first:last]]):
                if any(failure[0] < rows for failure in failures):
                    return
                for place, array in enumerate(block.columns, start=first):
                    gatherers[place].add(array)
                rows, place = rows + block.num_rows, -1
        except DataError as error:
            failures.append((rows, place, error))

    with ThreadPoolExecutor(jobs) as pool:
        list(pool.map(read, pairwise(bounds)))
    if failures:
        raise min(failures, key=lambda failure: failure[:2])[2]


def _gather_blocks(source: Source, gatherers: Sequence[Gatherer], jobs: int) -> None:
    """Read blocks of all columns ahead on one thread while others code them; coding takes longer than reading."""
    bounds = np.linspace(0, len(gatherers), jobs + 1).astype(int).tolist()

    def code(block: Sequence[pa.RecordBatch], bound: tuple[int, int]) -> None:
        for place in range(*bound):
            gatherers[place].add(pa.concat_arrays([part.column(place) for part in block]))

    with (
        ThreadPoolExecutor(1) as reader,
        ThreadPoolExecutor(jobs) as coders,
    ):
        blocks = _larger(source.blocks([gatherer.name for gatherer in gatherers]))
        ahead = reader.submit(next, blocks, None)
        while block := ahead.result():
            if jobs > 1:
                ahead = reader.submit(next, blocks, None)
            for _ in coders.map(lambda bound, block=block: code(block, bound), pairwise(bounds)):
                pass
            if jobs == 1:
                ahead = reader.submit(next, blocks, None)


def _larger(parts: Iterable[pa.RecordBatch]) -> Iterator[list[pa.RecordBatch]]:
    """Put neighbouring blocks together."""
    held: list[pa.RecordBatch] = []
    size = rows = 0
    for part in parts:
        held.append(part)
        size, rows = size + part.nbytes, rows + part.num_rows
        if size >= _BYTES or rows >= _ROWS:
            yield held
            held, size, rows = [], 0, 0
    if held:
        yield held
