"""Run the benchmarks and write docs/speed.md.

``python tests/speed/report.py`` runs all parts, ``report.py pairs command`` some of them, ``report.py page`` none: it
writes the page from what is there. Every step stores its figures as soon as it is done, in tests/speed/measured, so
that a run that was cut goes on with ``--resume``, which leaves out the steps that are stored.
"""

import argparse
import json
import sys
import tempfile
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

import page_command
import page_growth
import page_large
import page_pairs
import part_command
import part_growth
import part_pairs
import part_tall
import part_wide
from child import ChildError
from growth_plot import draw_growth
from make_tall import SizeError
from part_pairs import TablesDifferError
from setting import Claim, Part, Setting, claim_table
from tablestore import TableUnavailable
from timing import Figures, machine

__all__ = ["PARTS", "main", "page", "write"]

FAILURES = (ChildError, SizeError, TablesDifferError, TableUnavailable)  # of one step, which others may outlive
HERE = Path(__file__).parent
DOCS = HERE.parents[1] / "docs"
PARTS = {
    "pairs": Part(part_pairs.STEPS, page_pairs.page, page_pairs.claims),
    "command": Part(part_command.STEPS, page_command.page, page_command.claims),
    "wide": Part(part_wide.STEPS, page_large.wide_page, page_large.wide_claims),
    "tall": Part(part_tall.STEPS, page_large.tall_page, page_large.tall_claims),
    "growth": Part(part_growth.STEPS, page_growth.page, lambda _: []),
}
HEAD = """# Speed

Written by `python tests/speed/report.py`, which can run part by part (`report.py pairs`); `pytest -m speed tests/speed`
measures anew and asserts the requirements. All tables are seeded, so anyone can draw them again.

Where several things are timed, each round runs every one of them once, one after the other, so that other work on the
machine falls on all of them alike. Figures are medians over the rounds, with the least and the most in brackets.
Compilation, which happens once per machine, is not counted. Compare ratios; seconds belong to this machine and this
hour, and on a machine that others share they vary by some tens of percent.
"""


def measure(name: str, setting: Setting, measured: Path, resume: bool) -> list[str]:
    """Run the steps of a part and store each one's figures when it is done; list the steps that failed."""
    path, failed = measured / f"{name}.json", list[str]()
    for step, task in PARTS[name].steps.items():
        stored = load(path)
        if resume and step in stored:
            continue
        print(f"{name}: {step}", file=sys.stderr, flush=True)
        try:
            found = task(setting)
        except FAILURES as failure:
            print(f"{name}: {step} failed: {failure}", file=sys.stderr, flush=True)
            failed.append(step)
            continue
        stored[step] = {"machine": machine(), **found}
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(json.dumps(stored, indent=1) + "\n", encoding="utf-8")
    return failed


def load(path: Path) -> Figures:
    """Read the figures of a part, none where it was not measured."""
    return dict(json.loads(path.read_text(encoding="utf-8"))) if path.exists() else {}


def write(measured: Path, folder: Path) -> None:
    """Write the page and its picture from the figures that are stored."""
    figures = {name: load(measured / f"{name}.json") for name in PARTS}
    (folder / "pictures").mkdir(exist_ok=True)
    if figures["growth"]:
        draw_growth(figures["growth"], folder / page_growth.PICTURE)
    (folder / "speed.md").write_text(page(figures), encoding="utf-8")


def page(figures: dict[str, Figures]) -> str:
    """Write the page from the figures of every part."""
    lines: list[str] = []
    claims: list[Claim] = []
    for name, part in PARTS.items():
        claims += part.claims(figures[name])
        lines += part.page(figures[name])
    lines += page_growth.limit_page(figures)
    return "\n".join([HEAD, *_machines(figures), "## What is required", "", *claim_table(claims), "", *lines])


def _machines(figures: dict[str, Figures]) -> list[str]:
    """Name the machine of all steps; where it changed, which steps ran on which."""
    names: dict[str, list[str]] = {}
    for part, steps in figures.items():
        for step, found in steps.items():
            names.setdefault(found["machine"], []).append(f"{part} {step}")
    if len(names) < 2:
        return [*(f"Machine: {name}.\n" for name in names)]
    return [*(f"Machine of {', '.join(steps)}: {name}.\n" for name, steps in names.items())]


def main() -> None:
    """Read the command line, measure and write the page."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("parts", nargs="*", metavar="PART", help=f"{', '.join(PARTS)} or page; all without one")
    parser.add_argument("--runs", type=int, default=5, help="rounds of everything that is compared")
    parser.add_argument("--scale", type=float, default=1.0, help="share of the full number of rows")
    parser.add_argument("--resume", action="store_true", help="leave out steps whose figures are stored")
    parser.add_argument("--folder", type=Path, default=Path(tempfile.gettempdir()) / "bnx-speed", help="for tables")
    chosen = parser.parse_args()
    unknown = [name for name in chosen.parts if name not in (*PARTS, "page")]
    if unknown:
        parser.error(f"no part is called {unknown[0]!r}; choose from {', '.join(PARTS)}, page")
    full = chosen.scale == 1
    measured, written = (HERE / "measured", DOCS) if full else (chosen.folder / "measured", chosen.folder)
    chosen.folder.mkdir(parents=True, exist_ok=True)
    setting, failed = Setting(chosen.folder, chosen.scale, chosen.runs), list[str]()
    for name in chosen.parts or PARTS:
        if name != "page":
            failed += measure(name, setting, measured, chosen.resume)
    write(measured, written)
    print(f"written: {written / 'speed.md'}", file=sys.stderr)
    if failed:
        raise SystemExit(f"failed, so not renewed: {', '.join(failed)}")


if __name__ == "__main__":
    main()
