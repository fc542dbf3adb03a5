"""Parquet files and folders, and Arrow IPC files, in blocks of rows."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa
import pyarrow.ipc
import pyarrow.parquet

from bnx.errors import DataError

__all__ = ["ArrowFile", "ParquetFiles", "open_arrow", "open_parquet"]

ROWS = 1 << 16


@dataclass(frozen=True)
class ParquetFiles:
    """Parquet files with the same columns, read one after the other."""

    paths: tuple[Path, ...]
    names: tuple[str, ...]
    contents: tuple[pa.parquet.FileMetaData, ...]

    @property
    def rows(self) -> int:
        """Count the rows."""
        return sum(content.num_rows for content in self.contents)

    def blocks(self, columns: Sequence[str]) -> Iterator[pa.RecordBatch]:
        """Read batches of up to 65,536 rows; text columns as dictionaries."""
        for path, content in zip(self.paths, self.contents, strict=True):
            texts = _texts(content.schema.to_arrow_schema(), columns)
            with pa.parquet.ParquetFile(path, metadata=content, read_dictionary=texts) as file:
                for batch in file.iter_batches(ROWS, columns=list(columns), use_threads=False):
                    yield batch.select(list(columns))


@dataclass(frozen=True)
class ArrowFile:
    """One Arrow IPC file."""

    path: Path
    names: tuple[str, ...]
    rows: int

    def blocks(self, columns: Sequence[str]) -> Iterator[pa.RecordBatch]:
        """Read batches of up to 65,536 rows, each column of the type that the file gives it."""
        with pa.memory_map(str(self.path)) as file:
            reader = pa.ipc.open_file(file)
            for number in range(reader.num_record_batches):
                batch = reader.get_batch(number).select(list(columns))
                for start in range(0, batch.num_rows, ROWS):
                    yield batch.slice(start, ROWS)


def open_parquet(paths: Sequence[Path], name: str) -> ParquetFiles:
    """Compare the columns of Parquet files and count their rows.

    Raises:
        DataError: the files differ in their columns or hold no row.
        pyarrow.ArrowInvalid, OSError: a file is no Parquet file.
    """
    contents = tuple(pa.parquet.read_metadata(path) for path in paths)
    schemas = [content.schema.to_arrow_schema() for content in contents]
    for path, schema in zip(paths[1:], schemas[1:], strict=True):
        _same_columns(schemas[0], schema, paths[0].name, path.name)
    files = ParquetFiles(tuple(paths), tuple(schemas[0].names), contents)
    if not files.rows:
        raise DataError(f"{name} holds columns but no row; it must hold at least one row")
    return files


def open_arrow(path: Path, name: str) -> ArrowFile:
    """Open an Arrow IPC file and count its rows.

    Raises:
        DataError: the file holds no row.
        pyarrow.ArrowInvalid, OSError: the file is no Arrow IPC file.
    """
    with pa.memory_map(str(path)) as file:
        reader = pa.ipc.open_file(file)
        rows = sum(reader.get_batch(number).num_rows for number in range(reader.num_record_batches))
        if not rows:
            raise DataError(f"{name} holds columns but no row; it must hold at least one row")
        return ArrowFile(path, tuple(reader.schema.names), rows)


def _texts(schema: pa.Schema, columns: Sequence[str]) -> list[str]:
    """Choose the text columns, which are read as dictionaries."""
    kinds = {name: schema.field(name).type for name in columns}
    return [name for name, kind in kinds.items() if pa.types.is_string(kind) or pa.types.is_large_string(kind)]


def _same_columns(first: pa.Schema, other: pa.Schema, first_name: str, other_name: str) -> None:
    """Refuse a second file whose columns have other names or types.

    Raises:
        DataError: naming the file and the column.
    """
    must = "all files of a folder must have the same columns"
    for name in sorted({*first.names} ^ {*other.names}):
        without, within = (other_name, first_name) if name in first.names else (first_name, other_name)
        raise DataError(f"{without} has no column {name!r}, which {within} has; {must}")
    for name in first.names:
        if first.names.count(name) == 1 and _kind(first.field(name).type) != _kind(other.field(name).type):
            raise DataError(
                f"column {name!r} is {other.field(name).type} in {other_name} "
                f"but {first.field(name).type} in {first_name}; {must}"
            )


def _kind(kind: pa.DataType) -> str:
    """Name the sort of a type: numbers of any width are one sort, text in any form another."""
    if pa.types.is_dictionary(kind):
        return _kind(kind.value_type)
    if pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_decimal(kind):
        return "number"
    return "text" if pa.types.is_string(kind) or pa.types.is_large_string(kind) else str(kind)
