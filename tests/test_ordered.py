"""Generalised Cochran-Mantel-Haenszel tests against published values, other tests they contain, and enumeration."""

from itertools import pairwise, permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from published import BERKELEY, HAIR_EYE, JOB_SATISFACTION
from scipy.stats import chi2, chi2_contingency, friedmanchisquare, kruskal, rankdata
from statsmodels.stats.contingency_tables import StratifiedTable, Table, cochrans_q

from bnx.ordered import OrderedTest, generalised_cmh

SMALL = arrays(np.int64, st.tuples(st.integers(1, 3), st.integers(2, 3), st.integers(2, 4)), elements=st.integers(0, 4))
TWO_BY_TWO = arrays(np.int64, st.tuples(st.integers(1, 5), st.just(2), st.just(2)), elements=st.integers(1, 30))


def integer_scores(levels: int) -> np.ndarray:
    return np.arange(1.0, levels + 1.0)


def near(value: float) -> object:
    return pytest.approx(value, rel=1e-9, abs=1e-9)


def every(counts: np.ndarray) -> tuple[OrderedTest, OrderedTest, OrderedTest, OrderedTest]:
    u, v = integer_scores(counts.shape[1]), integer_scores(counts.shape[2])
    return (
        generalised_cmh(counts),
        generalised_cmh(counts, u),
        generalised_cmh(counts, None, v),
        generalised_cmh(counts, u, v),
    )


def test_job_satisfaction_has_the_published_figures() -> None:
    # Agresti 2002, table 7.8 and table A.9 (from memory; the first is also in R's documentation of mantelhaen.test):
    # income scores 3 10 20 35, satisfaction scores 1 3 4 5.
    income, satisfaction = (3, 10, 20, 35), (1, 3, 4, 5)
    general = generalised_cmh(JOB_SATISFACTION)
    assert (f"{general.statistic:.4f}", general.df, f"{general.p:.4f}") == ("10.2001", 9, "0.3345")
    means = generalised_cmh(JOB_SATISFACTION, None, satisfaction)
    assert (f"{means.statistic:.4f}", means.df, f"{means.p:.4f}") == ("9.0342", 3, "0.0288")
    linear = generalised_cmh(JOB_SATISFACTION, income, satisfaction)
    assert (f"{linear.statistic:.4f}", linear.df, f"{linear.p:.4f}") == ("6.1563", 1, "0.0131")
    assert 0 < linear.correlation < 1
    assert [found.kind for found in (general, means, linear)] == ["general", "mean scores", "linear"]


def test_binary_pairs_have_the_cochran_mantel_haenszel_test_whatever_is_ordered() -> None:
    plain = StratifiedTable(list(BERKELEY.astype(float))).test_null_odds(correction=False)
    for found in every(BERKELEY):
        assert (found.statistic, found.df, found.p) == (near(plain.statistic), 1, near(plain.pvalue))


@given(TWO_BY_TWO)
@settings(max_examples=100, deadline=None)
def test_random_binary_pairs_agree_with_statsmodels(tables: np.ndarray) -> None:
    plain = StratifiedTable(list(tables.astype(float))).test_null_odds(correction=False)
    for found in every(tables):
        assert (found.statistic, found.df, found.p) == (near(plain.statistic), 1, near(plain.pvalue))


def test_one_stratum_is_pearsons_statistic_less_one_record_and_the_correlation() -> None:
    for table in (HAIR_EYE[0], HAIR_EYE.sum(0), BERKELEY.sum(0)):
        n = table.sum()
        general, _, _, linear = every(table[None])
        assert general.statistic == near((n - 1) / n * chi2_contingency(table, correction=False).statistic)
        rows, columns = (np.repeat(side.ravel() + 1, table.ravel()) for side in np.indices(table.shape))
        correlation = np.corrcoef(rows, columns)[0, 1]
        assert linear.correlation == near(correlation)
        assert linear.statistic == near((n - 1) * correlation**2)
        ordinal = Table(table, shift_zeros=False).test_ordinal_association(
            row_scores=integer_scores(len(table)), col_scores=integer_scores(table.shape[1])
        )
        assert np.sign(ordinal.zscore) == np.sign(linear.correlation)
        assert ordinal.zscore**2 == pytest.approx(linear.statistic, rel=0.01)  # its variance divides by n, not n - 1


def test_mean_scores_contain_kruskal_and_wallis() -> None:
    values = [np.repeat(np.arange(4), row) for row in HAIR_EYE[0]]
    ranks = rankdata(np.concatenate(values))
    scores = [float(ranks[np.concatenate(values) == level][0]) for level in range(4)]
    found = generalised_cmh(HAIR_EYE[:1], None, scores)
    other = kruskal(*values)
    assert (found.statistic, found.df, found.p) == (near(other.statistic), 3, near(other.pvalue))
    turned = generalised_cmh(HAIR_EYE[:1].transpose(0, 2, 1), scores)
    assert turned.statistic == near(found.statistic)


def test_mean_scores_over_blocks_contain_friedman() -> None:
    ranks = np.array([np.random.default_rng(3).permutation(4) for _ in range(12)])
    counts = np.zeros((12, 4, 4), int)
    for block, order in enumerate(ranks):
        counts[block, np.arange(4), order] = 1
    found, other = generalised_cmh(counts, None, integer_scores(4)), friedmanchisquare(*ranks.T)
    assert (found.statistic, found.df, found.p) == (near(other.statistic), 3, near(other.pvalue))


def test_general_association_over_blocks_contains_cochrans_q() -> None:
    answers = np.random.default_rng(4).integers(0, 2, (30, 3))
    counts = np.stack([answers == 0, answers == 1], axis=2).astype(int)
    found, other = generalised_cmh(counts), cochrans_q(answers)
    assert (found.statistic, found.df, found.p) == (near(other.statistic), 2, near(other.pvalue))


def by_permutation(counts: np.ndarray, weights: np.ndarray) -> tuple[float, int]:
    """Weigh the sum of weights (k, r c) x counts by moments over all ways of dealing columns to rows."""
    size = counts.shape[1] * counts.shape[2]
    mean, covariance = np.zeros(size), np.zeros((size, size))
    for table in counts:
        rows, columns = (np.repeat(side.ravel(), table.ravel()) for side in np.indices(table.shape))
        dealt = np.array(list(permutations(columns.tolist())), dtype=np.int64).reshape(-1, len(columns))
        cells = rows * counts.shape[2] + dealt
        tables = np.stack([(cells == cell).sum(1) for cell in range(size)], axis=1)
        mean += tables.mean(0)
        covariance += np.cov(tables.T, bias=True)
    off, spread = weights @ (counts.sum(0).ravel() - mean), weights @ covariance @ weights.T
    rank = int(np.linalg.matrix_rank(spread, tol=1e-9, hermitian=True))
    return float(off @ np.linalg.pinv(spread, rcond=1e-10, hermitian=True) @ off), rank


@pytest.mark.parametrize("seed", range(8))
def test_moments_are_those_of_all_permutations(seed: int) -> None:
    rng = np.random.default_rng(seed)
    counts = rng.multinomial(7, np.full(9, 1 / 9), 2).reshape(2, 3, 3)
    if seed % 2:
        counts[0, 2] = counts[1, :, 1] = 0  # levels that are used in one stratum only
    u, v = np.array([1.0, 2.0, 5.0]), np.array([0.0, 1.0, 3.0])
    expected = {
        "general": (generalised_cmh(counts), np.eye(9)),
        "rows": (generalised_cmh(counts, None, v), np.kron(np.eye(3), v)),
        "columns": (generalised_cmh(counts, u), np.kron(u, np.eye(3))),
        "linear": (generalised_cmh(counts, u, v), np.kron(u, v)[None]),
    }
    for found, weights in expected.values():
        statistic, rank = by_permutation(counts, weights)
        assert found.df == rank
        assert found.statistic == pytest.approx(statistic, rel=1e-8, abs=1e-8)
        assert found.p == near(chi2.sf(statistic, rank))


@given(SMALL)
@settings(max_examples=200, deadline=None)
def test_laws_hold_for_any_table(counts: np.ndarray) -> None:
    general, rows, columns, linear = every(counts)
    rising = [found for found in (linear, columns, general) if found.df]
    for less, more in pairwise(rising):  # a contrast never exceeds the whole
        assert less.df <= more.df
        assert less.statistic <= more.statistic + 1e-7
    for found in (general, rows, columns, linear):
        assert (found.df == 0) == np.isnan(found.statistic) == np.isnan(found.p)
    turned = generalised_cmh(counts.transpose(0, 2, 1))
    np.testing.assert_allclose(turned.statistic, general.statistic, rtol=1e-7, atol=1e-9)
    assert turned.df == general.df
    if linear.df:
        assert -1 <= linear.correlation <= 1
        mirrored = generalised_cmh(counts[:, ::-1], *map(integer_scores, counts.shape[1:]))
        assert mirrored.correlation == near(-linear.correlation)
        assert mirrored.statistic == near(linear.statistic)


def test_unused_levels_and_strata_change_nothing() -> None:
    wide = np.zeros((4, 6, 5), int)
    wide[np.ix_([0, 2], [0, 1, 3, 4], [0, 2, 3, 4])] = JOB_SATISFACTION
    wide[3, 5, 1] = 1  # one record says nothing, though its levels are used nowhere else
    found, plain = generalised_cmh(wide), generalised_cmh(JOB_SATISFACTION)
    assert (found.statistic, found.df) == (near(plain.statistic), plain.df)
    scored = generalised_cmh(wide, (3, 10, 0, 20, 35, 0), (1, 0, 3, 4, 5))
    assert scored.statistic == near(generalised_cmh(JOB_SATISFACTION, (3, 10, 20, 35), (1, 3, 4, 5)).statistic)


@pytest.mark.parametrize(
    "counts", [np.zeros((0, 3, 3), int), np.zeros((2, 3, 3), int), np.array([[[4, 2, 3], [0, 0, 0]]])]
)
def test_nothing_to_test_gives_no_df(counts: np.ndarray) -> None:
    for found in every(counts):
        assert found.df == 0
        assert np.isnan([found.statistic, found.p, found.correlation]).all()


def test_constant_scores_give_no_df_and_only_differences_of_scores_matter() -> None:
    flat = generalised_cmh(HAIR_EYE, (0.1, 0.1, 0.1, 0.1), (1, 2, 3, 4))
    assert (flat.df, np.isnan(flat.statistic)) == (0, True)
    plain = generalised_cmh(HAIR_EYE, (1, 2, 3, 4), (1, 2, 3, 4))
    moved = generalised_cmh(HAIR_EYE, (1000.5, 1001, 1001.5, 1002), (-7, -5, -3, -1))
    assert (moved.statistic, moved.correlation) == (near(plain.statistic), near(plain.correlation))


def test_size_and_the_gain_from_order() -> None:
    rng = np.random.default_rng(6)
    margins = np.outer([0.3, 0.25, 0.25, 0.2], [0.4, 0.3, 0.2, 0.1])
    trend = np.exp(0.13 * np.outer(np.linspace(-2, 2, 4), np.linspace(-2, 2, 4))) * margins
    rejected = {}
    for name, shares in (("none", margins), ("trend", trend / trend.sum())):
        draws = rng.multinomial(60, shares.ravel(), (2000, 3)).reshape(2000, 3, 4, 4)
        p = np.array([[found.p for found in every(counts)] for counts in draws])
        rejected[name] = (p <= 0.05).mean(0)
    noise = 4 * np.sqrt(0.05 * 0.95 / 2000)
    np.testing.assert_allclose(rejected["none"], 0.05, atol=noise)
    general, rows, columns, linear = rejected["trend"]
    assert linear > max(rows, columns) + 0.03
    assert min(rows, columns) > general + 0.03
