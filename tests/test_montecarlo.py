"""Random tables with fixed margins, and the tail of X2 among them, against exact probabilities and chi-square."""

from collections import Counter
from fractions import Fraction

import numpy as np
import pytest
from enumerated import Margin, distribution, summed, tables_with, tail, x2_of
from scipy.stats import chi2, chisquare, hypergeom, random_table
from simulated import measured, nudged

from bnx.kernels.montecarlo import ENOUGH, _draw, _shuffle, log_factorials, monte_carlo_tail

MOST = 20_000


def estimate(table: np.ndarray, seed: int, most: int = MOST) -> tuple[float, int]:
    """Run the kernel on one table (S, h, w)."""
    strata, height, width = table.shape
    counts = np.ascontiguousarray(table, dtype=np.int32).reshape(strata, -1)
    return monte_carlo_tail(counts, height, width, log_factorials(int(counts.sum())), seed, most)


def over_seeds(table: np.ndarray, seeds: range, most: int = MOST) -> tuple[float, float]:
    """Put the tables drawn under many seeds together: their share of extreme ones, and how many these are."""
    extreme = drawn = 0.0
    for seed in seeds:
        p, tables = estimate(table, seed, most)
        drawn += tables
        extreme += p * (most + 1) - 1 if tables == most else ENOUGH
    return extreme / drawn, extreme


def error_of(p: float, extreme: float) -> float:
    """Give the standard error of a share p found by drawing until so many tables are extreme."""
    return float(p * np.sqrt((1 - p) / extreme))


def drawn_tables(way: str, down: Margin, across: Margin, number: int) -> Counter[tuple[int, ...]]:
    """Draw tables by one of the two ways and count each."""
    rows, columns, total = np.array(down), np.array(across), sum(down)
    table, state = np.zeros(rows.size * columns.size, np.int64), np.array([7], np.uint64)
    records, logs = np.zeros(total, np.int64), log_factorials(total)
    found: Counter[tuple[int, ...]] = Counter()
    for _ in range(number):
        if way == "shuffled":
            _shuffle(rows, columns, total, records, table, state)
        else:
            _draw(rows, columns, total, table, logs, state)
        found[tuple(table.tolist())] += 1
    return found


@pytest.mark.parametrize("way", ["shuffled", "cell by cell"])
@pytest.mark.parametrize(
    ("down", "across"),
    [((3, 4), (2, 5)), ((2, 3, 4), (3, 6)), ((1, 2, 3), (2, 2, 2)), ((1, 1, 5, 6), (9, 3, 1)), ((6, 1), (2, 2, 1, 2))],
)
def test_every_table_is_drawn_as_often_as_its_probability_says(way: str, down: Margin, across: Margin) -> None:
    number = 30_000
    found = drawn_tables(way, down, across, number)
    tables = list(tables_with(down, across))
    pmf = np.asarray(random_table(down, across).pmf(np.array(tables, dtype=float)))
    assert pmf.sum() == pytest.approx(1)
    observed = np.array([found[tuple(count for row in table for count in row)] for table in tables])
    assert observed.sum() == number  # none with other margins
    often = pmf * number >= 5
    expected = np.append(pmf[often], pmf[~often].sum()) * number
    kept = expected > 0
    assert chisquare(np.append(observed[often], observed[~often].sum())[kept], expected[kept]).pvalue > 1e-3


@pytest.mark.parametrize("way", ["shuffled", "cell by cell"])
@pytest.mark.parametrize(("down", "across"), [((400, 600), (700, 300)), ((5, 995), (990, 10)), ((990, 10), (5, 995))])
def test_large_tables_are_drawn_from_the_hypergeometric_distribution(way: str, down: Margin, across: Margin) -> None:
    number = 20_000
    first = np.zeros(1001)
    for table, times in drawn_tables(way, down, across, number).items():
        first[table[0]] += times
    expected = hypergeom(1000, down[0], across[0]).pmf(np.arange(1001)) * number
    often = expected >= 5
    rest = number - expected[often].sum()
    observed, wanted = np.append(first[often], first[~often].sum()), np.append(expected[often], rest)
    kept = wanted > 1e-9
    assert often.sum() > 1
    assert chisquare(observed[kept], wanted[kept]).pvalue > 1e-3


@pytest.mark.parametrize(
    "table",
    [
        pytest.param([[[3, 1, 0], [0, 2, 4]]], id="2 x 3, shuffled"),
        pytest.param([[[4, 0], [1, 5]], [[3, 1], [0, 4]], [[0, 2], [2, 2]]], id="2 x 2 x 3"),
        pytest.param([[[3, 0, 1], [0, 2, 1], [1, 1, 2]], [[1, 2, 0], [0, 1, 3], [1, 0, 0]]], id="3 x 3 x 2"),
        pytest.param([[[40, 38], [12, 30]], [[2, 0], [1, 3]]], id="one stratum cell by cell, one shuffled"),
        pytest.param([[[90, 3, 1], [2, 1, 1]]], id="2 x 3, cell by cell"),
    ],
)
def test_p_equals_the_exact_tail(table: list[list[list[int]]]) -> None:
    parts = [used(stratum) for stratum in table]
    margins = [(tuple(map(sum, part)), tuple(map(sum, zip(*part, strict=True)))) for part in parts]
    truth = tail(summed([distribution(*each) for each in margins]), sum(map(x2_of, parts), Fraction(0)))
    p, extreme = over_seeds(np.array(table), range(60))
    assert p == pytest.approx(truth, abs=4 * error_of(truth, extreme))
    assert extreme > 400  # four standard errors are then at most a fifth of p


def used(stratum: list[list[int]]) -> list[list[int]]:
    """Drop empty rows and columns."""
    kept = [j for j, column in enumerate(zip(*stratum, strict=True)) if any(column)]
    return [[row[j] for j in kept] for row in stratum if any(row)]


@pytest.mark.parametrize("shape", [(1, 3, 3), (2, 3, 4), (2, 2, 5)])
def test_p_equals_the_chi_square_tail_where_every_expected_count_is_above_20(shape: tuple[int, int, int]) -> None:
    for k in range(4):
        shares = nudged(*shape, 0.03 * k, seed=k)
        table = np.random.default_rng(k).multinomial(150 * shares.size, shares.ravel()).reshape(shape)
        stats = measured(table[None])
        assert stats.df[0] >= 4
        assert stats.min_expected[0] > 20
        truth = chi2.sf(stats.x2[0], stats.df[0])
        p, extreme = over_seeds(table, range(20), most=2000)
        assert p == pytest.approx(truth, abs=4 * error_of(truth, max(1.0, extreme)) + 0.005)


def test_p_of_a_constant_x2_is_one() -> None:
    for table in (
        [[[1, 0], [0, 1]]],
        [[[1, 0], [1, 2]]],
        [[[1, 0, 0], [0, 1, 0], [0, 0, 1]], [[3, 2, 1], [0, 0, 0], [0, 0, 0]]],
    ):
        assert estimate(np.array(table), 5) == (1.0, ENOUGH)


def test_tables_that_differ_by_rounding_alone_are_ties() -> None:
    # Rows and columns of 6: whatever is renamed has the same X2, but summed in another order. Of all tables that are
    # as extreme as this one, those with 64 % of the probability come out smaller by rounding.
    table = np.array([[4, 2, 0], [1, 3, 2], [1, 1, 4]])
    truth = tail(distribution((6,) * 3, (6,) * 3), x2_of(table.tolist()))
    for orders in ([0, 1, 2], [2, 0, 1], [1, 0, 2]):
        p, extreme = over_seeds(table[orders][None], range(60))
        assert p == pytest.approx(truth, abs=4 * error_of(truth, extreme))


def test_drawing_stops_at_the_twentieth_extreme_table() -> None:
    mild = np.array([[[6, 4], [4, 6]]])
    for seed in range(20):
        p, drawn = estimate(mild, seed)
        assert p == ENOUGH / drawn
        assert ENOUGH <= drawn < 200
    assert len({estimate(mild, seed)[1] for seed in range(20)}) > 5


def test_at_the_end_one_is_added_to_both_counts() -> None:
    strong, seen = np.array([[[8, 1], [1, 8]]]), set()
    for seed in range(40):
        p, drawn = estimate(strong, seed, most=999)
        extreme = p * 1000 - 1
        assert drawn == 999
        assert extreme == pytest.approx(round(extreme), abs=1e-9)
        assert 0 <= round(extreme) < ENOUGH
        seen.add(round(extreme))
    assert len(seen) > 3
    assert estimate(np.array([[[30, 0], [0, 30]]]), 1, most=499) == (1 / 500, 499)


def test_p_never_rejects_more_often_than_it_says() -> None:
    # P(p <= at) <= at for a p from random tables too (Besag & Clifford 1991), at every at, over tables and seeds.
    draws = random_table((9, 6, 3), (8, 5, 5)).rvs(3000, random_state=4)
    p = np.array([estimate(table[None], seed, most=199)[0] for seed, table in enumerate(draws)])
    for at in (0.01, 0.05, 0.2, 0.5):
        assert np.mean(p <= at) < at + 3 * np.sqrt(at * (1 - at) / p.size)
        assert np.mean(p <= at) > 0.5 * at


def test_the_seed_decides() -> None:
    table = np.array([[[6, 2, 1], [2, 5, 3]], [[1, 0, 4], [3, 3, 0]]])
    assert [estimate(table, seed) for seed in range(10)] == [estimate(table, seed) for seed in range(10)]
    assert len({estimate(table, seed) for seed in range(10)}) > 5
    assert estimate(table, 2**56 - 1) != estimate(table, 2**56 - 2)


def test_strata_and_levels_that_hold_nothing_change_nothing() -> None:
    table = np.array([[[6, 2, 1], [2, 5, 3]], [[1, 0, 4], [3, 3, 0]]])
    one_row = np.zeros((1, 2, 3), np.int64)
    one_row[0, 1] = 3, 0, 9
    wide = np.pad(np.concatenate([table[:1], one_row, table[1:], 0 * one_row]), ((0, 0), (1, 0), (0, 2)))
    assert estimate(wide, 3) == estimate(table, 3)


def test_log_factorials() -> None:
    np.testing.assert_allclose(np.exp(log_factorials(6)), [1, 1, 2, 6, 24, 120, 720], rtol=1e-14)
    assert log_factorials(0).tolist() == [0.0]
