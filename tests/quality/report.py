"""Measure the probabilities of open tables and write docs/probabilities.md.

``python tests/quality/report.py`` measures all tables, ``--tables iris,wine`` some of them, ``--tables none`` none: it
writes the page from what is there. The figures of a table are stored as soon as it is done, in tests/quality/measured,
so that a run that was cut goes on with ``--resume``, which leaves out the tables that are stored. Rivals are measured
again only where rows or folds have changed. ``--seed`` deals other folds, for a ``--folder`` of its own.
``--smoothing`` compares ways to smooth instead; there ``--resume`` leaves out the ways that are stored.
"""

import argparse
import json
import sys
import tempfile
from collections.abc import Iterable
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[1]))

from opentables import TABLES, load
from quality.measuring import measure_bnx, measure_rivals, recipe_for
from quality.quality_page import page
from quality.smoothing_page import PICTURE, draw_ways, smoothing_page
from quality.smoothing_schemes import SCHEMES
from quality.smoothing_trial import compare_ways
from tablestore import TableUnavailable

__all__ = ["NAMES", "main", "measure", "measure_ways", "stored", "write"]

HERE = Path(__file__).parent
WAYS = "smoothing"
DOCS = HERE.parents[1] / "docs"
LEFT_OUT = {
    "corral": "a rule that is known",
    "ucb_admissions": "two attributes",
    "hair_eye_sex": "two attributes",
    "mnist5k_binary": "307,000 pairs",
}
NAMES = tuple(name for name in TABLES if name not in LEFT_OUT)


def measure(name: str, measured: Path, seed: int = 1) -> None:
    """Measure one table, and store its figures."""
    path, target = measured / f"{name}.json", TABLES[name].target
    frame = load(name)
    with tempfile.TemporaryDirectory(prefix="bnx-quality-") as folder:
        own, rows = measure_bnx(frame, recipe_for(frame, target, seed=seed), Path(folder))
    before = _read(path).get("rivals", {})
    figures = {"bnx": own, "rivals": measure_rivals(frame, target, rows, before)}
    measured.mkdir(parents=True, exist_ok=True)
    path.write_text(json.dumps(figures, indent=1) + "\n", encoding="utf-8")


def measure_ways(name: str, measured: Path, resume: bool) -> None:
    """Compare ways to smooth on one table, and store the figures."""
    path = measured / WAYS / f"{name}.json"
    before = _read(path) if resume else {}
    missing = {way: own for way, own in SCHEMES.items() if way not in before}
    if not missing:
        return
    frame = load(name)
    with tempfile.TemporaryDirectory(prefix="bnx-quality-") as folder:
        found = before | compare_ways(frame, TABLES[name].target, Path(folder), missing)
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(json.dumps({way: found[way] for way in SCHEMES}, indent=1) + "\n", encoding="utf-8")


def stored(measured: Path) -> dict[str, Any]:
    """Read the figures of all tables that were measured, in the order of ``NAMES``."""
    found = {name: _read(measured / f"{name}.json") for name in NAMES}
    return {name: one for name, one in found.items() if one}


def _read(path: Path) -> dict[str, Any]:
    return dict(json.loads(path.read_text(encoding="utf-8"))) if path.exists() else {}


def _all(names: Iterable[str], measured: Path, resume: bool, smoothing: bool, seed: int) -> list[str]:
    """Measure tables; list those that cannot be had."""
    failed = []
    for name in names:
        if resume and not smoothing and (measured / f"{name}.json").exists():
            continue
        print(name, file=sys.stderr, flush=True)
        try:
            if smoothing:
                measure_ways(name, measured, resume)
            else:
                measure(name, measured, seed)
        except TableUnavailable as reason:
            print(f"{name}: {reason}", file=sys.stderr, flush=True)
            failed.append(name)
    return failed


def write(measured: Path, folder: Path) -> None:
    """Write the page and its picture from the figures that are stored."""
    figures, ways = stored(measured), stored(measured / WAYS)
    if not figures:
        raise SystemExit("no table was compared, so there is no page to write")
    if ways:
        (folder / PICTURE).parent.mkdir(exist_ok=True)
        draw_ways(ways, folder / PICTURE)
    text = "\n".join([page(figures), *smoothing_page(ways), ""])
    (folder / "probabilities.md").write_text(text.rstrip("\n") + "\n", encoding="utf-8")


def main() -> None:
    """Read the command line, measure and write the page."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--tables", default=",".join(NAMES), help="names with commas, or none; all without it")
    parser.add_argument("--resume", action="store_true", help="leave out tables whose figures are stored")
    parser.add_argument(
        "--smoothing", action="store_true", help="compare ways to smooth instead of measuring the program"
    )
    parser.add_argument("--folder", type=Path, default=None, help="for figures and page, instead of the repository")
    parser.add_argument("--seed", type=int, default=1, help="of the folds; others than 1 need a --folder")
    chosen = parser.parse_args()
    if chosen.seed != 1 and chosen.folder is None:
        parser.error("--seed deals other folds than those of the page; give a --folder for their figures")
    names = [name for name in chosen.tables.split(",") if name not in ("", "none")]
    unknown = [name for name in names if name not in NAMES]
    if unknown:
        parser.error(f"no table is called {unknown[0]!r}; choose from {', '.join(NAMES)}, none")
    measured, written = (HERE / "measured", DOCS) if chosen.folder is None else (chosen.folder, chosen.folder)
    failed = _all(names, measured, chosen.resume, chosen.smoothing, chosen.seed)
    write(measured, written)
    print(f"written: {written / 'probabilities.md'}", file=sys.stderr)
    if failed:
        raise SystemExit(f"not to be had, so not measured: {', '.join(failed)}")


if __name__ == "__main__":
    main()
