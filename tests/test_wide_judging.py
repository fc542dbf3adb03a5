"""Pairs of very many binary attributes, tested chunk by chunk: what all pairs at once say."""

from dataclasses import fields

import numpy as np
import pytest
from builders import started
from hypothesis import given, settings
from hypothesis import strategies as st
from test_wide import BLOCKS, rare_table

from bnx import multiplicity
from bnx.comparison import _judged
from bnx.dependence import measure
from bnx.kernels.grouping import group_by_size
from bnx.many_tests import ManyTests
from bnx.multiplicity import adjusted, family_size, threshold
from bnx.recipe import Recipe
from bnx.trainings import Training
from bnx.verdicts import Judgement
from bnx.views import make_view
from bnx.wide_judging import judge_wide

METHODS = ("bh", "by", "holm", "none")


@pytest.mark.parametrize("adjust", METHODS)
@pytest.mark.parametrize("seed", range(4))
def test_judged_pairs_are_the_same_as_when_all_are_measured_at_once(seed, adjust, monkeypatch):
    monkeypatch.setattr("bnx.wide_testing._PAIRS", 50)
    table = rare_table(seed, (60, 200, 700, 1500)[seed], 30, 2 + seed % 2)
    engine = started(table, np.random.default_rng(seed).integers(0, BLOCKS, len(table.target)), BLOCKS, 2)
    mask = np.ones(BLOCKS, bool)
    training = Training((), mask, make_view(table.schema, {}), engine.class_counts.sum(axis=0))
    recipe = Recipe("class", adjust=adjust)
    pairs = measure(engine, [training], marginal_of_first=True)[0][1]
    whole = _judged(engine, training, pairs, recipe)
    drawn = [(3, 1), (28, 29), (1, 3)]
    some, judged = judge_wide(engine, training, drawn, 100, recipe)
    places = {ends: place for place, ends in enumerate(zip(pairs.left.tolist(), pairs.right.tolist(), strict=True))}
    order = np.array([places[ends] for ends in zip(some.left.tolist(), some.right.tolist(), strict=True)])
    assert len(order) == 100
    assert {places[1, 3], places[28, 29]} <= set(order.tolist())
    left_out = np.setdiff1d(np.arange(len(pairs.left)), order)
    free = np.setdiff1d(order, [places[1, 3], places[28, 29]])
    assert whole.statistics.bits[left_out].max() <= whole.statistics.bits[free].min() + 1e-9
    assert judged.family == len(pairs.left)
    assert judged.rejected == whole.judgement.rejected.sum()
    for mine, other in ((judged.judgement, whole.judgement.take(order)), (judged.without, whole.without.take(order))):
        for field in fields(Judgement):
            assert np.array_equal(getattr(mine, field.name), getattr(other, field.name), equal_nan=True), field.name
    assert np.array_equal(judged.outcome, whole.outcome[order])


@settings(max_examples=200, deadline=None)
@given(
    st.integers(0, 2**32),
    st.integers(0, 60) | st.sampled_from([1000, 20_000]),
    st.sampled_from(METHODS),
    st.sampled_from([0.2, 1, 4, 40]),
)
def test_a_family_brought_together_by_size_says_what_all_its_tests_say(seed, tests, method, power):
    random = np.random.default_rng(seed)
    p = random.random(tests) ** np.where(random.random(tests) < random.random() ** 3, power, 1)
    if seed % 2:
        p = np.round(p, 2 + seed % 3)
    p[random.random(tests) < 0.2 * (seed % 5)] = np.nan
    family = ManyTests.of(p, method)
    some = random.permutation(tests)[: random.choice([tests // 2, min(tests, 3)])]
    assert np.array_equal(family.adjusted(p[some]), adjusted(p, method)[some], equal_nan=True)
    assert np.array_equal(family.threshold(0.05), threshold(p, method, 0.05), equal_nan=True)
    assert family.rejected(0.05) == np.count_nonzero(adjusted(p, method) <= 0.05)


def test_numbers_are_grouped_by_size_whatever_they_are():
    random = np.random.default_rng(1)
    numbers = np.concatenate(
        [10.0 ** random.uniform(-320, 0, 5000), [0.0, -0.0, 1.0, 5e-324, np.nan, -np.nan], random.random(5000)]
    )
    numbers = random.permutation(numbers)
    grouped = np.full(len(numbers), -1.0)
    counts = group_by_size(numbers, numbers.view(np.int64), grouped)
    held = np.sort(numbers)[:-2]
    assert counts.sum() == len(held)
    assert np.array_equal(grouped[len(held) :], [-1.0, -1.0])
    ends = np.cumsum(counts[counts > 0])
    for start, end in zip([0, *ends[:-1]], ends, strict=True):
        assert np.array_equal(np.sort(grouped[start:end]), held[start:end])


@settings(max_examples=200, deadline=None)
@given(st.integers(0, 2**32), st.integers(1, 60))
def test_the_size_of_a_family_of_tests_that_could_reject(seed, tests):
    random = np.random.default_rng(seed)
    least = random.random(tests) ** random.integers(1, 9)
    doubtful = least[least > 0.05 / tests]
    size = family_size(doubtful, tests - len(doubtful), 0.05)
    assert np.array_equal(least <= 0.05 / size, multiplicity.testable(least, 0.05, "bh"))
