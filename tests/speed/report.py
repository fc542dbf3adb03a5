"""Run the benchmarks and write docs/speed.md: ``python tests/speed/report.py [RUNS]``."""

import platform
import sys
import tempfile
from collections.abc import Mapping
from importlib.metadata import version
from pathlib import Path

from make_table import ROWS, make_table, write_parquet
from measuring import (
    Times,
    bincounts,
    cross_validations,
    engine_of,
    learn,
    pair_tasks,
    processors,
    same_tables,
    side_by_side,
    staged,
)

PAGE = Path(__file__).parents[2] / "docs" / "speed.md"
PACKAGES = ("numpy", "numba", "pyarrow", "scipy", "pandas", "scikit-learn")
BINCOUNT = "one np.bincount per pair"
LEARN = "bnx learn, the whole command, two threads"


def page(runs: int) -> str:
    """Measure everything and write the page."""
    table = make_table()
    if not same_tables(table, engine_of(table, 2), bincounts(table)):  # also compiles what is timed
        raise SystemExit("the pair tables differ from those of np.bincount; nothing was written")
    pairs = side_by_side(pair_tasks(table), runs)
    with tempfile.TemporaryDirectory() as folder:
        path, output = Path(folder) / "table.parquet", Path(folder) / "results"
        write_parquet(make_table(3_000), path)
        learn(path, output)
        write_parquet(table, path)
        whole = side_by_side(cross_validations(table, path, output), runs)
        stages = staged(path)
    return "\n".join([*_head(runs), *_pairs(pairs), *_whole(whole), *_stages(stages)])


def _head(runs: int) -> list[str]:
    packages = ", ".join(f"{name} {version(name)}" for name in PACKAGES)
    return [
        "# Speed",
        "",
        "Written by `python tests/speed/report.py`; `pytest -m speed tests/speed -s` asserts the ratios.",
        "",
        f"Table: {ROWS:,} rows, 50 attributes of 2 to 12 levels, 3 classes, dependences planted; seeded, so anyone can "
        "draw it again (`tests/speed/make_table.py`).",
        f"Machine: {_processor_name()}, {processors()} processors, {platform.system()}, Python "
        f"{platform.python_version()}, {packages}.",
        f"Every figure is the median of {runs} runs, with the least and the most in brackets. Each round runs every "
        "line once, one after the other, so other work on the machine falls on all of them. Compilation, which happens "
        "once per machine, is not counted. Compare ratios; seconds belong to this machine and this hour.",
        "",
    ]


def _processor_name() -> str:
    names = Path("/proc/cpuinfo")
    lines = names.read_text(encoding="utf-8").splitlines() if names.exists() else []
    found = [line.partition(":")[2].strip() for line in lines if line.startswith("model name")]
    flags = {flag for line in lines if line.startswith("flags") for flag in line.split()}
    known = [
        name
        for flag, name in (("avx2", "AVX2"), ("avx512_vpopcntdq", "AVX-512 with population count"))
        if flag in flags
    ]
    return f"{(found or [platform.machine()])[0]} {platform.machine()} ({', '.join(known) or 'no wide vectors known'})"


def _pairs(times: Mapping[str, Times]) -> list[str]:
    theirs = times[BINCOUNT]
    return [
        "## All 1,225 pair tables given the class",
        "",
        *_table(times, theirs),
        "",
        "The tables are checked to be equal, cell by cell, before anything is timed. The rows lie in memory as small "
        "integers for both sides; the bincounts reuse their work array and half of every cell number. bnx's time "
        "includes making the bit planes, and in the last line also sorting the rows by class. The 40 blocks are what "
        "`bnx learn` counts: from them it gets every fold, pair of folds and random half by addition.",
        "",
    ]


def _whole(times: Mapping[str, Times]) -> list[str]:
    return [
        "## The whole command against one cross-validation",
        "",
        *_table(times, times[LEARN]),
        "",
        "Times as fast: against the first line. `bnx learn` starts from the Parquet file with text levels in a new "
        "process: it reads and codes, tests all pairs, learns seven structures in 56 training sets, chooses smoothing "
        "and calibration inside each, predicts and scores ten folds, judges every edge, draws and writes the report. "
        "scikit-learn gets the coded integers in memory, of 8 bits, which it is faster with than with 64, and does 10 "
        "fits of one model, 10 predictions and the log loss.",
        "",
    ]


def _table(times: Mapping[str, Times], against: Times) -> list[str]:
    rows = [
        f"| {name} | {one.seconds:.3g} [{min(one.wall):.3g}, {max(one.wall):.3g}] | {one.processor_seconds:.3g} | "
        f"{against.seconds / one.seconds:.3g} |"
        for name, one in times.items()
    ]
    return ["| what | seconds | processor seconds | times as fast |", "|---|---|---|---|", *rows]


def _stages(stages: list[tuple[str, float, float]]) -> list[str]:
    return [
        "## Where the time of `bnx learn` goes",
        "",
        "| stage | seconds | processor seconds |",
        "|---|---|---|",
        *(f"| {name} | {wall:.2f} | {processor:.2f} |" for name, wall, processor in stages),
        "",
        "One run with a clock around each stage (`tests/speed/stages.py`), two threads; a stage's processor seconds "
        "are those of all its threads.",
        "",
    ]


if __name__ == "__main__":
    text = page(int(sys.argv[1]) if len(sys.argv) > 1 else 5)
    PAGE.parent.mkdir(exist_ok=True)
    PAGE.write_text(text, encoding="utf-8")
    print(text)
