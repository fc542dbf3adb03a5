"""Every command does its job: what it prints, what it writes, and where."""

import csv
import inspect
import io
import json
import os
import re
import signal
import subprocess
import sys
import time
from dataclasses import fields
from pathlib import Path

import pandas as pd
import pytest
from commandline import FAST, call, small_results, small_rows, small_table, write

import bnx.cli.learn
import bnx.cli.profile
import bnx.cli.test
from bnx.cli import COMMANDS
from bnx.cli.shared import listed, threads
from bnx.recipe import Recipe

PROGRAM = [sys.executable, "-c", "from bnx.cli import main; main()"]


def test_help_lists_every_command_and_nothing_asked_is_help() -> None:
    shown = call("--help")
    assert shown.code == 0
    assert re.findall(r"^  (\w+)  ", shown.out.partition("Commands:")[2], re.M) == list(COMMANDS)
    assert call() == shown


def test_help_needs_none_of_the_heavy_libraries() -> None:
    heavy = ("numpy", "pandas", "scipy", "numba", "rich")
    code = f"import sys, bnx.cli; print([name for name in {heavy} if name in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_a_help_that_says_what_it_does(command: str) -> None:
    shown = call(command, "--help")
    assert shown.code == 0
    assert shown.out.startswith(f"Usage: bnx {command} ")
    assert max(map(len, shown.out.splitlines())) <= 80


def test_the_help_of_classify_shows_the_cautions() -> None:
    text = " ".join(call("classify", "--help").out.split())
    assert "A probability is not a decision." in text
    assert "leave the decision to those licensed to make it" in text
    assert "bias in who was recorded and how" in text


def test_every_setting_is_an_option_of_the_same_name() -> None:
    options = inspect.signature(bnx.cli.learn.run).parameters
    assert {field.name for field in fields(Recipe)} <= set(options)
    for command in (bnx.cli.profile, bnx.cli.test):
        shared = set(inspect.signature(command.run).parameters) & {field.name for field in fields(Recipe)}
        assert {"target", "numeric", "categorical", "ignore", "keep", "missing", "max_levels"} <= shared


def test_version() -> None:
    assert re.fullmatch(r"bnx \d+\.\d+\.\d+\n", call("--version").out)


def test_lists_come_as_several_options_with_commas_or_both_and_known_names_stay_whole() -> None:
    assert listed("keep", ["a, b", "c"]) == ("a", "b", "c")
    assert listed("keep", None) == ()
    assert listed("keep", ["a,b", "c,d"], ["a,b", "c", "d"]) == ("a,b", "c", "d")
    assert listed("require", ["a,b:c:d"], ["a,b", "c:d"]) == ("a,b:c:d",)


def test_jobs_zero_is_every_usable_processor() -> None:
    assert threads(3) == 3
    assert 1 <= threads(0) <= (os.cpu_count() or 1)


def test_learn_prints_one_screen_and_writes_a_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    out = Path("new place") / "ünï"
    run = call(
        "learn", small_table(), "--class", "grade", "-o", str(out), "--structures", "naive,tan,kdb2-tested", *FAST
    )
    assert (run.code, run.err) == (0, "")
    assert max(map(len, run.out.splitlines())) <= 120
    assert run.out.startswith("small.csv   240 rows   class grade: few ")
    document = json.loads((out / "comparison.json").read_text(encoding="utf-8"))
    for one in document["structures"]:
        line = next(line for line in run.out.splitlines() if re.match(rf"[* ] {one['name']} ", line))
        cells = line.removeprefix("*").split()
        assert cells[1:6] == [
            str(len(one["edges"])),
            f"{one['free_parameters']:,}",
            f"{one['log_loss']:.3f}",
            "+-",
            f"{one['log_loss_se']:.3f}",
        ]
        scores = ("brier", "accuracy", "auc", "calibration_error")
        assert cells[-5:] == [*(f"{one[key]:.3f}" for key in scores), f"{one['temperature']:.2f}"]
        if one["name"] != "naive":
            against = one["against_baseline"]
            low, high = against["interval"]
            assert f"  {against['difference']:+.3f} [{low:+.3f}, {high:+.3f}]  {against['p_value']:.3f}  " in line
        assert f"{one['name']}: {one['words']}" in " ".join(run.out.split())
    assert f"recommended (*): {document['recommended']['name']}." in run.out
    names = [one["name"] for one in document["structures"]]
    assert sorted(path.name for path in out.iterdir()) == sorted(
        [
            "comparison.json",
            "pairs.csv",
            "report.html",
            *(["mix.json"] if document["mix"]["offered"] else []),
            *(f"{name}.{form}" for name in names for form in ("json", "svg", "dot")),
        ]
    )
    assert [path.name for path in tmp_path.iterdir()] == ["new place"]
    assert [path.name for path in out.parent.iterdir()] == ["ünï"]


def test_learn_prints_the_document_as_json_and_reads_standard_input(tmp_path: Path) -> None:
    text = Path(small_table()).read_text(encoding="utf-8")
    out = str(tmp_path / "out")
    run = call("learn", "-", "--class", "grade", "-o", out, "--structures", "naive", "--json", *FAST, stdin=text)
    assert (run.code, run.err) == (0, "")
    document = json.loads(run.out)
    assert document == json.loads((tmp_path / "out" / "comparison.json").read_text(encoding="utf-8"))
    assert document["rows"] == 240
    assert document["settings"]["structures"] == ["naive"]


def test_learn_scores_a_holdout_table_and_writes_predictions_and_all_pairs(tmp_path: Path) -> None:
    held = write(tmp_path / "held.csv", rows=[*small_rows(60, 9), ["never seen", "few", "few", "", "x", "2", "few"]])
    out = tmp_path / "out"
    extra = ["--holdout", held, "--predictions", "--all-pairs", "--repeats", "2", "--structures", "naive,kdb1"]
    run = call("learn", small_table(), "--class", "grade", "-o", str(out), *extra, *FAST)
    assert run.code == 0
    table = run.out.partition("On the --holdout table, by the structures learnt from all rows of this one:\n")[2]
    assert table.startswith("structure  ")
    document = json.loads((out / "comparison.json").read_text(encoding="utf-8"))
    for one in (*document["structures"], document["mix"] | {"name": "mix"}):
        assert re.search(rf"^  {one['name']} +{one['holdout']['log_loss']:.3f} ", table, re.M)
    predictions = pd.read_parquet(out / "predictions.parquet")
    assert list(predictions) == ["row", "repeat", "fold", "structure", "truth", "p:few", "p:many", "p:some"]
    assert len(predictions) == 240 * 2 * 3, "two structures and their mix"
    assert len(pd.read_parquet(out / "pairs.parquet")) == 15


def test_learn_with_odd_names_and_levels(tmp_path: Path) -> None:
    odd = ("a,b", "c:d", 'say "x"', "two\nlines", "<script>alert(1)</script>", "gap", "grade")
    levels = {"few": "p:x", "some": "<script>", "many": 'a,"b'}
    table = write(tmp_path / "odd table.csv", odd, [[*row[:-1], levels[row[-1]]] for row in small_rows()])
    out = tmp_path / "out"
    options = ["--ignore", "a,b", "--keep", "two\nlines", "--structures", "naive,kdb1", *FAST]
    run = call("learn", table, "--class", "grade", "-o", str(out), *options)
    assert run.code == 0, run
    document = json.loads((out / "comparison.json").read_text(encoding="utf-8"))
    assert document["attributes"] == list(odd[1:-1])
    assert document["settings"]["ignore"] == ["a,b"]
    classified = call("classify", str(out / "kdb1.json"), table, "-o", "-")
    header, first = list(csv.reader(io.StringIO(classified.out)))[:2]
    assert header == ["row", "most_probable", "p:<script>", 'p:a,"b', "p:p:x"]
    assert first[1] in levels.values()


@pytest.mark.parametrize(("rows", "folds"), [(12, "3"), (40, "4")])
def test_learn_on_very_few_rows_with_a_class_of_one(tmp_path: Path, rows: int, folds: str) -> None:
    table = write(tmp_path / "few.csv", rows=[*small_rows(rows), [*small_rows(1)[0][:-1], "odd"]])
    out = str(tmp_path / "out")
    run = call(
        "learn", table, "--class", "grade", "-o", out, "--structures", "naive,tan", "--folds", folds, "--resamples", "2"
    )
    assert run.code == 0, run
    assert "note: class grade = odd has 1 row: every figure for this class is anecdotal\n" in run.err


def test_quiet_keeps_standard_error_empty(tmp_path: Path) -> None:
    table = write(tmp_path / "few.csv", rows=small_rows(12))
    settings = ["--class", "grade", "--structures", "naive", "--folds", "3", "--resamples", "0"]
    loud = call("learn", table, "-o", str(tmp_path / "a"), *settings)
    quiet = call("learn", table, "-o", str(tmp_path / "b"), *settings, "--quiet")
    assert loud.err.startswith("note: ")
    assert (quiet.code, quiet.err) == (0, "")


def start(*arguments: str, **streams: object) -> subprocess.Popen[str]:
    return subprocess.Popen([*PROGRAM, *arguments], text=True, **streams)  # type: ignore[call-overload,no-any-return]


def test_a_refusal_of_the_real_program_is_one_line_and_code_1(tmp_path: Path) -> None:
    done = subprocess.run(
        [*PROGRAM, "profile", small_table(), "--class", "grde"], capture_output=True, text=True, check=False
    )
    assert (done.returncode, done.stdout) == (1, "")
    assert done.stderr == f"error: {small_table()} has no column 'grde'; did you mean grade?\n"


def test_standard_error_that_is_no_terminal_gets_no_progress_and_no_colour(tmp_path: Path) -> None:
    done = subprocess.run(
        [
            *PROGRAM,
            "learn",
            small_table(),
            "--class",
            "grade",
            "-o",
            str(tmp_path / "out"),
            "--structures",
            "naive",
            *FAST,
        ],
        capture_output=True,
        text=True,
        check=False,
        env={**os.environ, "FORCE_COLOR": "1", "NO_COLOR": ""},
    )
    assert (done.returncode, done.stderr) == (0, "")
    assert "\x1b" not in done.stdout


@pytest.mark.parametrize(("sent", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_an_interrupted_run_leaves_nothing(tmp_path: Path, sent: signal.Signals, code: int) -> None:
    demo = Path(__file__).parent.parent / "datasets" / "cold_chain.csv"
    run = start(
        "learn",
        str(demo),
        "--class",
        "arrival",
        "-o",
        str(tmp_path / "a" / "out"),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )
    for _ in range(600):
        if list(tmp_path.glob("a/.out-*")):
            break
        time.sleep(0.05)
    assert list(tmp_path.glob("a/.out-*")), "it has begun"
    run.send_signal(sent)
    out, err = run.communicate(timeout=60)
    assert (run.returncode, out, err) == (code, "", "")
    assert list(tmp_path.iterdir()) == []


def test_a_reader_that_goes_away_is_no_fault_worth_a_traceback(tmp_path: Path) -> None:
    run = start(
        "classify",
        f"{small_results()}/naive.json",
        "-",
        "-o",
        "-",
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )
    assert run.stdin is not None
    assert run.stdout is not None
    assert run.stderr is not None
    run.stdout.close()
    lines = Path(small_table()).read_text(encoding="utf-8").splitlines(keepends=True)
    run.stdin.write(lines[0] + "".join(lines[1:]) * 20)
    run.stdin.close()
    assert run.stderr.read() == ""
    assert run.wait(60) == 1
    run.stderr.close()


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs the device that is always full")
def test_a_full_place_for_standard_output_is_said_in_one_sentence() -> None:
    with Path("/dev/full").open("w") as full:
        run = start("show", f"{small_results()}/naive.json", stdout=full, stderr=subprocess.PIPE)
        err = run.communicate(timeout=60)[1]
    assert (run.returncode, err) == (
        1,
        "error: cannot write the output (No space left on device); give another place\n",
    )
