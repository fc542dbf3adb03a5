"""Tables from files: CSV and TSV, Parquet, Arrow, standard input; always in blocks of rows."""

import difflib
import hashlib
import io
import shutil
import sys
import tempfile
import weakref
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa

from bnx.columnar import ArrowFile, ParquetFiles, open_arrow, open_parquet
from bnx.delimited import Delimited, OddQuotesError, check_names, open_bytes, open_delimited
from bnx.errors import DataError
from bnx.malformed import not_text, ragged
from bnx.repeating import Repeated
from bnx.text import nearest

__all__ = ["Source", "open_source", "repeated"]

TEXT_ENDINGS = {".csv", ".tsv", ".tab", ".txt", ".dat", ".data", ""}
PARQUET_ENDINGS = {".parquet", ".pq"}
ARROW_ENDINGS = {".arrow", ".feather", ".ipc"}
PACKED_ENDINGS = {".gz", ".zst"}


@dataclass(frozen=True)
class Source:
    """A table that can be read in blocks, as often as needed: its name for messages, its columns, its files."""

    name: str
    columns: tuple[str, ...]
    files: tuple[Path, ...]
    form: Delimited | ParquetFiles | ArrowFile | Repeated

    @property
    def file_form(self) -> Delimited | ParquetFiles | ArrowFile:
        """Give the form that the files have, however often their rows are taken."""
        return self.form.form if isinstance(self.form, Repeated) else self.form

    @property
    def rows(self) -> int:
        """Count the rows, if the form of the table tells; 0 if only reading it would."""
        return 0 if isinstance(self.form, Delimited) else self.form.rows

    def blocks(self, columns: Sequence[str]) -> Iterator[pa.RecordBatch]:
        """Read batches of rows in file order, holding ``columns`` in the order given.

        Raises:
            DataError: a column is unknown, or the file is malformed; the sentence names the line.
        """
        self.check(columns)
        try:
            yield from self.form.blocks(columns)
        except OddQuotesError:
            _refuse_open_quote(self.name, self.file_form)
        except (pa.ArrowException, OSError, UnicodeDecodeError) as error:
            raise _explained(error, self.name, self.file_form) from error

    def row_of(self, record: int) -> int:
        """Find the row of the files, from 0 on, behind a record from 0 on."""
        return self.form.row_of(record) if isinstance(self.form, Repeated) else record

    def check(self, columns: Sequence[str]) -> None:
        """Refuse column names that the table does not have.

        Raises:
            DataError: naming the column and the nearest one.
        """
        known = set(self.columns)
        for column in columns:
            if column not in known:
                raise DataError(f"{self.name} has no column {column!r}; {nearest(column, self.columns)}")

    def sha256(self) -> str:
        """Digest of the bytes of the files as they lie on disk, in the order of their paths (hexadecimal)."""
        digest = hashlib.sha256()
        for path in self.files:
            with path.open("rb") as file:
                while chunk := file.read(1 << 20):
                    digest.update(chunk)
        return digest.hexdigest()


def open_source(path: str, delimiter: str | None = None) -> Source:
    """Open a CSV or TSV (plain, gzip, Zstandard), a Parquet file or folder, an Arrow IPC file, or ``-`` (stdin).

    ``delimiter`` is found among comma, semicolon, tab and pipe unless it is given.

    Raises:
        DataError: there is no such file, or it cannot be read as a table.
        SettingError: the delimiter is not a single character.
    """
    place = Path(path)
    if path == "-" or (place.exists() and not place.is_file() and not place.is_dir()):
        return _spooled(path, delimiter)
    if not place.exists():
        raise DataError(f"there is no file {path}; {_near(place)}")
    if place.is_dir():
        return _opened(_parquet_files(place), path, delimiter, "parquet")
    return _opened((place,), path, delimiter, _form(place, path))


def repeated(source: Source, column: str, records: int) -> Source:
    """Take every row as often as a column counts, ``records`` in all; the column is no column any more."""
    form = Repeated(source.file_form, column, records)
    return Source(source.name, form.names, source.files, form)


def _near(place: Path) -> str:
    """End a sentence about a missing file: a file of nearly the same name, or what would be right."""
    names = sorted(other.name for other in place.parent.iterdir()) if place.parent.is_dir() else []
    close = difflib.get_close_matches(place.name, names, n=1, cutoff=0.6)
    return f"did you mean {place.parent / close[0]}?" if close else "give a table that exists, or - for standard input"


def _spooled(path: str, delimiter: str | None) -> Source:
    """Copy standard input or a pipe to a temporary file, which goes when the source goes."""
    with tempfile.NamedTemporaryFile(prefix="bnx-", delete=False) as spool:
        copy = Path(spool.name)
        if path == "-":
            shutil.copyfileobj(sys.stdin.buffer, spool)
        else:
            with Path(path).open("rb") as pipe:
                shutil.copyfileobj(pipe, spool)
    try:
        source = _opened((copy,), "standard input" if path == "-" else path, delimiter, _form(copy, path))
    except BaseException:
        copy.unlink()
        raise
    weakref.finalize(source, copy.unlink, missing_ok=True)
    return source


def _parquet_files(folder: Path) -> tuple[Path, ...]:
    """List the Parquet files of a folder and its subfolders, sorted.

    Raises:
        DataError: there is none, or the folder is split by values in the names of subfolders.
    """
    found = (path for path in folder.rglob("*") if path.suffix in PARQUET_ENDINGS)
    files = sorted(path for path in found if not path.name.startswith(("_", ".")))
    if not files:
        raise DataError(f"the folder {folder} holds no Parquet file; give a folder of .parquet files, or one file")
    for path in files:
        for part in path.relative_to(folder).parts[:-1]:
            if "=" in part:
                raise DataError(
                    f"the folder {folder} keeps values in the names of subfolders ({part}); "
                    "write that column into the files, or give one of the subfolders"
                )
    return tuple(files)


def _form(place: Path, path: str) -> str:
    """Tell the form of a file by its first bytes, then by its ending.

    Raises:
        DataError: the ending is not one that is known, or the content contradicts it.
    """
    with place.open("rb") as file:
        start = file.read(6)
    if start.startswith(b"PAR1"):
        return "parquet"
    if start == b"ARROW1":
        return "arrow"
    ending = _ending(Path(path))
    if ending in PARQUET_ENDINGS | ARROW_ENDINGS:
        kind = "a Parquet" if ending in PARQUET_ENDINGS else "an Arrow IPC"
        raise DataError(f"{path} ends in {ending} but is not {kind} file; its first bytes are {start!r}")
    if ending not in TEXT_ENDINGS:
        raise DataError(
            f"{path} ends in {ending}, which is not a form of table that can be read; "
            "give .csv, .tsv, .txt (also .gz, .zst), .parquet, .arrow or .feather"
        )
    return "text"


def _ending(path: Path) -> str:
    """Take the last ending of a name, the one before it if the last is that of a packed file."""
    ending = path.suffix.lower()
    return _ending(path.with_suffix("")) if ending in PACKED_ENDINGS else ending


def _opened(files: tuple[Path, ...], name: str, delimiter: str | None, kind: str) -> Source:
    """Open files of a known kind."""
    form: Delimited | ParquetFiles | ArrowFile
    try:
        if kind == "text":
            form = open_delimited(files[0], name, delimiter)
        elif kind == "parquet":
            form = open_parquet(files, name)
        else:
            form = open_arrow(files[0], name)
    except UnicodeDecodeError as error:
        found = _undecodable(files[0], name, error.encoding)
        raise found or DataError(f"{name} is not text: {error}") from error
    except (pa.ArrowException, OSError) as error:
        raise _damaged(error, name) from error
    check_names(form.names, name)
    return Source(name, form.names, files, form)


def _explained(error: Exception, name: str, form: Delimited | ParquetFiles | ArrowFile) -> DataError:
    """Say why reading failed: look through a delimited file for the line, else repeat the reader's own words."""
    if not isinstance(form, Delimited) or isinstance(error, OSError):
        return _damaged(error, name)
    return _undecodable(form.path, name, form.encoding) or _ragged(form, name) or _damaged(error, name)


def _refuse_open_quote(name: str, form: Delimited | ParquetFiles | ArrowFile) -> None:
    """Raise if a quote was left open; stray quotes inside cells are no fault."""
    found = _ragged(form, name) if isinstance(form, Delimited) else None
    if found:
        raise found


def _ragged(form: Delimited, name: str) -> DataError | None:
    """Look for a record of the wrong width or an open quote."""
    with open_bytes(form.path) as raw, io.TextIOWrapper(raw, form.encoding, newline="") as lines:
        return ragged(lines, form.delimiter, len(form.names), name)


def _undecodable(path: Path, name: str, encoding: str) -> DataError | None:
    """Look for bytes that are not in the encoding."""
    with open_bytes(path) as raw:
        return not_text(raw, encoding, name)


def _damaged(error: Exception, name: str) -> DataError:
    """Put the reader's own words into a sentence."""
    first = str(error).strip().splitlines()[0].rstrip(".")
    return DataError(f"{name} cannot be read, it may be damaged or cut short: {first}")
