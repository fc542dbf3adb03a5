"""Bounds of the bits against scipy's inversions, and their coverage, wrong verdicts and power by simulation."""

from collections.abc import Callable, Iterable
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from published import JOB_SATISFACTION
from scipy.special import chndtrinc
from scipy.stats import chi2, ncx2
from simulated import drawn, exact_bits, measured, nudged
from simulations.intervals import (
    Coverage,
    Design,
    beyond,
    coverage,
    covered_designs,
    found,
    found_designs,
    negligible_designs,
    shares_of,
    summaries,
    unrelated_designs,
)

from bnx.independence import Statistics
from bnx.intervals import bits_interval, bits_upper, detectable_bits

FIRST, AGAIN = 2000, 20_000  # tables per design, and for a design that seems to miss its mark at first
MANY = 1e12


def delta_error(stats: Statistics) -> np.ndarray:
    """Standard error of the bits by the delta method, (P,). Source: Agresti 2002, section 14.1."""
    nats = stats.nats / stats.rows
    return np.sqrt((stats.nats_squared / stats.rows - nats * nats) / stats.rows) / np.log(2)


def offenders(designs: Iterable[Design], miss: Callable[[Coverage], float], most: float) -> list[str]:
    """List designs in which more than the share ``most`` misses by over 2 standard errors, twice.

    A design that seems to at first is drawn again, with another seed and many more tables.
    """
    wrong, measures = [], 0
    for design in designs:
        first = coverage(design, FIRST)
        measures += first is not None
        if first is not None and over(miss(first), most, first.tables):
            again = coverage(design, AGAIN, seed=2)
            assert again is not None
            if over(miss(again), most, again.tables):
                wrong.append(str(again))
    assert measures >= 20
    return wrong


def over(share: float, most: float, tables: int) -> bool:
    return share > most + 2 * np.sqrt(most * (1 - most) / tables)


def test_planted_bits_and_margins_are_exact() -> None:
    for design in (Design((3, 3), 4.0, "monotone", True, 0.03, 0), Design((2, 6), 2.0, "rare cells", False, 0.1, 0)):
        shares = shares_of(design)
        assert shares is not None
        assert exact_bits(shares) == pytest.approx(design.bits, abs=1e-10)
        for axis, size in ((2, design.levels[0]), (1, design.levels[1])):
            for margin in shares.sum(axis):
                assert margin[-1] / margin[0] == pytest.approx(design.skew, rel=1e-9)
                assert margin.size == size
    assert shares_of(Design((2, 2), 4.0, "rare cells apart", False, 0.3, 0)) is None  # an empty cell holds but .07 bit


def test_two_sided_intervals_cover_in_92_to_98_percent() -> None:
    designs = [*covered_designs((0.005, 0.01, 0.03, 0.1, 0.3), (500, 5000))][::3]
    assert not offenders(designs, lambda one: 1 - one.covered, 0.08)
    inner = (design for design in designs if design.shape != "rare cells apart")  # those are at the edge
    assert not offenders(inner, lambda one: one.covered, 0.98)


def test_intervals_cover_in_other_classes_and_sizes() -> None:
    designs = [*beyond((0.005, 0.03, 0.1, 0.3), (500, 5000))][::7]
    assert not offenders(designs, lambda one: 1 - one.covered, 0.08)
    assert not offenders(designs, lambda one: one.covered, 0.98)


@pytest.mark.parametrize("classes", [(1.0,), (0.5, 0.5)])
def test_rare_levels_do_not_spoil_the_interval(classes: tuple[float, ...]) -> None:
    one = coverage(Design((2, 2), 4.0, "rare cells", False, 0.03, 3000, classes), 10_000)
    assert one is not None
    assert one.covered == pytest.approx(0.95, abs=0.008)
    assert one.below == pytest.approx(0.025, abs=0.006)


def test_upper_bounds_cover_in_94_percent() -> None:
    designs = [*covered_designs((0.002, 0.005), (500, 5000)), *beyond((0.002, 0.005), (500, 5000))][::3]
    assert not offenders(designs, lambda one: 1 - one.upper, 0.06)


def test_independent_attributes_lie_within_the_bounds() -> None:
    # The bounds cannot lie below 0: a two-sided interval misses on one side only.
    found = [coverage(design, 2000) for design in unrelated_designs((500, 5000))]
    measures = [one for one in found if one is not None]
    assert len(measures) >= 14
    for one in measures:
        assert one.upper == 1.0
        assert one.above == 0.0
        assert not over(one.below, 0.04, one.tables)


def test_negligible_is_wrong_in_at_most_5_percent() -> None:
    designs = [*negligible_designs((500, 1500, 5000, 15_000, 50_000))][::4]
    assert not offenders(designs, lambda one: one.negligible, 0.05)


def test_summaries_hold_the_worst_of_their_designs() -> None:
    designs = [design for design in covered_designs((0.0051,), (500,)) if design.levels == (2, 2)]
    (summary,) = summaries(designs, 1000)
    measures = [one for one in (coverage(design, 1000) for design in designs) if one is not None]
    assert (summary.designs, summary.bits, summary.rows) == (len(measures), 0.0051, 500)
    assert summary.least_covered == min(one.covered for one in measures)
    assert summary.most_negligible == max(one.negligible for one in measures)


@pytest.mark.parametrize("at", [0.05, 1e-4])
def test_dependence_spread_over_cells_is_detected_with_power_80(at: float) -> None:
    measures = [found(design, at, 2000) for design in found_designs((5000, 50_000)) if "rare" not in design.shape]
    powers = [one for one in measures if one is not None]
    assert len(powers) == 24
    for one in powers:
        assert one.x2 == pytest.approx(0.8, abs=0.05), str(one)
        assert one.g == pytest.approx(0.8, abs=0.04), str(one)
    assert np.mean([one.x2 for one in powers if one.design.rows == 50_000]) == pytest.approx(0.8, abs=0.015)


@pytest.mark.parametrize("at", [0.05, 1e-4])
def test_dependence_in_one_rare_cell_is_not_detected_with_the_same_power(at: float) -> None:
    # X2's own non-centrality, rows x phi^2, is more than 2 x rows x information where a rare cell is too full.
    for design in found_designs((5000,)):
        one = found(design, at, 2000)
        if one is None or design.skew == 1 or "rare" not in design.shape:
            continue
        assert one.g == pytest.approx(0.8, abs=0.08), str(one)
        assert (one.x2 >= one.g) == (design.shape == "rare cells"), str(one)


@pytest.mark.parametrize("at", [0.05, 1e-3, 1e-9])
def test_detectable_bits_have_power_80_by_scipy(at: float) -> None:
    df, rows = np.array([1, 2, 6, 18, 605, 6, 0]), np.array([50, 100, 4526, 592, 5000, 10**6, 70])
    bits = detectable_bits(at, df, rows)
    assert np.isnan(bits[-1])
    power = ncx2.sf(chi2.isf(at, df[:-1]), df[:-1], 2 * rows[:-1] * bits[:-1] * np.log(2))
    np.testing.assert_allclose(power, 0.8, rtol=1e-8)


def as_if_weak(statistic: np.ndarray, df: float) -> Statistics:
    """Make statistics of many rows in which G is the statistic and the variance is that of weak dependence."""
    full = measured(np.full((1, 1, 2, 2), 100)).take(np.zeros(statistic.size, int))
    rows = np.full(statistic.size, MANY)
    nats = statistic / 2
    known = {"rows": rows, "nats": nats, "nats_squared": statistic + nats**2 / rows, "df": np.full(rows.shape, df)}
    return replace(full, **known)


@pytest.mark.parametrize("df", [1.0, 2.0, 8.0, 50.0, 242.0])
def test_weak_dependence_is_bounded_as_scipy_inverts_the_non_central_chi_square(df: float) -> None:
    statistic = np.exp(np.linspace(np.log(df), np.log(12_000), 300))
    stats = as_if_weak(statistic, df)
    for bound, probability in ((bits_upper(stats), 0.05), (bits_interval(stats)[1], 0.025)):
        expected = chndtrinc(statistic, df, probability)
        expected = np.where(chi2.cdf(statistic, df) <= probability, 0.0, expected)
        np.testing.assert_allclose(bound * 2 * MANY * np.log(2), expected, rtol=1e-6, atol=1e-6)
    low = bits_interval(stats)[0] * 2 * MANY * np.log(2)
    expected = np.where(chi2.cdf(statistic, df) <= 0.975, 0.0, chndtrinc(statistic, df, 0.975))
    np.testing.assert_allclose(low, expected, rtol=1e-6, atol=1e-6)  # so many rows that G has no excess


def test_strong_dependence_is_bounded_as_the_delta_method_says() -> None:
    shares = nudged(2, 3, 3, 1.0, seed=13)
    stats = measured(drawn(shares, 200_000, 50, seed=1))
    low, high = bits_interval(stats)
    np.testing.assert_allclose(high - low, 2 * 1.959964 * delta_error(stats), rtol=0.01)  # Agresti 2002, section 14.1
    assert delta_error(stats).mean() == pytest.approx(
        measured(drawn(shares, 200_000, 3000, seed=2)).bits.std(), rel=0.04
    )


@settings(deadline=None)
@given(arrays(np.int32, (40, 2, 3, 4), elements=st.integers(0, 60)), st.floats(0.6, 0.999))
def test_bounds_stand_in_order(tables: np.ndarray, level: float) -> None:
    stats = measured(tables)
    low, high = bits_interval(stats, level)
    carried = stats.cochran & stats.varies
    np.testing.assert_array_equal(np.isnan(low), ~carried)
    np.testing.assert_array_equal(np.isnan(high), ~carried)
    low, high, centre, upper = (each[carried] for each in (low, high, stats.bits_corrected, bits_upper(stats, level)))
    assert (low >= 0).all()
    assert (low <= np.maximum(0, centre) + 1e-9).all()
    assert (centre <= high + 1e-9).all()
    assert (upper <= high + 1e-9).all()
    wider = bits_interval(stats, (1 + level) / 2)
    assert (wider[0][carried] <= low + 1e-9).all()
    assert (wider[1][carried] >= high - 1e-9).all()


@pytest.mark.parametrize(
    ("table", "low", "high"),
    [
        ([[50, 0], [0, 50]], 0.8, 1.0),  # one is the other: no more than 1 bit
        ([[5000, 0], [0, 5000]], 0.98, 1.0),
        ([[50, 50], [50, 50]], 0.0, 0.032),  # no proof of independence: bounded as if G were its mean
        ([[500_000, 500_000], [500_000, 500_000]], 0.0, 3.2e-6),
        ([[900_000, 100_000], [100_000, 900_000]], 0.5296, 0.5324),  # 1 - entropy(.1) = .5310, error .00067
    ],
)
def test_extreme_tables_have_bounds(table: list[list[int]], low: float, high: float) -> None:
    stats = measured(np.array(table)[None, None])
    bounds = (*bits_interval(stats), bits_upper(stats))
    for bound in bounds:
        assert low - 1e-12 <= bound[0] <= high + 1e-12


def test_a_sample_that_shows_less_than_chance_proves_no_more_than_one_that_shows_as_much() -> None:
    even = measured(np.array([[[250, 250], [250, 250]]])[None])
    usual = measured(np.array([[[258, 242], [242, 258]]])[None])  # G 1.02, df 1
    assert bits_upper(even)[0] == pytest.approx(chndtrinc(1, 1, 0.05) / (2 * 1000 * np.log(2)), rel=1e-5)
    assert bits_upper(even)[0] <= bits_upper(usual)[0]


def test_sparse_tables_have_no_bounds() -> None:
    stats = measured(JOB_SATISFACTION[None])  # Agresti 2002; the smallest expected count is .125
    assert np.isnan([*bits_interval(stats), bits_upper(stats)]).all()
    nothing = stats.take(np.array([], dtype=np.int64))
    assert bits_upper(nothing).size == 0
