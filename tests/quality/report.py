"""Measure the probabilities of open tables and write docs/probabilities.md.

``python tests/quality/report.py`` measures all tables, ``--tables iris,wine`` some of them, ``--tables none`` none: it
writes the page from what is there. The figures of a table are stored as soon as it is done, in tests/quality/measured,
so that a run that was cut goes on with ``--resume``, which leaves out the tables that are stored. Rivals are measured
again only where rows or folds have changed.
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
from tablestore import TableUnavailable

__all__ = ["NAMES", "main", "measure", "stored"]

HERE = Path(__file__).parent
DOCS = HERE.parents[1] / "docs"
LEFT_OUT = {
    "corral": "a rule that is known",
    "ucb_admissions": "two attributes",
    "hair_eye_sex": "two attributes",
    "mnist5k_binary": "307,000 pairs",
}
NAMES = tuple(name for name in TABLES if name not in LEFT_OUT)


def measure(name: str, measured: Path) -> None:
    """Measure one table, and store its figures."""
    path, target = measured / f"{name}.json", TABLES[name].target
    frame = load(name)
    with tempfile.TemporaryDirectory(prefix="bnx-quality-") as folder:
        own, rows = measure_bnx(frame, recipe_for(frame, target), Path(folder))
    before = _read(path).get("rivals", {})
    figures = {"bnx": own, "rivals": measure_rivals(frame, target, rows, before)}
    measured.mkdir(parents=True, exist_ok=True)
    path.write_text(json.dumps(figures, indent=1) + "\n", encoding="utf-8")


def stored(measured: Path) -> dict[str, Any]:
    """Read the figures of all tables that were measured, in the order of ``NAMES``."""
    found = {name: _read(measured / f"{name}.json") for name in NAMES}
    return {name: one for name, one in found.items() if one}


def _read(path: Path) -> dict[str, Any]:
    return dict(json.loads(path.read_text(encoding="utf-8"))) if path.exists() else {}


def _all(names: Iterable[str], measured: Path, resume: bool) -> list[str]:
    """Measure tables; list those that cannot be had."""
    failed = []
    for name in names:
        if resume and (measured / f"{name}.json").exists():
            continue
        print(name, file=sys.stderr, flush=True)
        try:
            measure(name, measured)
        except TableUnavailable as reason:
            print(f"{name}: {reason}", file=sys.stderr, flush=True)
            failed.append(name)
    return failed


def main() -> None:
    """Read the command line, measure and write the page."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--tables", default=",".join(NAMES), help="names with commas, or none; all without it")
    parser.add_argument("--resume", action="store_true", help="leave out tables whose figures are stored")
    parser.add_argument("--folder", type=Path, default=None, help="for figures and page, instead of the repository")
    chosen = parser.parse_args()
    names = [name for name in chosen.tables.split(",") if name not in ("", "none")]
    unknown = [name for name in names if name not in NAMES]
    if unknown:
        parser.error(f"no table is called {unknown[0]!r}; choose from {', '.join(NAMES)}, none")
    measured, written = (HERE / "measured", DOCS) if chosen.folder is None else (chosen.folder, chosen.folder)
    failed = _all(names, measured, chosen.resume)
    figures = stored(measured)
    if not figures:
        raise SystemExit("nothing was measured, so there is no page to write")
    (written / "probabilities.md").write_text(page(figures), encoding="utf-8")
    print(f"written: {written / 'probabilities.md'}", file=sys.stderr)
    if failed:
        raise SystemExit(f"not to be had, so not measured: {', '.join(failed)}")


if __name__ == "__main__":
    main()
