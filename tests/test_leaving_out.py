"""Leave-one-out in one pass, against models that are fitted anew without every single row."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from builders import coded, started, whole
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx import leaving_out
from bnx.domains import Domain
from bnx.engines import LocalEngine
from bnx.leaving_out import DEEPER, STRENGTH, LeftOut, leave_out
from bnx.structure import Structure
from bnx.trainings import Training

Parents = tuple[int, ...]


def drawn(rows: int, classes: int, seed: int, sizes: Sequence[int] = (2, 3, 2, 3)) -> tuple[np.ndarray, np.ndarray]:
    """Draw attributes that depend on the class and on those before them."""
    rng = np.random.default_rng(seed)
    target = rng.integers(0, classes, rows)
    codes = [rng.integers(0, sizes[0], rows)]
    for size in sizes[1:]:
        codes.append(np.where(rng.random(rows) < 0.6, (sum(codes) + target) % size, rng.integers(0, size, rows)))
    return np.array(codes), target


def judged(codes: np.ndarray, target: np.ndarray, structure: Structure, classes: int = 3) -> LeftOut:
    table = coded(codes, target, classes=classes)
    engine = started(table, np.arange(len(target)) % 6, 6)
    return judged_of(engine, whole(engine, table), structure)


def judged_of(engine: LocalEngine, training: Training, structure: Structure) -> LeftOut:
    return leave_out(engine, [training], [structure], lambda _, one: one)[0]


def share(records: np.ndarray, sizes: Sequence[int], row: np.ndarray, family: Parents, c: int) -> float:
    """Back off from class and parents to less, counting records (rows, n + 1), the class last, where all is observed.

    Codes of -1 are of cells not observed: from the first such parent on nothing is backed off to.
    """
    child, parents = family[-1], family[:-1]
    if row[child] < 0:
        return 1.0
    same, known = records[:, child] == row[child], records[:, child] >= 0
    found = (same.sum() + 1) / (known.sum() + sizes[child])
    for depth in range(len(parents) + 1):
        if depth and row[parents[depth - 1]] < 0:
            break
        context = known & (records[:, -1] == c)
        for parent in parents[:depth]:
            context &= records[:, parent] == row[parent]
        strength = DEEPER if depth else STRENGTH
        found = ((context & same).sum() + strength * found) / (context.sum() + strength)
    return float(found)


def loss_of_refits(records: np.ndarray, sizes: Sequence[int], families: Sequence[Parents], classes: int) -> float:
    """Fit a model without each row, judge the row, and take the best of the temperatures."""
    n = len(records)
    shares = np.bincount(records[:, -1], minlength=classes) / n
    losses = np.zeros(len(TEMPERATURES))
    for i, row in enumerate(records):
        others = np.delete(records, i, axis=0)
        prior = np.bincount(others[:, -1], minlength=classes) / len(others)
        terms = np.array([sum(np.log(share(others, sizes, row, one, c)) for one in families) for c in range(classes)])
        for t, temperature in enumerate(TEMPERATURES):
            weights = prior * np.exp(temperature * (terms - terms.max()))
            truth = row[-1]
            losses[t] -= np.log((1 - 1 / n) * weights[truth] / weights.sum() + shares[truth] / n)
    return float(losses.min())


TEMPERATURES = (1.0, 0.75, 0.5)
PARENTS: tuple[Parents, ...] = ((1,), (), (1, 0), (2, 1, 0))
ORDER = [1, 0, 2, 3]


@pytest.mark.parametrize(("rows", "classes"), [(25, 2), (40, 3), (11, 4)])
def test_every_depth_and_number_of_attributes_is_judged_as_by_refits_without_each_row(rows: int, classes: int) -> None:
    """The definition of leave-one-out, (k, s) by (k, s): Martinez, Webb, Chen & Zaidi 2016, section 3."""
    codes, target = drawn(rows, classes, seed=rows)
    found = judged(codes, target, Structure("x", PARENTS), classes).losses(ORDER, [0] * 4, 6)
    sizes = [int(row.max()) + 1 for row in codes]
    assert found.shape == (6, 5)
    for k in range(6):
        for s in range(5):
            families = [(*PARENTS[child][:k], child) for child in ORDER[:s]]
            expected = loss_of_refits(np.column_stack([codes.T, target]), sizes, families, classes)
            assert found[k, s] == pytest.approx(expected, rel=1e-9)


@settings(max_examples=15, deadline=None)
@given(st.integers(2, 14), st.integers(2, 3), st.integers(0, 10_000))
def test_tiny_tables_and_lone_rows_of_a_class_are_judged_as_by_refits(rows: int, classes: int, seed: int) -> None:
    codes, target = drawn(rows, classes, seed)
    found = judged(codes, target, Structure("x", PARENTS), classes).losses(ORDER, [0] * 4, 4)
    sizes = [int(row.max()) + 1 for row in codes]
    records = np.column_stack([codes.T, target])
    for k, s in ((0, 0), (3, 4), (2, 3)):
        families = [(*PARENTS[child][:k], child) for child in ORDER[:s]]
        assert found[k, s] == pytest.approx(loss_of_refits(records, sizes, families, classes), rel=1e-9)


def test_rows_with_cells_not_observed_are_judged_by_the_tables_before_them() -> None:
    codes, target = drawn(40, 3, seed=9)
    sizes = [2, 3, 2, 3]
    blank = np.random.default_rng(2).random(codes.shape) < 0.2
    table = coded(np.where(blank, np.array(sizes)[:, None], codes), target)
    domains = tuple(Domain(f"a{i}", tuple(map(str, range(size))), veiled=True) for i, size in enumerate(sizes))
    table = replace(table, schema=replace(table.schema, attributes=domains))
    engine = started(table, np.arange(40) % 6, 6)
    found = judged_of(engine, whole(engine, table), Structure("x", PARENTS)).losses(ORDER, [0] * 4, 4)
    records = np.column_stack([np.where(blank, -1, codes).T, target])
    for k, s in ((0, 1), (0, 4), (1, 4), (2, 3), (3, 4)):
        families = [(*PARENTS[child][:k], child) for child in ORDER[:s]]
        assert found[k, s] == pytest.approx(loss_of_refits(records, sizes, families, 3), rel=1e-9)


def test_required_parents_are_in_every_model() -> None:
    codes, target = drawn(30, 3, seed=4)
    one = judged(codes, target, Structure("x", PARENTS))
    free, bound = one.losses(ORDER, [0] * 4, 4), one.losses(ORDER, [0, 0, 0, 3], 4)
    records, sizes = np.column_stack([codes.T, target]), [2, 3, 2, 3]
    families = [(1,), (0,), (2,), (2, 1, 0, 3)]
    assert bound[0, 4] == pytest.approx(loss_of_refits(records, sizes, families, 3), rel=1e-9)
    assert np.array_equal(bound[:, :4], free[:, :4])
    assert bound[3, 4] == free[3, 4]


def test_losses_do_not_depend_on_the_order_of_rows() -> None:
    codes, target = drawn(500, 3, seed=5)
    mixed = np.random.default_rng(6).permutation(500)
    first, second = (
        judged(codes[:, order], target[order], Structure("x", PARENTS)).losses(ORDER, [0] * 4, 6)
        for order in (np.arange(500), mixed)
    )
    assert first == pytest.approx(second, rel=1e-12)


def test_of_many_rows_some_are_judged_by_counts_of_all(monkeypatch: pytest.MonkeyPatch) -> None:
    """Judged on a third of the rows the sum still stands for all of them; it is near that of all."""
    codes, target = drawn(3_000, 3, seed=7)
    every = judged(codes, target, Structure("x", PARENTS)).losses(ORDER, [0] * 4, 4)
    monkeypatch.setattr(leaving_out, "MOST_JUDGED", 1_000)
    some = judged(codes, target, Structure("x", PARENTS))
    assert 990 < some.rows.codes.shape[1] < 1_050
    assert some.counted.counts.sum() == 4 * 3_000
    assert some.losses(ORDER, [0] * 4, 4) == pytest.approx(every, rel=0.05)


def test_sets_are_counted_a_few_at_a_time_with_the_same_result(monkeypatch: pytest.MonkeyPatch) -> None:
    codes, target = drawn(200, 3, seed=8)
    table = coded(codes, target)
    engine = started(table, np.arange(200) % 6, 6)
    trainings = [whole(engine, table)] * 3

    def losses() -> list[np.ndarray]:
        structures = [Structure("x", PARENTS), Structure("x", ((),) * 4), Structure("x", PARENTS)]
        return leave_out(engine, trainings, structures, lambda _, one: one.losses(ORDER, [0] * 4, 3))

    together = losses()
    monkeypatch.setattr(leaving_out, "_CELLS", 1)
    assert all(np.array_equal(a, b) for a, b in zip(together, losses(), strict=True))
    assert np.array_equal(together[0], together[2])
    assert not np.array_equal(together[0], together[1])
