"""Pairs, structure files and places for results that cannot be used: one sentence, and nothing is written."""

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from commandline import FAST, NAMES, call, refusal, small_results, small_rows, small_table, write

LEARN = ("--class", "grade", "-o", "out", "--structures", "naive,tan", *FAST)


@pytest.fixture(autouse=True)
def _in_an_empty_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


TESTS = {
    "dock dock": "'dock' is named twice; name each attribute once",
    "dock": "only dock is named, but a pair needs two; name at least two, or give --all",
    "": "no attribute is named, but a pair needs two; name at least two, or give --all",
    "--all dock lane": "--all tests every pair, but dock is named too; give the names or --all",
    "dock alrm": "small.csv has no column 'alrm'; did you mean alarm?",
    "dock grade": "'grade' is the class, which is taken as given in every test; leave it out",
    "dock lane --given grade": "'grade' is the class, which is taken as given in every test; leave it out",
    "dock lane --given lane": "'lane' is to be tested and also --given; it can be only one of them",
    "dock lane --given site,site": "'site' is named twice; name each attribute once",
    "dock lane --given shft": "small.csv has no column 'shft'; did you mean shift?",
    "dock lane --given ,": "--given: ',' names nothing; give one or more names, or drop the option",
    "--all --given dock,alarm,lane,shift,site": "the table has only 1 attribute to test beside the class and --given, "
    "but a pair needs two; give a table with more, or fewer --given",
}


@pytest.mark.parametrize("options", TESTS)
def test_pairs_that_cannot_be_tested(options: str) -> None:
    name = small_table()
    found = refusal("test", name, "--class", "grade", *options.split())
    assert found == TESTS[options].replace("small.csv", name)


def test_a_column_that_is_left_out_cannot_be_tested() -> None:
    write(Path("t.csv"), (*NAMES, "same"), [[*row, "x"] for row in small_rows(40)])
    assert refusal("test", "t.csv", "--class", "grade", "dock", "same") == (
        "'same' is left out of the table: the same value in every row; --keep same to use it"
    )


def test_structure_files_that_are_none() -> None:
    name, table = f"{small_results()}/kdb2.json", small_table()
    assert refusal("show", "none.json") == (
        "there is no file none.json; give the NAME.json that bnx learn or bnx export wrote"
    )
    assert (
        refusal("show", table)
        == f"{table} is not JSON (line 1: Expecting value); give the NAME.json that bnx learn or bnx export wrote"
    )
    comparison = f"{small_results()}/comparison.json"
    assert refusal("classify", comparison, table, "-o", "-") == (
        f"{comparison} has the format 'bnx-comparison/1', not 'bnx-structure/1'; give a NAME.json of bnx learn"
    )
    assert refusal("show", name, "alrm") == "'alrm' is not an attribute of this structure; did you mean alarm?"
    assert refusal("show", name, "--given", "dock") == (
        "--given only goes with --separated; add --separated or drop it"
    )
    assert refusal("show", name, "dock", "--json") == (
        "--json prints the whole structure, but dock is named; drop the name or --json"
    )
    assert refusal("show", name, "--separated", "dock") == (
        "--separated takes two attributes, not 1; write --separated A B --given Z"
    )


def change(*keys: Any, value: Any) -> Callable[[dict[str, Any]], None]:
    """Put a value at a place of a document; the value ``...`` takes the place away."""

    def apply(document: Any) -> None:
        for key in keys[:-1]:
            document = document[key]
        if value is ...:
            del document[keys[-1]]
        else:
            document[keys[-1]] = value

    return apply


WRITE_ANEW = "write it anew with bnx learn"
TAMPERED = [
    (change("edges", value=...), f"f.json has no edges; {WRITE_ANEW} or bnx export"),
    (change("edges", 0, "gain", value=...), f"f.json has no edges[0].gain; {WRITE_ANEW} or bnx export"),
    (change("edges", 0, "bits", value=None), f"f.json: edges[0].bits is None, not int or float; {WRITE_ANEW}"),
    (change("edges", 0, value=7), f"f.json: edges[0] is 7, not an object; {WRITE_ANEW}"),
    (change("rows", value="many"), f"f.json: rows is 'many', not int; {WRITE_ANEW}"),
    (change("rows", value=True), f"f.json: rows is True, not int; {WRITE_ANEW}"),
    (change("edges", value=[]), f"f.json: the edges are not those of the attributes' parents; {WRITE_ANEW}"),
    (change("bits_with_class", "dock", value=...), f"f.json has no bits_with_class.dock; {WRITE_ANEW} or bnx export"),
    (
        change("attributes", 0, "probabilities", 0, 0, value=0.5),
        "f.json contradicts itself (the probabilities of dock do not follow from its counts); "
        "write it anew with bnx learn or bnx export",
    ),
]


@pytest.mark.parametrize("case", range(len(TAMPERED)))
def test_structure_files_that_somebody_changed(case: int) -> None:
    apply, message = TAMPERED[case]
    structure = "kdb2" if case < len(TAMPERED) - 1 else "naive"
    document = json.loads((Path(small_results()) / f"{structure}.json").read_text(encoding="utf-8"))
    apply(document)
    Path("f.json").write_text(json.dumps(document), encoding="utf-8")
    for command in (
        ("show", "f.json"),
        ("draw", "f.json", "-o", "f.svg"),
        ("classify", "f.json", small_table(), "-o", "-"),
    ):
        assert refusal(*command) == message
    assert [path.name for path in Path().iterdir()] == ["f.json"]


def test_results_folders_without_the_structure_asked_for() -> None:
    folder = small_results()
    assert refusal("export", folder, "--structure", "kdb22", "-o", "f.json") == (
        f"{folder} holds no structure 'kdb22'; did you mean kdb2?"
    )
    assert refusal("export", folder, "--structure", "comparison", "-o", "f.json") == (
        f"{folder} holds no structure 'comparison'; known: kdb2, mix, naive, tan"
    )
    assert refusal("export", ".", "--structure", "tan", "-o", "f.json") == (
        ". holds no comparison.json; give the folder that bnx learn -o wrote"
    )


OUTPUTS = [
    (
        ("draw", "kdb2.json", "-o", "f.gif"),
        "-o f.gif: the ending says nothing that can be drawn; use .svg, .png, .pdf or .dot",
    ),
    (("draw", "kdb2.json", "-o", ""), "-o : the ending says nothing that can be drawn; use .svg, .png, .pdf or .dot"),
    (("draw", "kdb2.json", "-o", "f.png", "--theme", "pink"), "--theme: 'pink' cannot be used; give light or dark"),
    (
        ("draw", "kdb2.json", "-o", "f.svg", "--theme", "dark"),
        "--theme dark cannot be used for an .svg, which follows the reader's own setting; drop it",
    ),
    (
        ("draw", "kdb2.json", "-o", "f.svg", "--least-bits", "nan"),
        "--least-bits: nan cannot be used; give 0 or a number above",
    ),
    (
        ("draw", "kdb2.json", "-o", "f.svg", "--least-gain", "inf"),
        "--least-gain: inf cannot be used; give a number, which may be below 0",
    ),
    (
        ("draw", "kdb2.json", "-o", "none/f.svg"),
        "cannot write none/f.svg: there is no folder none; make it, or give another -o",
    ),
    (
        ("export", "", "--structure", "tan", "-o", "f.json", "--to", "xml"),
        "--to: 'xml' cannot be used; give json or dot",
    ),
    (
        ("export", "", "--structure", "tan", "-o", "f.dot"),
        "-o f.dot ends in .dot, but --to is json; give --to dot or another ending",
    ),
    (
        ("classify", "kdb2.json", "-o", "f.txt"),
        "-o f.txt: the ending must be .csv or .parquet, or - for CSV on standard output",
    ),
    (
        ("classify", "kdb2.json", "-o", "-", "--overwrite"),
        "--overwrite has nothing to replace with -o -, which is standard output; drop it",
    ),
]


@pytest.mark.parametrize(("line", "message"), OUTPUTS)
def test_outputs_that_cannot_be_written(line: tuple[str, ...], message: str) -> None:
    command, structure, *options = line
    table = [small_table()] if command == "classify" else []
    assert refusal(command, f"{small_results()}/{structure}".rstrip("/"), *table, *options) == message
    assert list(Path().iterdir()) == []


@pytest.mark.parametrize("command", ["draw", "export", "classify"])
def test_a_file_that_is_there_is_replaced_only_when_told(command: str) -> None:
    name = {"draw": "f.svg", "export": "f.json", "classify": "f.csv"}[command]
    given = {
        "draw": [f"{small_results()}/tan.json"],
        "export": [small_results(), "--structure", "tan"],
        "classify": [f"{small_results()}/tan.json", small_table()],
    }[command]
    Path(name).write_text("keep")
    assert refusal(command, *given, "-o", name) == (
        f"the file {name} exists already; give another one with -o, or --overwrite to replace it"
    )
    assert Path(name).read_text() == "keep"
    assert call(command, *given, "-o", name, "--overwrite").code == 0
    assert Path(name).read_text() != "keep"
    assert [path.name for path in Path().iterdir()] == [name]


def test_without_an_engine_nothing_is_drawn(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("BNX_DOT", "no-such-program")
    assert refusal("draw", f"{small_results()}/tan.json", "-o", "f.svg") == (
        "the environment variable BNX_DOT is 'no-such-program', which is no program; give the path of dot"
    )
    assert list(Path().iterdir()) == []


def test_output_folders_that_cannot_be_used() -> None:
    table = small_table()
    Path("file").write_text("keep")
    Path("theirs").mkdir()
    Path("theirs/notes.txt").write_text("keep")
    settings = ("--class", "grade", "--structures", "naive", *FAST)
    expected = {
        "file": "file is a file, but -o takes a folder; give another name",
        "theirs": "the folder theirs holds notes.txt, which no run of bnx learn wrote, so it is left alone; "
        "give another folder with -o",
        "file/out": "cannot write file/out (File exists); choose another folder with -o",
        "": "-o is empty; give the name of a folder",
        "x" * 300: f"cannot use {Path.cwd() / ('x' * 300)} (File name too long); give another place",
    }
    for place, message in expected.items():
        assert refusal("learn", table, *settings, "-o", place, "--overwrite") == message
    assert refusal("learn", table, *settings, "-o", "theirs") == (
        "the folder theirs exists already; give another one with -o, or --overwrite to replace it"
    )
    assert sorted(path.name for path in Path().rglob("*")) == ["file", "notes.txt", "theirs"]


@pytest.mark.skipif(not Path("/proc/self").exists(), reason="needs a file system where nothing can be made")
def test_an_output_folder_in_a_place_that_cannot_be_written() -> None:
    assert refusal("learn", small_table(), *LEARN, "-o", "/proc/here/out") == (
        "cannot write /proc/here/out (No such file or directory); choose another folder with -o"
    )


def test_missing_columns_of_new_records() -> None:
    write(Path("new.csv"), NAMES[:2], [row[:2] for row in small_rows(5)])
    assert refusal("classify", f"{small_results()}/naive.json", "new.csv", "-o", "out.csv") == (
        "new.csv has no column 'lane'; known: dock, alarm"
    )
    assert [path.name for path in Path().iterdir()] == ["new.csv"]


def test_names_with_line_ends_stay_on_one_line() -> None:
    write(Path("t.csv"), ("a\nb", "\x1b[31m", "grade"), [["x", "y", "few"], ["y", "x", "many"]])
    assert refusal("profile", "t.csv", "--class", "none") == (
        "t.csv has no column 'none'; known: a\\nb, \\x1b[31m, grade"
    )


def test_too_little_memory_is_said_in_one_sentence(monkeypatch: pytest.MonkeyPatch) -> None:
    def exhausted(*_: Any, **__: Any) -> None:
        raise MemoryError

    monkeypatch.setattr("bnx.cli.learn.compare", exhausted)
    assert refusal("learn", small_table(), *LEARN) == (
        "the memory of this machine is not enough for this table; "
        "give fewer columns, --structures or --given, or --spill DIR"
    )
    assert list(Path().iterdir()) == []
