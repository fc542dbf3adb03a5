"""The third moment of X2 given the margins: enumeration, expected factorials, random tables, and what p gains by it."""

from dataclasses import replace
from fractions import Fraction
from random import Random

import numpy as np
import pytest
from enumerated import Margin, corner_table, distribution, moments, moments_of_any_size, partitions
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import gamma, random_table
from simulated import measured

from bnx.independence import METHODS, Statistics, p_values

margins = st.lists(st.integers(1, 30), min_size=2, max_size=5)


def third(table: np.ndarray) -> float:
    """Run the kernel on one table (S, h, w)."""
    return float(measured(table[None]).x2_third[0])


def third_given(down: Margin, across: Margin) -> float:
    return third(corner_table(down, across)[None])


def test_equals_enumeration_of_every_margin_of_up_to_seven_records() -> None:
    checked, negative, constant = 0, 0, 0
    for total in range(2, 8):
        used = [margin for margin in partitions(total, total) if len(margin) > 1]
        for down, across in ((down, across) for down in used for across in used):
            truth = moments(distribution(down, across))[2]
            assert third_given(down, across) == pytest.approx(float(truth), rel=1e-11, abs=1e-12)
            checked, negative, constant = checked + 1, negative + (truth < 0), constant + (truth == 0)
    assert checked == sum(ways**2 for ways in (1, 2, 4, 6, 10, 14))  # partitions of 2 to 7 but the one of one part
    assert min(negative, constant) > 5


def test_equals_enumeration_of_random_margins_of_eight_and_nine_records() -> None:
    random = Random(1)
    for total in (8, 9):
        used = [margin for margin in partitions(total, total) if 1 < len(margin) < 8]
        for _ in range(25):
            down, across = random.choice(used), random.choice(used)
            truth = moments(distribution(down, across))[2]
            assert third_given(down, across) == pytest.approx(float(truth), rel=1e-11, abs=1e-11)


@pytest.mark.parametrize(
    ("down", "across"),
    [
        pytest.param((3, 4), (2, 5), id="seven"),
        pytest.param((20, 9, 6), (25, 10), id="dozens"),
        pytest.param((500, 300, 3, 1), (500, 300, 4), id="hundreds"),
        pytest.param((99_999_993, 5, 2), (99_999_997, 3), id="rare rows"),
        pytest.param((99_999_999, 1), (99_999_999, 1), id="one record each"),
        pytest.param((99_990_000, 10_000), (50_000_000, 50_000_000), id="equal columns"),
        pytest.param((25_000_000,) * 4, (50_000_000,) * 2, id="all equal"),
        pytest.param((10**6, 10**7, 89 * 10**6), (10**8 - 1009, 1000, 9), id="every size"),
        pytest.param((2 * 10**9 - 10, 10), (2 * 10**9 - 1000, 1000), id="two billion"),
    ],
)
def test_keeps_its_digits_up_to_billions_of_records(down: Margin, across: Margin) -> None:
    # All moments in fractions, by another route than the kernel's: expected products of falling factorials of cells.
    mean, variance, skew = moments_of_any_size(down, across)
    stats = measured(corner_table(down, across)[None, None])
    assert stats.x2_mean[0] == pytest.approx(float(mean), rel=1e-13)
    assert stats.x2_variance[0] == pytest.approx(float(variance), rel=1e-12)
    assert stats.x2_third[0] == pytest.approx(float(skew), rel=1e-12)


def test_the_second_route_agrees_with_enumeration() -> None:
    for down, across in (
        ((4, 3, 1), (5, 2, 1)),
        ((2, 2, 2), (3, 3)),
        ((5, 1, 1), (4, 2, 1)),
        ((3, 3, 2), (2, 2, 2, 2)),
    ):
        assert moments_of_any_size(down, across) == moments(distribution(down, across))


@pytest.mark.parametrize("total", [10, 1000, 100_000])
def test_holds_where_nearly_every_row_is_a_single_record(total: int) -> None:
    # One row of two records, the rest single: X2 takes two values, told apart by where the two fall.
    half = total // 2
    table = np.zeros((total - 1, 2), np.int64)
    table[0], table[1 : half - 1, 0], table[half - 1 :, 1] = [2, 0], 1, 1
    apart, gap = Fraction(2 * half * half, total * (total - 1)), Fraction(2 * total, total)
    variance, skew = gap**2 * apart * (1 - apart), -(gap**3) * apart * (1 - apart) * (1 - 2 * apart)
    stats = measured(table[None, None])
    assert stats.x2_variance[0] == pytest.approx(float(variance), rel=1e-15 * total + 1e-12)
    assert stats.x2_third[0] == pytest.approx(float(skew), rel=1e-15 * total * total + 1e-10)


@pytest.mark.parametrize(
    ("down", "across"),
    [((20, 9, 6, 3, 2), (25, 10, 5)), ((2, 2, 1, 1), (3, 1, 1, 1)), ((7,) * 6, (14,) * 3), ((2,) * 12, (2,) * 12)],
)
def test_equals_200000_random_tables(down: Margin, across: Margin) -> None:
    draws = random_table(down, across).rvs(200_000, random_state=1)
    expected = np.outer(down, across) / sum(down)
    x2 = ((draws - expected) ** 2 / expected).sum((1, 2))
    cubes = (x2 - x2.mean()) ** 3
    influence = cubes - 3 * x2.var() * (x2 - x2.mean())  # the mean is estimated too
    assert third(draws[:1]) == pytest.approx(cubes.mean(), abs=4 * influence.std() / np.sqrt(x2.size))
    assert abs(third(draws[:1])) > 8 * influence.std() / np.sqrt(x2.size)  # so that 0 or a wrong sign would fail


@pytest.mark.parametrize(("height", "width"), [(2, 2), (3, 5), (6, 4)])
def test_is_eight_times_df_in_the_limit(height: int, width: int) -> None:
    found = third(np.full((1, height, width), 10**7))
    assert found == pytest.approx(8 * (height - 1) * (width - 1), rel=1e-5)  # as of a chi-square distribution
    assert third(np.full((1, height, width), 2)) != pytest.approx(found, rel=1e-2)


@settings(deadline=None)
@given(margins, margins, st.integers(0, 2**32))
def test_relabelling_transposing_and_emptiness_change_nothing(down: list[int], across: list[int], seed: int) -> None:
    total = max(sum(down), sum(across))
    down[0], across[0] = down[0] + total - sum(down), across[0] + total - sum(across)
    table, shuffled = corner_table(down, across), np.random.default_rng(seed)
    renamed = table[shuffled.permutation(len(down))][:, shuffled.permutation(len(across))]
    found = third(table[None])
    for other in (renamed, table.T, np.pad(table, 1)):
        assert third(other[None]) == pytest.approx(found, rel=1e-11, abs=1e-11)


def test_adds_over_strata_of_every_size() -> None:
    sizes = [
        ((1,), (1,)),
        ((1, 1), (1, 1)),
        ((2, 1), (1, 2)),
        ((3, 1), (2, 2)),
        ((2, 2, 1), (4, 1)),
        ((5, 2, 1), (4, 4)),
    ]
    table, truth = np.zeros((len(sizes) + 1, 3, 3), np.int64), Fraction(0)
    for s, (down, across) in enumerate(sizes):
        table[s, : len(down), : len(across)] = corner_table(down, across)
        truth += moments(distribution(down, across))[2]
    assert third(table) == pytest.approx(float(truth), rel=1e-12)
    assert third(np.concatenate([table] * 3)) == pytest.approx(3 * float(truth), rel=1e-12)


def two_moment_p(stats: Statistics) -> np.ndarray:
    """Take the tail of the gamma distribution with X2's mean and variance alone."""
    scale = stats.x2_variance / stats.x2_mean
    return np.asarray(gamma.sf(stats.x2, stats.x2_mean / scale, scale=scale))


@pytest.mark.parametrize(
    "strata",
    [
        pytest.param([((14, 5, 3, 2, 1), (13, 6, 4, 2))], id="5 x 4"),  # shares by two moments at .001: twice
        pytest.param([((30, 20), (40, 5, 3, 1, 1))] * 3, id="2 x 5 x 3"),  # 1.5 times
        pytest.param([((4,) * 10, (4,) * 10)], id="10 x 10"),  # 2.6 times
        pytest.param([((6, 2, 1), (5, 3, 1))] * 5, id="3 x 3 x 5"),  # half
    ],
)
def test_p_by_three_moments_is_reached_as_often_as_it_says(strata: list[tuple[Margin, Margin]]) -> None:
    draws = 300_000
    tables = [random_table(*margins).rvs(draws, random_state=s) for s, margins in enumerate(strata)]
    stats = measured(np.stack(tables, axis=1))
    _, p, method, _ = p_values(stats)
    assert set(method) == {METHODS.index("moments")}
    for at, factor in ((0.05, 1.3), (0.01, 1.5), (0.001, 1.4)):
        assert 1 / factor < np.mean(p <= at) / at < factor
    assert not 1 / 1.4 < np.mean(two_moment_p(stats) <= 0.001) / 0.001 < 1.4


def test_p_by_three_moments_rarely_errs_by_a_factor_of_five() -> None:
    # Exact tails from .05 down to 1e-5 of every value of X2 on 200 sparse margins of at most 30 records.
    random = Random(3)
    three: list[np.ndarray] = []
    two: list[np.ndarray] = []
    while len(three) < 200:
        total, (rows, columns) = random.choice((10, 14, 20, 30)), random.choice(((2, 3), (3, 3), (2, 4)))
        down, across = (random_margin(random, total, parts) for parts in (rows, columns))
        stats = measured(corner_table(down, across)[None, None])
        if stats.cochran[0] or not stats.varies[0]:
            continue
        values, chances = zip(*sorted(distribution(down, across).items(), reverse=True), strict=True)
        tails = np.cumsum(np.array(chances, dtype=float))
        stats = stats.take(np.zeros(len(values), np.int64))
        stats = replace(stats, x2=np.array(values, dtype=float))
        kept = (tails < 0.05) & (tails > 1e-5)
        three.append(p_values(stats)[1][kept] / tails[kept])
        two.append(two_moment_p(stats)[kept] / tails[kept])
    far_three, far_two = (np.mean(np.abs(np.log(np.concatenate(each))) > np.log(5)) for each in (three, two))
    assert far_three < 0.02
    assert far_two > 3 * far_three
    assert np.median(np.concatenate(three)) == pytest.approx(1, abs=0.1)


def random_margin(random: Random, total: int, parts: int) -> Margin:
    """Spread records over parts, none of them empty."""
    cuts = sorted(random.sample(range(1, total), parts - 1))
    return tuple(high - low for low, high in zip([0, *cuts], [*cuts, total], strict=True))
