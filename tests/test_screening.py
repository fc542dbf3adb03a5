import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from tablefiles import domain, reasons, source_of, with_class

from bnx.coding import code_table
from bnx.errors import DataError, SettingError


def test_what_is_left_out_and_why(tmp_path):
    rows = 100
    columns = with_class(
        {
            "id": [f"s{k}" for k in range(rows)],
            "nearly": [f"s{max(k, 5)}" for k in range(rows)],
            "number": [str(1000 + k) for k in range(rows)],
            "measured": [f"{k}.25" for k in range(rows)],
            "same": ["x"] * rows,
            "same_or_blank": ["x", ""] * (rows // 2 - 1) + ["", "x"],
            "alias": ["0", "1"] * (rows // 2),
            "useful": [str(k % 7) for k in range(rows)],
        }
    )
    coded = code_table(source_of(tmp_path, columns), "arrival")
    assert reasons(coded) == {
        "id": "a different value in every row; --keep id to use it",
        "nearly": "95 different values in 100 rows; --keep nearly to use it",
        "number": "a different value in every row; --keep number to use it",
        "same": "the same value in every row; --keep same to use it",
        "alias": "it is the class under other names; --keep alias to use it",
    }
    assert coded.table.schema.names == ("measured", "same_or_blank", "useful")
    kept = code_table(source_of(tmp_path, columns), "arrival", keep=["id", "same", "alias"], ignore=["useful"])
    assert kept.table.schema.names == ("id", "measured", "same", "same_or_blank", "alias")
    assert len(domain(kept, "same")) == 1


def test_the_limits_of_an_identifier(tmp_path):
    columns = with_class({"a": [f"s{k}" for k in range(50)], "b": ["x", "y", "x", "x", "y"] * 10})
    assert not code_table(source_of(tmp_path, columns), "arrival").left_out
    columns = with_class({"a": [f"s{k % 90}" for k in range(100)], "b": ["x", "y", "x", "x", "y"] * 20})
    assert not code_table(source_of(tmp_path, columns), "arrival").left_out
    columns["a"][99] = "s90"
    assert set(reasons(code_table(source_of(tmp_path, columns), "arrival"))) == {"a"}


def test_warnings(tmp_path):
    columns = {
        "a": ["x", "X ", "x", "y"] * 10,
        "holes": ["p", "", "", "q", ""] * 8,
        "arrival": ["sound", "downgraded"] * 18 + ["rejected"] + ["sound"] * 3,
    }
    coded = code_table(source_of(tmp_path, columns), "arrival", max_levels=2)
    assert coded.warnings == (
        "class arrival = rejected has 1 row: every figure for this class is anecdotal",
        "a has 3 levels; all but the 2 most frequent of the training rows are pooled",
        "a has levels that differ only in capitals or in spaces around them: 'X ' and 'x'",
        "holes is blank in 24 of 40 rows",
        f"{coded.duplicates} rows of 40 repeat an earlier row in every attribute used and the class, "
        "as must happen where only 27 different rows are possible",
    )
    assert coded.duplicates == 40 - len(set(zip(*columns.values(), strict=True)))


@settings(max_examples=50, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.tuples(st.sampled_from("ab"), st.sampled_from(["", "1", "2.5"]), st.sampled_from("cd")), min_size=4))
def test_duplicates_equal_a_count_by_sets(tmp_path, rows):
    rows = [*rows, ("a", "1", "c"), ("b", "2.5", "d"), ("b", "2.5", "c"), ("a", "2.5", "c")]
    columns = {name: [row[k] for row in rows] for k, name in enumerate(["p", "q", "arrival"])}
    coded = code_table(source_of(tmp_path, columns), "arrival", numeric=["q"], keep=["p", "q"])
    assert coded.duplicates == len(rows) - len(set(rows))


def test_numbers_that_share_a_fine_bin_are_no_duplicates(tmp_path):
    values = [repr(k / 3) for k in range(2000)]
    assert code_table(source_of(tmp_path, with_class({"x": values})), "arrival").duplicates == 0
    assert code_table(source_of(tmp_path, with_class({"x": [*values, *values[:6]]})), "arrival").duplicates == 6


CASES = [
    ({"target": "arival"}, DataError, "{} has no column 'arival'; did you mean arrival?"),
    ({"numeric": ["Route"]}, DataError, "{} has no column 'Route'; did you mean route?"),
    ({"keep": ["zzz"]}, DataError, "{} has no column 'zzz'; known: route, id, arrival"),
    ({"extra": ["sit"]}, DataError, "{} has no column 'sit'; known: route, id, arrival"),
    (
        {"target": "id"},
        DataError,
        "the class 'id' has 200 levels; a class must be categories, at most 100",
    ),
    (
        {"ignore": ["arrival"]},
        SettingError,
        "column 'arrival' is given as the class and also as ignore; it can be only one of them",
    ),
    (
        {"numeric": ["route"], "categorical": ["route"]},
        SettingError,
        "column 'route' is given as numeric and also as categorical; it can be only one of them",
    ),
    (
        {"ignore": ["route", "id"]},
        DataError,
        "no attribute is left beside the class 'arrival': there is no other column",
    ),
    (
        {"ignore": ["route"]},
        DataError,
        "no attribute is left beside the class 'arrival': id (a different value in every row; --keep id to use it)",
    ),
]


@pytest.mark.parametrize(("wishes", "kind", "sentence"), CASES)
def test_refusals(tmp_path, wishes, kind, sentence):
    columns = with_class(
        {"route": ["north", "south", "south"] * 66 + ["north"] * 2, "id": [f"s{k}" for k in range(200)]}
    )
    source = source_of(tmp_path, columns)
    with pytest.raises(kind) as caught:
        code_table(source, **({"target": "arrival"} | wishes))
    assert str(caught.value) == sentence.format(source.name)


def test_a_class_with_one_level_or_none_is_refused(tmp_path):
    source = source_of(tmp_path, {"a": ["x", "y", "x"], "arrival": ["sound", "sound", ""], "empty": ["", "", ""]})
    with pytest.raises(DataError) as caught:
        code_table(source, "arrival")
    assert str(caught.value) == "the class 'arrival' is 'sound' in all 2 rows used; it must have at least two levels"
    with pytest.raises(DataError) as caught:
        code_table(source, "empty")
    assert str(caught.value) == "no row is left: in every row the class 'empty' or another cell is blank"
