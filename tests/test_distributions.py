"""Few bins that show the shape of a numeric column: how many, where their edges lie, and what they never split."""

import numpy as np
import pytest

from bnx.columns import FINE_LEVELS
from bnx.discretising import fine_cuts
from bnx.distributions import MOST_BINS, chosen_edges, outer_edges

DRAWN = {
    "normal": lambda random: random.normal(10, 2, 5000),
    "exponential": lambda random: random.exponential(3, 5000),
    "heavy": lambda random: np.exp(random.normal(0, 3, 5000)),
    "whole": lambda random: random.integers(1, 180, 5000).astype(float),
    "piled": lambda random: np.where(random.random(5000) < 0.7, 0.0, random.gamma(2, 50, 5000)),
    "huge": lambda random: random.normal(0, 4e307, 5000),
}


def fine_of(kind: str) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Draw numbers: sorted different values, their rows, fine cut points, rows of fine bins."""
    values, counts = np.unique(DRAWN[kind](np.random.default_rng(6)), return_counts=True)
    fine = fine_cuts(values, counts, FINE_LEVELS)
    rows = np.bincount(np.searchsorted(fine, values), counts, len(fine) + 1)
    return values, counts, fine, rows


@pytest.mark.parametrize("kind", DRAWN)
@pytest.mark.parametrize("cut", [0, 1, 5, 30, 60])
def test_few_bins_hold_every_cut_point(kind: str, cut: int) -> None:
    values, _, fine, rows = fine_of(kind)
    cuts = fine[np.linspace(0, len(fine) - 1, cut).astype(int)] if cut else fine[:0]
    chosen = chosen_edges(fine, rows, cuts, outer_edges(fine, values[0], values[-1], len(values)))
    assert (np.diff(chosen) > 0).all()
    assert set(cuts) <= set(fine[chosen])
    assert len(chosen) + 1 <= max(MOST_BINS, len(cuts) + 1)


@pytest.mark.parametrize("kind", ["normal", "exponential", "whole"])
def test_bins_within_the_reach_of_most_rows_are_about_as_wide(kind: str) -> None:
    values, _, fine, rows = fine_of(kind)
    ends = outer_edges(fine, values[0], values[-1], len(values))
    edges = fine[chosen_edges(fine, rows, fine[:0], ends)]
    inner = (edges > np.quantile(values, 0.1)) & (edges < np.quantile(values, 0.9))
    widths = np.diff(edges[inner])
    assert len(widths) >= 12
    assert widths.max() <= 2.5 * np.median(widths)


def test_few_values_keep_a_bin_each_as_wide_on_both_sides() -> None:
    fine = np.array([1.5, 2.5, 3.5])
    assert outer_edges(fine, 1.0, 4.0, 4) == (0.5, 4.5)
    assert outer_edges(fine, 0.7, 4.9, 400) == (0.7, 4.9)
    assert chosen_edges(fine, np.array([3, 1, 4, 1]), fine[:1], (0.5, 4.5)).tolist() == [0, 1, 2]


def test_outer_edges_stay_finite() -> None:
    fine = np.array([0.0])
    low, high = outer_edges(fine, -1.7e308, 1.7e308, 2)
    assert (low, high) == (-1.7e308, 1.7e308)
