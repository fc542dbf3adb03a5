"""What a command says while it works: bars on a terminal; elsewhere, on long runs, a line now and then."""

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from threading import Event, Thread
from typing import Any

import typer
from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

from bnx.unfinished import unfinished

__all__ = ["QUIET_SECONDS", "bars", "lines", "told"]

Tell = Callable[[str, int, int], None]

QUIET_SECONDS = 20.0
"""Runs that take less say nothing where no terminal shows bars."""
_AGAIN_SECONDS = 60.0
_LOOK_SECONDS = 1.0  # stages shorter than this may go unsaid


@contextmanager
def told(quiet: bool) -> Iterator[Tell]:
    """Say on standard error what runs while the block does: a bar per stage on a terminal, else a line now and then.

    What is given is to be called with (stage, steps done, of how many; 0 of 0 where steps are not counted).
    """
    if quiet:
        yield lambda stage, done, total: None
    elif sys.stderr.isatty():
        with bars() as tell:
            yield tell
    else:
        with lines() as tell:
            yield tell


@contextmanager
def bars() -> Iterator[Tell]:
    """Show a bar for every stage, and take them all away at the end."""
    columns = (TextColumn("{task.description:<20}"), BarColumn(), TextColumn("{task.fields[steps]}"))
    with (
        Progress(*columns, TimeElapsedColumn(), console=Console(stderr=True), transient=True) as bar,
        unfinished(bar.stop),
    ):
        tasks: dict[str, Any] = {}
        running = ""

        def tell(stage: str, done: int, total: int) -> None:
            nonlocal running
            if stage not in tasks:
                tasks[stage] = bar.add_task(stage, total=None, steps="")
            if stage != running and running:
                bar.update(tasks[running], total=1, completed=1)
            running = stage
            bar.update(tasks[stage], total=total or None, completed=done, steps=_steps(done, total))

        yield tell


def _steps(done: int, total: int) -> str:
    return f"{done:,} of {total:,}" if total else ""


@contextmanager
def lines(after: float = QUIET_SECONDS, again: float = _AGAIN_SECONDS, look: float = _LOOK_SECONDS) -> Iterator[Tell]:
    """Say what runs, ``after`` seconds in: when that changes, and ``again`` after so many seconds in one stage."""
    began = time.monotonic()
    running = ("starting", 0, 0)
    ended = Event()

    def tell(stage: str, done: int, total: int) -> None:
        nonlocal running
        running = (stage, done, total)

    def watch() -> None:
        said, at = "", began
        while not ended.wait(look):
            stage, done, total = running
            now = time.monotonic()
            if now - began >= after and (stage != said or now - at >= again):
                said, at = stage, now
                typer.echo(_line(now - began, stage, done, total), err=True)

    watcher = Thread(target=watch, daemon=True)
    watcher.start()
    try:
        yield tell
    finally:
        ended.set()
        watcher.join()


def _line(seconds: float, stage: str, done: int, total: int) -> str:
    """Write one line: ``0:25 trying smoothings, 12 of 40``."""
    minutes, rest = divmod(int(seconds), 60)
    steps = _steps(done, total)
    return f"{minutes}:{rest:02d} {stage}{', ' + steps if steps else ''}"
