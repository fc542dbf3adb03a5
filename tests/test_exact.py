"""The exact test of 2 x 2 x K tables against enumeration, scipy, and simulation."""

from fractions import Fraction
from itertools import product
from math import comb

import numpy as np
import pytest
from enumerated import distribution, summed, tail, x2_of
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import fisher_exact, hypergeom

from bnx.kernels.exact import exact_tail

CELL = st.integers(0, 7)


def enumerated(tables: np.ndarray) -> float:
    """Sum the chances of all combinations of strata (S, 4) whose X2 is at least as large as observed."""
    strata, observed = [], 0.0
    for a, b, c, d in tables.tolist():
        n, down, across = a + b + c + d, a + b, a + c
        if min(down, across, n - down, n - across) == 0:
            continue
        first = np.arange(max(0, down + across - n), min(down, across) + 1)
        x2 = n * (first * n - down * across) ** 2 / (down * (n - down) * across * (n - across))
        strata.append(list(zip(x2, hypergeom(n, down, across).pmf(first), strict=True)))
        observed += x2[a - first[0]]
    total = 0.0
    for cells in product(*strata):
        if sum(x2 for x2, _ in cells) >= observed - 1e-9 * (1 + observed):
            total += float(np.prod([chance for _, chance in cells]))
    return total


@given(st.lists(st.tuples(CELL, CELL, CELL, CELL), min_size=1, max_size=3))
@settings(max_examples=150, deadline=None)
def test_few_sums_are_kept_apart_and_equal_enumeration(strata: list[tuple[int, int, int, int]]) -> None:
    tables = np.array(strata, dtype=np.int32)
    assert exact_tail(tables, 2, 2) == pytest.approx(enumerated(tables), rel=1e-9)


def test_one_stratum_equals_fishers_test_where_both_order_tables_alike() -> None:
    # With equal row totals X2 and the chance of a table order the tables alike; scipy's two-sided test uses the chance.
    for table in ([[3, 7], [8, 2]], [[1, 9], [6, 4]], [[12, 3], [5, 10]]):
        counts = np.array(table, dtype=np.int32).reshape(1, 4)
        assert exact_tail(counts, 2, 2) == pytest.approx(fisher_exact(table).pvalue, rel=1e-9)


def test_unused_rows_columns_and_strata_change_nothing() -> None:
    small = np.array([[4, 1, 2, 6], [3, 3, 0, 5]], dtype=np.int32)
    wide = np.zeros((3, 3, 4), dtype=np.int32)
    wide[0][np.ix_([0, 2], [1, 3])] = small[0].reshape(2, 2)
    wide[2][np.ix_([1, 2], [0, 2])] = small[1].reshape(2, 2)
    wide[1][1, 1] = 9
    assert exact_tail(wide.reshape(3, 12), 3, 4) == exact_tail(small, 2, 2)


def test_many_sums_gathered_in_steps_stay_within_monte_carlo_error() -> None:
    rng = np.random.default_rng(5)
    tables = rng.multinomial(200, [0.02, 0.08, 0.12, 0.78], 10).astype(np.int32)
    draws, observed, drawn = 400_000, 0.0, np.zeros(400_000)
    for a, b, c, d in tables.tolist():
        n, down, across = a + b + c + d, a + b, a + c
        scale = n / (down * (n - down) * across * (n - across))
        observed += scale * (a * n - down * across) ** 2
        first = rng.hypergeometric(across, n - across, down, draws)
        drawn += scale * (first * float(n) - down * across) ** 2
    share = float(np.mean(drawn >= observed - 1e-9 * (1 + observed)))
    assert exact_tail(tables, 2, 2) == pytest.approx(share, abs=4 * np.sqrt(share * (1 - share) / draws))


def test_equals_enumeration_in_fractions_up_to_ties() -> None:
    # Equal margins make many sums of X2 alike; in fractions they are ties, whatever the order of the strata.
    strata = [[[4, 2], [1, 5]], [[3, 3], [3, 3]], [[0, 3], [3, 0]], [[5, 1], [2, 4]]]
    chances = summed([distribution(tuple(map(sum, one)), tuple(map(sum, zip(*one, strict=True)))) for one in strata])
    truth = tail(chances, sum(map(x2_of, strata), Fraction(0)))
    assert len(chances) < 4 * 5 * 7 * 7 / 3
    for order in ([0, 1, 2, 3], [3, 2, 1, 0], [2, 0, 3, 1]):
        tables = np.array(strata, dtype=np.int32)[order].reshape(4, 4)
        assert exact_tail(tables, 2, 2) == pytest.approx(truth, rel=1e-9)
        assert exact_tail(tables[:, [2, 3, 0, 1]], 2, 2) == pytest.approx(truth, rel=1e-9)


def test_twelve_strata_equal_enumeration_in_fractions() -> None:
    strata = [[[k % 3, 1 + k % 2], [2, k % 4]] for k in range(12)]
    parts = [one for one in strata if min(map(sum, [*one, *zip(*one, strict=True)])) > 0]
    margins = [(tuple(map(sum, one)), tuple(map(sum, zip(*one, strict=True)))) for one in parts]
    truth = tail(summed([distribution(*each) for each in margins]), sum(map(x2_of, parts), Fraction(0)))
    assert len(parts) > 9
    assert 0.01 < truth < 0.99
    assert exact_tail(np.array(strata, dtype=np.int32).reshape(12, 4), 2, 2) == pytest.approx(truth, rel=1e-9)


def test_what_cannot_vary_has_p_one_and_the_most_extreme_table_its_probability() -> None:
    assert exact_tail(np.array([[3, 4, 0, 0], [0, 0, 0, 0], [2, 0, 5, 0]], dtype=np.int32), 2, 2) == 1.0
    assert exact_tail(np.array([[1, 0, 0, 1]], dtype=np.int32), 2, 2) == 1.0  # X2 is 2 whatever happens
    assert exact_tail(np.array([[20, 0, 0, 20]], dtype=np.int32), 2, 2) == pytest.approx(2 / comb(40, 20), rel=1e-12)


@pytest.mark.parametrize(
    ("ones", "rows", "strata"), [(20, 400, 2), (16, 300, 2), (12, 200, 3), (60, 900, 1), (5, 90, 2)]
)
def test_two_equal_columns_have_the_probability_of_that_one_table(ones: int, rows: int, strata: int) -> None:
    # every other table with these margins has a smaller X2, so p is the product of 1 / C(rows, ones)
    table = np.array([[rows - ones, 0, 0, ones]] * strata, dtype=np.int32)
    assert exact_tail(table, 2, 2) == pytest.approx(float(Fraction(1, comb(rows, ones)) ** strata), rel=1e-9, abs=0)


def test_a_small_p_is_as_exact_as_a_large_one() -> None:
    # enumeration in floating point of all combinations; the strata are those of two rare and alike columns
    table = np.array([[468, 2, 10, 40], [336, 0, 5, 39]], dtype=np.int32)
    assert exact_tail(table, 2, 2) == pytest.approx(enumerated(table), rel=1e-9, abs=0)
    assert 1e-95 < exact_tail(table, 2, 2) < 1e-93
