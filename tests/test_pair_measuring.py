"""Every pair in every training set at once gives what each set gives alone, counted row by row."""

from collections.abc import Sequence

import numpy as np
import pytest
from builders import coded, started
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx import dependence
from bnx.coarsening import coarsen
from bnx.dependence import measure, relevance_of
from bnx.domains import Domain
from bnx.engines import LocalEngine
from bnx.families import family_statistics, for_each_family
from bnx.kernels.contingency import one_table
from bnx.trainings import Training, held_sets, mask_without
from bnx.views import View, make_view

SIZES = (3, 1, 2, 40, 2, 60, 9)
NUMERIC = (3, 5)
CLASSES, FOLDS, PARTS = 3, 3, 2
ROWS = (0, 1, 63, 64, 65, 400)


@st.composite
def measured_tables(draw: st.DrawFn) -> tuple[LocalEngine, list[Training]]:
    """Draw rows, sort them in chunks for one or two threads, and let some sets cut numeric columns for themselves."""
    rows = draw(st.sampled_from(ROWS))
    random = np.random.default_rng(draw(st.integers(0, 10_000)))
    codes = np.array([random.integers(0, size, rows) for size in SIZES]).reshape(len(SIZES), rows)
    codes[2] = np.where(random.random(rows) < 0.5, codes[0] % 2, codes[2])
    table = coded(
        codes, random.integers(0, CLASSES, rows), SIZES, CLASSES, draw(st.sampled_from([np.uint8, np.uint16]))
    )
    part = random.integers(0, FOLDS * PARTS, rows)
    engine = started(table, part, FOLDS * PARTS, draw(st.integers(1, 2)), draw(st.sampled_from([64, 100, 1 << 20])))
    cut = draw(st.booleans())
    sets = []
    for held in held_sets(FOLDS, nested=True):
        mask = mask_without(held, FOLDS, PARTS)
        view = make_view(table.schema, coarser(engine, mask) if cut else {})
        sets.append(Training(held, mask, view, engine.class_counts[mask].sum(axis=0)))
    sets.append(Training((), np.arange(FOLDS * PARTS) % 2 == 0, sets[-1].view, np.zeros(CLASSES, int)))
    return engine, sets


def coarser(engine: LocalEngine, mask: np.ndarray) -> dict[int, object]:
    """Cut the numeric columns by the rows of some blocks; a blank level stays apart."""
    found: dict[int, object] = {}
    for i in NUMERIC:
        regular = SIZES[i] - 1
        names = (*map(str, range(regular)), "(blank)")
        domain = Domain(f"a{i}", names, numeric=True, cuts=tuple(np.arange(regular - 1.0)), blank=True)
        found[i] = coarsen(domain, engine.margins[i][mask].sum(axis=0).T, "frequency:5", 50)
    return found


def table_by_rows(engine: LocalEngine, training: Training, members: Sequence[int]) -> np.ndarray:
    """Count joint levels by class one row at a time, int32 (C, cells)."""
    group = np.empty(len(engine.target), np.int64)
    for s in range(len(engine.starts) - 1):
        group[engine.starts[s] : engine.starts[s + 1]] = s % (engine.blocks * CLASSES)
    cells = np.zeros((CLASSES, *training.view.sizes_of(members)), np.int32)
    for row in np.flatnonzero(training.mask[group // CLASSES]):
        place = [int(training.view.recode[i, engine.codes[i, row]]) for i in members]
        cells[(int(group[row]) % CLASSES, *place)] += 1
    return cells.reshape(CLASSES, -1)


def check_all_pairs(engine: LocalEngine, sets: list[Training]) -> None:
    for k, (training, (found, pairs)) in enumerate(zip(sets, measure(engine, sets, True), strict=True)):
        assert len(pairs.marginal) == (len(pairs.left) if k == 0 else 0)
        for p, ends in enumerate(zip(pairs.left.tolist(), pairs.right.tolist(), strict=True)):
            counts, sizes = table_by_rows(engine, training, ends), training.view.sizes_of(ends)
            expected = one_table(counts, *sizes)
            np.testing.assert_array_equal(pairs.statistics[p], expected)
            assert found.strength[ends] == found.strength[ends[::-1]]
            assert found.strength[ends] == expected[1] / max(expected[0], 1.0) / np.log(2)
            if k == 0:
                shut = counts.sum(axis=0, dtype=np.int32)[None]
                np.testing.assert_array_equal(pairs.marginal[p], one_table(shut, *sizes))
        for i, bits in enumerate(relevance_of(engine, training)):
            counts = table_by_rows(engine, training, [i])
            row = one_table(counts.reshape(1, -1), *counts.shape)
            assert bits == found.relevance[i] == row[1] / max(row[0], 1.0) / np.log(2)


@given(measured_tables())
@settings(max_examples=15, deadline=None)
def test_statistics_of_all_sets_equal_those_of_tables_counted_row_by_row(
    drawn: tuple[LocalEngine, list[Training]],
) -> None:
    check_all_pairs(*drawn)


@pytest.mark.parametrize("setting", ["_MOST_CELLS", "_SMALL", "_CELLS"])
@given(measured_tables())
@settings(max_examples=4, deadline=None)
def test_every_way_to_count_a_pair_gives_the_same(setting: str, drawn: tuple[LocalEngine, list[Training]]) -> None:
    """Bit planes for no pair; no pair with many cells by block; counts of few pairs held at a time."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(dependence, setting, 0)
        if setting == "_SMALL":
            patch.setattr(dependence, "_DENSE", 0)
        check_all_pairs(*drawn)


@given(measured_tables())
@settings(max_examples=10, deadline=None)
def test_families_of_all_sets_equal_tables_counted_row_by_row(drawn: tuple[LocalEngine, list[Training]]) -> None:
    engine, sets = drawn
    families = ((0,), (2, 0), (3, 0, 2), (6, 5, 3), (4, 6, 1, 0))
    requests = [(k, members) for members in families for k in range(len(sets))] + [(2, (6, 0))]
    found = for_each_family(engine, sets, requests, lambda counts, sizes: (counts, sizes))
    assert list(found) == requests
    for (k, members), (counts, sizes) in found.items():
        assert sizes == sets[k].view.sizes_of(members)
        assert np.array_equal(counts, table_by_rows(engine, sets[k], members))
    rows = family_statistics(engine, sets, [request for request in requests if len(request[1]) > 1])
    for (k, members), row in rows.items():
        sizes = sets[k].view.sizes_of(members)
        tables = table_by_rows(engine, sets[k], members).reshape(-1, sizes[-2] * sizes[-1])
        np.testing.assert_array_equal(row, one_table(tables, sizes[-2], sizes[-1]))


def test_fine_levels_are_as_few_as_the_sets_allow() -> None:
    engine = started(coded(np.arange(60)[None] % 40, np.zeros(60, int), (40,), 1))
    cuts = [np.searchsorted(places, np.arange(40), side="right") for places in ((10, 20), (12, 20), (10, 30))]
    stored = np.array([40])
    views = [View((), np.array([cut]), np.array([False]), np.array([3])) for cut in cuts]
    fine = dependence.refine(views, stored)
    assert fine.sizes.tolist() == [5]  # cut at 10, 12, 20 and 30
    assert all((fine.levels[k, fine.recode[0]] == cut).all() for k, cut in enumerate(cuts))
    assert len(engine.margins) == 1
