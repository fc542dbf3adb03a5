"""``bnx test``: what it prints and writes, that every option tells, and that nothing is left half-written."""

import csv
import json
from pathlib import Path

import numpy as np
import pytest
from commandline import call, refusal, small_table, write

DEMO = str(Path(__file__).parent.parent / "datasets" / "cold_chain.csv")
GRADE = ("--class", "grade")
PAIR_KEYS = {
    "a",
    "b",
    "bits",
    "bits_corrected",
    "bits_low",
    "bits_high",
    "marginal_bits",
    "marginal_bits_corrected",
    "marginal_p_value",
    "marginal_adjusted_p",
    "explained_bits",
    "bits_without_blanks",
    "double_counted_bits",
    "outcome",
    "x2",
    "g",
    "statistic",
    "df",
    "p_value",
    "adjusted_p",
    "method",
    "sample_carries_it",
    "strata",
    "strata_informative",
    "min_expected",
    "share_expected_below_5",
    "cramers_v",
    "detectable_bits",
    "detectable_at",
    "verdict",
}
CLOSE_KEYS = {"classes", "same_in_every_class", "differs_between_classes", "only_in", "odds", "trend"}


def test_pairs_are_printed_by_verdict() -> None:
    run = call("test", small_table(), *GRADE, "--all")
    assert run.code == 0
    lines = run.out.splitlines()
    assert lines[0] == "240 rows; bits, X2 and p given grade"
    assert lines[2].split() == ["bits", "marginal", "X2", "df", "p", "adjusted", "detectable", "method"]
    assert lines[3] == "dependent"
    assert lines[4].startswith("  dock ~ alarm ")
    table = run.out.split("\n\nbits: ")[0]
    assert table.count(" ~ ") == 15
    assert max(map(len, lines)) <= 100
    assert "3 of 3 strata informative (both attributes vary there)" in lines


def test_json_has_every_key_promised() -> None:
    run = call("test", small_table(), *GRADE, "dock", "alarm", "lane", "--given", "shift", "--json", "--explain")
    found = json.loads(run.out)
    assert (found["class"], found["given"], found["rows"]) == ("grade", ["shift"], 240)
    tests = found["tests"]
    assert (tests[0]["a"], tests[0]["b"], len(tests)) == ("dock", "alarm", 3)
    for one in tests:
        assert set(one) >= PAIR_KEYS | CLOSE_KEYS
        assert (one["strata"], "strata_tables" in one) == (12, False)
        assert ("explained_by" in one) == (one["adjusted_p"] is not None and one["adjusted_p"] <= 0.05)
    assert {one["attribute"] for one in tests[0]["explained_by"]} == {"lane", "site", "gap"}


def test_json_takes_no_more_than_json_allows() -> None:
    for more in ((), ("--strata",), ("--strata", "--given", "site,shift")):
        text = call("test", small_table(), *GRADE, "--all", "--json", *more).out
        json.loads(text, parse_constant=lambda name: pytest.fail(f"{name} is no JSON"))


def test_the_csv_holds_what_the_json_holds(tmp_path: Path) -> None:
    path = tmp_path / "pairs.csv"
    run = call("test", small_table(), *GRADE, "--all", "--given", "site", "--json", "-o", str(path))
    with path.open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    tests = json.loads(run.out)["tests"]
    assert len(rows) == len(tests) == 10
    for row, one in zip(rows, tests, strict=True):
        assert set(row) >= PAIR_KEYS | {"given"}
        assert row.pop("given") == "grade, site"
        for key, text in row.items():
            value = one[key]
            if isinstance(value, float):
                assert float(text) == value
            else:
                assert text == ("" if value is None else str(value))


@pytest.mark.parametrize("names", [("shift", "site", "gap"), ("--all",)])
def test_the_same_bytes_twice_and_with_any_number_of_threads(names: tuple[str, ...], tmp_path: Path) -> None:
    runs = []
    for number, jobs in enumerate(("1", "1", "2")):
        paths = [str(tmp_path / f"{number}{ending}") for ending in (".csv", ".svg")]
        options = ("--jobs", jobs, "--explain", "--strata", "--quiet", "-o", paths[0], "--plot", paths[1])
        text = call("test", small_table(), *GRADE, *names, *options).out
        document = call("test", small_table(), *GRADE, *names, "--jobs", jobs, "--strata", "--explain", "--json").out
        runs.append((text, document, *(Path(path).read_bytes() for path in paths)))
    assert runs[0] == runs[1] == runs[2]


@pytest.mark.parametrize("names", [("dock", "alarm", "lane"), ("--all",)])
@pytest.mark.parametrize(("ending", "start"), [("svg", b"<"), ("png", b"\x89PNG"), ("pdf", b"%PDF")])
def test_pictures_of_named_pairs_and_of_those_rejected(
    names: tuple[str, ...], ending: str, start: bytes, tmp_path: Path
) -> None:
    path = tmp_path / f"p.{ending}"
    run = call("test", small_table(), *GRADE, *names, "--plot", str(path))
    assert run.code == 0
    assert run.err.endswith(f"{path} written\n")
    assert path.read_bytes().lstrip().startswith(start)
    assert [one.name for one in tmp_path.iterdir()] == [path.name]
    if ending == "svg":
        text = path.read_text(encoding="utf-8")
        assert "dock ~ alarm" in text
        assert ("alarm ~ lane" in text) == (names != ("--all",))


def test_files_are_not_replaced_unless_told_to(tmp_path: Path) -> None:
    for option, name in (("-o", "p.csv"), ("--plot", "p.svg")):
        path = tmp_path / name
        path.write_text("mine")
        message = refusal("test", small_table(), *GRADE, "dock", "alarm", option, str(path))
        assert message == (
            f"the file {path} exists already; give another one with {option}, or --overwrite to replace it"
        )
        assert path.read_text() == "mine"
        assert call("test", small_table(), *GRADE, "dock", "alarm", option, str(path), "--overwrite").code == 0
        assert path.read_text() != "mine"


HALVES = {
    "a picture in no folder": ("-o p.csv --plot none/p.svg", "there is no folder none"),
    "a CSV in no folder": ("-o none/p.csv --plot p.svg", "none"),
    "a picture that is there already": ("-o p.csv --plot taken.svg", "taken.svg exists already"),
    "a CSV that is there already": ("-o taken.csv --plot p.svg", "taken.csv exists already"),
    "an ending that cannot be drawn": ("-o p.csv --plot p.bmp", "use .svg, .png or .pdf"),
    "no ending": ("-o p.csv --plot p", "use .svg, .png or .pdf"),
    "a folder for a picture": ("-o p.csv --plot folder.svg", "folder.svg is a folder"),
}


@pytest.mark.parametrize("case", HALVES)
def test_a_later_step_that_fails_leaves_nothing(case: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    for name in ("taken.svg", "taken.csv"):
        Path(name).write_text("mine")
    Path("folder.svg").mkdir()
    options, message = HALVES[case]
    assert message in refusal("test", small_table(), *GRADE, "dock", "alarm", *options.split())
    assert {path.name for path in Path().iterdir()} == {"taken.svg", "taken.csv", "folder.svg"}
    assert {Path(name).read_text() for name in ("taken.svg", "taken.csv")} == {"mine"}


def test_a_picture_of_nothing_is_not_drawn_and_the_csv_is_written(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    random = np.random.default_rng(1)
    rows = [[*(f"l{k}" for k in random.integers(0, 2, 2)), "xy"[k % 2]] for k in range(100)]
    write(Path("t.csv"), ("a", "b", "kind"), rows)
    run = call("test", "t.csv", "--class", "kind", "--all", "-o", "p.csv", "--plot", "p.svg")
    assert run.code == 0
    assert run.err.splitlines()[-2:] == [
        "p.csv written",
        "no pair was rejected, so p.svg is not drawn; name two attributes to draw them",
    ]
    assert sorted(path.name for path in Path().iterdir()) == ["p.csv", "t.csv"]
    assert call("test", "t.csv", "--class", "kind", "a", "b", "--plot", "p.svg").code == 0


def test_the_table_itself_is_never_replaced(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    write(Path("t.csv"))
    before = Path("t.csv").read_bytes()
    Path("link.csv").symlink_to("t.csv")
    for name in ("t.csv", "./t.csv", "link.csv"):
        message = refusal("test", "t.csv", *GRADE, "dock", "alarm", "-o", name, "--overwrite")
        assert "is the table" in message
        assert Path("t.csv").read_bytes() == before


def drawn(rows: int, sizes: tuple[int, ...], blank: float = 0.0, classes: int = 2) -> list[list[str]]:
    """Draw cells of so many levels at random, some of them blank, and a class."""
    random = np.random.default_rng(rows)
    cells = [[f"v{k}" for k in random.integers(0, size, rows)] for size in sizes]
    hidden = random.random((len(sizes), rows)) < blank
    columns = [["" if no else cell for cell, no in zip(*both, strict=True)] for both in zip(cells, hidden, strict=True)]
    return [list(row) for row in zip(*columns, (f"k{k % classes}" for k in range(rows)), strict=True)]


ODD = {
    "ten rows": drawn(10, (2, 2, 3)),
    "two rows": [["v0", "v1", "v0", "k0"], ["v1", "v0", "v0", "k1"]],
    "one record in every stratum": [[f"v{k % 2}", f"v{k % 3}", f"v{k // 2}", f"k{k % 2}"] for k in range(60)],
    "60 levels by 60": drawn(1500, (60, 60, 2)),
    "blanks nearly everywhere": drawn(200, (2, 3, 2), blank=0.95),
    "a class of one record": [*drawn(100, (3, 3, 2)), ["v0", "v1", "v1", "alone"]],
    "a hundred classes": drawn(400, (3, 3, 2), classes=100),
    "perfect copies": [["v0", "v0", "v0", "k0"], ["v1", "v1", "v1", "k1"]] * 50,
}


@pytest.mark.parametrize("case", ODD)
def test_odd_tables_are_tested_without_a_fuss(case: str, tmp_path: Path) -> None:
    table = write(tmp_path / "odd.csv", ("a", "b", "c", "kind"), ODD[case])
    chosen = ("test", table, "--class", "kind", "a", "b", "--keep", "all")
    for more in ((), ("--given", "c"), ("--test", "monte-carlo"), ("--test", "g", "--bins", "mdl")):
        run = call(*chosen, *more, "--explain", "--strata", "--plot", str(tmp_path / "p.svg"), "--overwrite")
        assert run.code == 0, run
        assert max(map(len, run.out.splitlines())) <= 100
        one = json.loads(call(*chosen, *more, "--json", "--strata").out)["tests"][0]
        assert sum(table["rows"] for table in one["strata_tables"]) == len(ODD[case])
        assert len(one["strata_tables"]) == one["strata"]
        informative = [np.array(table["observed"]) for table in one["strata_tables"]]
        several = [bool(min(np.count_nonzero(t.any(0)), np.count_nonzero(t.any(1))) > 1) for t in informative]
        assert one["strata_informative"] == sum(several)


def test_one_record_in_every_stratum_is_not_enough_data(tmp_path: Path) -> None:
    table = write(tmp_path / "odd.csv", ("a", "b", "c", "kind"), ODD["one record in every stratum"])
    run = call("test", table, "--class", "kind", "a", "b", "--given", "c", "--keep", "all")
    assert "0 of 60 strata informative" in run.out
    assert "not enough data\n  a ~ b " in run.out
    assert run.err.splitlines()[-1].startswith("note: 1 pair left out in advance (method none): ")
