"""Why a delimited file cannot be read, in one sentence with the line: looked for only after reading has failed."""

import codecs
import csv
import io
from collections.abc import Iterable
from itertools import chain

from bnx.errors import DataError
from bnx.text import count_of

__all__ = ["not_text", "ragged"]

CHUNK = 1 << 20
END = "\x00end of file\x00"  # a last record of our own: an open quote swallows it


def not_text(raw: io.RawIOBase, encoding: str, name: str) -> DataError | None:
    """Find the first bytes that are not in ``encoding``; None if all are."""
    decoder = codecs.getincrementaldecoder(encoding)()
    lines, end = 1, 0
    while True:
        chunk = raw.read(CHUNK) or b""
        end += len(chunk)
        try:
            lines += decoder.decode(chunk, final=not chunk).count("\n")
        except UnicodeDecodeError as error:
            good = error.object[: error.start].decode(encoding, errors="replace")
            position = end - len(error.object) + error.start + 1
            return DataError(
                f"{name}, line {lines + good.count(chr(10))}: byte {position:,} of the file "
                f"(0x{error.object[error.start]:02x}) is not {encoding.upper()}; save the file as UTF-8"
            )
        if not chunk:
            return None


def ragged(lines: Iterable[str], delimiter: str, width: int, name: str) -> DataError | None:
    """Find the first record that is not as wide as the header, or an open quote; None if there is neither."""
    reader = csv.reader(chain(lines, [END]), delimiter=delimiter)
    while True:
        start = reader.line_num + 1
        try:
            record = next(reader)
        except csv.Error:
            most = f"{csv.field_size_limit():,} characters"
            return DataError(f"{name}, line {start}: a cell has more than {most}; a quote is probably never closed")
        if record == [END] and reader.line_num == start:
            return None
        if record and record[-1].endswith(END):
            return DataError(f"{name}, line {start}: a quote is opened in this record and never closed")
        if record and len(record) != width:
            return DataError(
                f"{name}, line {start}: {count_of(len(record), 'cell')} where the header has {width:,}; "
                "every row must have as many cells as the header"
            )
