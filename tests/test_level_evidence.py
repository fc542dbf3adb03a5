"""The class that a level speaks for: by definition, against statsmodels, and where chance is explanation enough."""

import math

import numpy as np
import pytest
from published import BERKELEY
from statsmodels.stats.contingency_tables import Table

from bnx.level_evidence import BEYOND_CHANCE, evidence_of


def test_evidence_is_the_log_of_two_shares_and_the_residual_that_of_statsmodels() -> None:
    rows = BERKELEY.sum(axis=1)  # departments by admitted, rejected
    residuals = np.asarray(Table(rows).standardized_resids)
    found = evidence_of(rows, rows)
    for level, one in enumerate(found):
        best = int(residuals[level].argmax())
        if residuals[level, best] <= BEYOND_CHANCE:
            assert one is None
            continue
        assert one is not None
        assert one.target == best
        assert one.residual == pytest.approx(residuals[level, best])
        inside, total = rows[level, best] + 0.5, rows[:, best].sum() + 1
        outside, others = rows[level, 1 - best] + 0.5, rows[:, 1 - best].sum() + 1
        assert one.bits == pytest.approx(math.log2(inside / total / (outside / others)))
    assert [one.target if one else None for one in found] == [0, 0, None, 1, 1, 1]


def test_a_level_seen_in_one_class_only_has_finite_evidence() -> None:
    rows = np.array([[40, 0, 0], [60, 100, 100]])
    first, second = evidence_of(rows, rows)
    assert first is not None
    assert first.target == 0
    assert first.bits == pytest.approx(math.log2(40.5 / 101 / (0.5 / 201)))
    assert second is not None
    assert second.target in (1, 2)


def test_chance_speaks_for_no_class() -> None:
    """Of levels independent of the class, three in a thousand or so exceed the limit."""
    random = np.random.default_rng(2)
    tables = random.multinomial(600, np.full(12, 1 / 12), 500).reshape(500, 4, 3)
    spoken = [one for rows in tables for one in evidence_of(rows, rows)]
    assert len(spoken) == 2000
    assert sum(one is not None for one in spoken) <= 20


def test_a_few_records_of_a_rare_class_make_no_level_speak() -> None:
    """One record in a class of 8 % lies 3.4 standard errors out; five expected records are enough."""
    rows = np.array([[1, 0], [79, 920]])
    assert evidence_of(rows, rows)[0] is None
    rows = np.array([[15, 48], [65, 872]])
    assert rows[0].sum() * 80 / 1000 > 5
    found = evidence_of(rows, rows)[0]
    assert found is not None
    assert found.target == 0


def test_rows_decide_and_masses_give_the_bits() -> None:
    rows = np.array([[30, 10], [20, 60]])
    masses = np.array([[60.0, 10.0], [10.0, 60.0]])
    one, plain = evidence_of(rows, masses)[0], evidence_of(rows, rows)[0]
    assert one is not None
    assert plain is not None
    assert one.residual == plain.residual
    assert one.bits == pytest.approx(math.log2(60.5 / 71 / (10.5 / 71)))


def test_one_class_without_rows_is_no_fault() -> None:
    rows = np.array([[5, 0], [7, 0]])
    assert evidence_of(rows, rows) == [None, None]
    nothing = np.zeros((2, 2), np.int64)
    assert evidence_of(nothing, nothing) == [None, None]
