"""The held-out class log loss that a choice of parents has: the judge against the definition, and its loops."""

from collections.abc import Sequence

import numpy as np
import pytest
from builders import coded, started, whole
from interacting import drawn

from bnx.heldout import MOST_ROWS, InnerRows, RowJudge, inner_rows

Parents = tuple[int, ...]


def judged(rows: int = 90, classes: int = 3, parents: Sequence[Parents] = ((),) * 4) -> tuple[InnerRows, RowJudge]:
    codes, target = drawn(rows, classes)
    table = coded(codes, target)
    engine = started(table, np.arange(rows) % 6, 6)
    inner = inner_rows(engine, whole(engine, table), MOST_ROWS)
    return inner, RowJudge(inner, parents)


def share(counted: np.ndarray, sizes: np.ndarray, row: np.ndarray, family: Parents, c: int) -> float:
    """Back off from class and parents to less, 2 records a step, from counted records (rows, n + 1), the class last."""
    child, parents = family[-1], family[:-1]
    if row[child] == sizes[child]:
        return 1.0
    counted = counted[counted[:, child] < sizes[child]]
    level = (counted[:, child] == row[child]).sum()
    found = (level + 1) / (len(counted) + sizes[child])
    for depth in range(len(parents) + 1):
        context = counted[:, -1] == c
        for parent in parents[:depth]:
            context &= (counted[:, parent] == row[parent]) & (row[parent] < sizes[parent])
        found = ((context & (counted[:, child] == row[child])).sum() + 2 * found) / (context.sum() + 2)
    return float(found)


def loss_by_definition(inner: InnerRows, parents: Sequence[Parents]) -> float:
    """Sum the held-out log losses with plain loops, row by row."""
    classes, folds = len(inner.floor), 3
    segment = np.repeat(np.arange(len(inner.starts) - 1), np.diff(inner.starts))
    fold, truth = segment // classes, segment % classes
    records = np.column_stack([inner.codes.T, truth])
    shares = np.bincount(truth, minlength=classes) / len(truth)
    total = 0.0
    for f in range(folds):
        others = records[fold != f]
        for row in records[fold == f]:
            weights = np.array([(others[:, -1] == c).mean() for c in range(classes)])
            if not weights[row[-1]]:
                continue
            for child, own in enumerate(parents):
                weights *= [share(others, inner.levels, row, (*own, child), c) for c in range(classes)]
            chance = (1 - 1 / len(truth)) * weights[row[-1]] / weights.sum() + shares[row[-1]] / len(truth)
            total -= float(np.log(chance))
    return total


@pytest.mark.parametrize("rows", [30, 91])
def test_the_loss_of_every_choice_is_that_of_the_definition(rows: int) -> None:
    start: list[Parents] = [(), (0,), (), (1, 0)]
    inner, judge = judged(rows, parents=start)
    assert judge.loss() == pytest.approx(loss_by_definition(inner, start), rel=1e-12)
    choices: list[Parents] = [(), (0,), (3,), (1, 3), (3, 1), (0, 1, 3)]
    expected = [loss_by_definition(inner, [*start[:2], choice, start[3]]) for choice in choices]
    assert judge.loss() - judge.savings(2, choices, 1.0) == pytest.approx(expected, rel=1e-12)


def test_a_move_made_is_the_loss_foretold() -> None:
    inner, judge = judged()
    foretold = judge.loss() - judge.savings(3, [(1, 2)], 1.0)[0]
    judge.take(3, (1, 2))
    assert judge.loss() == pytest.approx(foretold, rel=1e-12)
    assert judge.loss() == pytest.approx(RowJudge(inner, [(), (), (), (1, 2)]).loss(), rel=1e-12)
    judge.take(3, ())
    assert judge.loss() == pytest.approx(RowJudge(inner, [()] * 4).loss(), rel=1e-12)


def test_rows_of_a_class_that_the_other_folds_lack_are_skipped() -> None:
    codes, target = drawn(60, 2)
    target[:1] = 2
    table = coded(codes, target)
    engine = started(table, np.arange(60) % 3, 3)
    inner = inner_rows(engine, whole(engine, table), MOST_ROWS)
    assert (inner.log_prior == -np.inf).sum() == 1
    assert RowJudge(inner, [()] * 4).loss() == pytest.approx(loss_by_definition(inner, [()] * 4), rel=1e-12)


def test_losses_stay_finite_where_one_class_outweighs_the_others_beyond_measure() -> None:
    target = np.arange(600) % 2
    codes = np.repeat(target[None], 80, axis=0)
    codes[:, 0] = 1
    table = coded(codes, target)
    engine = started(table, np.arange(600) % 6, 6)
    judge = RowJudge(inner_rows(engine, whole(engine, table), MOST_ROWS), [()] * 80)
    assert np.isfinite([judge.loss(), *judge.savings(0, [(1,), (1, 2)], 1.0)]).all()


def test_a_family_of_very_many_cells_is_not_tried() -> None:
    codes = np.array([np.arange(200) % 40, np.arange(200) // 3 % 50, np.arange(200) % 2])
    table = coded(codes, np.arange(200) % 2)
    engine = started(table, np.arange(200) % 6, 6)
    judge = RowJudge(inner_rows(engine, whole(engine, table), MOST_ROWS), [()] * 3)
    assert np.isinf(judge.savings(0, [(1,), (2,)], 1.0)).tolist() == [True, False]
    assert np.isinf(judge.misfits([(0, 1), (0, 2)])).tolist() == [True, False]


def test_of_many_rows_a_share_of_every_class_and_block_is_taken() -> None:
    target = (np.arange(30_000) % 10 == 0).astype(int)
    table = coded(np.array([np.arange(30_000) % 7]), target)
    engine = started(table, np.arange(30_000) % 12, 12)
    inner = inner_rows(engine, whole(engine, table), MOST_ROWS)
    by_class = np.diff(inner.starts).reshape(3, 2)
    assert by_class.sum() == pytest.approx(MOST_ROWS, abs=6)
    assert by_class[:, 1] / by_class.sum(axis=1) == pytest.approx([0.1] * 3, abs=0.001)
    assert np.bincount(inner.codes[0]) == pytest.approx([MOST_ROWS / 7] * 7, rel=0.05)


def test_a_choice_is_given_up_for_what_a_part_of_the_rows_says_and_only_if_it_saves_too_little() -> None:
    codes, target = drawn(9_000)
    table = coded(codes, target)
    engine = started(table, np.arange(9_000) % 6, 6)
    judge = RowJudge(inner_rows(engine, whole(engine, table), MOST_ROWS), [()] * 4)
    choices: list[Parents] = [(0,), (1,), (0, 1), (2,), (0, 2)]
    exact = judge.savings(3, choices, -np.inf)
    for least in (1.0, float(np.median(exact)), 1e9):
        found = judge.savings(3, choices, least)
        assert found[exact > least] == pytest.approx(exact[exact > least], rel=1e-12)
        assert (found[exact <= least] <= least).all()
    assert judge.savings(3, choices, 1e9) != pytest.approx(exact, rel=1e-6)
    assert judge.savings(3, choices, 1e9) == pytest.approx(exact, rel=0.4, abs=40)


def test_tables_forgotten_for_want_of_room_are_made_again(monkeypatch: pytest.MonkeyPatch) -> None:
    choices: list[Parents] = [(), (0,), (3,), (1, 3), (3, 1), (0, 1, 3), (1, 0, 3), (3, 1, 0)]
    expected = judged()[1].savings(2, choices, 1.0)
    monkeypatch.setattr("bnx.heldout._ROOM", 600)
    monkeypatch.setattr("bnx.heldout._FAMILIES", 5)
    judge = judged()[1]
    for _ in range(2):
        assert judge.savings(2, choices, 1.0).tolist() == expected.tolist()


def test_what_all_moves_saved_together_is_told_with_its_error() -> None:
    _, judge = judged(91)
    before = judge.loss()
    judge.take(3, (0, 1))
    judge.take(2, (0,))
    saved, error = judge.path()
    assert saved == pytest.approx(before - judge.loss(), rel=1e-9)
    assert 0 < error < 91


def test_a_cell_not_observed_says_nothing_and_is_not_counted() -> None:
    """Blank children vanish, and a blank parent leaves the child to the parents before it, as if it were not there."""
    codes, _ = drawn(90)
    blank = np.random.default_rng(4).random(codes.shape) < 0.2
    inner, _ = judged()
    rows = InnerRows(
        np.where(blank, inner.levels[:, None], inner.codes).astype(np.uint8),
        inner.sizes + 1,
        inner.levels,
        inner.starts,
        inner.log_prior,
        inner.floor,
    )
    for parents in ([(), (0,), (), (1, 0)], [(), (), (1, 0), (0, 1, 2)]):
        assert RowJudge(rows, parents).loss() == pytest.approx(loss_by_definition(rows, parents), rel=1e-12)
    judge = RowJudge(rows, [()] * 4)
    expected = judge.loss() - loss_by_definition(rows, [(), (), (), (1, 0)])
    assert judge.savings(3, [(1, 0)], 1.0) == pytest.approx([expected], rel=1e-9)


def test_misfits_are_those_of_the_formula() -> None:
    inner, judge = judged(91, parents=[(), (0,), (), ()])
    families: list[Parents] = [(0, 1, 2), (1, 2, 3)]
    segment = np.repeat(np.arange(len(inner.starts) - 1), np.diff(inner.starts))
    chance = judge._weights / judge._weights.sum(axis=0)
    expected = []
    for family in families:
        cell = np.ravel_multi_index(tuple(inner.codes[list(family)]), inner.sizes[list(family)])
        cells = int(inner.sizes[list(family)].prod())
        found = mean = spread = 0.0
        for c in range(3):
            off = np.bincount(cell, (segment % 3 == c) - chance[c], cells)
            variance = np.bincount(cell, chance[c] * (1 - chance[c]), cells)
            found += (off**2 / (variance + 0.5)).sum()
            mean += (variance / (variance + 0.5)).sum()
            spread += ((variance / (variance + 0.5)) ** 2).sum()
        expected.append((found - mean) / np.sqrt(2 * spread + 1))
    assert judge.misfits(families) == pytest.approx(expected, rel=1e-9)
