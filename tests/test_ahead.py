"""Loops compiled ahead of their use, in a process of its own."""

import os
import subprocess
import sys
import time
from pathlib import Path

import pytest

import bnx.cli.ahead
from bnx.cli.ahead import compiling_ahead
from bnx.kernels.warming import LATE, compile_late

DEMO = Path(__file__).parent.parent / "datasets" / "cold_chain.csv"


def test_a_run_calls_every_loop_with_the_types_that_are_compiled_ahead(tmp_path: Path) -> None:
    """Else the work would be for nothing: a loop is compiled anew for other types."""
    script = (
        "import sys\n"
        "from bnx.cli import app\n"
        "from bnx.kernels.warming import LATE\n"
        "app(sys.argv[1:], standalone_mode=False)\n"
        "unused = [(loop.__name__, str(types)) for loop, types in LATE if types not in loop.signatures]\n"
        "print(unused, file=sys.stderr)\n"
    )
    options = ["--folds", "3", "--resamples", "0", "--quiet", "--jobs", "1"]
    options += ["--structures", "naive,kdb2-tested,heldout"]
    run = ["learn", str(DEMO), "--class", "arrival", "-o", str(tmp_path / "out"), *options]
    done = subprocess.run([sys.executable, "-c", script, *run], capture_output=True, text=True, check=True)
    assert done.stderr == "[]\n"


def test_everything_late_is_compiled_and_noted(tmp_path: Path) -> None:
    compile_late(tmp_path / "done")
    assert (tmp_path / "done").exists()
    for loop, types in LATE:
        assert types in loop.signatures  # type: ignore[attr-defined]


def helper(folder: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Let a program that writes a file and then waits stand for the compiling one; give the file."""
    code = f"import os, time; open({str(folder / 'new')!r}, 'w').write(str(os.getpid())); "
    code += f"os.rename({str(folder / 'new')!r}, {str(folder / 'ran')!r}); time.sleep(60)"
    monkeypatch.setattr(bnx.cli.ahead, "COMMAND", (sys.executable, "-c", code))
    monkeypatch.setattr(bnx.cli.ahead, "DONE", folder / "done")
    return folder / "ran"


def test_another_process_works_while_the_block_runs_and_not_beyond(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    ran = helper(tmp_path, monkeypatch)
    with compiling_ahead(2) as ahead:
        assert ahead
        end = time.monotonic() + 30
        while not ran.exists() and time.monotonic() < end:
            time.sleep(0.01)
        number = int(ran.read_text())
        os.kill(number, 0)
    with pytest.raises(ProcessLookupError):
        os.kill(number, 0)


@pytest.mark.parametrize(("jobs", "done"), [(1, False), (2, True)])
def test_nothing_is_started_without_a_processor_to_spare_or_work_to_do(
    jobs: int, done: bool, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    ran = helper(tmp_path, monkeypatch)
    if done:
        (tmp_path / "done").touch()
    with compiling_ahead(jobs) as ahead:
        assert not ahead
        time.sleep(0.2)
    assert not ran.exists()
