"""A table in which a row stands for as many records as one of its columns counts, read as that many rows."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import pyarrow as pa

from bnx.blocks import array_numbers
from bnx.columnar import ArrowFile, ParquetFiles
from bnx.delimited import Delimited

__all__ = ["Repeated"]

ROWS = 1 << 16


@dataclass(frozen=True)
class Repeated:
    """Another form of table, each row as often as ``column`` counts; all counts are known to be whole and sum to rows.

    The column itself is no column any more.
    """

    form: Delimited | ParquetFiles | ArrowFile
    column: str
    rows: int

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the columns but that of counts."""
        return tuple(name for name in self.form.names if name != self.column)

    def blocks(self, columns: Sequence[str]) -> Iterator[pa.RecordBatch]:
        """Read batches of up to 65,536 records."""
        for batch in self.form.blocks([*columns, self.column]):
            ends = np.cumsum(self._counts(batch.column(len(columns))))
            plain = batch.select(list(columns))
            records = int(ends[-1]) if len(ends) else 0
            for first in range(0, records, ROWS):
                rows = np.searchsorted(ends, np.arange(first, min(first + ROWS, records)), side="right")
                yield plain.take(pa.array(rows))

    def row_of(self, record: int) -> int:
        """Find the row of the form, from 0 on, that a record from 0 on repeats."""
        read = 0
        for batch in self.form.blocks([self.column]):
            ends = np.cumsum(self._counts(batch.column(0)))
            if record < ends[-1]:
                return read + int(np.searchsorted(ends, record, side="right"))
            record, read = record - int(ends[-1]), read + len(ends)
        return read

    def _counts(self, array: pa.Array) -> np.ndarray:
        """Turn a block of the column of counts into whole numbers, int64."""
        return array_numbers(array, self.column, padded=True)[0].astype(np.int64)
