"""Where a command's time goes: a clock that is told what runs, and charges all time to it."""

import os
import time
from collections.abc import Callable

from bnx.cli import BEGAN
from bnx.text import aligned

__all__ = ["Clock"]

Progress = Callable[[str, int, int], None]
Reading = tuple[float, float]


def _now() -> Reading:
    """Read (wall clock, processor) seconds: of all threads, and of other programs run and ended."""
    spent = os.times()
    return time.perf_counter(), time.process_time() + spent.children_user + spent.children_system


class Clock:
    """Charges all time since the process began to the stage that runs; the first one is the loading of the program.

    It stands where progress is told and passes the news on, so a stage lasts until another one is told.
    """

    def __init__(self, pass_on: Progress = lambda *_: None, began: Reading = (BEGAN, 0.0)) -> None:
        self._pass_on = pass_on
        self._stage = "imports"
        self._since = began
        self._spent: dict[str, Reading] = {}

    def tell(self, stage: str, done: int = 0, total: int = 0) -> None:
        """Take news of progress: ``done`` of ``total`` steps of a stage, 0 of 0 where steps are not counted."""
        if stage != self._stage:
            self._charge()
            self._stage = stage
        self._pass_on(stage, done, total)

    def spent(self) -> dict[str, Reading]:
        """List (wall clock, processor) seconds of every stage, in the order in which they first ran."""
        self._charge()
        return dict(self._spent)

    def _charge(self) -> None:
        now = _now()
        wall, processor = self._spent.get(self._stage, (0.0, 0.0))
        self._spent[self._stage] = (wall + now[0] - self._since[0], processor + now[1] - self._since[1])
        self._since = now

    def __str__(self) -> str:
        """Lay the stages out as a table, with their sum."""
        stages = self.spent()
        total = tuple(sum(times[k] for times in stages.values()) for k in range(2))
        rows = [(stage, *(f"{seconds:.2f}" for seconds in times)) for stage, times in [*stages.items(), ("all", total)]]
        return aligned(("stage", "seconds", "processor seconds"), rows)
