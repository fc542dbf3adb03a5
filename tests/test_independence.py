"""Tests, intervals, detectable effects and verdicts, against published values, scipy, and simulation."""

import json
from dataclasses import fields
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from published import (
    ASSOCIATION_TABLE,
    ASSOCIATION_V,
    BERKELEY,
    BERKELEY_G,
    BERKELEY_MARGINAL_G,
    BERKELEY_MARGINAL_X2,
    BERKELEY_X2,
    HAIR_EYE,
    HAIR_EYE_NATS,
    JOB_SATISFACTION,
    JOB_SATISFACTION_MIN_EXPECTED,
    SCIPY_G,
    SCIPY_G_P,
    SCIPY_TABLE,
    SCIPY_X2,
    SCIPY_X2_P,
)
from scipy.stats import chi2, chi2_contingency, pearson3, random_table
from scipy.stats.contingency import association
from simulated import drawn, exact_bits, measured, nudged

from bnx.errors import SettingError
from bnx.independence import METHODS, TESTS, Statistics, p_values
from bnx.intervals import detectable_bits
from bnx.kernels import contingency
from bnx.kernels.contingency import COLUMNS
from bnx.verdicts import VERDICTS, TestResult, judge, outcomes, results

PAIR_KEYS = {
    *(
        "a",
        "b",
        "bits",
        "bits_corrected",
        "bits_low",
        "bits_high",
        "bits_at_most",
        "marginal_bits",
        "marginal_bits_corrected",
    ),
    *("marginal_p_value", "marginal_adjusted_p", "explained_bits", "bits_without_blanks", "outcome"),
    "double_counted_bits",
    *("x2", "g", "statistic", "df", "p_value", "adjusted_p", "method"),
    *("sample_carries_it", "strata", "strata_informative", "min_expected", "share_expected_below_5", "cramers_v"),
    *("detectable_bits", "detectable_at", "verdict"),
}


def judge_all(
    names: list[tuple[str, str]], given: Statistics, marginal: Statistics, test: str = "auto", **options: Any
) -> list[TestResult]:
    """Test and judge pairs as one family, given the class and without it."""
    judgement, without = (judge(stats, p_values(stats, test), **options) for stats in (given, marginal))
    outcome = outcomes(given, judgement, marginal, without)
    nothing = np.full(len(names), np.nan)
    return results(names, given, judgement, marginal, without, outcome, nothing, nothing)


def judged(table: np.ndarray, **options: float) -> TestResult:
    """Judge one table (S, h, w) as a family of its own."""
    given, marginal = measured(table[None]), measured(table.sum(0)[None, None])
    return judge_all([("a", "b")], given, marginal, **options)[0]


def test_fields_stand_in_the_order_of_the_kernels_columns() -> None:
    names = [field.name.upper() for field in fields(Statistics)]
    assert [getattr(contingency, name) for name in names[:-1]] == list(range(COLUMNS))
    assert names[-1] == "CHANCE"


def test_berkeley() -> None:
    result = judged(BERKELEY)  # Bickel, Hammel & O'Connell 1975
    assert result.x2 == result.statistic == pytest.approx(BERKELEY_X2, abs=5e-5)
    assert result.g == pytest.approx(BERKELEY_G, abs=5e-5)
    assert result.df == 6
    assert result.p_value == pytest.approx(chi2.sf(BERKELEY_X2, 6), rel=1e-4)
    assert (result.method, result.sample_carries_it, result.verdict) == ("chi2-tail", True, "dependent")
    assert result.marginal_bits == pytest.approx(BERKELEY_MARGINAL_G / (2 * 4526 * np.log(2)), rel=1e-6)
    assert (
        result.marginal_p_value
        == result.marginal_adjusted_p
        == pytest.approx(chi2.sf(BERKELEY_MARGINAL_X2, 1), rel=1e-4, abs=0)
    )
    lost = BERKELEY_MARGINAL_G - 1 - (BERKELEY_G - 6)  # each G less its df: Miller-Madow on both
    assert result.explained_bits == pytest.approx(lost / (2 * 4526 * np.log(2)), rel=1e-5)
    assert (result.outcome, result.strata, result.strata_informative) == ("remains", 6, 6)


def test_job_satisfaction_is_too_sparse_for_the_chi_square_tail() -> None:
    result = judged(JOB_SATISFACTION)  # Agresti 2002
    assert (result.method, result.sample_carries_it, result.verdict) == ("moments", False, "not enough data")
    assert result.min_expected == JOB_SATISFACTION_MIN_EXPECTED
    assert np.isnan([result.bits_low, result.bits_high]).all()
    assert judged(JOB_SATISFACTION, test="chi2").method == "chi2-tail"
    assert not judged(JOB_SATISFACTION, test="chi2").sample_carries_it


def test_hair_and_eye_given_sex() -> None:
    stats = measured(HAIR_EYE[None])  # Snee 1974
    assert stats.bits[0] == pytest.approx(HAIR_EYE_NATS / np.log(2), abs=1e-6)
    assert stats.bits_corrected[0] == pytest.approx(stats.bits[0] - 18 / (2 * 592 * np.log(2)), rel=1e-12)


def test_the_examples_in_scipys_documentation() -> None:
    for test, value, tail in (("chi2", SCIPY_X2, SCIPY_X2_P), ("g", SCIPY_G, SCIPY_G_P)):
        statistic, p, _, carried = p_values(measured(SCIPY_TABLE[None, None]), test)
        assert statistic[0] == pytest.approx(value, abs=5e-6)
        assert p[0] == pytest.approx(tail, abs=5e-7)
        assert carried[0] == (test == "chi2")  # for g every expected count would have to reach 15
    assert measured(ASSOCIATION_TABLE[None, None]).cramers_v[0] == pytest.approx(ASSOCIATION_V, abs=5e-7)


@settings(deadline=None)
@given(arrays(np.int32, (3, 4, 3), elements=st.integers(0, 30)))
def test_g_is_twice_the_rows_times_the_bits(table: np.ndarray) -> None:
    stats = measured(table[None])  # Kullback 1959
    assert stats.g[0] == pytest.approx(2 * table.sum() * stats.bits[0] * np.log(2), rel=1e-12, abs=1e-12)
    assert stats.bits[0] >= 0
    assert not 0 > stats.cramers_v[0] > 1


@given(arrays(np.int32, (3, 3), elements=st.integers(1, 30)))
def test_cramers_v_of_one_stratum_equals_scipy(table: np.ndarray) -> None:
    assert measured(table[None, None]).cramers_v[0] == pytest.approx(association(table, method="cramer"), abs=1e-9)


def test_cramers_v_over_strata_is_a_weighted_mean_that_reaches_one() -> None:
    perfect = np.array([[[9, 0, 0], [0, 9, 0], [0, 0, 9]], [[5, 0, 0], [0, 7, 0], [0, 0, 0]]])
    assert measured(perfect[None]).cramers_v[0] == pytest.approx(1)
    half = np.array([[[10, 0], [0, 10]], [[5, 5], [5, 5]]])
    assert measured(half[None]).cramers_v[0] == pytest.approx(np.sqrt(0.5))


def test_far_tails_keep_their_digits() -> None:
    dense, sparse = np.array([[900, 100], [100, 900]]), np.eye(12, dtype=np.int64) * 4
    fit = chi2_contingency(dense, correction=False)
    assert 0 < p_values(measured(dense[None, None]))[1][0] == pytest.approx(fit.pvalue, rel=1e-9, abs=0)
    stats = measured(sparse[None, None])
    spread = np.sqrt(stats.x2_variance[0])
    expected = pearson3.sf(stats.x2[0], stats.x2_third[0] / spread**3, stats.x2_mean[0], spread)
    assert 0 < p_values(stats)[1][0] == pytest.approx(expected, rel=1e-9, abs=0)
    assert expected < 1e-40


@pytest.mark.parametrize(
    ("table", "cochran"),
    [
        ([[5, 5], [5, 5]], True),
        ([[4, 4], [16, 16]], False),  # two of four expected counts are 4
        ([[4, 16, 16, 16, 16], [4, 16, 16, 16, 16]], True),  # two of ten, 20 %
        ([[4, 16, 16, 16], [4, 16, 16, 16]], False),  # two of eight
        ([[1, 99, 99, 99, 99, 99], [0, 100, 99, 99, 99, 99]], False),  # an expected count of .5
    ],
)
def test_cochrans_rule_decides_the_method(table: list[list[int]], cochran: bool) -> None:
    stats = measured(np.array(table)[None, None])
    method = "chi2-tail" if cochran else "moments"
    for test, expected in (("auto", method), ("monte-carlo", method), ("chi2", "chi2-tail"), ("g", "g-tail")):
        assert METHODS[p_values(stats, test)[2][0]] == expected
    assert stats.cochran[0] == cochran


def test_g_is_carried_from_five_times_the_levels() -> None:
    for count, carried in ((15, True), (14, False)):
        assert p_values(measured(np.full((1, 1, 3, 2), count)), "g")[3][0] == carried


@pytest.mark.parametrize("test", TESTS)
@pytest.mark.parametrize(
    "table",
    [
        np.zeros((2, 2, 2), dtype=np.int64),
        np.array([[[3, 4], [0, 0]], [[5, 0], [2, 0]]]),  # one used row or column per stratum
        np.array([[[1, 0], [0, 1]], [[0, 1], [1, 0]]]),  # X2 is 2 whatever happens
        np.array([[[1, 0], [1, 2]]]),  # one row of 1, two equal columns: X2 is 4/3 whatever happens
    ],
)
def test_what_cannot_vary_is_not_tested(table: np.ndarray, test: str) -> None:
    result = judged(table, test=test)
    assert (result.method, result.verdict, result.sample_carries_it) == ("none", "not enough data", False)
    plain = result.to_dict()
    for key in ("statistic", "p_value", "adjusted_p", "detectable_bits", "detectable_at", "bits_low", "bits_high"):
        assert plain[key] is None


def test_untestable_pairs_leave_the_family() -> None:
    nothing = np.array([[[7, 7], [0, 0]]] * 6)
    tables = np.stack([BERKELEY, nothing, nothing])
    tested = judge_all([("a", "b"), ("a", "c"), ("b", "c")], measured(tables), measured(tables.sum(1)[:, None]))
    assert tested[0].adjusted_p == tested[0].p_value
    assert tested[0].detectable_at == 0.05


def test_moment_p_follows_random_tables() -> None:
    down, across = (14, 5, 3, 2, 1), (13, 6, 4, 2)
    stats = measured(random_table(down, across).rvs(200_000, random_state=3)[:, None])
    p = p_values(stats)[1]
    assert set(p_values(stats)[2]) == {METHODS.index("moments")}
    for at in (0.2, 0.1, 0.05, 0.02):
        assert np.mean(p <= at) == pytest.approx(at, rel=0.15)


@pytest.mark.parametrize("base", [0.7, 0.55, 0.4])
def test_moment_p_keeps_its_size_on_sparse_skewed_tables(base: float) -> None:
    skewed = base ** np.arange(6)
    shares = np.array([5, 4, 3, 2, 1])[:, None, None] * np.outer(skewed, skewed)
    stats = measured(drawn(shares / shares.sum(), 100, 2000, seed=4))
    _, p, method, carried = p_values(stats)
    assert (method == METHODS.index("moments")).all()
    assert not carried.any()
    assert 0.03 < np.mean(p <= 0.05) < 0.07
    assert np.mean(p_values(stats, "chi2")[1] <= 0.05) > 0.07  # the tail that the sample does not carry


def test_two_effects_of_one_cause() -> None:
    # Common practice, no source: hot weather brings outings to the shore and heat strokes.
    hot = 0.3
    outing = np.array([[0.8, 0.2], [0.3, 0.7]])  # by weather: no, yes
    stroke = np.array([[0.98, 0.02], [0.85, 0.15]])
    shares = np.array([1 - hot, hot])[:, None, None] * outing[:, :, None] * stroke[:, None, :]
    tables = drawn(shares, 5000, 1000, seed=5)
    given_cause, marginal = p_values(measured(tables))[1], p_values(measured(tables.sum(1)[:, None]))[1]
    assert np.mean(marginal <= 0.001) > 0.99
    assert np.mean(given_cause <= 0.05) == pytest.approx(0.05, abs=3 * np.sqrt(0.05 * 0.95 / 1000))


def test_detectable_bits_are_found_in_simulated_tables() -> None:
    low, high = 0.0, 1.0
    for _ in range(40):  # the strength at which the shares hold just the detectable bits
        middle = (low + high) / 2
        enough = exact_bits(nudged(2, 3, 3, middle, seed=6)) > detectable_bits(0.01, np.array([8]), np.array([2000]))[0]
        low, high = (low, middle) if enough else (middle, high)
    p = p_values(measured(drawn(nudged(2, 3, 3, high, seed=6), 2000, 4000, seed=7)))[1]
    assert np.mean(p <= 0.01) == pytest.approx(0.8, abs=0.03)


def test_every_verdict() -> None:
    close, few, strong = [[5010, 4990], [4990, 5010]], [[11, 9], [9, 11]], [[90, 10], [10, 90]]
    tables = np.array([close, few, strong, [[255_000, 245_000], [245_000, 255_000]]])[:, None]
    judgement = judge(measured(tables), p_values(measured(tables)))
    verdicts = [VERDICTS[code] for code in judgement.verdict]
    assert verdicts == ["negligible", "not enough data", "dependent", "detected, but negligible"]
    assert VERDICTS[judge(measured(tables), p_values(measured(tables)), negligible=1e-7).verdict[3]] == "dependent"
    assert judgement.at == 0.05 * 2 / 4
    assert judgement.rejected.tolist() == [False, False, True, True]


def test_the_family_sets_the_threshold() -> None:
    tables = np.stack([BERKELEY, BERKELEY[::-1], np.full((6, 2, 2), 50)])
    names = [("a", "b"), ("a", "c"), ("b", "c")]
    for adjust, at in (
        ("bh", 0.05 * 2 / 3),
        ("holm", 0.05),
        ("by", 0.05 * 2 / 3 / (1 + 1 / 2 + 1 / 3)),
        ("none", 0.05),
    ):
        tested = judge_all(names, measured(tables), measured(tables.sum(1)[:, None]), adjust=adjust)
        assert [result.detectable_at for result in tested] == pytest.approx([at] * 3)
        assert [(result.a, result.b) for result in tested] == names
        expected = detectable_bits(at, np.array([6]), np.array([4526]))[0]
        assert tested[0].detectable_bits == pytest.approx(expected)
        assert tested[1].p_value == pytest.approx(tested[0].p_value)


def test_results_are_plain_json() -> None:
    for table in (BERKELEY, JOB_SATISFACTION):
        plain = judged(table).to_dict()
        assert set(plain) == PAIR_KEYS
        assert json.loads(json.dumps(plain, allow_nan=False)) == plain
        assert type(plain["df"]) is int
        assert type(plain["sample_carries_it"]) is bool


@settings(deadline=None)
@given(arrays(np.int32, (2, 3, 4), elements=st.integers(0, 40)), st.integers(0, 2**32))
def test_names_order_and_direction_do_not_matter(table: np.ndarray, seed: int) -> None:
    random = np.random.default_rng(seed)
    renamed = table[random.permutation(2)][:, random.permutation(3)][:, :, random.permutation(4)]
    first, *others = (judged(each).to_dict() for each in (table, renamed, table.transpose(0, 2, 1)))
    for other in others:
        for key, value in first.items():
            assert other[key] == (pytest.approx(value, rel=1e-7, abs=1e-9) if isinstance(value, float) else value)


def test_unknown_test_is_refused() -> None:
    with pytest.raises(SettingError, match=r"^test is 'exact'; it must be one of auto, chi2, g, monte-carlo$"):
        p_values(measured(BERKELEY[None]), "exact")
