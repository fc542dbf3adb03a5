"""Write a run's results: a whole folder or nothing."""

import json
import shutil
from collections.abc import Iterator, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager, suppress
from itertools import chain
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

from bnx.comparison import Comparison
from bnx.documents import (
    COMPARISON_FORMAT,
    comparison_document,
    dot_of,
    pair_results,
    predictions,
    structure_document,
)
from bnx.drawing import find_engine, render
from bnx.engines.local import Progress
from bnx.errors import DataError, EngineError, SettingError
from bnx.files import hidden_beside
from bnx.mix_documents import mix_document
from bnx.picture import MANY_CHIPS
from bnx.report import report_html
from bnx.text import quoted
from bnx.unfinished import unfinished
from bnx.verdicts import pairs_csv

__all__ = ["json_text", "new_folder", "write_results"]

_OURS = "comparison.json"
MIX_FILE = "mix.json"


@contextmanager
def new_folder(path: str, overwrite: bool) -> Iterator[Path]:
    """Give a temporary folder beside ``path`` that takes its place when the block ends well, and vanishes if not.

    Raises:
        SettingError: the place is taken, or taken by something that bnx did not write.
        DataError: the folder cannot be made or filled.
    """
    if not path:
        raise SettingError("-o is empty; give the name of a folder")
    place = Path(path).resolve()
    _check_place(place, path, overwrite)
    missing = [folder for folder in place.parents if not folder.exists()]
    work = hidden_beside(place)

    def undo() -> None:
        shutil.rmtree(work, ignore_errors=True)
        for folder in missing:
            with suppress(OSError):  # it holds the results, or something of somebody else
                folder.rmdir()

    with unfinished(undo):
        try:
            place.parent.mkdir(parents=True, exist_ok=True)
            work.mkdir(mode=0o700)
            yield work
            _check_place(place, path, overwrite)
            _put_in_place(work, place)
        except BrokenPipeError:
            raise
        except OSError as error:
            raise DataError(f"cannot write {path} ({error.strerror or error}); choose another folder with -o") from None
        finally:
            undo()


def _put_in_place(work: Path, place: Path) -> None:
    """Let a finished folder take the place of an older one, if there is one; that one goes last."""
    work.chmod(0o755)
    if not place.exists():
        work.rename(place)
        return
    old = hidden_beside(place)

    def settle() -> None:
        if (old / "old").exists() and not place.exists():
            (old / "old").rename(place)
        shutil.rmtree(old, ignore_errors=True)

    with unfinished(settle):
        try:
            old.mkdir(mode=0o700)
            place.rename(old / "old")
            work.rename(place)
        finally:
            settle()


def _check_place(place: Path, path: str, overwrite: bool) -> None:
    """Refuse a place that holds something worth keeping."""
    if not place.exists():
        return
    if not place.is_dir():
        raise SettingError(f"{path} is a file, but -o takes a folder; give another name")
    found = sorted(one.name for one in place.iterdir())
    if not found:
        return
    if not overwrite:
        raise SettingError(f"the folder {path} exists already; give another one with -o, or --overwrite to replace it")
    ours = _files_of_a_run(place / _OURS)
    strangers = [name for name in found if name not in ours]
    if strangers:
        raise SettingError(
            f"the folder {path} holds {quoted(strangers, 3)}, which no run of bnx learn wrote, so it is left alone; "
            "give another folder with -o"
        )


def _files_of_a_run(comparison: Path) -> set[str]:
    """Name the files that a run wrote beside its comparison; none if that is not one of ours."""
    try:
        document = json.loads(comparison.read_text(encoding="utf-8"))
        if document["format"] != COMPARISON_FORMAT:
            return set()
        names = [one["name"] for one in document["structures"]]
    except (OSError, ValueError, TypeError, KeyError):
        return set()
    drawn = {f"{name}.{form}" for name in names for form in ("json", "dot", "svg")}
    return drawn | {_OURS, MIX_FILE, "pairs.csv", "pairs.parquet", "predictions.parquet", "report.html"}


def write_results(
    comparison: Comparison,
    folder: Path,
    jobs: int,
    predictions: bool = False,
    all_pairs: bool = False,
    progress: Progress = lambda *_: None,
) -> tuple[dict[str, Any], list[str]]:
    """Write every result file into a folder.

    progress: called with (stage, 0, 0) while it runs.

    Returns:
        The comparison as written, and sentences about what could not be written.
    """
    progress("documents", 0, 0)
    document = comparison_document(comparison)
    write_json(folder / _OURS, document)
    (folder / "pairs.csv").write_bytes(pairs_csv(document["pairs"]).encode())
    structures = [structure_document(comparison, s) for s in range(len(comparison.classifiers))]
    drawings = {one["name"]: dot_of(one) for one in structures}
    for one in structures:
        write_json(folder / f"{one['name']}.json", one)
        (folder / f"{one['name']}.dot").write_text(drawings[one["name"]], encoding="utf-8")
    if comparison.mix and comparison.mix.offered:
        write_json(folder / MIX_FILE, mix_document(comparison, structures))
    progress("drawings", 0, 0)
    pictures, notes = draw_all(drawings, jobs)
    notes += _not_all_drawn(structures) if pictures else []
    progress("report", 0, 0)
    for name, picture in pictures.items():
        (folder / f"{name}.svg").write_text(picture, encoding="utf-8")
    (folder / "report.html").write_text(report_html(document, pictures), encoding="utf-8")
    progress("writing", 0, 0)
    if all_pairs:
        every = [result.to_dict() for result in pair_results(comparison, everything=True)]
        pq.write_table(pa.Table.from_pylist(every), folder / "pairs.parquet")
        notes += _not_all_written(document)
    if predictions:
        write_predictions(comparison, folder / "predictions.parquet")
    return document, notes


def write_predictions(comparison: Comparison, path: Path) -> None:
    """Write out-of-fold probabilities, a part at a time."""
    parts = predictions(comparison)
    first = next(parts)
    with pq.ParquetWriter(path, first.schema) as writer:
        for part in chain([first], parts):
            writer.write_table(part)


def _not_all_drawn(structures: Sequence[Mapping[str, Any]]) -> list[str]:
    """Say what pictures of very many attributes leave out."""
    names, attributes = [one["name"] for one in structures], max(len(one["attributes"]) for one in structures)
    if attributes <= MANY_CHIPS:
        return []
    return [
        f"pictures show at most {MANY_CHIPS} of the {attributes:,} attributes, those that the strongest arrows join, "
        f"and say how many; bnx draw {names[-1]}.json --everything draws all"
    ]


def draw_all(drawings: Mapping[str, str], jobs: int) -> tuple[dict[str, str], list[str]]:
    """Draw DOT texts as SVG; say which could not be drawn, and why."""
    try:
        find_engine()
    except EngineError as error:
        return {}, [f"no picture was drawn, only .dot files were written: {error}"]
    with ThreadPoolExecutor(jobs) as pool:
        drawn = dict(zip(drawings, pool.map(_drawn, drawings.values()), strict=True))
    failed = [f"{name}.svg was not drawn: {one}" for name, one in drawn.items() if isinstance(one, EngineError)]
    return {name: one for name, one in drawn.items() if isinstance(one, str)}, failed


def _drawn(dot: str) -> str | EngineError:
    try:
        return render(dot, "svg").decode()
    except EngineError as error:
        return error


def write_json(path: Path, document: Mapping[str, Any]) -> None:
    """Write a document as JSON."""
    path.write_text(json_text(document), encoding="utf-8")


def json_text(document: Mapping[str, Any]) -> str:
    """Lay a document out as JSON, a key a line at the top and compact below it."""
    lines = [
        f" {json.dumps(key)}: {json.dumps(value, ensure_ascii=False, allow_nan=False)}"
        for key, value in document.items()
    ]
    return "{\n" + ",\n".join(lines) + "\n}\n"


def _not_all_written(document: dict[str, Any]) -> list[str]:
    """Say which pairs are not among all pairs."""
    judged, total = document["pairs_judged"], document["pairs_total"]
    return [f"--all-pairs: pairs.parquet holds the {judged:,} pairs judged of {total:,}"] if judged < total else []
