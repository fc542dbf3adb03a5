"""Counts are sums: any way to split the rows gives the same totals."""

from dataclasses import replace

import numpy as np
from builders import coded, started, stored_view
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx.coarsening import coarsen
from bnx.counts import FamilyCounts, PairCounts, PairLayout
from bnx.dependence import measure
from bnx.domains import Domain
from bnx.engines import LocalEngine
from bnx.families import for_each_family
from bnx.kernels.reducing import blocks_of_masks, sum_all, sum_set
from bnx.trainings import Training, held_sets, mask_without
from bnx.views import View, make_view

SIZES = (3, 2, 4)


@st.composite
def tables(draw: st.DrawFn) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Draw codes (3, N), classes (N,) of two, and a block out of four for every row."""
    rows = draw(st.integers(0, 90))
    random = np.random.default_rng(draw(st.integers(0, 10_000)))
    codes = np.array([random.integers(0, size, rows) for size in SIZES]).reshape(3, rows)
    return codes, random.integers(0, 2, rows), random.integers(0, 4, rows)


def counted(engine: LocalEngine) -> tuple[PairCounts, FamilyCounts]:
    """Count all pairs and one family of three."""
    left, right = np.triu_indices(3, 1)
    pairs = engine.pair_counts(PairLayout.of(np.array(SIZES), left, right))
    return pairs, engine.family_counts((2, 0, 1), VIEW)


VIEW = stored_view(coded(np.zeros((3, 1), int), np.zeros(1, int), SIZES, 2).schema.attributes)


@given(tables())
@settings(max_examples=40, deadline=None)
def test_counts_of_two_parts_add_up_and_either_can_be_taken_away(
    table: tuple[np.ndarray, np.ndarray, np.ndarray],
) -> None:
    codes, target, part = table
    first, second = part < 2, part >= 2
    both = counted(started(coded(codes, target, SIZES, 2)))
    one = counted(started(coded(codes[:, first], target[first], SIZES, 2)))
    other = counted(started(coded(codes[:, second], target[second], SIZES, 2)))
    for whole, a, b in zip(both, one, other, strict=True):
        assert np.array_equal(a.counts + b.counts, whole.counts)
        assert np.array_equal((a + b).counts, whole.counts)
        assert np.array_equal((whole - b).counts, a.counts)


@given(tables(), st.lists(st.booleans(), min_size=4, max_size=4))
@settings(max_examples=40, deadline=None)
def test_blocks_of_a_mask_are_the_rows_of_those_blocks(
    table: tuple[np.ndarray, np.ndarray, np.ndarray], mask: list[bool]
) -> None:
    codes, target, part = table
    chosen = np.array(mask)[part]
    by_block = counted(started(coded(codes, target, SIZES, 2), part, 4))
    alone = counted(started(coded(codes[:, chosen], target[chosen], SIZES, 2)))
    for blocks, expected in zip(by_block, alone, strict=True):
        flat = blocks.counts.reshape(8, -1)
        total, found = np.empty((2, 2, flat.shape[1]), np.int32)
        sum_all(flat, 2, total)
        sum_set(flat, 2, *blocks_of_masks(np.array([mask])).of(0), total, found)
        assert np.array_equal(total, blocks.counts.sum(axis=0))
        assert np.array_equal(found, expected.counts[0])


@given(tables())
@settings(max_examples=20, deadline=None)
def test_margins_are_sums_of_pair_counts(table: tuple[np.ndarray, np.ndarray, np.ndarray]) -> None:
    codes, target, part = table
    engine = started(coded(codes, target, SIZES, 2), part, 4)
    pairs, _ = counted(engine)
    first = pairs.counts[:, :, : SIZES[0] * SIZES[1]].reshape(4, 2, *SIZES[:2])
    assert np.array_equal(first.sum(axis=3), engine.margins[0])
    assert np.array_equal(first.sum(axis=2), engine.margins[1])
    assert np.array_equal(engine.margins[2].sum(axis=2), engine.class_counts)


def training(view: View, engine: LocalEngine, held: tuple[int, ...]) -> Training:
    """Leave folds of two blocks out."""
    mask = mask_without(held, 3, 2)
    return Training(held, mask, view, engine.class_counts[mask].sum(axis=0))


def test_a_family_counted_by_block_or_in_each_training_set_is_the_same() -> None:
    random = np.random.default_rng(1)
    codes = np.array([random.integers(0, size, 2000) for size in SIZES])
    target, part = random.integers(0, 2, 2000), random.integers(0, 6, 2000)
    engine = started(coded(codes, target, SIZES, 2), part, 6)
    trainings = [training(VIEW, engine, held) for held in held_sets(3, nested=True)]
    assert [one.held for one in trainings] == [(), (0,), (1,), (2,), (0, 1), (0, 2), (1, 2)]
    requests = [(number, (2, 0, 1)) for number in range(7)] + [(3, (0, 2))]
    found = for_each_family(engine, trainings, requests, lambda counts, sizes: (counts, sizes))
    assert list(found) == list(dict.fromkeys(requests))
    for (number, members), (counts, sizes) in found.items():
        rows = trainings[number].mask[part]
        assert sizes == tuple(SIZES[member] for member in members)
        for c in range(2):
            cells = np.ravel_multi_index(tuple(codes[list(members)][:, rows & (target == c)]), sizes)
            assert np.array_equal(counts[c], np.bincount(cells, minlength=int(np.prod(sizes))))


def test_a_table_seen_through_cut_points_is_the_table_that_was_cut_before() -> None:
    """Bits, tests and margins through a view equal those of codes that are coarse already; so do recoded rows."""
    random = np.random.default_rng(2)
    codes = np.array([random.integers(0, size, 700) for size in (30, 4, 20, 3)])
    target = (codes[0] // 10 + random.integers(0, 2, 700)) % 2
    part = random.integers(0, 4, 700)
    table = coded(codes, target, (30, 4, 20, 3), 2)
    fine = [
        Domain(f"a{i}", tuple(map(str, range(size))), numeric=True, cuts=tuple(np.arange(size - 1.0)))
        for i, size in ((0, 30), (2, 20))
    ]
    counts = [
        np.array([np.bincount(codes[i][target == c], minlength=size) for c in (0, 1)]).T
        for i, size in ((0, 30), (2, 20))
    ]
    coarse = {i: coarsen(own, seen, "frequency:4", 50) for i, own, seen in zip((0, 2), fine, counts, strict=True)}
    assert [len(one.domain) for one in coarse.values()] == [4, 4]
    view = make_view(table.schema, coarse)
    cut = codes.copy()
    for i, one in coarse.items():
        cut[i] = one.codes[codes[i]]
    before = coded(cut, target, (4, 4, 4, 3), 2)
    engine, plain = started(table, part, 4), started(before, part, 4)
    mask = np.array([True, False, True, True])
    rows = engine.class_counts[mask].sum(axis=0)
    sets = [Training((), mask, view, rows), Training((), np.ones(4, bool), view, rows)]
    through = measure(engine, sets, marginal_of_first=True)
    direct = measure(plain, [replace(one, view=stored_view(before.schema.attributes)) for one in sets], True)
    for (one, pairs), (other, expected) in zip(through, direct, strict=True):
        assert np.array_equal(one.relevance, other.relevance)
        assert np.array_equal(one.strength, other.strength)
        assert np.array_equal(pairs.statistics, expected.statistics, equal_nan=True)
        assert np.array_equal(pairs.marginal, expected.marginal, equal_nan=True)
    recoded = engine.recoded(view)
    assert np.array_equal(recoded.codes, plain.codes)
    assert all(np.array_equal(a, b) for a, b in zip(recoded.margins, plain.margins, strict=True))
