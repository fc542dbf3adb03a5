"""Rows are sorted within chunks of the table only: everything counted or drawn is the same for any chunk."""

import numpy as np
import pytest
from builders import coded, started, stored_view
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx import sampling
from bnx.counts import PairLayout
from bnx.engines import LocalEngine
from bnx.sampling import sample_for_gains

SIZES = (3, 2, 5)
BLOCKS, CLASSES = 6, 3


@st.composite
def engines(draw: st.DrawFn) -> tuple[LocalEngine, LocalEngine, np.ndarray, np.ndarray]:
    """Draw a table, and sort it as one chunk and in small chunks; give the rows' blocks and codes as well."""
    rows, chunk = draw(st.integers(0, 120)), draw(st.integers(1, 130))
    random = np.random.default_rng(draw(st.integers(0, 10_000)))
    codes = np.array([random.integers(0, size, rows) for size in SIZES]).reshape(3, rows)
    part = random.integers(0, BLOCKS, rows)
    table = coded(codes, random.integers(0, CLASSES, rows), SIZES, CLASSES)
    jobs = draw(st.integers(1, 3))
    return started(table, part, BLOCKS), started(table, part, BLOCKS, jobs, chunk), part, table.codes


@given(engines())
@settings(max_examples=60, deadline=None)
def test_counts_do_not_depend_on_chunks(drawn: tuple[LocalEngine, LocalEngine, np.ndarray, np.ndarray]) -> None:
    one, many, _, _ = drawn
    layout = PairLayout.of(np.array(SIZES), *np.triu_indices(3, 1))
    view = stored_view(coded(np.zeros((3, 1), int), np.zeros(1, int), SIZES, 2).schema.attributes)
    mask = np.array([True, False, True, True, False, False])
    assert np.array_equal(one.pair_counts(layout).counts, many.pair_counts(layout).counts)
    assert np.array_equal(one.family_counts((2, 0), view).counts, many.family_counts((2, 0), view).counts)
    assert np.array_equal(one.training_counts((1, 2), view, mask), many.training_counts((1, 2), view, mask))
    assert np.array_equal(one.class_counts, many.class_counts)
    assert all(np.array_equal(a, b) for a, b in zip(one.margins, many.margins, strict=True))


@given(engines())
@settings(max_examples=60, deadline=None)
def test_segments_hold_the_rows_of_one_group_in_one_chunk(
    drawn: tuple[LocalEngine, LocalEngine, np.ndarray, np.ndarray],
) -> None:
    _, many, part, codes = drawn
    groups = BLOCKS * CLASSES
    assert (len(many.starts) - 1) % groups == 0
    assert (many.starts[0], many.starts[-1], many.rows) == (0, len(part), len(part))
    order = many.order
    assert np.array_equal(np.sort(order), np.arange(len(part)))
    assert np.array_equal(many.codes, codes[:, order])
    for s in range(len(many.starts) - 1):
        rows = slice(many.starts[s], many.starts[s + 1])
        assert set(part[order[rows]]) <= {s % groups // CLASSES}
        assert set(many.target[rows]) <= {s % CLASSES}
        assert set(order[rows] // many.chunk) <= {s // groups}
        assert (np.diff(order[rows]) > 0).all()
    runs = many.rows_of(2, 4)
    inside = np.concatenate([order[run] for run in runs])
    assert np.array_equal(np.sort(inside), np.flatnonzero((part == 2) | (part == 3)))


@pytest.mark.parametrize("chunk", [1, 7, 64, 999, 5000])
def test_the_sample_does_not_depend_on_chunks(chunk: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sampling, "_ROWS_PER_CLASS_FOR_GAINS", 20)
    monkeypatch.setattr(sampling, "_ROWS", 300)
    random = np.random.default_rng(3)
    codes = np.array([random.integers(0, size, 2000) for size in SIZES])
    table, part = coded(codes, random.integers(0, CLASSES, 2000), SIZES, CLASSES), random.integers(0, BLOCKS, 2000)
    first = sample_for_gains(started(table, part, BLOCKS), 3)
    other = sample_for_gains(started(table, part, BLOCKS, 1, chunk), 3)
    assert 300 <= len(first.target) < 2000
    for name in ("codes", "target", "weights", "starts"):
        assert np.array_equal(getattr(first, name), getattr(other, name))
