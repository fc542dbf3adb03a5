"""A first run compiles its loops: half of them in a process of its own, so that two processors share the work."""

import os
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from bnx import __kernels__
from bnx.unfinished import unfinished

__all__ = ["COMMAND", "DONE", "compiling_ahead"]

DONE = Path(os.environ["NUMBA_CACHE_DIR"], f"late-{__kernels__}")
"""A file that says that all is compiled."""
COMMAND = (sys.executable, "-P", "-m", "bnx.kernels.warming", str(DONE))


@contextmanager
def compiling_ahead(jobs: int) -> Iterator[bool]:
    """Compile late loops while the block runs, if it has a processor to spare and they are not on disk yet.

    Yields:
        Whether anything is compiled. It is stopped when the block ends; the next run goes on with what is left.
    """
    if DONE.exists() or jobs < 2:
        yield False
        return
    with _another_process():
        yield True


@contextmanager
def _another_process() -> Iterator[None]:
    """Let another process compile while the block runs."""
    away = subprocess.DEVNULL
    with subprocess.Popen(COMMAND, stdin=away, stdout=away, stderr=away) as helper, unfinished(helper.kill):
        try:
            yield
        finally:
            helper.kill()
