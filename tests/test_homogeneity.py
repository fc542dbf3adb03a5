"""One pattern in all classes: against Poisson regression, published values, enumeration, and simulation."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from margins import chances, design, fibre
from published import BERKELEY, HAIR_EYE, JOB_SATISFACTION
from scipy.stats import chi2
from statsmodels.genmod.families import Poisson
from statsmodels.genmod.generalized_linear_model import GLM

from bnx.effects import binary_association
from bnx.errors import SettingError
from bnx.homogeneity import homogeneity
from bnx.loglinear import fit_homogeneous

# Bartlett 1935, Journal of the Royal Statistical Society, supplement 2: plum cuttings, 240 of each kind; planted at
# once and in spring; long, short by alive, dead.
CUTTINGS = np.array([[[156, 84], [107, 133]], [[84, 156], [31, 209]]])
SPARSE = arrays(
    np.int64, st.tuples(st.integers(2, 3), st.integers(2, 3), st.integers(2, 3)), elements=st.integers(0, 3)
)


def near(value: float) -> object:
    return pytest.approx(value, rel=1e-8, abs=1e-8)


def poisson(counts: np.ndarray, classes: list[int] | None = None) -> tuple[float, float, int]:
    """Fit by statsmodels: Pearson's X2, deviance, residual df."""
    columns, cells = design(counts.shape, classes), counts.ravel().astype(float)
    rank = int(np.linalg.matrix_rank(columns))
    basis = np.linalg.svd(columns, full_matrices=False)[0][:, :rank]
    found = GLM(cells, basis, family=Poisson()).fit(tol=1e-14, maxiter=200)
    return float(found.pearson_chi2), float(found.deviance), cells.size - rank


@pytest.mark.parametrize(
    ("counts", "x2", "g", "df"),
    [
        (BERKELEY, "18.82", "20.20", 5),  # Agresti 2002, section 9.4 (from memory): 18.8 and 20.2
        (HAIR_EYE, "6.87", "6.76", 9),  # R documentation of loglin, stopped early: 6.868292, 6.761258 (from memory)
        (CUTTINGS, "2.27", "2.29", 1),  # Bartlett 1935; Bishop, Fienberg & Holland 1975 (from memory)
    ],
)
def test_published_tables(counts: np.ndarray, x2: str, g: str, df: int) -> None:
    found = homogeneity(counts)
    assert (f"{found.x2:.2f}", f"{found.g:.2f}", found.df) == (x2, g, df)
    assert (found.x2, found.g, found.df) == tuple(near(value) for value in poisson(counts))
    assert found.p == found.tail_p == near(chi2.sf(found.x2, df))
    assert (found.method, found.carried, found.converged) == ("chi2-tail", True, True)


@pytest.mark.filterwarnings("ignore:Perfect separation or prediction")
@given(
    arrays(np.int64, st.tuples(st.integers(2, 4), st.integers(2, 3), st.integers(2, 3)), elements=st.integers(1, 40))
)
@settings(max_examples=40, deadline=None)
def test_random_tables_agree_with_poisson_regression(counts: np.ndarray) -> None:
    found = homogeneity(counts, draws=0)
    x2, g, df = poisson(counts)
    assert (found.x2, found.df) == (pytest.approx(x2, rel=1e-6, abs=1e-7), df)
    assert found.g == pytest.approx(g, rel=1e-6, abs=1e-7)


def test_classes_of_several_strata_are_nested_poisson_regressions() -> None:
    classes = [0, 0, 1, 1, 2, 2]
    found = homogeneity(BERKELEY, classes)
    (_, shared, df_shared), (_, apart, df_apart) = poisson(BERKELEY), poisson(BERKELEY, classes)
    assert (found.g, found.df) == (near(shared - apart), df_shared - df_apart)
    assert found.x2 == pytest.approx(found.g, rel=0.1)


def test_a_class_of_one_stratum_each_is_the_plain_test_and_one_class_has_nothing_to_compare() -> None:
    assert homogeneity(BERKELEY, [5, 3, 8, 1, 0, 9]) == homogeneity(BERKELEY)
    single = homogeneity(BERKELEY, [4] * 6)
    assert (single.df, single.method) == (0, "none")
    assert np.isnan([single.x2, single.g, single.p, single.tail_p]).all()


def test_rows_and_columns_of_a_zero_margin_carry_no_df() -> None:
    # Job satisfaction: two pairs of levels occur in neither gender, so 4 cells and 2 parameters go: 9 - 2 = 7.
    found = homogeneity(JOB_SATISFACTION, draws=99)
    assert (found.df, found.carried, found.method) == (7, False, "monte-carlo")
    fit = fit_homogeneous(JOB_SATISFACTION)
    assert int((~fit.free).sum()) == 4
    assert (fit.expected[~fit.free] == 0).all()


@given(SPARSE)
@settings(max_examples=100, deadline=None)
def test_idle_strata_and_levels_change_nothing_and_no_table_raises(counts: np.ndarray) -> None:
    strata, height, width = counts.shape
    wide = np.zeros((strata + 2, height + 1, width + 2), int)
    wide[:strata, :height, 1 : width + 1] = counts
    wide[strata, 0, :] = 3  # one used row
    wide[strata + 1, :, 1] = 2  # one used column
    found, more = homogeneity(counts, draws=0), homogeneity(wide, draws=0)
    assert (found.df, found.strata, found.carried) == (more.df, more.strata, more.carried)
    np.testing.assert_allclose([more.x2, more.g], [found.x2, found.g], rtol=1e-7, atol=1e-9)
    turned = homogeneity(counts.transpose(0, 2, 1)[::-1], draws=0)
    assert turned.df == found.df
    np.testing.assert_allclose([turned.x2, turned.g], [found.x2, found.g], rtol=1e-7, atol=1e-9)


def test_two_by_two_strata_agree_with_breslow_and_day_on_large_samples() -> None:
    shares = np.array([[[3, 1], [1, 2]], [[2, 1], [2, 6]], [[1, 2], [1, 12]]]) / 34
    for draw in np.random.default_rng(1).multinomial(200_000, shares.ravel(), 20).reshape(20, 3, 2, 2):
        assert homogeneity(draw).x2 == pytest.approx(binary_association(draw).tarone, rel=0.02, abs=0.02)


@pytest.mark.parametrize("shape", [(2, 2, 2), (4, 2, 2), (2, 3, 3), (3, 3, 2)])
def test_monte_carlo_p_agrees_with_enumeration(shape: tuple[int, int, int]) -> None:
    rng = np.random.default_rng(7)
    tested = 0
    for draw in rng.multinomial(30, np.full(np.prod(shape), 1 / np.prod(shape)), 4).reshape(4, *shape):
        fit, tables, found = fit_homogeneous(draw), fibre(draw), homogeneity(draw, draws=1999, seed=3)
        if found.method != "monte-carlo":
            continue
        tested += 1
        weight = np.where(fit.free, 1 / np.where(fit.free, fit.expected, 1), 0)
        x2 = ((tables - fit.expected) ** 2 * weight).sum((1, 2, 3))
        exact = float(chances(tables)[x2 >= found.x2 - 1e-7].sum())
        assert found.p == pytest.approx(exact, abs=4 * np.sqrt(exact * (1 - exact) / 2000) + 1e-3)
    assert tested >= 3


def test_the_seed_alone_decides() -> None:
    first, again, other = (homogeneity(JOB_SATISFACTION, draws=499, seed=seed) for seed in (1, 1, 2))
    assert first == again
    assert first.x2 == other.x2
    assert first.p != other.p
    assert homogeneity(JOB_SATISFACTION, draws=0).method == "none"
    with pytest.raises(SettingError, match=r"^draws is -1; it must be 0 or more$"):
        homogeneity(JOB_SATISFACTION, draws=-1)


def test_where_the_strata_have_over_1500_rows_and_columns_df_is_not_counted() -> None:
    """Strata of 2 x 2 have four; the tail then gives way to Monte Carlo, which tells the same."""
    counts = np.random.default_rng(5).poisson(20, (376, 2, 2))
    most, more = homogeneity(counts[:375]), homogeneity(counts)
    assert (most.df, most.method, most.carried) == (374, "chi2-tail", True)
    assert (more.df, more.method, more.carried) == (None, "monte-carlo", False)
    assert np.isnan(more.tail_p)
    assert more.p == pytest.approx(chi2.sf(more.x2, 375), abs=0.1)
    counts[:188, 0, 0] += 15
    assert homogeneity(counts).p <= 0.001


def test_no_walk_is_made_among_more_cells_than_it_can_cover(monkeypatch: pytest.MonkeyPatch) -> None:
    """Cells are those of rows and columns in use. Where the tail is not carried, nothing is left to judge by."""
    counts = np.zeros((3, 6, 7), int)
    counts[:, 1:5, 1:6] = np.random.default_rng(4).poisson(0.8, (3, 4, 5))
    monkeypatch.setattr("bnx.homogeneity._MOST_CELLS", 60)
    most = homogeneity(counts, seed=2)
    assert (most.method, most.draws) == ("monte-carlo", 999)
    monkeypatch.setattr("bnx.homogeneity._MOST_CELLS", 59)
    more = homogeneity(counts, seed=2)
    assert (more.method, more.draws, np.isnan(more.p)) == ("none", 0, True)
    assert (more.x2, more.g, more.df) == (most.x2, most.g, most.df)
    assert homogeneity(HAIR_EYE).p == homogeneity(HAIR_EYE).tail_p, "a tail that is carried needs no walk"


def test_without_df_everything_else_is_as_with_it(monkeypatch: pytest.MonkeyPatch) -> None:
    sparse = np.random.default_rng(4).poisson(0.8, (3, 4, 5))
    plain = [homogeneity(sparse, groups, seed=2) for groups in (None, [0, 0, 1])]
    monkeypatch.setattr("bnx.loglinear._MOST_LINES", 0)
    for groups, known in zip((None, [0, 0, 1]), plain, strict=True):
        assert (known.method, known.df is None) == ("monte-carlo", False)
        found = homogeneity(sparse, groups, seed=2)
        assert found.df is None
        assert np.isnan(found.tail_p)
        assert replace(found, df=known.df, tail_p=0.0) == replace(known, tail_p=0.0)
    without = homogeneity(sparse, draws=0)
    assert (without.method, np.isnan(without.p), without.x2) == ("none", True, plain[0].x2)


def test_many_tables_stop_early_and_stay_a_p() -> None:
    counts = np.random.default_rng(8).poisson(0.5, (4, 9, 9))
    found = homogeneity(counts, draws=9999, seed=1)
    assert (found.method, 0.02 < found.p <= 1) == ("monte-carlo", True)


def shares(strengths: list[float], height: int, width: int, evenness: float) -> np.ndarray:
    """Make cell shares (S, height, width): a trend of this strength in every stratum, margins of its own."""
    rng = np.random.default_rng(7)
    strata = len(strengths)
    rows, columns = rng.dirichlet(np.full(height, evenness), strata), rng.dirichlet(np.full(width, evenness), strata)
    trend = np.outer(np.linspace(-1, 1, height), np.linspace(-1, 1, width))
    cells = rows[:, :, None] * columns[:, None, :] * np.exp(np.array(strengths)[:, None, None] * trend)
    return np.asarray(cells / cells.sum((1, 2), keepdims=True) / strata)


def rejected(cells: np.ndarray, rows: int, number: int, draws: int, classes: list[int] | None = None) -> float:
    """Find the share of simulated tables with p <= .05."""
    tables = np.random.default_rng(11).multinomial(rows, cells.ravel(), number).reshape(number, *cells.shape)
    found = [homogeneity(table, classes, draws=draws, seed=k).p for k, table in enumerate(tables)]
    return float(np.mean(np.array(found) <= 0.05))


@pytest.mark.parametrize(
    ("strata", "height", "width", "rows"), [(2, 2, 2, 400), (5, 2, 2, 1000), (3, 3, 3, 1000), (2, 6, 6, 2000)]
)
def test_size_where_the_tail_is_carried(strata: int, height: int, width: int, rows: int) -> None:
    size = rejected(shares([0.8] * strata, height, width, 10.0), rows, 1000, 0)
    assert size == pytest.approx(0.05, abs=4 * np.sqrt(0.05 * 0.95 / 1000))


@pytest.mark.parametrize(("strata", "height", "width", "rows"), [(2, 3, 3, 80), (5, 4, 4, 300)])
def test_size_where_it_is_not(strata: int, height: int, width: int, rows: int) -> None:
    size = rejected(shares([1.0] * strata, height, width, 3.0), rows, 200, 99)
    assert 0.005 <= size <= 0.05 + 4 * np.sqrt(0.05 * 0.95 / 200)


def test_size_with_several_strata_in_a_class() -> None:
    classes = [0, 0, 1, 1]
    plenty = rejected(shares([0.8] * 4, 3, 3, 10.0), 2000, 600, 0, classes)
    sparse = rejected(shares([0.8] * 4, 3, 3, 3.0), 150, 150, 99, classes)
    assert plenty == pytest.approx(0.05, abs=4 * np.sqrt(0.05 * 0.95 / 600))
    assert 0.005 <= sparse <= 0.05 + 4 * np.sqrt(0.05 * 0.95 / 150)


def test_power_when_one_class_alone_depends() -> None:
    assert rejected(shares([1.5, 0, 0], 3, 3, 10.0), 900, 200, 0) > 0.8
    assert rejected(shares([3.0, 0, 0], 3, 3, 3.0), 200, 60, 99) > 0.5
    assert rejected(shares([1.5, 1.5, 0, 0], 3, 3, 10.0), 1200, 200, 0, [0, 0, 1, 1]) > 0.9
