"""Run a command as a process of its own and watch its memory."""

import os
import re
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from timing import Figures

import bnx  # noqa: F401  # says where compiled loops are kept

__all__ = ["Child", "ChildError", "learn", "learn_compiled", "python", "run_child"]

LEARN = "from bnx.cli import main; main()"
_STAGE = re.compile(r"^(\S.*?) {2,}([0-9]+\.[0-9]+) +([0-9]+\.[0-9]+)$", re.MULTILINE)
_PAUSE = 0.01  # seconds between two looks at the memory


class ChildError(Exception):
    """The command ended with an error; the message holds what it wrote."""


@dataclass(frozen=True)
class Child:
    """What a process took.

    Seconds by the wall clock and of all processors; the most bytes resident, and the most of them that belong to no
    file (0 where the system does not tell); what it wrote to standard output and to standard error.
    """

    wall: float
    processor: float
    resident: int
    anonymous: int
    output: str
    errors: str

    def stages(self) -> list[tuple[str, float, float]]:
        """Read the table of ``--timings``: stage, seconds, processor seconds."""
        return [(name, float(wall), float(processor)) for name, wall, processor in _STAGE.findall(self.errors)]

    def figures(self) -> Figures:
        """Give all but the text, as they are stored."""
        return {
            "seconds": self.wall,
            "processor": self.processor,
            "resident": self.resident,
            "anonymous": self.anonymous,
            "stages": self.stages(),
        }


def run_child(command: Sequence[str]) -> Child:
    """Run a command to its end.

    Raises:
        ChildError: it ended with an error.
    """
    with tempfile.TemporaryFile() as output, tempfile.TemporaryFile() as errors:
        start, anonymous = time.perf_counter(), 0
        process = subprocess.Popen(command, stdout=output, stderr=errors)
        status = Path(f"/proc/{process.pid}/status")
        while True:
            ended, code, usage = os.wait4(process.pid, os.WNOHANG)
            if ended:
                break
            anonymous = max(anonymous, _anonymous(status))
            time.sleep(_PAUSE)
        wall = time.perf_counter() - start
        process.returncode = os.waitstatus_to_exitcode(code)
        texts = []
        for file in (output, errors):
            file.seek(0)
            texts.append(file.read().decode(errors="replace"))
    if process.returncode:
        raise ChildError(f"{' '.join(command)} ended with {process.returncode}: {texts[1][-2000:]}")
    resident = usage.ru_maxrss * (1 if sys.platform == "darwin" else 1024)
    return Child(wall, usage.ru_utime + usage.ru_stime, resident, anonymous, *texts)


def _anonymous(status: Path) -> int:
    """Read how many bytes of a process belong to no file now."""
    try:
        lines = status.read_text(encoding="utf-8").splitlines()
    except OSError:
        return 0
    return next((1024 * int(line.split()[1]) for line in lines if line.startswith("RssAnon:")), 0)


def learn(table: Path, results: Path, *options: str, target: str = "arrival", jobs: int = 2) -> Child:
    """Run the whole command ``bnx learn`` as a process of its own."""
    command = [sys.executable, "-c", LEARN, "learn", str(table), "--class", target, "-o", str(results)]
    return run_child([*command, "--overwrite", "--quiet", "--jobs", str(jobs), *options])


def learn_compiled(table: Path, results: Path, *options: str, target: str = "arrival") -> Child:
    """Run ``bnx learn`` once more if something was compiled and kept while it ran, which happens once per machine."""
    before = _compiled()
    found = learn(table, results, *options, target=target)
    return found if _compiled() == before else learn(table, results, *options, target=target)


def _compiled() -> set[Path]:
    """List what is compiled and kept; importing bnx says where."""
    return {path for path in Path(os.environ["NUMBA_CACHE_DIR"]).rglob("*") if path.is_file()}


def python(code: str) -> Child:
    """Run some Python as a process of its own."""
    return run_child([sys.executable, "-c", code])
