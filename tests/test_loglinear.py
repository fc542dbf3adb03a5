"""The fit of homogeneous association by its definition, and walks among tables with the same margins."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from margins import chances, design, fibre
from scipy.optimize import linprog
from scipy.stats import chisquare

from bnx.fibre import walked
from bnx.loglinear import fit_homogeneous

SPARSE = arrays(
    np.int64, st.tuples(st.integers(2, 3), st.integers(2, 3), st.integers(2, 3)), elements=st.integers(0, 3)
)


def test_opposite_empty_corners_leave_nothing_to_test() -> None:
    # Haberman 1974, appendix B: no margin is zero, and yet both empty cells are fitted as zero.
    fit = fit_homogeneous(np.array([[[0, 5], [6, 7]], [[8, 9], [4, 0]]]))
    assert (fit.df, int(fit.free.sum()), fit.converged) == (0, 0, True)


@pytest.mark.parametrize(
    "counts",
    [
        [[[1, 500], [600, 70000]], [[800, 90000], [40000, 1]]],
        [[[50000, 1], [2, 40000]], [[30000, 5], [1, 60000]]],
        [[[500, 1], [2, 400]], [[300, 1], [0, 600]]],
    ],
)
def test_nearly_deterministic_tables_on_which_scaling_creeps_are_fitted(counts: list[list[list[int]]]) -> None:
    fit = fit_homogeneous(np.array(counts))
    assert (fit.df, fit.converged) == (1, True)
    assert 300 < fit.rounds < 350
    ratios = fit.expected[:, 0, 0] * fit.expected[:, 1, 1] / (fit.expected[:, 0, 1] * fit.expected[:, 1, 0])
    assert ratios[0] == pytest.approx(ratios[1], rel=1e-6)
    for axis in range(3):
        np.testing.assert_allclose(fit.expected.sum(axis), np.array(counts).sum(axis), rtol=1e-9)


def test_df_is_counted_up_to_1500_rows_and_columns_of_all_strata_together() -> None:
    """Only those that have free cells count: a stratum with one used row adds none."""
    counts = np.random.default_rng(6).poisson(9.0, (376, 2, 2)) + 1
    assert fit_homogeneous(counts[:375]).df == 374
    more = fit_homogeneous(counts)
    assert (more.df, more.converged, int(more.free.sum())) == (None, True, 4 * 376)
    for axis in range(3):
        np.testing.assert_allclose(more.expected.sum(axis), counts.sum(axis), rtol=1e-9)
    counts[100, 1] = 0
    assert fit_homogeneous(counts).df == 374


def widest(counts: np.ndarray, cells: np.ndarray) -> np.ndarray:
    """Find how far cells, given by a mask (cells,), can vary over all tables of non-negative reals with the same
    margins.
    """
    margins = design(counts.shape).T
    totals = margins @ counts.ravel()
    spread = []
    for cell in np.eye(counts.size)[cells]:
        ends = [linprog(sign * cell, A_eq=margins, b_eq=totals, bounds=(0, None)).fun for sign in (1, -1)]
        spread.append(-ends[0] - ends[1])
    return np.array(spread)


@given(SPARSE)
@settings(max_examples=60, deadline=None)
def test_a_sparse_fit_keeps_margins_and_is_log_linear_where_cells_are_free(counts: np.ndarray) -> None:
    # These conditions define the (extended) maximum-likelihood fit: Haberman 1974.
    fit = fit_homogeneous(counts)
    free = fit.free.ravel()
    assert fit.converged
    for axis in range(3):
        np.testing.assert_allclose(fit.expected.sum(axis), counts.sum(axis), atol=1e-9)
    np.testing.assert_array_equal(fit.expected[~fit.free], counts[~fit.free])
    assert (widest(counts, ~free) < 1e-7).all()
    columns, rank = design(counts.shape)[free], 0
    if free.any():
        rank = int(np.linalg.matrix_rank(columns))
        logs = np.log(fit.expected.ravel()[free])
        np.testing.assert_allclose(columns @ np.linalg.lstsq(columns, logs, rcond=None)[0], logs, atol=1e-6)
    assert fit.df == int(free.sum()) - rank


def test_walks_visit_tables_as_often_as_their_chance() -> None:
    counts = np.array([[[3, 2, 1], [2, 3, 2]], [[1, 2, 3], [2, 2, 2]]])
    tables = fibre(counts)
    visited = np.concatenate(list(walked(counts, fit_homogeneous(counts), 20_000, 5)))
    for axis in range(1, 4):
        assert (visited.sum(axis) == counts.sum(axis - 1)).all()
    keys = {table.tobytes(): number for number, table in enumerate(tables.astype(np.int32))}
    number = np.bincount([keys[table.tobytes()] for table in visited], minlength=len(tables))
    expected = chances(tables) * len(visited)
    common = expected >= 5
    assert common.sum() > 10
    grouped = [np.append(values[common], values[~common].sum() + 1e-9) for values in (number, expected)]
    assert chisquare(*(values / values.sum() * len(visited) for values in grouped)).pvalue > 1e-4
