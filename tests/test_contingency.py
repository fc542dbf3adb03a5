"""The kernel against published tables, scipy, and enumeration of every table with the same margins."""

from itertools import combinations, product

import numpy as np
import pytest
from enumerated import corner_table, distribution, moments, partitions
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from published import (
    ASSOCIATION_TABLE,
    BERKELEY,
    BERKELEY_G,
    BERKELEY_MARGINAL_G,
    BERKELEY_MARGINAL_X2,
    BERKELEY_X2,
    CORRAL_ACROSS_NATS,
    CORRAL_WITHIN_G,
    CORRAL_WITHIN_NATS,
    HAIR_EYE,
    HAIR_EYE_G,
    HAIR_EYE_NATS,
    HAIR_EYE_X2,
    JOB_SATISFACTION,
    JOB_SATISFACTION_G,
    JOB_SATISFACTION_MIN_EXPECTED,
    JOB_SATISFACTION_X2,
    MONK1_NATS,
    SCIPY_G,
    SCIPY_TABLE,
    SCIPY_X2,
    corral,
    monk1,
)
from scipy.stats import chi2_contingency, power_divergence, random_table

from bnx.kernels import contingency as columns
from bnx.kernels.contingency import COLUMNS, table_statistics

strata_of_counts = st.tuples(st.integers(1, 4), st.integers(1, 5), st.integers(1, 4)).flatmap(
    lambda shape: arrays(np.int32, shape, elements=st.integers(0, 9))
)


def statistics(table: np.ndarray) -> np.ndarray:
    """Run the kernel on one table (S, h, w)."""
    strata, height, width = table.shape
    counts = np.ascontiguousarray(table, dtype=np.int32).reshape(strata, -1)
    return table_statistics(counts, np.array([0]), np.array([height]), np.array([width]))[0]


def table_given(rows: np.ndarray, target: np.ndarray, a: int, b: int) -> np.ndarray:
    """Count two columns within each class."""
    table = np.zeros((target.max() + 1, rows[:, a].max() + 1, rows[:, b].max() + 1), dtype=np.int32)
    np.add.at(table, (target, rows[:, a], rows[:, b]), 1)
    return table


def used(stratum: np.ndarray) -> np.ndarray:
    """Drop empty rows and columns."""
    return stratum[stratum.sum(1) > 0][:, stratum.sum(0) > 0]


def informative(table: np.ndarray) -> list[np.ndarray]:
    """List the strata that can carry something."""
    return [small for small in map(used, table) if min(small.shape, default=0) > 1]


@pytest.mark.parametrize(
    ("table", "x2", "g", "df"),
    [
        pytest.param(BERKELEY, BERKELEY_X2, BERKELEY_G, 6, id="Bickel, Hammel & O'Connell 1975"),
        pytest.param(
            BERKELEY.sum(0, keepdims=True), BERKELEY_MARGINAL_X2, BERKELEY_MARGINAL_G, 1, id="Bickel et al., marginal"
        ),
        pytest.param(JOB_SATISFACTION, JOB_SATISFACTION_X2, JOB_SATISFACTION_G, 18, id="Agresti 2002"),
        pytest.param(HAIR_EYE, HAIR_EYE_X2, HAIR_EYE_G, 18, id="Snee 1974"),
    ],
)
def test_published_statistics(table: np.ndarray, x2: float, g: float, df: int) -> None:
    found = statistics(table)
    assert found[columns.X2] == pytest.approx(x2, abs=5e-5)
    assert 2 * found[columns.NATS] == pytest.approx(g, abs=5e-5)
    assert found[columns.DF] == df
    assert found[columns.ROWS] == table.sum()


def test_published_information_and_smallest_expected_count() -> None:
    hair = statistics(HAIR_EYE)  # Snee 1974
    assert hair[columns.ROWS] == 592
    assert hair[columns.NATS] / hair[columns.ROWS] == pytest.approx(HAIR_EYE_NATS, abs=5e-7)
    assert statistics(JOB_SATISFACTION)[columns.MIN_EXPECTED] == JOB_SATISFACTION_MIN_EXPECTED  # Agresti 2002


def test_the_example_in_scipys_documentation() -> None:
    found = statistics(SCIPY_TABLE[None])
    assert found[columns.X2] == pytest.approx(SCIPY_X2, abs=5e-6)
    assert 2 * found[columns.NATS] == pytest.approx(SCIPY_G, abs=5e-7)


def test_corral_depends_within_its_pairs() -> None:
    rows, target = corral()  # John, Kohavi & Pfleger 1994; figures derived
    nats = {
        (a, b): statistics(table_given(rows, target, a, b))[columns.NATS] / 128 for a, b in combinations(range(6), 2)
    }
    for pair, value in nats.items():
        within, across = pair in {(0, 1), (2, 3)}, max(pair) < 4
        expected = CORRAL_WITHIN_NATS if within else CORRAL_ACROSS_NATS if across else 0.0
        assert value == pytest.approx(expected, abs=5e-7)
    inner = statistics(table_given(rows, target, 0, 1))
    assert 2 * inner[columns.NATS] == pytest.approx(CORRAL_WITHIN_G, abs=5e-5)
    assert inner[columns.DF] == 2


def test_monk1_depends_in_one_pair() -> None:
    rows, target = monk1()  # Thrun et al. 1991; figure derived
    for a, b in combinations(range(6), 2):
        value = statistics(table_given(rows, target, a, b))[columns.NATS] / 432
        assert value == pytest.approx(MONK1_NATS if (a, b) == (0, 1) else 0.0, abs=5e-7)


@settings(deadline=None)
@given(strata_of_counts)
def test_equals_scipy_summed_over_strata(table: np.ndarray) -> None:
    found = statistics(table)
    strata = informative(table)
    x2 = g = 0.0
    expected: list[float] = []
    for stratum in strata:
        fit = chi2_contingency(stratum, correction=False)
        x2 += fit.statistic
        g += power_divergence(stratum, fit.expected_freq, lambda_="log-likelihood", axis=None).statistic
        expected += fit.expected_freq.ravel().tolist()
    assert found[columns.X2] == pytest.approx(x2, abs=1e-9)
    assert 2 * found[columns.NATS] == pytest.approx(g, abs=1e-9)
    assert found[columns.DF] == sum((len(s) - 1) * (s.shape[1] - 1) for s in strata)
    assert found[columns.MIN_EXPECTED] == pytest.approx(min(expected, default=np.nan), rel=1e-12, nan_ok=True)
    assert found[columns.BELOW_5] == sum(e < 5 - 1e-9 for e in expected)
    assert found[columns.CELLS] == len(expected)
    assert found[columns.ROWS] == table.sum()
    assert found[columns.STRATA] == sum(s.any() for s in table)
    assert found[columns.INFORMATIVE] == len(strata)
    assert found[columns.LEVELS] == max((max(s.shape) for s in strata), default=0)
    assert found[columns.X2_CEILING] == sum(s.sum() * (min(s.shape) - 1) for s in strata)


@settings(deadline=None)
@given(strata_of_counts)
def test_squared_logs_equal_their_definition(table: np.ndarray) -> None:
    total = 0.0
    for stratum in table:
        for i, j in zip(*np.nonzero(stratum), strict=True):
            ratio = stratum[i, j] * stratum.sum() / (stratum[i].sum() * stratum[:, j].sum())
            total += stratum[i, j] * np.log(ratio) ** 2
    assert statistics(table)[columns.NATS_SQUARED] == pytest.approx(total, rel=1e-9, abs=1e-9)


@settings(deadline=None)
@given(strata_of_counts, st.integers(0, 2**32))
def test_relabelling_and_transposing_change_nothing(table: np.ndarray, seed: int) -> None:
    shuffled = np.random.default_rng(seed)
    renamed = table[shuffled.permutation(len(table))]
    renamed = renamed[:, shuffled.permutation(table.shape[1])][:, :, shuffled.permutation(table.shape[2])]
    for other in (renamed, table.transpose(0, 2, 1)):
        np.testing.assert_allclose(statistics(other), statistics(table), rtol=1e-9, atol=1e-9)


@settings(deadline=None)
@given(strata_of_counts)
def test_empty_rows_columns_and_strata_change_nothing(table: np.ndarray) -> None:
    padded = np.pad(table, 1)
    np.testing.assert_array_equal(statistics(padded), statistics(table))


@pytest.mark.parametrize("total", [2, 3, 4, 5, 6, 7])
def test_moments_equal_enumeration_of_every_small_margin(total: int) -> None:
    used = [margin for margin in partitions(total, total) if len(margin) > 1]
    for down, across in product(used, used):
        mean, variance, third = moments(distribution(down, across))
        found = statistics(corner_table(down, across)[None])
        assert found[columns.X2_MEAN] == pytest.approx(float(mean), rel=1e-12)
        assert found[columns.X2_VARIANCE] == pytest.approx(float(variance), rel=1e-11, abs=1e-300)
        assert found[columns.X2_THIRD] == pytest.approx(float(third), rel=1e-11, abs=1e-12)
        assert (found[columns.X2_VARIANCE] == 0) == (variance == 0)


def test_moments_add_over_strata_of_every_size() -> None:
    margins = [((1,), (1,)), ((1, 1), (1, 1)), ((2, 1), (1, 2)), ((3, 1), (2, 2)), ((5, 2, 1), (4, 4))]
    table = np.zeros((len(margins), 3, 3), dtype=np.int32)
    for s, (down, across) in enumerate(margins):
        table[s, : len(down), : len(across)] = corner_table(down, across)
    expected = np.sum([moments(distribution(*each)) for each in margins], axis=0).astype(float)
    found = statistics(table)[[columns.X2_MEAN, columns.X2_VARIANCE, columns.X2_THIRD]]
    np.testing.assert_allclose(found, expected, rtol=1e-12)


@pytest.mark.parametrize(("down", "across"), [((20, 9, 6, 3, 2), (25, 10, 5)), ((2, 2, 1, 1), (3, 1, 1, 1))])
def test_moments_equal_200000_random_tables(down: tuple[int, ...], across: tuple[int, ...]) -> None:
    draws = random_table(down, across).rvs(200_000, random_state=1)
    expected = np.outer(down, across) / sum(down)
    x2 = ((draws - expected) ** 2 / expected).sum((1, 2))
    found = statistics(draws[:1])
    spread = (x2 - x2.mean()) ** 2
    assert found[columns.X2_MEAN] == pytest.approx(x2.mean(), abs=4 * x2.std() / np.sqrt(x2.size))
    assert found[columns.X2_VARIANCE] == pytest.approx(spread.mean(), abs=4 * spread.std() / np.sqrt(x2.size))


def test_many_tables_at_once_equal_each_alone() -> None:
    random = np.random.default_rng(2)
    tables = [random.poisson(3, (4, h, w)) for h, w in [(2, 2), (1, 3), (6, 2), (3, 7)]] + [np.zeros((4, 2, 3), int)]
    sizes = [table[0].size for table in tables]
    offsets = 2 + np.concatenate([[0], np.cumsum(sizes)[:-1]])
    counts = np.full((4, 2 + sum(sizes)), 99, dtype=np.int32)
    counts[:, 2:] = np.concatenate([table.reshape(4, -1) for table in tables], axis=1)
    heights, widths = np.array([t.shape[1] for t in tables]), np.array([t.shape[2] for t in tables])
    counts.flags.writeable = False
    found = table_statistics(counts, offsets, heights, widths)
    assert found.shape == (5, COLUMNS)
    np.testing.assert_array_equal(found, [statistics(table) for table in tables])
    assert table_statistics(counts, offsets[:0], heights[:0], widths[:0]).shape == (0, COLUMNS)


def test_large_counts_keep_their_precision() -> None:
    table = ASSOCIATION_TABLE[None].astype(np.int64) * 800_000  # 2 billion records nearly fill the counts' type
    found = statistics(table)
    assert found[columns.ROWS] == table.sum()
    assert found[columns.X2] == pytest.approx(chi2_contingency(table[0], correction=False).statistic, rel=1e-12)
