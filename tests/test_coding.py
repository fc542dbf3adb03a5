import datetime
import decimal

import numpy as np
import pyarrow as pa
import pytest
from tablefiles import domain, parquet_of, reasons, source_of, texts, with_class

from bnx.coding import code_table
from bnx.domains import Domain
from bnx.errors import DataError


@pytest.mark.parametrize("make", [source_of, parquet_of])
def test_levels_that_look_alike_stay_apart(tmp_path, make):
    levels = ["01", "1", "1.0", "001", "10", "true", "True", "NA", "None", "null", "nan", "#N/A"] * 2
    coded = code_table(make(tmp_path, with_class({"code": levels})), "arrival")
    assert texts(coded, "code") == levels
    assert domain(coded, "code").levels == tuple(sorted(set(levels)))
    assert not domain(coded, "code").blank


def test_numbers_as_levels_are_in_natural_order_and_texts_in_text_order(tmp_path):
    columns = {"n": ["10", "2", "1", "2"], "z": ["10", "02", "1", "2"], "t": ["b10", "b2", "a", "a"]}
    coded = code_table(source_of(tmp_path, with_class(columns)), "arrival")
    assert domain(coded, "n").levels == ("1", "2", "10")
    assert domain(coded, "z").levels == ("02", "1", "10", "2")
    assert domain(coded, "t").levels == ("a", "b10", "b2")
    assert coded.table.schema.target.levels == ("rejected", "sound")


def test_the_order_of_rows_does_not_matter(tmp_path):
    rng = np.random.default_rng(3)
    columns = with_class({"a": rng.integers(0, 9, 300).astype(str), "x": rng.normal(size=300).astype(str)})
    order = rng.permutation(300)
    shuffled = {name: list(np.array(cells)[order]) for name, cells in columns.items()}
    first = code_table(source_of(tmp_path, columns), "arrival").table
    second = code_table(source_of(tmp_path, shuffled, "shuffled.csv"), "arrival").table
    assert first.schema == second.schema
    np.testing.assert_array_equal(first.codes[:, order], second.codes)
    np.testing.assert_array_equal(first.target[order], second.target)


@pytest.mark.parametrize(
    ("values", "numeric"),
    [
        ([f"{k / 7:.3f}" for k in range(21)], True),
        ([f"{k / 7:.3f}" for k in range(20)] * 2, False),
        ([f"{k}e-3" for k in range(-12, 12)], True),
        ([f" {k / 7:.3f} " for k in range(21)], True),
        ([f"+{k}.5" for k in range(30)], True),
        ([*(f"{k / 7:.3f}" for k in range(30)), "", "  "], True),
        ([*(f"{k / 7:.3f}" for k in range(30)), "n/a"], False),
        ([*(f"{k / 7:.3f}" for k in range(20)), "inf"], False),
        ([*(f"{k / 7:.3f}" for k in range(30)), "inf", "n/a"], False),
        ([*(f"{k / 7:.3f}" for k in range(30)), "nan"], False),
        ([*(f"{k / 7:.3f}" for k in range(30)), "1_000"], False),
        ([*(str(k) for k in range(30)), "007"] * 2, False),
        (["1", "1.0", "1.00", *(str(k) for k in range(2, 21))] * 2, False),
    ],
)
def test_which_columns_are_numeric(tmp_path, values, numeric):
    coded = code_table(source_of(tmp_path, with_class({"x": values})), "arrival", keep=["x"])
    assert domain(coded, "x").numeric is numeric


def test_overrides_of_numeric(tmp_path):
    columns = with_class({"few": ["3", "007", "1", "3"], "many": [f"{k}.5" for k in range(40)][:4]})
    coded = code_table(source_of(tmp_path, columns), "arrival", numeric=["few"])
    assert domain(coded, "few") == Domain("few", ("<= 2", "2 to 5", "> 5"), numeric=True, cuts=(2.0, 5.0))
    assert coded.table.codes[0].tolist() == [1, 2, 0, 1]
    columns = with_class({"x": [f"{k % 25}.5" for k in range(100)]})
    assert domain(code_table(source_of(tmp_path, columns), "arrival"), "x").numeric
    assert len(domain(code_table(source_of(tmp_path, columns), "arrival", categorical=["x"]), "x").levels) == 25


@pytest.mark.parametrize("bad", ["n/a", "inf", "1e999", "0x10"])
def test_a_bad_value_in_a_numeric_column_is_named(tmp_path, bad):
    source = source_of(tmp_path, with_class({"x": ["1", "", "2", bad]}))
    with pytest.raises(DataError) as caught:
        code_table(source, "arrival", numeric=["x"])
    assert str(caught.value) == (
        f"row 4 has {bad!r} in the numeric column 'x'; every cell of it must hold a finite number or be blank"
    )


@pytest.mark.parametrize("rows", [30, 900, 1100, 70_000])
@pytest.mark.parametrize("value", ["inf", "-inf"])
def test_an_infinite_value_in_a_column_of_numbers_is_named(tmp_path, rows, value):
    values = [float(k % 1500) / 7 for k in range(rows)]
    values[rows - 2] = float(value)
    values[rows - 1] = float("inf")
    sentence = (
        f"row {rows - 1:,} has {value!r} in the numeric column 'x'; "
        "every cell of it must hold a finite number or be blank"
    )
    with pytest.raises(DataError) as caught:
        code_table(parquet_of(tmp_path, with_class({"x": values})), "arrival")
    assert str(caught.value) == sentence
    texts = source_of(tmp_path, with_class({"x": [str(one) for one in values]}))
    with pytest.raises(DataError) as caught:
        code_table(texts, "arrival")
    assert str(caught.value) == f"{sentence}; --categorical x would take its values as levels"
    with pytest.raises(DataError) as caught:
        code_table(texts, "arrival", numeric=["x"])
    assert str(caught.value) == sentence
    assert value in domain(code_table(texts, "arrival", categorical=["x"], keep=["x"]), "x").levels


@pytest.mark.parametrize("value", ["Infinity", "+INF", " -inf ", "1e999", "-2E+400"])
def test_infinite_numbers_are_known_in_all_their_spellings(tmp_path, value):
    source = source_of(tmp_path, with_class({"x": [*(f"{k / 7:.3f}" for k in range(30)), "", value]}))
    with pytest.raises(DataError) as caught:
        code_table(source, "arrival")
    assert str(caught.value).startswith(f"row 32 has {value!r} in the numeric column 'x'; ")


def test_fine_bins_are_exact_up_to_256_levels(tmp_path):
    values = [str(k / 4) for k in range(256)] * 2
    coded = code_table(source_of(tmp_path, with_class({"x": values})), "arrival", keep=["x"])
    assert len(domain(coded, "x")) == 256
    assert coded.table.codes[0].tolist() == list(range(256)) * 2
    assert domain(coded, "x").cuts[:2] == (0.125, 0.375)
    coded = code_table(source_of(tmp_path, with_class({"x": [*values, ""]})), "arrival", keep=["x"])
    assert len(domain(coded, "x")) == 256
    assert coded.table.codes[0, -1] == 255
    assert coded.table.codes.dtype == np.uint8


@pytest.mark.parametrize("make", [source_of, parquet_of])
def test_many_distinct_numbers_get_bins_of_equal_size(tmp_path, make):
    values = np.random.default_rng(5).normal(size=100_000)
    cells = [repr(float(value)) for value in values] if make is source_of else values
    coded = code_table(make(tmp_path, with_class({"x": cells})), "arrival")
    counts = np.bincount(coded.table.codes[0])
    assert len(counts) == len(domain(coded, "x")) == 256
    assert counts.max() - counts[:-1].min() <= 1
    np.testing.assert_array_equal(coded.table.codes[0], np.searchsorted(domain(coded, "x").cuts, values))


def test_a_text_after_a_thousand_numbers_makes_a_text_column(tmp_path):
    values = [f"{k % 3000}.5" for k in range(200_000)]
    values[-1] = "n/a"
    coded = code_table(source_of(tmp_path, with_class({"x": values, "y": ["a", "b"] * 100_000})), "arrival", keep=["y"])
    assert not domain(coded, "x").numeric
    assert texts(coded, "x") == values
    assert coded.table.codes.dtype == np.uint16
    assert (
        "x is read as text because of 'n/a', the only 1 level of 3,001 that is not a number; "
        "leave such cells blank to have it numeric" in coded.warnings
    )


def test_blanks_are_a_level_or_their_rows_are_dropped(tmp_path):
    columns = with_class({"a": ["x", "", "y", " \t", "x", "y"], "b": ["p", "q", "q", "p", "", "q"]})
    columns["arrival"][5] = ""
    source = source_of(tmp_path, columns)
    coded = code_table(source, "arrival", keep=["a", "b"])
    assert domain(coded, "a") == Domain("a", ("x", "y", "(blank)"), blank=True)
    assert texts(coded, "a") == ["x", "(blank)", "y", "(blank)", "x"]
    assert coded.table.lines.numbers().tolist() == [0, 1, 2, 3, 4]
    assert coded.rows_read == 6
    assert coded.warnings[0] == "1 row of 6 dropped because the class arrival is blank"
    columns["arrival"][:] = ["sound", "rejected", "rejected", "sound", "sound", "sound"]
    dropped = code_table(source_of(tmp_path, columns), "arrival", missing="drop", keep=["a", "b"])
    assert dropped.table.lines.numbers().tolist() == [0, 2, 5]
    assert not domain(dropped, "a").blank
    assert dropped.warnings[0] == "3 rows of 6 dropped because a cell is blank"


def test_blanks_of_a_column_left_out_drop_no_row(tmp_path):
    columns = with_class({"a": ["x", "y", "y", "x"], "nothing": ["", "", "", ""], "one": ["k", "", "k", "k"]})
    coded = code_table(source_of(tmp_path, columns), "arrival", missing="drop")
    assert coded.table.lines.numbers().tolist() == [0, 1, 2, 3]
    assert reasons(coded) == {
        "nothing": "every cell is blank; --keep nothing to use it",
        "one": "the same value in every cell that is not blank; --keep one to use it",
    }


def test_a_level_named_like_the_blank_one_stays_apart(tmp_path):
    columns = with_class({"a": ["(blank)", "", "x", "x"]})
    coded = code_table(source_of(tmp_path, columns), "arrival")
    assert domain(coded, "a").levels == ("(blank)", "x", "(blank 2)")
    assert texts(coded, "a") == ["(blank)", "(blank 2)", "x", "x"]


def test_side_columns_are_no_attributes(tmp_path):
    columns = with_class({"a": ["x", "y", "y", "x"], "site": ["10", "9", "", "9"]})
    columns["arrival"][3] = ""
    coded = code_table(source_of(tmp_path, columns), "arrival", extra=["site"], keep=["a"])
    assert coded.table.schema.names == ("a",)
    side = coded.extra["site"]
    assert (side.name, side.levels, side.codes.tolist(), side.codes.dtype) == (
        "site",
        ("9", "10", "(blank)"),
        [1, 0, 2],
        np.int32,
    )


def test_more_than_65_000_levels_are_pooled_at_once(tmp_path):
    values = [f"s{k}" for k in range(65_010)] + [f"s{k}" for k in range(10, 65_010)]
    coded = code_table(source_of(tmp_path, with_class({"a": values, "b": ["x", "y"] * 65_005})), "arrival", keep=["b"])
    levels = domain(coded, "a").levels
    assert len(levels) == 65_001
    assert levels[-1] == "(other)"
    assert domain(coded, "a").pooled
    assert set(texts(coded, "a")[:10]) == {"(other)"}
    assert texts(coded, "a")[10:] == values[10:]
    assert "a has too many levels to tell apart; its 10 rarest are pooled at once" in coded.warnings


def test_types_of_columnar_files(tmp_path):
    columns = {
        "small": pa.array([3, None, 10, 3], pa.int8()),
        "real": pa.array([1.0, 2.5, float("nan"), 1.0]),
        "none": pa.nulls(4),
        "flag": pa.array([True, False, None, True]),
        "day": pa.array([datetime.date(2030, 1, 2), None, datetime.date(2030, 1, 3), None]),
        "price": pa.array([decimal.Decimal("1.50"), None, decimal.Decimal("2.25"), None]),
        "coded": pa.array(["u", None, "v", "u"]).dictionary_encode(),
        "arrival": pa.array([1, 2, 2, 1]),
    }
    coded = code_table(parquet_of(tmp_path, columns), "arrival", keep=list(columns)[:-1])
    assert texts(coded, "small") == ["3", "(blank)", "10", "3"]
    assert domain(coded, "small").levels == ("3", "10", "(blank)")
    assert texts(coded, "real") == ["1", "2.5", "(blank)", "1"]
    assert texts(coded, "none") == ["(blank)"] * 4
    assert texts(coded, "flag") == ["true", "false", "(blank)", "true"]
    assert texts(coded, "day") == ["2030-01-02", "(blank)", "2030-01-03", "(blank)"]
    assert texts(coded, "price") == ["1.50", "(blank)", "2.25", "(blank)"]
    assert texts(coded, "coded") == ["u", "(blank)", "v", "u"]
    assert coded.table.schema.target.levels == ("1", "2")


def test_a_type_without_text_is_refused(tmp_path):
    columns = {"a": [1, 2], "nest": [[1], [2]], "arrival": ["x", "y"]}
    with pytest.raises(DataError) as caught:
        code_table(parquet_of(tmp_path, columns), "arrival")
    assert str(caught.value) == (
        "column 'nest' is of type list<element: int64>; "
        "a column must hold text, numbers, dates or truth values, or be named in ignore"
    )
    assert code_table(parquet_of(tmp_path, columns), "arrival", ignore=["nest"], keep=["a"]).table.codes.shape == (1, 2)


def test_csv_and_parquet_give_equal_codes(tmp_path):
    rng = np.random.default_rng(8)
    columns = with_class(
        {"a": rng.integers(0, 5, 5000), "x": rng.normal(size=5000).round(2), "y": rng.normal(size=5000)}
    )
    csv = source_of(tmp_path, {name: [str(cell) for cell in cells] for name, cells in columns.items()})
    first, second = code_table(csv, "arrival").table, code_table(parquet_of(tmp_path, columns), "arrival").table
    assert first.schema == second.schema
    np.testing.assert_array_equal(first.codes, second.codes)
