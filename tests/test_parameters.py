"""Smoothed tables against their definitions, cell by cell."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx.errors import SettingError
from bnx.parameters import CANDIDATES, Smoothing, candidates, log_tables, parse_smoothing

Counts = np.ndarray


@st.composite
def families(draw: st.DrawFn) -> Counts:
    """Draw counts (C, levels of up to three parents..., levels), many of them zero."""
    parents = draw(st.lists(st.integers(1, 4), max_size=3))
    shape = (draw(st.integers(1, 3)), *parents, draw(st.integers(1, 5)))
    random = np.random.default_rng(draw(st.integers(0, 100_000)))
    return random.poisson(draw(st.sampled_from([0.2, 1.0, 30.0])), shape).astype(np.int32)


def tables(counts: Counts, smoothing: Smoothing) -> np.ndarray:
    """Smooth one family, shaped like its counts."""
    logs = log_tables(counts.reshape(len(counts), -1), counts.shape[1:], [smoothing])
    return np.exp(logs.T).reshape(counts.shape)


def backed_off(counts: Counts, s: float, c: int, context: tuple[int, ...], level: int, deeper: float = 0) -> float:
    """Friedman, Geiger & Goldszmidt 1997, section 5, one parent after the other, by recursion.

    q_d = (N_d + s q_(d-1)) / (N_d(context) + s); q_0 mixes in the marginal, itself smoothed by one record per level.
    Contexts that hold parents take ``deeper`` for s, if it is given.
    """
    if context == ():
        marginal = counts.reshape(-1, counts.shape[-1]).sum(axis=0)
        before = (marginal[level] + 1) / (marginal.sum() + counts.shape[-1])
    else:
        before = backed_off(counts, s, c, context[:-1], level, deeper)
        s = deeper or s
    free = counts[(c, *context)].reshape(-1, counts.shape[-1]).sum(axis=0)
    return float((free[level] + s * before) / (free.sum() + s))


@given(families(), st.sampled_from([0.5, 1.0, 2.0, 16.0, 0.03]))
@settings(deadline=None, max_examples=60)
def test_back_off_equals_its_recursion(counts: Counts, s: float) -> None:
    found = tables(counts, Smoothing("backoff", s))
    for cell in np.ndindex(counts.shape):
        expected = backed_off(counts, s, cell[0], cell[1:-1], cell[-1])
        assert found[cell] == pytest.approx(expected, rel=1e-12)


@given(families(), st.sampled_from([(0.5, 8.0), (2.0, 256.0), (16.0, 0.25)]))
@settings(deadline=None, max_examples=60)
def test_two_strengths_equal_their_recursion(counts: Counts, strengths: tuple[float, float]) -> None:
    found = tables(counts, Smoothing("backoff", *strengths))
    for cell in np.ndindex(counts.shape):
        expected = backed_off(counts, strengths[0], cell[0], cell[1:-1], cell[-1], strengths[1])
        assert found[cell] == pytest.approx(expected, rel=1e-12)


@given(families(), st.sampled_from([0.5, 1.0, 3.0]))
@settings(deadline=None)
def test_laplace_equals_its_definition(counts: Counts, amount: float) -> None:
    expected = (counts + amount) / (counts.sum(axis=-1, keepdims=True) + amount * counts.shape[-1])
    assert tables(counts, Smoothing("laplace", amount)) == pytest.approx(expected, rel=1e-13)


@given(families(), st.sampled_from(CANDIDATES))
@settings(deadline=None)
def test_tables_sum_to_one_and_leave_nothing_impossible(counts: Counts, smoothing: Smoothing) -> None:
    found = tables(counts, smoothing)
    assert found.sum(axis=-1) == pytest.approx(np.ones(counts.shape[:-1]), abs=1e-12)
    assert (found > 0).all()


@given(families())
@settings(deadline=None)
def test_several_smoothings_at_once_equal_each_alone(counts: Counts) -> None:
    classes = len(counts)
    together = log_tables(counts.reshape(classes, -1), counts.shape[1:], CANDIDATES)
    for v, smoothing in enumerate(CANDIDATES):
        alone = log_tables(counts.reshape(classes, -1), counts.shape[1:], [smoothing])
        assert np.array_equal(together[:, v * classes : (v + 1) * classes], alone)


def test_a_context_without_a_record_backs_off_to_the_table_that_knows_one_parent_less() -> None:
    counts = np.zeros((2, 3, 2), np.int32)
    counts[0, 0] = [6, 2]
    counts[0, 1] = [1, 3]
    counts[1, 2] = [2, 2]
    found = tables(counts, Smoothing("backoff", 4.0))
    without = tables(counts.sum(axis=1, dtype=np.int32), Smoothing("backoff", 4.0))
    assert found[0, 2] == pytest.approx(without[0], rel=1e-13)
    assert found[1, 0] == pytest.approx(without[1], rel=1e-13)


def test_strength_pulls_towards_the_general_table() -> None:
    counts = np.array([[[8, 0], [0, 8]]], np.int32)
    weak, strong = tables(counts, Smoothing("backoff", 0.5)), tables(counts, Smoothing("backoff", 1e6))
    assert weak[0, 0, 0] > 0.95
    assert strong[0, 0, 0] == pytest.approx(0.5, abs=1e-4)


@pytest.mark.parametrize("text", ["laplace:1", "laplace:.5", "backoff:16", "backoff:0.25", "backoff:2,256"])
def test_smoothings_are_read_as_they_are_written(text: str) -> None:
    smoothing = parse_smoothing(text)
    assert parse_smoothing(str(smoothing)) == smoothing
    assert candidates(text) == (smoothing,)


@pytest.mark.parametrize(
    "text",
    ["laplace", "laplace:0", "backoff:-1", "backoff:nan", "kneser:1", "", "laplace:1:2", "laplace:1,2", "backoff:1,0"],
)
def test_other_smoothings_are_refused(text: str) -> None:
    with pytest.raises(SettingError, match="give auto, laplace:A, backoff:S or backoff:S,D with numbers above 0"):
        parse_smoothing(text)


def test_auto_tries_one_record_three_strengths_and_four_pairs() -> None:
    written = [str(smoothing) for smoothing in candidates("auto")]
    assert written[:4] == ["laplace:1", "backoff:0.5", "backoff:2", "backoff:8"]
    assert written[4:] == ["backoff:2,32", "backoff:2,256", "backoff:16,64", "backoff:16,512"]
