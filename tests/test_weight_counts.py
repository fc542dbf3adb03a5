"""A column of counts: every result is that of the table with a row per record; what cannot be a weight is refused."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from commandline import call, refusal
from hypothesis import given, settings
from hypothesis import strategies as st
from opentables import TITANIC_LOST, TITANIC_SAVED
from published import BERKELEY, BERKELEY_X2

from bnx.reading import open_source
from bnx.recipe import Recipe

FAST = ("--structures", "naive,tan-tested", "--folds", "4", "--resamples", "6", "--quiet", "--jobs", "2")
OF_THE_FILE = {"sha256", "source", "settings"}
OF_THE_WEIGHTS = {"weights", "warnings"}


def cells(names: list[str], levels: list[list[str]], counts: np.ndarray) -> pd.DataFrame:
    """Write a table of counts as one row a cell, the count amid the columns."""
    rows = pd.MultiIndex.from_product(levels, names=names).to_frame(index=False)
    rows.insert(1, "persons", np.asarray(counts).ravel())
    return rows


def titanic() -> pd.DataFrame:
    """Write 2,201 persons as 32 rows, eight of them of no person (Dawson 1995, via `opentables`)."""
    levels = [["no", "yes"], ["child", "adult"], ["male", "female"], ["1st", "2nd", "3rd", "crew"]]
    return cells(["saved", "age", "sex", "berth"], levels, np.array([TITANIC_LOST, TITANIC_SAVED]))


def berkeley() -> pd.DataFrame:
    """Write 4,526 applicants as 24 rows (Bickel, Hammel & O'Connell 1975)."""
    return cells(["dept", "gender", "admit"], [list("ABCDEF"), ["male", "female"], ["admitted", "rejected"]], BERKELEY)


def by_record(table: pd.DataFrame) -> pd.DataFrame:
    return table.loc[np.repeat(table.index, table["persons"])].drop(columns="persons")


def written(table: pd.DataFrame, path: Path) -> str:
    table.to_parquet(path) if path.suffix == ".parquet" else table.to_csv(path, index=False)
    return str(path)


def without_file(document: Any) -> Any:
    """Leave out of a document what names the file, also of the members of a mix."""
    if isinstance(document, dict):
        return {key: without_file(one) for key, one in document.items() if key not in OF_THE_FILE}
    return [without_file(one) for one in document] if isinstance(document, list) else document


def results(folder: Path) -> dict[str, object]:
    """Read a results folder but what names the file; the page shows the same and the file's name."""
    found: dict[str, object] = {}
    for path in sorted(folder.iterdir()):
        if path.suffix == ".json":
            document, told = json.loads(path.read_text()), OF_THE_WEIGHTS if path.stem == "comparison" else set()
            found[path.name] = json.dumps(
                without_file({key: document[key] for key in document.keys() - told}), sort_keys=True
            )
        elif path.suffix != ".html":
            found[path.name] = path.read_bytes()
    return found


@pytest.mark.parametrize(
    ("table", "target", "ending", "more"),
    [(titanic(), "saved", ".csv", ()), (berkeley(), "admit", ".parquet", ("--spill", "."))],
    ids=["titanic", "berkeley"],
)
def test_counts_give_the_bytes_of_the_table_by_record(
    tmp_path: Path, table: pd.DataFrame, target: str, ending: str, more: tuple[str, ...]
) -> None:
    counted = written(table, tmp_path / f"counted{ending}")
    whole = written(by_record(table), tmp_path / "whole.csv")
    outputs = ("--predictions", "--all-pairs", *FAST)
    first = call("learn", counted, "--class", target, "--weight", "persons", "-o", f"{tmp_path}/a", *outputs, *more)
    second = call("learn", whole, "--class", target, "-o", f"{tmp_path}/b", *outputs)
    assert (first.code, second.code) == (0, 0), first
    assert results(tmp_path / "a") == results(tmp_path / "b")
    weights = json.loads((tmp_path / "a" / "comparison.json").read_text())["weights"]
    records = int(table["persons"].sum())
    expected = {
        "column": "persons",
        "kind": "counts",
        "rows": len(table),
        "left_out": int((table["persons"] == 0).sum()),
    }
    assert weights == {**expected, "total": records, "effective_rows": records}


def test_bnx_test_takes_counts_and_says_what_its_tests_assume(tmp_path: Path) -> None:
    counted = written(berkeley(), tmp_path / "counted.csv")
    run = call("test", counted, "--class", "dept", "--weight", "persons", "gender", "admit", "--json")
    found = json.loads(run.out)
    assert found["rows"] == 4526
    # X2 of admission and gender given department, from the published counts (`published.py` names the source)
    assert found["tests"][0]["x2"] == pytest.approx(BERKELEY_X2, abs=5e-4)
    assert found["settings"]["weight"] == "persons"
    assert "24 rows stand for 4,526 records" in run.err
    assert "descriptive" in run.err


def test_bnx_profile_takes_counts_and_counts_what_is_left_out(tmp_path: Path) -> None:
    found = json.loads(
        call("profile", written(titanic(), tmp_path / "t.csv"), "--class", "saved", "--weight", "persons", "--json").out
    )
    assert found["rows"] == 2201
    assert found["classes"][1]["rows"] == 711  # saved (Dawson 1995)
    assert "8 rows of 32 left out because their weight in persons is 0" in found["warnings"]


def test_a_further_table_is_taken_by_its_counts_too(tmp_path: Path) -> None:
    table = titanic()
    counted, whole = written(table, tmp_path / "c.csv"), written(by_record(table), tmp_path / "w.csv")
    further = (*FAST, "--class", "saved")
    first = call("learn", counted, "--weight", "persons", "--holdout", counted, "-o", f"{tmp_path}/a", *further)
    second = call("learn", whole, "--holdout", whole, "-o", f"{tmp_path}/b", *further)
    assert (first.code, second.code) == (0, 0), first
    assert results(tmp_path / "a") == results(tmp_path / "b")
    bad = written(table.assign(persons=table["persons"] / 3), tmp_path / "thirds.csv")
    said = refusal("learn", counted, "--weight", "persons", "--holdout", bad, "-o", f"{tmp_path}/d", *further)
    assert "numbers that are not whole" in said
    assert "thirds.csv" in said


CELLS = st.lists(
    st.tuples(
        st.sampled_from("xyz"), st.sampled_from(["", "low", "7", "8.50"]), st.sampled_from("ab"), st.integers(0, 4)
    ),
    min_size=1,
    max_size=40,
)


@settings(max_examples=40, deadline=None)
@given(rows=CELLS, missing=st.sampled_from(["level", "drop", "sum-out"]))
def test_coding_counts_equals_coding_records(
    tmp_path_factory: pytest.TempPathFactory, rows: list[tuple[str, str, str, int]], missing: str
) -> None:
    folder = tmp_path_factory.mktemp("counts")
    sure = [("x", "low", "a", 1), ("y", "7", "b", 2), ("y", "8.50", "a", 1)]
    frame = pd.DataFrame([*rows, *sure], columns=["one", "two", "kind", "persons"])
    counted = open_source(written(frame, folder / "c.csv"))
    whole = open_source(written(by_record(frame), folder / "w.csv"))
    first = Recipe("kind", weight="persons", keep=("all",), missing=missing).code(counted)
    second = Recipe("kind", keep=("all",), missing=missing).code(whole)
    assert first.table.schema == second.table.schema
    assert (first.table.codes == second.table.codes).all()
    assert (first.table.target == second.table.target).all()
    assert (first.rows_read, first.duplicates, first.left_out) == (second.rows_read, second.duplicates, second.left_out)


@pytest.mark.parametrize(
    ("values", "sentence"),
    [
        (["1", "", "2"], "row 2 is blank in the weight column 'n'; a weight must be a number from 0 to 1e+15"),
        (["1", "2", "-2"], "row 3 has '-2' in the weight column 'n'; a weight must be a number from 0 to 1e+15"),
        (["few", "2", "1"], "row 1 has 'few' in the weight column 'n'; a weight must be a number from 0 to 1e+15"),
        (["1", "inf", "1"], "row 2 has 'inf' in the weight column 'n'; a weight must be a number from 0 to 1e+15"),
        (["0", "0", "0.0"], "the weight column 'n' is 0 in every row; at least one row must have a weight above 0"),
    ],
)
def test_what_is_no_weight_is_refused(tmp_path: Path, values: list[str], sentence: str) -> None:
    frame = pd.DataFrame({"one": list("xyx"), "n": values, "kind": list("aba")})
    table = written(frame, tmp_path / "t.csv")
    for command in (("learn", table, "-o", f"{tmp_path}/o"), ("test", table, "--all"), ("profile", table)):
        assert refusal(*command, "--class", "kind", "--weight", "n") == sentence


def test_more_records_than_there_is_room_for_are_refused_at_once(tmp_path: Path) -> None:
    frame = pd.DataFrame({"one": list("xyx"), "n": [1, 10**14, 5], "kind": list("aba")})
    said = refusal("profile", written(frame, tmp_path / "t.csv"), "--class", "kind", "--weight", "n")
    assert "the weight column 'n' count 100,000,000,000,006 records, which take about 1,300,000.0 GB" in said
    assert "--spill" in said


def test_a_weight_cannot_be_something_else_and_must_be_there(tmp_path: Path) -> None:
    table = written(titanic(), tmp_path / "t.csv")
    command = ("profile", table, "--class", "saved", "--weight", "persons")
    assert "given as the weight and also as ignore" in refusal(*command, "--ignore", "persons")
    assert "given as the weight and also as numeric" in refusal(*command, "--numeric", "persons")
    assert "given as the weight and also as the class" in refusal("profile", table, "--class", "age", "--weight", "age")
    assert "no column 'person'" in refusal("profile", table, "--class", "saved", "--weight", "person")


def test_a_fault_in_a_cell_is_named_by_its_row_in_the_file(tmp_path: Path) -> None:
    frame = pd.DataFrame({"size": ["1", "2", "x"], "n": [70_000, 0, 2], "kind": list("aba")})
    command = ("profile", written(frame, tmp_path / "t.csv"), "--class", "kind", "--weight", "n", "--numeric", "size")
    assert refusal(*command).startswith("row 3 has 'x' in the numeric column 'size'")
