"""What a command says while it works, and the table of where its time went."""

import os
import pty
import re
import subprocess
import sys
import time
from pathlib import Path

import pytest
from commandline import FAST, call, small_table

from bnx.cli.progress import lines, told
from bnx.cli.timings import Clock

PROGRAM = [sys.executable, "-c", "from bnx.cli import main; main()"]


def stages(err: str) -> dict[str, tuple[float, float]]:
    """Read the table of stages."""
    found = re.findall(r"^([a-z ]+?)  +(\d+\.\d\d)  +(\d+\.\d\d)$", err, re.M)
    return {stage: (float(wall), float(processor)) for stage, wall, processor in found}


def test_a_clock_charges_all_time_to_some_stage_and_passes_the_news_on() -> None:
    heard: list[tuple[str, int, int]] = []
    began = time.perf_counter()
    clock = Clock(lambda *news: heard.append(news), (began, time.process_time()))
    clock.tell("waiting", 0, 2)
    time.sleep(0.02)
    clock.tell("waiting", 2, 2)
    clock.tell("working")
    while clock.spent()["working"][1] < 0.02:
        pass
    clock.tell("waiting", 0, 1)
    time.sleep(0.02)
    spent = clock.spent()
    whole = time.perf_counter() - began
    assert list(spent) == ["imports", "waiting", "working"]
    assert heard == [("waiting", 0, 2), ("waiting", 2, 2), ("working", 0, 0), ("waiting", 0, 1)]
    assert spent["waiting"][0] >= 0.04 > spent["waiting"][1]
    assert whole - 0.01 < sum(wall for wall, _ in spent.values()) <= whole


def test_a_clock_charges_programs_that_were_run() -> None:
    clock = Clock()
    clock.tell("running")
    subprocess.run([sys.executable, "-c", "import time\nwhile time.process_time() < 0.3: pass"], check=True)
    assert clock.spent()["running"][1] >= 0.25


def test_learn_tells_where_its_time_went_and_the_stages_add_up(tmp_path: Path) -> None:
    plain = call("learn", small_table(), "--class", "grade", "-o", str(tmp_path / "a"), "--quiet", *FAST)
    run = call("learn", small_table(), "--class", "grade", "-o", str(tmp_path / "b"), "--quiet", "--timings", *FAST)
    assert run.code == 0
    assert run.out == plain.out.replace(str(tmp_path / "a"), str(tmp_path / "b")), "standard output carries the result"
    assert plain.err == ""
    table = stages(run.err)
    assert list(table)[:4] == ["imports", "reading", "dealing folds", "sorting rows"]
    assert list(table)[-1] == "all"
    assert {"measuring pairs", "counting families", "trying smoothings", "calibrating", "scoring folds"} < set(table)
    assert {"judging edges", "stability", "scoring", "judging pairs", "edge ledger"} < set(table)
    assert {"documents", "drawings", "report", "writing"} < set(table)
    for k in range(2):
        parts = [times[k] for stage, times in table.items() if stage != "all"]
        assert sum(parts) == pytest.approx(table["all"][k], abs=0.005 * (len(parts) + 1))


def test_stages_of_a_whole_run_add_up_to_what_a_watch_shows() -> None:
    began = time.perf_counter()
    done = subprocess.run(
        [*PROGRAM, "test", small_table(), "--class", "grade", "dock", "alarm", "--timings"],
        capture_output=True,
        text=True,
        check=True,
    )
    whole = time.perf_counter() - began
    table = stages(done.stderr)
    assert list(table)[:4] == ["imports", "reading", "sorting rows", "judging pairs"]
    assert 0.5 * whole < table["all"][0] < whole + 0.02
    assert table["imports"][1] > 0


def test_long_runs_say_what_they_do_even_where_no_terminal_is(capfd: pytest.CaptureFixture[str]) -> None:
    with lines(after=0.05, again=0.1, look=0.005) as tell:
        tell("short", 0, 0)
        time.sleep(0.02)
        tell("counting families", 3, 4000)
        time.sleep(0.25)
        tell("trying smoothings", 0, 0)
        time.sleep(0.04)
    said = capfd.readouterr().err.splitlines()
    assert set(said) == {"0:00 counting families, 3 of 4,000", "0:00 trying smoothings"}
    assert said.count("0:00 trying smoothings") == 1
    assert 2 <= said.count("0:00 counting families, 3 of 4,000") <= 3, "said again when it takes long"


def test_minutes_are_told_from_seconds() -> None:
    from_module = sys.modules["bnx.cli.progress"]
    assert from_module._line(3725.9, "stability", 0, 0) == "62:05 stability"  # type: ignore[attr-defined]


def test_short_runs_say_nothing_where_no_terminal_is(capfd: pytest.CaptureFixture[str]) -> None:
    with told(quiet=False) as tell:
        tell("reading", 0, 0)
    assert capfd.readouterr().err == ""


def test_quiet_runs_say_nothing_however_long(capfd: pytest.CaptureFixture[str]) -> None:
    with told(quiet=True) as tell:
        tell("reading", 0, 0)
    assert capfd.readouterr().err == ""


def test_a_terminal_shows_a_bar_for_every_stage() -> None:
    script = (
        "from bnx.cli.progress import told\n"
        "import time\n"
        "with told(False) as tell:\n"
        "    tell('reading', 0, 0); time.sleep(.15); tell('counting families', 1234, 4000); time.sleep(.15)\n"
    )
    ours, theirs = pty.openpty()
    done = subprocess.run(
        [sys.executable, "-c", script], stderr=theirs, env={**os.environ, "TERM": "xterm"}, check=True
    )
    os.close(theirs)
    shown = os.read(ours, 100_000).decode()
    os.close(ours)
    assert done.returncode == 0
    assert "reading" in shown
    assert "counting families" in shown
    assert "1,234 of 4,000" in shown
