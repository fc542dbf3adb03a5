"""Which records are told of: those on which two structures disagree most out of fold, found again by brute force."""

from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, in_turns, predicted
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy.spatial.distance import jensenshannon

from bnx import disagreement
from bnx.comparison import Comparison
from bnx.disagreement import contrast_of, jensen_shannon, picked
from bnx.structure import Structure

ROWS = 700
NAIVE, TAN, OTHER = (
    Structure("naive", ((), ())),
    Structure("tan", ((), (0,))),
    Structure("kdb1", ((1,), ())),
)


def table(rows: int = ROWS, attributes: int = 5, blanks: float = 0.0) -> pd.DataFrame:
    """Draw attributes of which each copies the one before it; many records have the levels of another one."""
    random = np.random.default_rng(11)
    target = random.choice(3, rows, p=[0.5, 0.3, 0.2])
    columns = [np.where(random.random(rows) < 0.5, target, random.integers(0, 3, rows))]
    for _ in range(attributes - 1):
        columns.append(np.where(random.random(rows) < 0.2, random.integers(0, 3, rows), columns[-1]))
    frame = pd.DataFrame({f"x{i}": [f"v{level}" for level in column] for i, column in enumerate(columns)})
    frame = frame.mask(random.random(frame.shape) < blanks)
    frame["site"] = random.integers(0, 40, rows).astype(str)
    frame["heavy"] = random.choice([0.5, 1.25, 3.5], rows)
    frame["kind"] = np.array(["p", "q", "r"])[target]
    return frame


@cache
def run(jobs: int = 1, **more: Any) -> Comparison:
    used = {more.get("group"), more.get("fold_column"), more.get("weight")}
    ignored = tuple(name for name in ("site", "heavy") if name not in used)
    blanks = 0.1 if more.get("missing") == "sum-out" else 0.0
    given_ = {"folds": 5, "structures": ("naive", "tan"), "ignore": ignored} | more
    return compared(table(blanks=blanks), "kind", jobs, **given_)


def by_brute_force(found: Comparison, number: int, blanks: float = 0.0) -> list[tuple[float, int]]:
    """List (bits, row) of the farthest records, of those with the same texts the first."""
    p, q = (predicted(found, s) for s in (0, 1))
    bits = [round(float(jensenshannon(a, b, base=2)) ** 2, 9) for a, b in zip(p, q, strict=True)]
    attributes = [name for name in table() if name.startswith("x")]
    texts = [tuple(map(str, row)) for row in table(blanks=blanks)[attributes].to_numpy()]
    kept: dict[tuple[str, ...], tuple[float, int]] = {}
    for row in sorted(range(len(bits)), key=lambda row: (-bits[row], row)):
        kept.setdefault(texts[row], (bits[row], row))
    return list(kept.values())[:number]


def test_two_distributions_by_hand() -> None:
    # 1/2 (log2 1/(3/4)) + 1/2 (1/2 log2 (1/2)/(3/4) + 1/2 log2 (1/2)/(1/4)) = .311278 bits
    p, q = np.array([[1.0, 0.0], [1.0, 0.0], [0.3, 0.7]]), np.array([[0.5, 0.5], [0.0, 1.0], [0.3, 0.7]])
    assert jensen_shannon(p, q) == pytest.approx([0.3112781244591328, 1.0, 0.0], abs=1e-12)


def test_the_smallest_numbers_make_no_difference() -> None:
    p, q = np.array([[0.0, 0.5, 0.5]]), np.array([[5e-324, 0.5, 0.5]])
    assert jensen_shannon(p, q) == pytest.approx([0.0], abs=1e-12)


SHARES = st.floats(0.0, 1.0, allow_subnormal=False)


@given(arrays(np.float64, (2, 4), elements=SHARES).filter(lambda both: (both.sum(axis=1) > 0.01).all()))
def test_divergence_is_that_of_a_second_library(both: np.ndarray) -> None:
    p, q = both / both.sum(axis=1, keepdims=True)
    assert jensen_shannon(p[None], q[None])[0] == pytest.approx(float(jensenshannon(p, q, base=2)) ** 2, abs=1e-9)


@pytest.mark.parametrize(
    "more",
    [
        {},
        {"records": 3},
        {"repeats": 2},
        {"weight": "heavy"},
        {"missing": "sum-out"},
        {"group": "site"},
        {"temperature": False},
    ],
    ids=str,
)
def test_records_are_those_of_a_brute_force_search(more: dict[str, Any]) -> None:
    found = run(**more)
    assert found.records is not None
    picks = [one.pick for one in found.records.told]
    blanks = 0.1 if more.get("missing") == "sum-out" else 0.0
    expected = by_brute_force(found, more.get("records", 12), blanks)
    assert len(picks) == len(expected) == more.get("records", 12)
    assert [one.row for one in picks] == [row for _, row in expected]
    assert [one.bits for one in picks] == pytest.approx([bits for bits, _ in expected], abs=1e-8)
    fold = folds_of(found.evaluations[0])
    assert [one.fold for one in picks] == [fold[one.row] for one in picks]


def test_all_records_are_counted_by_who_is_right() -> None:
    found = run()
    assert found.records
    assert found.records.differ
    p, q = (predicted(found, s) for s in (0, 1))
    truth = pd.factorize(table()["kind"], sort=True)[0]
    apart = p.argmax(axis=1) != q.argmax(axis=1)
    differ = found.records.differ
    assert differ.rows == apart.sum() > 10
    assert differ.naive_right == (apart & (p.argmax(axis=1) == truth)).sum()
    assert differ.other_right == (apart & (q.argmax(axis=1) == truth)).sum()
    assert differ.bits == pytest.approx(jensen_shannon(p, q).mean(), abs=1e-9)


def test_records_with_the_same_levels_are_told_once_and_counted() -> None:
    found = run()
    assert found.records is not None
    frame = table()
    attributes = [name for name in frame if name.startswith("x")]
    told = [tuple(frame.loc[one.pick.row, attributes]) for one in found.records.told]
    assert len(set(told)) == len(told)
    for texts, one in zip(told, found.records.told, strict=True):
        alike = frame[(frame[attributes] == list(texts)).all(axis=1)]
        assert one.alike.tolist() == [int((alike["kind"] == level).sum()) for level in "pqr"]
    assert max(int(one.alike.sum()) for one in found.records.told) > 1


def test_threads_turns_and_steps_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    one = run().evaluations[0]
    expected = picked(one, 0, 1, 12)
    assert [(a.row, a.bits) for a in picked(run(3).evaluations[0], 0, 1, 12)[0]] == [
        (a.row, a.bits) for a in expected[0]
    ]
    engine = in_turns(one.engine, 3)
    parts = engine.blocks // len(one.fold_rows)
    rows = tuple(engine.rows_of(fold * parts, (fold + 1) * parts) for fold in range(len(one.fold_rows)))
    assert all(len(runs) == 3 for runs in rows)
    turned = replace(one, engine=engine, fold_rows=rows)
    monkeypatch.setattr(disagreement, "_ROWS", 17)
    picks, differ = picked(turned, 0, 1, 12)
    assert [(a.row, a.bits, a.fold) for a in picks] == [(a.row, a.bits, a.fold) for a in expected[0]]
    assert (differ.rows, differ.naive_right, differ.other_right) == (
        expected[1].rows,
        expected[1].naive_right,
        expected[1].other_right,
    )


@pytest.mark.parametrize(
    ("structures", "losses", "recommended", "other", "reason"),
    [
        ((NAIVE, TAN, OTHER), (0.9, 0.8, 0.7), 1, 1, "It is the recommended structure."),
        ((NAIVE, TAN, OTHER), (0.6, 0.8, 0.7), 0, 2, "naive, has no edges; this is the best of those with edges"),
        ((NAIVE, TAN, OTHER), (0.6, 0.7, 0.7), 0, 1, "the best of those with edges"),
        ((NAIVE, TAN, replace(NAIVE, name="tan-tested")), (0.6, 0.9, 0.5), 2, 1, "tan-tested, has no edges"),
        ((NAIVE, replace(NAIVE, name="tan-tested")), (0.6, 0.5), 1, None, "No structure compared has an edge"),
        ((TAN, OTHER), (0.6, 0.5), 1, None, "naive is not among the structures compared"),
    ],
)
def test_what_naive_is_compared_with(
    structures: tuple[Structure, ...], losses: tuple[float, ...], recommended: int, other: int | None, reason: str
) -> None:
    found = contrast_of([one.name for one in structures], structures, losses, recommended)
    assert found.other == other
    assert reason in found.reason


def test_none_are_told_where_none_are_asked_for_or_nothing_is_compared() -> None:
    assert run(records=0).records is None
    alone = run(structures=("naive",)).records
    assert alone is not None
    assert alone.told == ()
    assert alone.differ is None


def test_records_that_are_told_the_same_are_not_listed() -> None:
    picks, differ = picked(run().evaluations[0], 0, 0, 12)
    assert picks == []
    assert differ.rows == differ.bits == 0
