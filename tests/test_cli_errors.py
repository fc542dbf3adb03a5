"""Whatever is refused, is refused in one sentence that says what would be right, and nothing is written."""

import gzip
from pathlib import Path

import numpy as np
import pytest
from commandline import FAST, NAMES, call, refusal, small_rows, small_table, write

LEARN = ("--class", "grade", "-o", "out", "--structures", "naive,tan", *FAST)
HEADER = ",".join(NAMES) + "\n"
ROW = "few,few,few,few,site 1,1.5,few\n"


@pytest.fixture(autouse=True)
def _in_an_empty_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def odd_table(content: bytes) -> None:
    Path("t.csv").write_bytes(content)


ONE_CLASS = HEADER + ROW * 4
NO_ATTRIBUTE = "grade\nfew\nmany\n"
CONSTANT = "a,b,grade\n" + "x,y,few\nx,y,many\n" * 3
TABLES = {
    "empty": (b"", "t.csv is empty; it must hold a header and at least one row"),
    "blank lines only": (b"\n\n\n", "t.csv is empty; it must hold a header and at least one row"),
    "header only": (HEADER.encode(), "t.csv holds a header but no row below it; it must hold at least one row"),
    "one class": (
        ONE_CLASS.encode(),
        "the class 'grade' is 'few' in all 4 rows used; it must have at least two levels",
    ),
    "only the class": (
        NO_ATTRIBUTE.encode(),
        "no attribute is left beside the class 'grade': there is no other column",
    ),
    "constant attributes": (
        CONSTANT.encode(),
        "no attribute is left beside the class 'grade': a (the same value in every row; --keep a to use it), "
        "b (the same value in every row; --keep b to use it)",
    ),
    "short row": (
        (HEADER + ROW + "few,few\n" + ROW).encode(),
        "t.csv, line 3: 2 cells where the header has 7; every row must have as many cells as the header",
    ),
    "long row": (
        (HEADER + ROW * 2 + "x," + ROW).encode(),
        "t.csv, line 4: 8 cells where the header has 7; every row must have as many cells as the header",
    ),
    "duplicate column": (
        ("dock," + HEADER + "x," + ROW).encode(),
        "t.csv has two columns named 'dock' (columns 1 and 2); give every column a name of its own",
    ),
    "not UTF-8": (
        (HEADER + ROW + ROW.replace("few", "fé", 1)).encode("latin-1"),
        f"t.csv, line 3: byte {len(HEADER + ROW) + 2} of the file (0xe9) is not UTF-8; save the file as UTF-8",
    ),
    "open quote": (
        (HEADER + ROW + '"' + ROW).encode(),
        "t.csv, line 3: a quote is opened in this record and never closed",
    ),
    "fewer rows than folds": (
        (HEADER + ROW + ROW.replace("few", "many")).encode(),
        "the table has 2 usable rows for 4 folds; give fewer --folds",
    ),
}


@pytest.mark.parametrize("case", [name for name in TABLES if name != "fewer rows than folds"])
@pytest.mark.parametrize("command", ["learn", "profile", "test"])
def test_tables_that_cannot_be_used(command: str, case: str) -> None:
    content, message = TABLES[case]
    odd_table(content)
    settings = {"learn": LEARN, "profile": ("--class", "grade"), "test": ("--class", "grade", "--all")}[command]
    assert refusal(command, "t.csv", *settings) == message
    assert [path.name for path in Path().iterdir()] == ["t.csv"]


def test_a_table_with_fewer_rows_than_folds() -> None:
    content, message = TABLES["fewer rows than folds"]
    odd_table(content)
    assert refusal("learn", "t.csv", *LEARN, "--keep", "all") == message
    assert [path.name for path in Path().iterdir()] == ["t.csv"]


def test_a_table_from_standard_input_is_named_so() -> None:
    assert refusal("profile", "-", "--class", "grade", stdin=HEADER + ROW + "few\n") == (
        "standard input, line 3: 1 cell where the header has 7; every row must have as many cells as the header"
    )


def test_a_packed_table_that_is_cut_short() -> None:
    Path("t.csv.gz").write_bytes(gzip.compress(Path(small_table()).read_bytes())[:700])
    message = refusal("learn", "t.csv.gz", *LEARN)
    assert message.startswith("t.csv.gz cannot be read, it may be damaged or cut short: ")
    assert not Path("out").exists()


def test_files_that_are_no_table() -> None:
    assert refusal("learn", "none.csv", *LEARN).startswith("there is no file none.csv")
    Path("t.xlsx").write_bytes(b"PK\x03\x04")
    assert refusal("learn", "t.xlsx", *LEARN) == (
        "t.xlsx ends in .xlsx, which is not a form of table that can be read; "
        "give .csv, .tsv, .txt (also .gz, .zst), .parquet, .arrow or .feather"
    )


SETTINGS = {
    "--structures bayes": "--structures: 'bayes' is not a structure; known: naive, tan, tan-tested, kdbK, kdbK-tested "
    "(K = 1, 2, ...), kdb, kdb-trimmed, heldout",
    "--structures kdb0": "--structures: 'kdb0' is not a structure; known: naive, tan, tan-tested, kdbK, kdbK-tested "
    "(K = 1, 2, ...), kdb, kdb-trimmed, heldout",
    "--structures tan": "--structures names one structure twice (naive, tan, tan); name each once",
    "--structures ,": "--structures: ',' names nothing; give one or more names, or drop the option",
    "--baseline kdb2": "--baseline kdb2 is not among the structures; add it to --structures, or choose one of naive, "
    "tan with --baseline",
    "--adjust bonferroni": "--adjust: 'bonferroni' cannot be used; give one of bh, holm, by, none",
    "--missing zero": "--missing: 'zero' cannot be used; give one of level, drop, sum-out",
    "--alpha 0": "--alpha: 0 cannot be used; give a number above 0 and below 1",
    "--alpha nan": "--alpha: nan cannot be used; give a number above 0 and below 1",
    "--negligible -1": "--negligible: -1 cannot be used; give a number above 0 and below 10",
    "--folds 2": "--folds: 2 cannot be used; give a whole number from 3 to 50",
    "--repeats 0": "--repeats: 0 cannot be used; give a whole number from 1 to 1000",
    "--max-levels 1": "--max-levels: 1 cannot be used; give a whole number from 2 to 60000",
    "--resamples -1": "--resamples: -1 cannot be used; give a whole number from 0 to 100000",
    "--records 101": "--records: 101 cannot be used; give a whole number from 0 to 100",
    "--jobs -1": "--jobs: -1 cannot be used; give a number of threads, or 0 for one per processor",
    "--smoothing laplace:0": "--smoothing: 'laplace:0' cannot be used; give auto, laplace:A, backoff:S or "
    "backoff:S,D with numbers above 0",
    "--group grade": "column 'grade' is given as the class and also as the group or fold column; it can be only one "
    "of them",
    "--group sites": "small.csv has no column 'sites'; did you mean site?",
    "--ignore doc": "small.csv has no column 'doc'; did you mean dock?",
    "--ignore lane --keep lane": "column 'lane' is given as ignore and also as keep; it can be only one of them",
    "--numeric lane": "row 1 has 'few' in the numeric column 'lane'; every cell of it must hold a finite number or "
    "be blank",
    "--require dock": "--require: 'dock' is not a pair of attributes; write PARENT:CHILD",
    "--require dock:alrm": "--require dock:alrm: 'alrm' is not an attribute in use; did you mean alarm?",
    "--require dock:dock": "--require dock:dock: the two ends are the same attribute; name two",
    "--require dock:lane,lane:dock": "the required edges form a cycle, dock -> lane -> dock; leave one of them out",
    "--require dock:lane --forbid lane:dock": "dock:lane is both required and forbidden; drop one",
    "--fold-column site": "--folds 4 cannot be used with --fold-column, whose folds are given; drop one",
}


@pytest.mark.parametrize("options", SETTINGS)
def test_settings_that_cannot_be_used(options: str) -> None:
    name = small_table()
    assert refusal("learn", name, *LEARN, *options.split(" ")) == SETTINGS[options].replace("small.csv", name)
    assert list(Path().iterdir()) == []


def test_given_folds() -> None:
    rows = [[*row, str(k % 2)] for k, row in enumerate(small_rows(40))]
    write(Path("t.csv"), (*NAMES, "fold"), rows)
    settings = ("--class", "grade", "-o", "out", "--fold-column", "fold")
    assert refusal("learn", "t.csv", *settings) == (
        "--fold-column fold holds 2 different values, but at least 3 folds are needed to choose inside each training "
        "fold; take a column with more values or drop the option"
    )
    assert refusal("learn", "t.csv", *settings, "--repeats", "2") == (
        "--repeats 2 cannot be used with --fold-column, whose folds are given; leave it at 1"
    )
    assert refusal("learn", "t.csv", *settings, "--group", "site") == (
        "--group and --fold-column both decide the folds; give one of them"
    )


def test_holdout_tables_that_cannot_be_scored() -> None:
    write(Path("new.csv"), rows=[[*row[:-1], "never"] for row in small_rows(5)])
    assert refusal("learn", small_table(), *LEARN, "--holdout", "new.csv") == (
        "new.csv (--holdout) has no row whose grade is one of few, many, some"
    )
    write(Path("short.csv"), NAMES[:-1], [row[:-1] for row in small_rows(5)])
    assert refusal("learn", small_table(), *LEARN, "--holdout", "short.csv") == (
        "short.csv has no column 'grade'; known: dock, alarm, lane, shift, site, gap"
    )
    assert not Path("out").exists()


PAIRS = {
    "dock alrm": "small.csv has no column 'alrm'; did you mean alarm?",
    "dock alarm --given sift": "small.csv has no column 'sift'; did you mean shift?",
    "dock grade": "'grade' is the class, which is taken as given in every test; leave it out",
    "dock alarm --given grade": "'grade' is the class, which is taken as given in every test; leave it out",
    "dock dock": "'dock' is named twice; name each attribute once",
    "dock alarm lane dock": "'dock' is named twice; name each attribute once",
    "dock alarm --given dock": "'dock' is to be tested and also --given; it can be only one of them",
    "dock alarm --given lane,lane": "'lane' is named twice; name each attribute once",
    "dock alarm --given ,": "--given: ',' names nothing; give one or more names, or drop the option",
    "dock": "only dock is named, but a pair needs two; name at least two, or give --all",
    "": "no attribute is named, but a pair needs two; name at least two, or give --all",
    "--all dock": "--all tests every pair, but dock is named too; give the names or --all",
    "--all --given dock,alarm,lane,shift,site": "the table has only 1 attribute to test beside the class and --given, "
    "but a pair needs two; give a table with more, or fewer --given",
    "dock alarm --ordered lane": "--ordered lane: it is not among the attributes to be tested, so its order would "
    "change nothing; name it, or drop it",
    "--all --ordered docks": "small.csv has no column 'docks'; did you mean dock?",
    "--all --ordered grade": "'grade' is the class, which is taken as given in every test; leave it out",
    "dock alarm --given lane --ordered lane": "--ordered lane: it is not among the attributes to be tested, so its "
    "order would change nothing; name it, or drop it",
    "--all --close -1": "--close: -1 cannot be used; give 0 or a number of pairs",
    "dock alarm --ordered dock=few<many": "--ordered dock: the order leaves out some; give every level its place",
    "dock alarm --ordered dock=few<smoe<many": "--ordered dock: 'smoe' is not a level of it; did you mean some?",
    "dock alarm --ordered dock=few<many<few": "--ordered dock=few<many<few: 'few<many<few' is no order of levels; "
    "write dock=low<middle<high",
    "dock alarm --ordered dock": "--ordered dock: its levels (few, many, some) are no numbers; give their order, "
    "from low to high, as in --ordered 'dock=LOWEST<...<HIGHEST', with quotation marks",
    "dock alarm --ordered dock=few<some<many --ordered dock": "--ordered names 'dock' twice; name it once",
    "dock alarm --plot p.bmp": "--plot p.bmp: the ending says nothing that can be drawn; use .svg, .png or .pdf",
    "dock alarm --plot none/p.svg": "cannot write none/p.svg: there is no folder none; make it, or give another --plot",
    "dock alarm -o none/p.csv": "cannot write none/p.csv: there is no folder none; make it, or give another -o",
    "dock alarm -o p.txt": "-o p.txt: the tests are written as CSV; give a name that ends in .csv",
    "dock alarm --theme dark": "--theme dark says how to draw, but no picture is asked for; give --plot, or drop it",
    "dock alarm --test exact": "--test: 'exact' cannot be used; give one of auto, chi2, g, monte-carlo",
    "dock alarm --alpha 1": "--alpha: 1 cannot be used; give a number above 0 and below 1",
    "dock alarm --bins best": None,
}


@pytest.mark.parametrize("options", PAIRS)
def test_pairs_that_cannot_be_tested(options: str) -> None:
    message = refusal("test", small_table(), "--class", "grade", *options.split())
    expected = PAIRS[options]
    assert "bins" in message if expected is None else message == expected.replace("small.csv", small_table())
    assert list(Path().iterdir()) == []


def test_attributes_that_are_left_out_say_why() -> None:
    rows = [[f"id {k}", "same", "", *row] for k, row in enumerate(small_rows(60))]
    write(Path("t.csv"), ("number", "flat", "empty", *NAMES), rows)
    for name, reason in (
        ("number", "a different value in every row"),
        ("flat", "the same value in every row"),
        ("empty", "every cell is blank"),
    ):
        expected = f"{name!r} is left out of the table: {reason}; --keep {name} to use it"
        assert refusal("test", "t.csv", "--class", "grade", "dock", name) == expected
        assert refusal("test", "t.csv", "--class", "grade", "dock", "alarm", "--given", name) == expected


def test_an_attribute_that_is_ignored_is_not_called_unknown() -> None:
    message = refusal("test", small_table(), "--class", "grade", "dock", "lane", "--ignore", "lane")
    assert message.startswith("'lane' is ")
    assert "--ignore" in message


def test_a_number_without_a_cut_point_cannot_be_tested() -> None:
    rows = [[row[0], row[1], f"{k * 37 % 101}.{k}", "xy"[k % 2]] for k, row in enumerate(small_rows(100))]
    write(Path("t.csv"), ("dock", "alarm", "noise", "kind"), rows)
    expected = (
        "'noise' is numeric, but mdl finds no cut point in it, so it has one level only; give other --bins, as "
        "frequency:5, or --categorical noise"
    )
    for names in (("dock", "noise"), ("dock", "alarm", "--given", "noise")):
        assert refusal("test", "t.csv", "--class", "kind", *names, "--bins", "mdl") == expected


def many_levels(sizes: tuple[int, ...], rows: int = 200) -> str:
    """Write a table of columns a, b, c, ... of so many levels each and a class of two."""
    names = "abcdefgh"[: len(sizes)]
    random = np.random.default_rng(1)
    columns = [random.permutation(np.arange(rows) % size) for size in sizes]
    cells = [[*(f"v{column[k]}" for column in columns), "xy"[k % 2]] for k in range(rows)]
    return write(Path("t.csv"), (*names, "kind"), cells)


def test_strata_too_many_to_count_are_refused_before_anything_is_counted() -> None:
    """2 classes x 50 x 50 x 50 levels, 40 x 40 cells each: 400 million are allowed, and not one level more."""
    table = many_levels((40, 40, 50, 50, 50))
    options = ("--class", "kind", "a", "b", "--max-levels", "100", "--given")
    assert refusal("test", many_levels((41, 40, 50, 50, 50)), *options, "c,d,e") == (
        "--given would make 250,000 strata of up to 1,640 cells, more than can be counted; give a smaller "
        "--max-levels, fewer --given, or no --explain"
    )
    assert refusal("test", many_levels((41, 40, 50, 50, 50)), *options, "c,d", "--explain") == (
        "--given and --explain would make 250,000 strata of up to 1,640 cells, more than can be counted; give a "
        "smaller --max-levels, fewer --given, or no --explain"
    )
    assert [path.name for path in Path().iterdir()] == ["t.csv"]
    assert call("test", table, *options, "c,d").code == 0


def test_a_table_of_one_row_has_one_class() -> None:
    Path("t.csv").write_text("a,b,kind\nx,y,k\n")
    assert refusal("test", "t.csv", "--class", "kind", "a", "b", "--keep", "all") == (
        "the class 'kind' is 'k' in all 1 row used; it must have at least two levels"
    )


USAGE = {
    "lern t.csv": "there is no command 'lern'; did you mean learn?",
    "fit t.csv": "there is no command 'fit'; known: learn, test, profile, show, draw, export, classify; see bnx --help",
    "profile t.csv": "missing option '--class'; see bnx profile --help",
    "show": "missing argument 'NAME.json'; see bnx show --help",
    "learn t.csv --class a": "missing option '-o' / '--output'; see bnx learn --help",
    "export d --structure a": "missing option '-o' / '--output'; see bnx export --help",
}


@pytest.mark.parametrize("line", USAGE)
def test_wrong_usage_ends_with_code_2(line: str) -> None:
    assert refusal(*line.split(), code=2) == USAGE[line]


def test_unknown_options_and_values_of_the_wrong_kind_end_with_code_2() -> None:
    unknown = refusal("learn", "t.csv", "--class", "a", "-o", "out", "--fold", "3", code=2)
    assert unknown.startswith("no such option: --fold ")
    assert "--folds" in unknown
    wrong = refusal("learn", "t.csv", "--class", "a", "-o", "out", "--folds", "ten", code=2)
    assert wrong.startswith("invalid value for '--folds': ")
