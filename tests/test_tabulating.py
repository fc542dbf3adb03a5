"""Counts of the families of many training sets against counting row by row."""

from dataclasses import replace

import numpy as np
import pytest
from builders import coded, in_turns, started

from bnx import tabulating
from bnx.engines import LocalEngine
from bnx.scoring import Counted, families_of
from bnx.structure import Structure
from bnx.tabulating import tabulate
from bnx.trainings import Training, held_sets, mask_without
from bnx.views import View

SIZES = np.array([2, 3, 5, 4])
PARENTS = (((), (0,), (1, 0), (2, 1, 0)), ((), (), (), ()), ((3,), (0,), (0, 1), ()), ((), (), (), ()))


def engine_of(rows: int, turns: int) -> tuple[LocalEngine, np.ndarray]:
    """Sort random rows; give the engine and the fold of each of its rows."""
    random = np.random.default_rng(rows)
    codes = np.array([random.integers(0, size, rows) for size in SIZES])
    fold_of_row = random.integers(0, 8, rows)
    engine = in_turns(started(coded(codes, random.integers(0, 3, rows), SIZES, 3), fold_of_row, 8, 2), turns)
    return engine, fold_of_row[engine.order] // 2


def trainings_of(engine: LocalEngine) -> list[Training]:
    """Make the nested training sets of four folds; some see the third attribute in two levels."""
    recode = np.tile(np.arange(5, dtype=np.int32), (4, 1))
    plain = View((), recode, np.ones(4, bool), SIZES)
    merged = recode.copy()
    merged[2] = [0, 0, 1, 1, 1]
    coarse = View((), merged, np.array([True, True, False, True]), np.array([2, 3, 2, 4]))
    return [
        Training(held, mask_without(held, 4, 2), coarse if number % 3 == 1 else plain, np.zeros(3))
        for number, held in enumerate(held_sets(4, nested=True))
    ]


def by_hand(engine: LocalEngine, fold: np.ndarray, training: Training, members: tuple[int, ...]) -> np.ndarray:
    """Count (C, levels...) one row at a time."""
    view = training.view
    out = np.zeros((3, *view.sizes[list(members)]), np.int64)
    for row in np.flatnonzero(~np.isin(fold, training.held)):
        out[(engine.target[row], *(view.recode[i, engine.codes[i, row]] for i in members))] += 1
    return out


@pytest.mark.parametrize(("rows", "turns"), [(0, 1), (1, 1), (300, 1), (300, 3), (90, 7)])
@pytest.mark.parametrize(("cells", "dense"), [(8_000_000, 8), (1, 8), (300, 8), (8_000_000, 0)])
def test_every_family_of_every_training_set_is_counted(
    rows: int, turns: int, cells: int, dense: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """However few are counted at a time, by parts of the table or in the training rows themselves."""
    monkeypatch.setattr(tabulating, "_CELLS", cells)
    monkeypatch.setattr(tabulating, "_DENSE", dense)
    engine, fold = engine_of(rows, turns)
    trainings = trainings_of(engine)
    structures = [Structure(f"s{k}", parents) for k, parents in enumerate(PARENTS)]
    families = [families_of(structures[: 1 + number % 4], one.view) for number, one in enumerate(trainings)]
    found = tabulate(engine, trainings, families)
    for number, (training, one) in enumerate(zip(trainings, found, strict=True)):
        for s in range(1 + number % 4):
            for child, parents in enumerate(PARENTS[s]):
                assert np.array_equal(one.table(s, child), by_hand(engine, fold, training, (*parents, child)))


def test_threads_change_no_count() -> None:
    engine, _ = engine_of(300, 2)
    trainings = trainings_of(engine)
    structures = [Structure(f"s{k}", parents) for k, parents in enumerate(PARENTS)]
    families = [families_of(structures, one.view) for one in trainings]
    for one, other in zip(
        tabulate(engine, trainings, families), tabulate(replace(engine, jobs=1), trainings, families), strict=True
    ):
        assert np.array_equal(one.counts, other.counts)


def test_families_are_listed_once_and_structures_that_are_the_same_stand_under_the_first() -> None:
    view = View((), np.zeros((4, 5), np.int32), np.ones(4, bool), SIZES)
    one = families_of([Structure(f"s{k}", parents) for k, parents in enumerate(PARENTS)], view)
    listed = [tuple(row[:depth]) for row, depth in zip(one.members.tolist(), one.depths, strict=True)]
    wanted = {(*parents, child) for structure in PARENTS for child, parents in enumerate(structure)}
    assert len(listed) == len(wanted)
    assert set(listed) == wanted
    for s, structure in enumerate(PARENTS):
        assert [listed[f] for f in one.of[s]] == [(*parents, child) for child, parents in enumerate(structure)]
    assert one.holder == (0, 1, 2, 1)
    assert np.diff(one.starts).tolist() == [int(np.prod(SIZES[list(members)])) for members in listed]
    assert Counted(one, np.zeros((3, int(one.starts[-1])), np.int32)).table(0, 3).shape == (3, 5, 3, 2, 4)


@pytest.mark.parametrize("base", [3, 40_000, 2**31])
def test_different_rows_are_numbered_however_large_the_numbers(base: int) -> None:
    random = np.random.default_rng(base)
    rows = random.choice([-1, 0, 1, base - 1], (500, 6))
    first, number = tabulating._different(rows)
    assert len(first) == len(np.unique(rows, axis=0))
    assert np.array_equal(rows[first][number], rows)
