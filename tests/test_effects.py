"""Effect sizes of one pair over strata against published figures, statsmodels, scipy and definitions."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from published import ASSOCIATION_TABLE, ASSOCIATION_V, BERKELEY, HAIR_EYE, JOB_SATISFACTION
from scipy.stats import norm
from scipy.stats.contingency import association, expected_freq
from statsmodels.stats.contingency_tables import StratifiedTable, Table

from bnx.effects import (
    binary_association,
    binary_part,
    expected_and_residuals,
    informative,
    stratum_v,
    used_levels,
    yule_q,
)

# Beitler & Landis 1985, Biometrics 41; Agresti 2002, table 6.9: eight centres; drug, control by success, failure.
CENTRES = np.array(
    [
        *([[11, 25], [10, 27]], [[16, 4], [22, 10]], [[14, 5], [7, 12]], [[2, 14], [1, 16]]),
        *([[6, 11], [0, 12]], [[1, 10], [0, 10]], [[1, 4], [1, 8]], [[4, 2], [6, 1]]),
    ]
)
POSITIVE = arrays(np.int64, st.tuples(st.integers(2, 6), st.just(2), st.just(2)), elements=st.integers(1, 60))
ANY = arrays(np.int64, st.tuples(st.integers(0, 4), st.just(2), st.just(2)), elements=st.integers(0, 4))
WIDER = arrays(np.int64, st.tuples(st.integers(1, 3), st.integers(1, 4), st.integers(1, 4)), elements=st.integers(0, 5))


def near(value: float) -> object:
    return pytest.approx(value, rel=1e-9, abs=1e-9)


def test_berkeley_has_the_published_figures() -> None:
    # R documentation, mantelhaen.test(UCBAdmissions): the printed CMH is the one with the continuity correction.
    found = binary_association(BERKELEY)
    assert f"{found.cmh_corrected:.4f}" == "1.4269"
    assert f"{found.cmh_corrected_p:.4f}" == "0.2323"
    assert f"{found.odds_ratio:.7f}" == "0.9046968"
    assert (f"{found.odds_low:.7f}", f"{found.odds_high:.7f}") == ("0.7719074", "1.0603298")
    assert (found.df, found.informative) == (5, 6)


def test_eight_centres_have_the_published_figures() -> None:
    # Agresti 2002, sections 6.3.2 and 6.3.5 (from memory): CMH 6.38, common odds ratio 2.13 (1.18 to 3.87),
    # Breslow-Day 8.0 with df 7. R's cmh without correction prints 6.384.
    found = binary_association(CENTRES)
    assert f"{found.cmh:.2f}" == "6.38"
    assert f"{found.cmh_p:.3f}" == "0.012"
    assert f"{found.odds_ratio:.2f}" == "2.13"
    assert (f"{found.odds_low:.2f}", f"{found.odds_high:.2f}") == ("1.18", "3.87")
    assert f"{found.breslow_day:.1f}" == "8.0"
    assert found.df == 7


def against_statsmodels(tables: np.ndarray) -> None:
    found, other = binary_association(tables), StratifiedTable(list(tables.astype(np.float64)))
    assert found.odds_ratio == near(other.oddsratio_pooled)
    assert (found.odds_low, found.odds_high) == tuple(map(near, other.oddsratio_pooled_confint()))
    plain = other.test_null_odds(correction=False)
    assert (found.cmh, found.cmh_p) == (near(plain.statistic), near(plain.pvalue))
    if plain.statistic * sum_of_variances(tables) >= 0.25:  # nearer than half a record statsmodels overcorrects
        corrected = other.test_null_odds(correction=True)
        assert (found.cmh_corrected, found.cmh_corrected_p) == (near(corrected.statistic), near(corrected.pvalue))
    if abs(found.odds_ratio - 1) > 1e-6:  # its quadratic loses digits there
        for adjust, value, p in (
            (False, found.breslow_day, found.breslow_day_p),
            (True, found.tarone, found.tarone_p),
        ):
            homogeneous = other.test_equal_odds(adjust=adjust)
            assert value == pytest.approx(homogeneous.statistic, rel=1e-7, abs=1e-7)
            assert p == pytest.approx(homogeneous.pvalue, rel=1e-7, abs=1e-7)


def sum_of_variances(tables: np.ndarray) -> float:
    down, across, n = tables.sum(2), tables.sum(1), tables.sum((1, 2)).astype(float)
    return float((down.prod(1) * across.prod(1) / (n * n * (n - 1))).sum())


def test_published_tables_agree_with_statsmodels_to_nine_digits() -> None:
    for tables in (BERKELEY, CENTRES):
        against_statsmodels(tables)
        found, other = binary_association(tables), StratifiedTable(list(tables.astype(np.float64)))
        assert found.breslow_day == near(other.test_equal_odds(adjust=False).statistic)
        assert found.tarone == near(other.test_equal_odds(adjust=True).statistic)
        assert found.tarone_p == near(other.test_equal_odds(adjust=True).pvalue)


@given(POSITIVE)
@settings(max_examples=150, deadline=None)
def test_random_tables_agree_with_statsmodels(tables: np.ndarray) -> None:
    against_statsmodels(tables)


@given(POSITIVE)
@settings(max_examples=100, deadline=None)
def test_breslow_day_is_the_distance_from_tables_with_the_common_odds_ratio(tables: np.ndarray) -> None:
    # By definition: the first cell of each stratum by bisection on its odds ratio.
    found = binary_association(tables)
    total = 0.0
    for (a, b), (c, d) in tables.tolist():
        low, high = max(0, a - d), min(a + b, a + c)
        for _ in range(200):
            x = (low + high) / 2
            below = x * (d - a + x) < found.odds_ratio * (a + b - x) * (a + c - x)
            low, high = (x, high) if below else (low, x)
        total += (a - x) ** 2 * (1 / x + 1 / (a + b - x) + 1 / (a + c - x) + 1 / (d - a + x))
    assert found.breslow_day == pytest.approx(total, rel=1e-6, abs=1e-6)


@given(ANY)
@settings(max_examples=300, deadline=None)
def test_strata_that_carry_nothing_change_nothing_and_no_table_raises(tables: np.ndarray) -> None:
    idle = np.array([[[0, 0], [0, 0]], [[3, 0], [4, 0]], [[0, 0], [2, 7]], [[0, 0], [0, 5]]])
    found, more = binary_association(tables), binary_association(np.concatenate([idle, tables]))
    np.testing.assert_equal(vars(more), vars(found))
    assert found.informative == informative(tables).sum()


def test_no_informative_stratum_gives_nothing() -> None:
    for tables in (np.zeros((0, 2, 2), int), np.zeros((2, 2, 2), int), np.array([[[3, 4], [0, 0]]])):
        found = binary_association(tables)
        assert (found.informative, found.df) == (0, 0)
        assert np.isnan(
            [found.odds_ratio, found.odds_low, found.cmh, found.cmh_p, found.breslow_day, found.tarone_p]
        ).all()


def test_one_informative_stratum_has_an_odds_ratio_and_no_homogeneity() -> None:
    found = binary_association(np.array([[[10, 5], [4, 9]]]))
    other = Table(np.array([[10, 5], [4, 9]]))
    assert found.odds_ratio == near(10 * 9 / (5 * 4))
    # In one table Robins, Breslow & Greenland's variance is Woolf's sum of reciprocals.
    half = norm.ppf(0.975) * np.sqrt(1 / 10 + 1 / 5 + 1 / 4 + 1 / 9)
    assert found.odds_high == near(4.5 * np.exp(half))
    assert found.cmh == near(27 / 28 * other.test_nominal_association().statistic)
    assert (found.df, found.informative) == (0, 1)
    assert np.isnan([found.breslow_day, found.breslow_day_p, found.tarone, found.tarone_p]).all()


def test_infinite_and_zero_odds_ratios_keep_one_bound() -> None:
    tables = np.array([[[3, 0], [2, 4]], [[5, 0], [1, 6]]])
    infinite, zero = binary_association(tables), binary_association(tables[:, ::-1])
    assert (infinite.odds_ratio, infinite.odds_high, zero.odds_ratio, zero.odds_low) == (np.inf, np.inf, 0.0, 0.0)
    assert np.isnan([infinite.odds_low, zero.odds_high, infinite.breslow_day, zero.tarone_p]).all()
    assert infinite.cmh == near(zero.cmh)
    assert infinite.cmh > 5
    assert infinite.yule_q.q == -zero.yule_q.q == 1.0


def test_the_continuity_correction_never_turns_the_difference_round() -> None:
    tables = np.array([[[6, 5], [5, 5]]])
    assert binary_association(tables).cmh > 0
    assert binary_association(tables).cmh_corrected == 0.0


def test_the_common_ratio_on_the_scale_of_q_is_monotone() -> None:
    found = binary_association(CENTRES)
    q = found.yule_q
    assert q.q == near((found.odds_ratio - 1) / (found.odds_ratio + 1))
    assert q.low == near((found.odds_low - 1) / (found.odds_low + 1))
    assert -1 < q.low < q.q < q.high < 1


def test_cramers_v_has_the_published_value() -> None:
    assert f"{stratum_v(ASSOCIATION_TABLE[None])[0]:.6f}" == str(ASSOCIATION_V)  # scipy documentation


@given(WIDER)
@settings(max_examples=200, deadline=None)
def test_every_stratum_agrees_with_scipy(counts: np.ndarray) -> None:
    v = stratum_v(counts)
    expected, residuals = expected_and_residuals(counts)
    for s, table in enumerate(counts):
        rows, columns = np.flatnonzero(table.sum(1)), np.flatnonzero(table.sum(0))
        unused = np.ones(table.shape, dtype=bool)
        unused[np.ix_(rows, columns)] = False
        assert (np.isnan(expected[s]) == unused).all()
        kept = table[np.ix_(rows, columns)]
        if rows.size:
            np.testing.assert_allclose(expected[s][np.ix_(rows, columns)], expected_freq(kept), rtol=1e-12)
        if min(rows.size, columns.size) < 2:
            assert np.isnan(v[s])
            assert np.isnan(residuals[s]).all()
        else:
            assert v[s] == near(association(kept, method="cramer"))
            ours = residuals[s][np.ix_(rows, columns)]
            np.testing.assert_allclose(ours, Table(kept, shift_zeros=False).standardized_resids, rtol=1e-9, atol=1e-12)


def test_residuals_of_a_2_by_2_table_are_the_root_of_its_statistic() -> None:
    _, residuals = expected_and_residuals(BERKELEY)
    for s, table in enumerate(BERKELEY):
        x2 = Table(table, shift_zeros=False).test_nominal_association().statistic
        np.testing.assert_allclose(residuals[s] ** 2, x2, rtol=1e-9)
    assert f"{abs(residuals[0, 0, 0]):.2f}" == "4.15"  # department A; Agresti 2002 (from memory)
    assert np.sign(residuals[0]).tolist() == [[-1, 1], [1, -1]]


def test_adjusted_residuals_are_standard_normal_when_independent() -> None:
    rng = np.random.default_rng(1)
    shares = np.outer([0.5, 0.3, 0.2], [0.6, 0.25, 0.15]).ravel()
    _, residuals = expected_and_residuals(rng.multinomial(400, shares, 4000).reshape(-1, 3, 3))
    np.testing.assert_allclose(residuals.mean(0), 0, atol=4 / np.sqrt(4000))
    np.testing.assert_allclose(residuals.std(0), 1, atol=0.05)


def test_yules_q_and_its_interval() -> None:
    # Q = (ad - bc) / (ad + bc) by definition; the log odds ratio's interval as statsmodels has it.
    for table in (*BERKELEY, *CENTRES[:4]):
        (a, b), (c, d) = table.tolist()
        found = yule_q(table)
        assert found.q == near((a * d - b * c) / (a * d + b * c))
        low, high = StratifiedTable([table.astype(float)]).oddsratio_pooled_confint()
        assert (found.low, found.high) == (near((low - 1) / (low + 1)), near((high - 1) / (high + 1)))
    assert yule_q(BERKELEY[0], 0.99).low < yule_q(BERKELEY[0]).low


def test_yules_q_at_the_edge() -> None:
    full = yule_q(np.array([[8, 0], [3, 9]]))
    assert full.q == full.high == 1.0
    assert 0 < full.low < 1
    assert yule_q(np.array([[0, 8], [3, 9]])).low == -1.0
    for empty in ([[0, 0], [3, 4]], [[0, 3], [0, 4]], [[0, 0], [0, 0]]):
        found = yule_q(np.array(empty))
        assert np.isnan([found.q, found.low, found.high]).all()


@pytest.mark.parametrize("ratio", [1.0, 4.0, 60.0])
def test_the_interval_of_yules_q_covers(ratio: float) -> None:
    shares = np.array([ratio, 1.0, 1.0, 1.0]) / (ratio + 3.0)
    q, covered, usable = (ratio - 1) / (ratio + 1), 0, 0
    for draw in np.random.default_rng(2).multinomial(80, shares, 2000):
        found = yule_q(draw.reshape(2, 2))
        usable += not np.isnan(found.q)
        covered += found.low <= q <= found.high
    assert usable > 1500
    assert 0.93 <= covered / usable <= 1.0


def test_binary_part_keeps_the_used_levels_in_order() -> None:
    wide = np.zeros((2, 4, 3), int)
    wide[0][np.ix_([1, 3], [0, 2])] = [[5, 1], [2, 7]]
    wide[1][np.ix_([1, 3], [0, 2])] = [[0, 4], [3, 3]]
    part = binary_part(wide)
    assert part is not None
    assert part.tolist() == [[[5, 1], [2, 7]], [[0, 4], [3, 3]]]
    rows, columns = used_levels(wide)
    assert (rows.tolist(), columns.tolist()) == ([1, 3], [0, 2])
    wide[1, 0, 0] = 1
    assert binary_part(wide) is None


def test_a_binary_part_with_one_level_is_filled_with_zeros() -> None:
    part = binary_part(np.array([[[3], [4]]]))
    assert part is not None
    assert part.tolist() == [[[3, 0], [4, 0]]]
    assert binary_part(HAIR_EYE) is None
    assert binary_part(JOB_SATISFACTION) is None
