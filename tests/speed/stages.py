"""Where the time of ``bnx learn`` goes: wall clock and processor seconds of each stage, summed over its threads.

``python tests/speed/stages.py TABLE.parquet CLASS [JOBS]`` runs the command's own functions with a clock around each
and prints stage, wall clock and processor seconds, separated by tabs.
"""

import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import wraps
from pathlib import Path
from typing import Any

_START = time.perf_counter(), 0.0  # processor time counts from the start of the interpreter

from bnx import comparison, documents, evaluation, results  # noqa: E402  (imports are a stage, so the clock runs first)
from bnx.cli.summary import summary  # noqa: E402
from bnx.engines import LocalEngine  # noqa: E402
from bnx.reading import Source, open_source  # noqa: E402
from bnx.recipe import Recipe  # noqa: E402

STAGES = {
    "read and code the table": (Recipe, "code"),
    "digest of the file": (Source, "sha256"),
    "deal rows to folds": (comparison, "assign_blocks"),
    "sort rows, count levels": (comparison, "start_local"),
    "draw the rows of inner choices": (evaluation, "sample_for_choices"),
    "learn in every training set": (evaluation, "learn"),
    "count the families learnt": (evaluation, "make_trial"),
    "try smoothings": (evaluation, "inner_losses"),
    "gains of edges": (comparison, "edge_gains"),
    "stability over halves": (comparison, "stability"),
    "scores": (comparison, "score"),
    "edge ledger": (comparison, "edge_ledger"),
    "recommend": (comparison, "recommend"),
    "results as documents": (results, "structure_document"),
    "results as text": (results, "json_text"),
    "drawings": (results, "draw_all"),
    "report": (results, "report_html"),
}
MAPPED = {"calibrating": "choose and calibrate"}


class Clock:
    """Charges time to the stage that is running; a stage inside another is charged alone."""

    def __init__(self) -> None:
        self.spent: dict[str, list[float]] = {}
        self._running = ["imports"]
        self._since = _START

    def _charge(self) -> None:
        now = time.perf_counter(), time.process_time()
        stage = self.spent.setdefault(self._running[-1], [0.0, 0.0])
        for k in range(2):
            stage[k] += now[k] - self._since[k]
        self._since = now

    def turn_to(self, stage: str) -> None:
        """Leave the outermost stage for another."""
        self._charge()
        self._running[0] = stage

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """Charge the time inside to a stage."""
        self._charge()
        self._running.append(name)
        yield
        self._charge()
        self._running.pop()

    def around(self, function: Callable[..., Any], name: str) -> Callable[..., Any]:
        """Make a function a stage."""

        @wraps(function)
        def run(*arguments: Any, **options: Any) -> Any:
            with self.stage(name):
                return function(*arguments, **options)

        return run


def watch(clock: Clock) -> None:
    """Put the clock around the stages."""
    for name, (place, function) in STAGES.items():
        setattr(place, function, clock.around(getattr(place, function), name))
    plain = LocalEngine.map

    def mapped(engine: LocalEngine, function: Any, items: Any, stage: str = "") -> Any:
        if stage not in MAPPED:
            return plain(engine, function, items, stage)
        with clock.stage(MAPPED[stage]):
            return plain(engine, function, items, stage)

    LocalEngine.map = mapped  # type: ignore[method-assign, assignment]  # these stages have no function of their own


def profile(path: str, target: str, jobs: int) -> dict[str, list[float]]:
    """Do what ``bnx learn`` does; give (wall clock, processor) seconds of each stage."""
    clock = Clock()
    clock.turn_to("everything else")
    watch(clock)
    with tempfile.TemporaryDirectory() as folder:
        found = comparison.compare(open_source(path), Recipe(target), jobs, lambda *_: None)
        results.write_results(found, Path(folder), jobs)
        summary(documents.comparison_document(found), folder)
    clock.turn_to("")
    return clock.spent


if __name__ == "__main__":
    spent = profile(sys.argv[1], sys.argv[2], int(sys.argv[3]) if len(sys.argv) > 3 else 2)
    rows = sorted(spent.items(), key=lambda item: -item[1][1])
    total = [sum(times[k] for times in spent.values()) for k in range(2)]
    for stage, (wall, processor) in [*rows, ("all", total)]:
        print(f"{stage}\t{wall:.2f}\t{processor:.2f}")
