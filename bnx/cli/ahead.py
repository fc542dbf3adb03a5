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
    if jobs < 2 or DONE.exists():
        yield False
        return
    away = subprocess.DEVNULL
    with subprocess.Popen(COMMAND, stdin=away, stdout=away, stderr=away) as helper, unfinished(helper.kill):
        try:
            yield True
        finally:
            helper.kill()
