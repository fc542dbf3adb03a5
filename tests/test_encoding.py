import numpy as np
import pyarrow as pa
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from tablefiles import CLASSES, parquet_of, source_of

from bnx.coarsening import coarsen, needs_coarsening
from bnx.coding import code_table
from bnx.domains import Domain
from bnx.encoding import encode
from bnx.errors import DataError


def encoded(source, domains):
    return np.concatenate([codes for codes, _ in encode(source, domains)], axis=1)


CELL = st.sampled_from(["", " ", "a", "b", "(other)", "(blank)", "1", "01", "1.0", "10"])
NUMBER = st.one_of(st.just(""), st.floats(-100, 100).map(lambda number: repr(round(number, 2))))


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    st.lists(st.tuples(CELL, NUMBER, st.sampled_from(CLASSES)), min_size=2, max_size=60),
    st.sampled_from(["mdl", "frequency:3", "width:4"]),
    st.integers(1, 4),
    st.data(),
)
def test_encoding_equals_coding_then_coarsening(tmp_path, rows, bins, max_levels, data):
    rows = [*rows, ("a", "1", "sound"), ("b", "2", "rejected")]
    source = source_of(tmp_path, {name: [row[k] for row in rows] for k, name in enumerate(["t", "x", "arrival"])})
    table = code_table(source, "arrival", numeric=["x"], keep=["t", "x"]).table
    np.testing.assert_array_equal(encoded(source, table.schema.attributes), table.codes)
    np.testing.assert_array_equal(encoded(source, [table.schema.target])[0], table.target)
    training = np.array(data.draw(st.lists(st.booleans(), min_size=len(rows), max_size=len(rows))))
    for fine, codes in zip(table.schema.attributes, table.codes, strict=True):
        counts = np.zeros((len(fine), 2), dtype=np.int64)
        np.add.at(counts, (codes[training], table.target[training]), 1)
        coarse = coarsen(fine, counts, bins, max_levels)
        assert coarse.codes.shape == (len(fine),)
        assert coarse.codes.dtype == np.uint16
        assert len(set(coarse.domain.levels)) == len(coarse.domain)
        assert not needs_coarsening(coarse.domain, max_levels) or coarse.domain.numeric
        np.testing.assert_array_equal(encoded(source, [coarse.domain])[0], coarse.codes[codes])


DOMAINS = (
    Domain("t", ("1", "3.0", "a")),
    Domain("p", ("a", "(other)", "(blank)"), pooled=True, blank=True),
    Domain("x", ("<= 0.5", "> 0.5"), numeric=True, cuts=(0.5,)),
    Domain("y", ("<= 0.5", "> 0.5", "(blank)"), numeric=True, cuts=(0.5,), blank=True),
)


def test_new_data_with_levels_never_seen(tmp_path):
    columns = {
        "t": ["1", "3.0", "3", "", "z", "a"],
        "p": ["a", "", "new", "(other)", "(blank)", " "],
        "x": ["0.5", "0.6", "", "text", "007", "inf"],
        "y": ["0.5", "0.6", "", "text", "-1", "1e999"],
        "more": ["1"] * 6,
    }
    blocks = list(encode(source_of(tmp_path, columns), DOMAINS, extra=["more", "x"]))
    assert blocks[0][0].tolist() == [
        [0, 1, -1, -1, -1, 2],
        [0, 2, 1, 1, 1, 2],
        [0, 1, -1, -1, 1, -1],
        [0, 1, 2, -1, 0, -1],
    ]
    assert blocks[0][0].dtype == np.int32
    assert blocks[0][1].schema.names == ["t", "p", "x", "y", "more"]


def test_new_data_from_typed_columns(tmp_path):
    columns = {
        "t": [1.0, 3.0, None, 2.0],
        "p": pa.array(["a", None, "b", "a"]).dictionary_encode(),
        "x": pa.array([0, 1, None, 2], pa.int32()),
        "y": [0.5, float("inf"), float("nan"), 9.0],
    }
    codes = encoded(parquet_of(tmp_path, columns), DOMAINS)
    assert codes.tolist() == [[0, 1, -1, -1], [0, 2, 1, 0], [0, 1, -1, 1], [0, -1, 2, 1]]


def test_new_data_without_a_column_is_refused(tmp_path):
    source = source_of(tmp_path, {"t": ["1"], "p": ["a"], "x": ["1"]})
    with pytest.raises(DataError) as caught:
        list(encode(source, DOMAINS))
    assert str(caught.value) == f"{source.name} has no column 'y'; known: t, p, x"
