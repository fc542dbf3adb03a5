"""Numbers that break careless arithmetic, from table to classified record: huge, tiny, nearly equal, repeated."""

import csv
import io
import json
from pathlib import Path

import numpy as np
import pyarrow as pa
import pytest
from commandline import FAST, call, write
from tablefiles import domain, parquet_of, source_of, with_class

from bnx.coding import code_table
from bnx.domains import interval_names

ROWS = 240
BINS = ("auto", "mdl", "frequency:5", "width:4", "mdl+frequency:5")
HUGE = (-1.7e308, -1e300, -1.0, -1e-300, -0.0, 0.0, 5e-324, 1e-300, 1.0, 1e300, 1.7e308)


def columns() -> dict[str, list[str]]:
    """Draw the class and columns that follow it, each hard in its own way."""
    random = np.random.default_rng(12)
    grade = random.integers(0, 2, ROWS)
    place = np.clip(random.integers(0, 7, ROWS) + 4 * grade, 0, len(HUGE) - 1)
    tenth = random.integers(1, 25, ROWS) + 6 * grade
    noise = np.where(random.random(ROWS) < 0.5, tenth * 0.1, tenth / 10)
    spike = np.where(random.random(ROWS) < 0.5, 0.0, random.normal(grade, 1).round(3))
    whole = 2**53 + 100 * (random.integers(0, 60, ROWS) + 30 * grade)
    outlier = random.random(ROWS) + grade
    outlier[0] = 1e9
    assert len(np.unique(noise)) > len(np.unique(noise.round(9))) + 5
    return {
        "huge": [repr(HUGE[k]) for k in place],
        "noise": [repr(float(one)) for one in noise],
        "spike": [repr(float(one)) for one in spike],
        "whole": [str(one) for one in whole],
        "outlier": [repr(float(one)) for one in outlier],
        "same": ["7.5"] * ROWS,
        "grade": ["bad" if one else "ok" for one in grade],
    }


@pytest.fixture(scope="module", params=BINS)
def learnt(request, tmp_path_factory) -> tuple[Path, dict[str, dict[str, object]]]:
    """Learn naive Bayes from all of these, by command; give its file and its attributes by name."""
    folder = tmp_path_factory.mktemp("hard")
    every = columns()
    table = write(folder / "table.csv", tuple(every), [list(row) for row in zip(*every.values(), strict=True)])
    how = ("--structures", "naive", "--bins", request.param, "--numeric", "huge", "--keep", "same", "--numeric", "same")
    run = call("learn", table, "--class", "grade", "-o", str(folder / "out"), *how, *FAST)
    assert run.code == 0, run.err
    document = json.loads((folder / "out" / "naive.json").read_text())
    return folder / "out" / "naive.json", {one["name"]: one for one in document["attributes"]}


def classified(path: Path, folder: Path, records: list[dict[str, str]]) -> list[float]:
    """Give the probability of the class ``ok`` for each record; what a record does not name is blank."""
    names = ("huge", "noise", "spike", "whole", "outlier", "same")
    table = write(folder / "new.csv", names, [[record.get(name, "") for name in names] for record in records])
    run = call("classify", str(path), table, "-o", "-", "--quiet")
    assert run.code == 0, run.err
    return [float(row["p:ok"]) for row in csv.DictReader(io.StringIO(run.out))]


def test_printed_levels_are_unlike_and_cut_points_ascend(learnt):
    _, attributes = learnt
    assert set(attributes) == {"huge", "noise", "spike", "whole", "outlier", "same"}
    for one in attributes.values():
        assert len(set(one["levels"])) == len(one["levels"])
        assert one["cuts"] == sorted(set(one["cuts"]))
        assert np.isfinite(one["cuts"]).all()
        assert list(interval_names(one["cuts"])) == one["levels"]
        assert "-0" not in " ".join(one["levels"]).split()
    assert attributes["same"]["levels"] == ["any"]


def test_numbers_that_differ_by_rounding_only_share_a_level(learnt, tmp_path):
    path, attributes = learnt
    tenths = range(1, 31)
    p = classified(path, tmp_path, [{"noise": repr(one)} for k in tenths for one in (k * 0.1, k / 10)])
    assert p[::2] == p[1::2]
    assert 1 < len(set(p)) <= len(attributes["noise"]["levels"])


def test_a_value_at_a_cut_point_lies_below_it_and_values_beyond_all_in_the_outer_levels(learnt, tmp_path):
    path, attributes = learnt
    for name in ("huge", "noise", "spike", "whole", "outlier"):
        cuts = attributes[name]["cuts"]
        at = classified(path, tmp_path, [{name: repr(cut)} for cut in cuts])
        above = classified(path, tmp_path, [{name: repr(float(np.nextafter(cut, np.inf)))} for cut in cuts])
        low, high = classified(path, tmp_path, [{name: "-1.79e308"}, {name: "1.79e308"}])
        assert [low, *above] == [*at, high]
        assert low != high


def test_negative_zero_is_zero(learnt, tmp_path):
    path, _ = learnt
    for name in ("huge", "spike"):
        p = classified(path, tmp_path, [{name: text} for text in ("-0.0", "0", "0.0", "-0", "-0e9", "+.0")])
        assert len(set(p)) == 1


def test_a_number_that_is_infinite_says_nothing_of_a_new_record(learnt, tmp_path):
    path, _ = learnt
    p = classified(path, tmp_path, [{}, {"spike": "inf"}, {"spike": "-inf"}, {"spike": "1e999"}, {"spike": "nan"}])
    assert len(set(p)) == 1


def test_bins_hold_rows_and_a_spike_has_one_of_its_own(learnt, tmp_path):
    _, attributes = learnt
    values = {name: np.array(cells, float) for name, cells in columns().items() if name != "grade"}
    for name, one in attributes.items():
        rows = np.bincount(np.searchsorted(one["cuts"], values[name]), minlength=len(one["levels"]))
        assert rows.min() > 0, (name, one["cuts"])
    cuts = attributes["spike"]["cuts"]
    if len(cuts) == 4:
        rows = np.bincount(np.searchsorted(cuts, values["spike"]))
        assert rows.max() <= 130
        assert np.sort(rows)[:-1].max() - rows.min() <= 15, "the others stay equal"


@pytest.mark.parametrize("make", [source_of, parquet_of])
def test_fine_bins_of_numbers_that_differ_by_rounding_only(tmp_path, make):
    values = [value for k in range(1, 40) for value in (k * 0.1, k / 10, k * 0.1)]
    cells = values if make is parquet_of else [repr(value) for value in values]
    coded = code_table(make(tmp_path, with_class({"x": cells})), "arrival", keep=["x"])
    assert domain(coded, "x").cuts == pytest.approx(np.arange(1, 39) / 10 + 0.05)
    assert coded.table.codes[0].tolist() == [k for k in range(39) for _ in range(3)]


def test_joining_does_not_run_on_through_a_chain_of_neighbours(tmp_path):
    # 1, and the 299 floats after it: at most 8 units in the last place are joined, so most stay apart.
    values = [1.0]
    for _ in range(299):
        values.append(float(np.nextafter(values[-1], 2)))
    found = domain(code_table(parquet_of(tmp_path, with_class({"x": values})), "arrival", keep=["x"]), "x")
    assert len(found.levels) == 60
    assert len(set(found.levels)) == 60


def test_many_numbers_some_of_which_differ_by_rounding_only(tmp_path):
    random = np.random.default_rng(6)
    plain = random.integers(0, 30_000, 70_000) / 10
    noisy = np.where(random.random(70_000) < 0.5, plain, np.nextafter(plain, np.inf))
    first, second = (
        code_table(parquet_of(tmp_path, with_class({"x": values}), f"{k}.parquet"), "arrival", keep=["x"])
        for k, values in enumerate((plain, noisy))
    )
    np.testing.assert_array_equal(first.table.codes, second.table.codes)
    assert domain(first, "x").cuts == pytest.approx(domain(second, "x").cuts, rel=1e-14)


def test_whole_numbers_beyond_the_exact_ones_of_float64(tmp_path):
    # 2^53 + 1 has no float64 of its own; neighbours that fall together are one value, others keep their order.
    whole = [2**53 + 100 * k for k in range(50)] + [2**53 + 1, 2**63 - 1, -(2**63)]
    csv_table = source_of(tmp_path, with_class({"x": [str(one) for one in whole]}))
    table = parquet_of(tmp_path, with_class({"x": pa.array(whole, pa.int64())}))
    one, other = (code_table(source, "arrival", keep=["x"]) for source in (csv_table, table))
    assert domain(one, "x") == domain(other, "x")
    assert len(domain(one, "x").cuts) == 51
    assert one.table.codes[0].tolist() == other.table.codes[0].tolist() == [*range(1, 51), 1, 51, 0]


def test_not_a_number_is_a_blank_cell_of_columns_of_numbers(tmp_path):
    values = [k / 7 for k in range(40)]
    values[3] = float("nan")
    coded = code_table(parquet_of(tmp_path, with_class({"x": values})), "arrival")
    assert domain(coded, "x").blank
    assert coded.table.codes[0, 3] == len(domain(coded, "x")) - 1


def test_a_constant_column_of_numbers_is_left_out_unless_it_is_kept(tmp_path):
    source = source_of(tmp_path, with_class({"x": ["3", "3.0", "3.00", "3e0"], "y": ["a", "b", "b", "a"]}))
    coded = code_table(source, "arrival", numeric=["x"], keep=["y"])
    assert [(one.name, one.reason) for one in coded.left_out] == [
        ("x", "the same value in every row; --keep x to use it")
    ]
    assert domain(code_table(source, "arrival", numeric=["x"], keep=["x", "y"]), "x").levels == ("any",)
