"""The command line run inside the test process, and a small table with its results folder to run it on."""

import contextlib
import csv
import io
import signal
import sys
import tempfile
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from unittest import mock

import numpy as np

from bnx.cli import main

NAMES = ("dock", "alarm", "lane", "shift", "site", "gap", "grade")
LEVELS = ("few", "some", "many")
FAST = ("--resamples", "5", "--folds", "4", "--jobs", "1")


@dataclass(frozen=True)
class Run:
    """Exit code and what was written to standard output and standard error."""

    code: int
    out: str
    err: str


def call(*arguments: str, stdin: str = "") -> Run:
    """Run the command line as ``main`` does, with streams of its own."""
    out, err = (io.TextIOWrapper(io.BytesIO(), encoding="utf-8", newline="") for _ in range(2))
    given = io.TextIOWrapper(io.BytesIO(stdin.encode()), encoding="utf-8")
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP)}
    with (
        mock.patch.object(sys, "argv", ["bnx", *arguments]),
        mock.patch.object(sys, "stdin", given),
        contextlib.redirect_stdout(out),
        contextlib.redirect_stderr(err),
    ):
        try:
            main()
        except SystemExit as end:
            code = int(end.code or 0)
        finally:
            for number, handler in before.items():
                signal.signal(number, handler)
    out.flush()
    err.flush()
    return Run(code, out.buffer.getvalue().decode(), err.buffer.getvalue().decode())  # type: ignore[attr-defined]


def refusal(*arguments: str, stdin: str = "", code: int = 1) -> str:
    """Run what must be refused; give the sentence, without ``error:``."""
    run = call(*arguments, stdin=stdin)
    assert run.code == code, run
    assert run.out == ""
    assert run.err.startswith("error: ")
    assert run.err.count("\n") == 1, "one sentence on one line"
    return run.err.removeprefix("error: ").removesuffix("\n")


def small_rows(count: int = 240, seed: int = 3) -> list[list[str]]:
    """Draw records: alarm copies dock, the number gap follows the class, some shifts are blank."""
    random = np.random.default_rng(seed)
    rows = []
    for _ in range(count):
        grade = int(random.integers(3))
        dock = grade if random.random() < 0.5 else int(random.integers(3))
        alarm = dock if random.random() < 0.85 else int(random.integers(3))
        lane = grade if random.random() < 0.4 else int(random.integers(3))
        shift = "" if random.random() < 0.2 else LEVELS[int(random.integers(3))]
        site = f"site {random.integers(6)}"
        gap = f"{random.normal(grade, 1.0):.3f}"
        rows.append([LEVELS[dock], LEVELS[alarm], LEVELS[lane], shift, site, gap, LEVELS[grade]])
    return rows


def write(path: Path, header: tuple[str, ...] = NAMES, rows: list[list[str]] | None = None) -> str:
    """Write a CSV, the small table unless rows are given; give its path as text."""
    with path.open("w", newline="", encoding="utf-8") as file:
        csv.writer(file).writerows([header, *(small_rows() if rows is None else rows)])
    return str(path)


@cache
def _shared() -> tuple[tempfile.TemporaryDirectory[str], str, str]:
    folder = tempfile.TemporaryDirectory()
    table = write(Path(folder.name) / "small.csv")
    results = str(Path(folder.name) / "results")
    run = call("learn", table, "--class", "grade", "-o", results, "--structures", "naive,tan,kdb2", *FAST)
    assert run.code == 0, run
    return folder, table, results


def small_table() -> str:
    """Give the path of a small table that is made once."""
    return _shared()[1]


def small_results() -> str:
    """Give the path of a results folder that is made once."""
    return _shared()[2]
