"""The benchmarks: what is timed, side by side in one run, and how."""

import os
import resource
import subprocess
import sys
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from statistics import median

import numpy as np
from joblib.externals.loky import get_reusable_executor
from make_table import CLASS_LEVELS, BenchTable
from sklearn.model_selection import StratifiedKFold, cross_val_predict
from sklearn.naive_bayes import CategoricalNB

from bnx.counts import PairLayout
from bnx.domains import Domain, Schema
from bnx.engines import LocalEngine, start_local
from bnx.tables import CodedTable, Lines

FOLDS = 10
LEARN = "from bnx.cli import main; main()"


@dataclass(frozen=True)
class Times:
    """Seconds of every run by the wall clock, and of all processors together (children included)."""

    wall: tuple[float, ...]
    processor: tuple[float, ...]

    @property
    def seconds(self) -> float:
        """Median by the wall clock."""
        return median(self.wall)

    @property
    def processor_seconds(self) -> float:
        """Median over all processors."""
        return median(self.processor)


def side_by_side(tasks: Mapping[str, Callable[[], object]], runs: int) -> dict[str, Times]:
    """Run every task once per round, so that what else the machine does falls on all of them alike."""
    found: dict[str, list[tuple[float, float]]] = {name: [] for name in tasks}
    for _ in range(runs):
        for name, task in tasks.items():
            wall, processor = time.perf_counter(), _processor()
            task()
            found[name].append((time.perf_counter() - wall, _processor() - processor))
    return {name: Times(*(tuple(column) for column in zip(*rows, strict=True))) for name, rows in found.items()}


def _processor() -> float:
    own, children = resource.getrusage(resource.RUSAGE_SELF), resource.getrusage(resource.RUSAGE_CHILDREN)
    return own.ru_utime + own.ru_stime + children.ru_utime + children.ru_stime


def engine_of(table: BenchTable, jobs: int, blocks: int = 1) -> LocalEngine:
    """Sort the coded rows by block and class, ready to be counted."""
    domains = tuple(Domain(f"a{i}", tuple(map(str, range(size)))) for i, size in enumerate(table.sizes.tolist()))
    rows = np.arange(len(table.target))
    coded = CodedTable(
        Schema(domains, Domain("arrival", CLASS_LEVELS)),
        table.codes.view(np.uint8),
        table.target.view(np.uint8),
        Lines.all(len(rows)),
    )
    return start_local(coded, (rows % blocks).astype(np.uint16), blocks, jobs, lambda *_: None)


def layout_of(table: BenchTable) -> PairLayout:
    """Lay out all pairs of attributes."""
    left, right = (index.astype(np.int64) for index in np.triu_indices(len(table.sizes), 1))
    return PairLayout.of(table.sizes.astype(np.int64), left, right)


def bincounts(table: BenchTable) -> list[np.ndarray]:
    """Count every pair given the class by one ``np.bincount``, in the order of ``layout_of``.

    The part of the cell number that class and first attribute make is computed once per attribute, and no array is
    allocated per pair but the counts.
    """
    classes, sizes = table.target.astype(np.int64), table.sizes.tolist()
    cells = np.empty(len(classes), np.int64)
    counts = []
    for i, size in enumerate(sizes):
        contexts = classes * size + table.codes[i]
        for j in range(i + 1, len(sizes)):
            np.multiply(contexts, sizes[j], out=cells)
            np.add(cells, table.codes[j], out=cells)
            counts.append(np.bincount(cells, minlength=len(CLASS_LEVELS) * size * sizes[j]))
    return counts


def same_tables(table: BenchTable, engine: LocalEngine, counted: list[np.ndarray]) -> bool:
    """Tell whether the pair tables of an engine, summed over its blocks, are those of ``bincounts``."""
    layout = layout_of(table)
    counts = engine.pair_counts(layout).counts.sum(axis=0)
    return all(
        np.array_equal(counts[:, layout.offsets[p] : layout.offsets[p + 1]].ravel(), one)
        for p, one in enumerate(counted)
    )


def pair_tasks(table: BenchTable) -> dict[str, Callable[[], object]]:
    """List the ways to count all pairs."""
    layout = layout_of(table)
    one, two, blocks = engine_of(table, 1), engine_of(table, 2), engine_of(table, 1, 40)
    return {
        "one np.bincount per pair": lambda: bincounts(table),
        "bnx, one thread": lambda: one.pair_counts(layout),
        "bnx, two threads": lambda: two.pair_counts(layout),
        "bnx, one thread, tables of 40 blocks apart": lambda: blocks.pair_counts(layout),
        "bnx, one thread, sorting the rows included": lambda: engine_of(table, 1).pair_counts(layout),
    }


def scikit_log_loss(table: BenchTable) -> float:
    """Cross-validate scikit-learn's CategoricalNB in one process, on small integers; mean log loss in bits.

    With codes of 8 bits it takes less time than with codes of 64: taking out the rows of a fold then costs little.
    """
    rows, truth = np.ascontiguousarray(table.codes.T), table.target
    total = 0.0
    for train, test in StratifiedKFold(FOLDS, shuffle=True, random_state=1).split(rows[:, :1], truth):
        model = CategoricalNB(alpha=1, min_categories=table.sizes).fit(rows[train], truth[train])
        p = model.predict_proba(rows[test])
        total -= float(np.log2(p[np.arange(len(test)), truth[test]]).sum())
    return total / len(truth)


def scikit_parallel(table: BenchTable) -> float:
    """Do the same through ``cross_val_predict`` with two processes."""
    p = cross_val_predict(
        CategoricalNB(alpha=1, min_categories=table.sizes),
        np.ascontiguousarray(table.codes.T),
        table.target,
        cv=StratifiedKFold(FOLDS, shuffle=True, random_state=1),
        n_jobs=2,
        method="predict_proba",
    )
    get_reusable_executor().shutdown(wait=True)  # processor time of a process counts once it has ended
    return float(-np.log2(p[np.arange(len(p)), table.target]).mean())


def learn(path: Path, output: Path, jobs: int = 2) -> None:
    """Run the whole default command as a process of its own.

    Raises:
        CalledProcessError: it failed.
    """
    command = [sys.executable, "-c", LEARN, "learn", str(path), "--class", "arrival", "-o", str(output)]
    subprocess.run([*command, "--overwrite", "--quiet", "--jobs", str(jobs)], check=True, capture_output=True)


def cross_validations(table: BenchTable, path: Path, output: Path) -> dict[str, Callable[[], object]]:
    """List what is compared with the whole command."""
    return {
        "bnx learn, the whole command, two threads": lambda: learn(path, output),
        "scikit-learn, CategoricalNB alone": lambda: scikit_log_loss(table),
        "scikit-learn, CategoricalNB alone, two processes": lambda: scikit_parallel(table),
    }


def staged(path: Path) -> list[tuple[str, float, float]]:
    """Profile the command in a process of its own: (stage, seconds, processor seconds), most processor time first."""
    command = [sys.executable, str(Path(__file__).with_name("stages.py")), str(path), "arrival"]
    done = subprocess.run(command, check=True, capture_output=True, text=True)
    rows = [line.split("\t") for line in done.stdout.splitlines()]
    return [(name, float(wall), float(processor)) for name, wall, processor in rows]


def processors() -> int:
    """Count the processors that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
