"""Delimited text (CSV, TSV): find encoding, delimiter and column names, then read blocks whose cells stay text."""

import codecs
import csv
import io
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa
import pyarrow.csv

from bnx.errors import DataError, SettingError
from bnx.text import quoted

__all__ = ["Delimited", "OddQuotesError", "check_names", "open_bytes", "open_delimited"]

DELIMITERS = (",", ";", "\t", "|")
WORDS = {"tab": "\t", "\\t": "\t", "comma": ",", "semicolon": ";", "pipe": "|"}
HEAD = 1 << 16
BLOCK = 1 << 20
COMPRESSION = {b"\x1f\x8b": "gzip", b"\x28\xb5\x2f\xfd": "zstd"}
MARKS = {codecs.BOM_UTF8: "utf-8", codecs.BOM_UTF16_LE: "utf-16", codecs.BOM_UTF16_BE: "utf-16"}


@dataclass(frozen=True)
class Delimited:
    """A delimited file and how to read it: its header comes after ``blank_lines`` and is ``header_bytes`` long."""

    path: Path
    names: tuple[str, ...]
    delimiter: str
    encoding: str
    blank_lines: int
    header_bytes: int

    def _block_bytes(self) -> int:
        """Choose blocks of a megabyte, larger for wide tables: each block costs some time per column."""
        return max(BLOCK, min(256 * self.header_bytes, 64 * BLOCK), 2 * self.header_bytes)

    def blocks(self, columns: Sequence[str]) -> Iterator[pa.RecordBatch]:
        """Read batches of a megabyte or more; columns are text, an empty cell is empty text.

        Raises:
            pyarrow.ArrowInvalid, OSError, UnicodeDecodeError: the text is malformed; `bnx.malformed` says how.
            OddQuotesError: after the last batch, if a quote may have been left open.
        """
        with open_bytes(self.path) as raw:
            counting = _QuoteCounting(raw)
            reader = pa.csv.open_csv(
                counting,
                pa.csv.ReadOptions(
                    block_size=self._block_bytes(),
                    use_threads=False,
                    encoding="utf8" if self.encoding == "utf-8" else self.encoding,
                    skip_rows=self.blank_lines,
                    column_names=list(self.names),
                    skip_rows_after_names=1,
                ),
                pa.csv.ParseOptions(delimiter=self.delimiter, newlines_in_values=True),
                pa.csv.ConvertOptions(
                    include_columns=list(columns),
                    column_types=dict.fromkeys(columns, pa.string()),
                    strings_can_be_null=False,
                ),
            )
            yield from reader
            if counting.quotes % 2:
                raise OddQuotesError


class OddQuotesError(Exception):
    """The whole file was read, but its quotes are odd in number: perhaps the last cell is one that was never closed."""


class _QuoteCounting(io.RawIOBase):
    """Hands bytes on and counts the quotes among them."""

    def __init__(self, raw: pa.NativeFile) -> None:
        self.raw = raw
        self.quotes = 0

    def readable(self) -> bool:
        """Say that bytes can be read."""
        return True

    def read(self, size: int = -1) -> bytes:
        """Read up to ``size`` bytes."""
        chunk: bytes = self.raw.read(size if size >= 0 else None)
        self.quotes += chunk.count(b'"')
        return chunk


def open_bytes(path: Path) -> pa.NativeFile:
    """Open a file for reading, decompressed if its first bytes are those of gzip or Zstandard."""
    with path.open("rb") as file:
        start = file.read(4)
    found = [name for magic, name in COMPRESSION.items() if start.startswith(magic)]
    return pa.input_stream(str(path), compression=found[0] if found else None)


def open_delimited(path: Path, name: str, delimiter: str | None) -> Delimited:
    """Look at the head of a file and decide how to read it.

    Raises:
        DataError: the file is empty, has no row below its header, or its header cannot be used.
        SettingError: the delimiter is not a single character.
        UnicodeDecodeError: the head is not in the encoding that its first bytes announce.
    """
    given = _delimiter(delimiter)
    head, whole = _head(path)
    encoding = _encoding(head)
    text = codecs.getincrementaldecoder(encoding)().decode(head, final=whole).removeprefix("\ufeff")
    if not text.strip():
        raise DataError(f"{name} is empty; it must hold a header and at least one row")
    chosen = given or _likeliest(text, whole)
    records = _records(text, chosen, whole)
    if not records:
        raise DataError(f"the header of {name} cannot be read; a quote in it is probably never closed")
    if whole and len(records) < 2:
        raise DataError(f"{name} holds a header but no row below it; it must hold at least one row")
    names = tuple(cell.strip() for cell in records[0])
    check_names(names, name)
    lines = text.splitlines()
    blank_lines = next(number for number, line in enumerate(lines) if line)
    return Delimited(path, names, chosen, encoding, blank_lines, sum(len(cell.encode()) + 3 for cell in records[0]))


def check_names(names: Sequence[str], source: str) -> None:
    """Refuse column names that are empty or given twice.

    Raises:
        DataError: naming the column.
    """
    if "" in names:
        raise DataError(f"column {names.index('') + 1} of {source} has no name; give every column a name in the header")
    first: dict[str, int] = {}
    for position, column in enumerate(names, start=1):
        if first.setdefault(column, position) < position:
            raise DataError(
                f"{source} has two columns named {column!r} (columns {first[column]} and {position}); "
                "give every column a name of its own"
            )


def _delimiter(text: str | None) -> str | None:
    """Turn the setting into a character: itself, or a word such as ``tab``."""
    if text is None:
        return None
    found = WORDS.get(text, text)
    if len(found) != 1 or found in '"\r\n':
        raise SettingError(f"delimiter is {text!r}; it must be one character, or {quoted(list(WORDS))}")
    return found


def _head(path: Path) -> tuple[bytes, bool]:
    """Read the first 64 KiB, more if they do not hold the whole header; and whether that is the whole file."""
    head = b""
    with open_bytes(path) as raw:
        while len(head) < HEAD or head.count(b"\n") + head.count(b"\r") < 2:
            chunk = raw.read(HEAD)
            if not chunk:
                return head, True
            head += chunk
    return head, False


def _encoding(head: bytes) -> str:
    """Take the encoding from the byte order mark; without one, every second byte zero means UTF-16."""
    for mark, encoding in MARKS.items():
        if head.startswith(mark):
            return encoding
    half = len(head) // 2
    for encoding, zeros in (("utf-16-le", head[1::2]), ("utf-16-be", head[0::2])):
        if half and zeros.count(0) > 0.7 * half:
            return encoding
    return "utf-8"


def _records(text: str, delimiter: str, whole: bool) -> list[list[str]]:
    """Split the head into records, without a last one that may be cut short; none if the delimiter cannot be right."""
    try:
        records = [record for record in csv.reader(io.StringIO(text, newline=""), delimiter=delimiter) if record]
    except csv.Error:  # a cell beyond the limit of the csv module: a delimiter that hardly splits, or an open quote
        return []
    return records if whole or len(records) < 2 else records[:-1]


def _likeliest(text: str, whole: bool) -> str:
    """Choose the delimiter that splits the most records into as many cells as the header, then into the most cells."""

    def merit(delimiter: str) -> tuple[bool, float, int]:
        widths = [len(record) for record in _records(text, delimiter, whole)] or [0]
        return widths[0] > 1, sum(width == widths[0] for width in widths) / len(widths), widths[0]

    return max(DELIMITERS, key=merit)
