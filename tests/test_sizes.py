"""Tests reject independent attributes as often as they say, in small and sparse samples too."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest
from simulations.interval_pages import bounds, negligible, power
from simulations.moments import LEVELS, FarOut, far_out, sparse_tables
from simulations.monte_carlo import tails
from simulations.size_pages import monte_carlo_tails
from simulations.size_pages import sizes as sizes_page
from simulations.sizes import CELLS, FAR_OUT, Cell, Sizes, measure, tables_of
from simulations.structure_pages import effects, interaction, second_causes

PAGE = Path(__file__).parent.parent / "docs" / "tests.md"
TABLES = 2000


@pytest.fixture(scope="module")
def sizes() -> list[Sizes]:
    with ThreadPoolExecutor(2) as pool:
        return list(pool.map(lambda cell: measure(cell, TABLES), CELLS))


def test_every_situation_is_there(sizes: list[Sizes]) -> None:
    assert len({one.cell for one in sizes}) == 64
    assert {one.cell.rows for one in sizes} == {50, 100, 500, 5000}
    assert all(sum(one.methods.values()) == pytest.approx(1) for one in sizes)


@pytest.mark.parametrize("test", ["auto", "gate"])
def test_size_is_at_most_what_it_says(sizes: list[Sizes], test: str) -> None:
    over = {one.cell: one.over(test) for one in sizes}
    assert max(over.values()) <= 4, max(over, key=lambda cell: over[cell])
    assert sum(one > 3 for one in over.values()) <= 2, over


def test_size_is_not_far_below_either(sizes: list[Sizes]) -> None:
    low = {one.cell: one.rejected["auto"] for one in sizes if one.cell.rows >= 200 and one.rejected["auto"] < 0.03}
    assert low == {}


def test_plain_tails_break_the_limits_that_auto_keeps(sizes: list[Sizes]) -> None:
    """Otherwise these situations would prove nothing."""
    for test, least in (("chi2", 5), ("g", 20)):
        assert sum(one.over(test) > 4 for one in sizes) >= least


@pytest.mark.simulations
@pytest.mark.parametrize("cell", FAR_OUT, ids=str)
@pytest.mark.parametrize("alpha", [0.01, 0.001])
def test_size_holds_far_out_in_the_tail(cell: Cell, alpha: float) -> None:
    found = measure(cell, 20_000, alpha)
    assert found.over("auto") <= 4
    assert found.over("gate") <= 4


@pytest.fixture(scope="module")
def far() -> list[FarOut]:
    return [far_out(name, table, 100_000, seed=1) for name, table in sparse_tables(1).items()]


def test_three_moments_hold_where_two_do_not(far: list[FarOut]) -> None:
    """Within a factor of 3 down to 1e-4, and 4 standard errors; jumps of a discrete X2 may make p too large."""
    for one in far:
        for k in range(1, len(LEVELS)):
            assert one.ratio("three moments", k) <= 3 + 4 * one.error("three moments", k), one
    off = [one.ratio("two moments", 2) - 4 * one.error("two moments", 2) for one in far]
    assert max(off) > 1.5


def test_monte_carlo_tail_equals_the_chi_square_tail_where_that_is_right() -> None:
    found = tails(5, 25, seed=1)
    assert all(one.smallest > 20 and one.df >= 4 for one in found)
    assert min(one.chi2 for one in found) < 0.01
    for one in found:
        assert abs(one.monte_carlo - one.chi2) <= 4 * one.error + 0.005, one


def test_the_page_holds_what_is_measured() -> None:
    """``python tests/simulations/report.py`` writes it anew."""
    text = PAGE.read_text(encoding="utf-8")
    for part in (monte_carlo_tails, effects, second_causes, interaction, power):
        assert "\n".join(part()) in text, part.__name__


@pytest.mark.simulations
@pytest.mark.parametrize("part", [sizes_page, negligible, bounds])
def test_the_page_holds_what_is_measured_at_length(part: Callable[[], list[str]]) -> None:
    assert "\n".join(part()) in PAGE.read_text(encoding="utf-8")


def test_tables_have_the_rows_and_margins_asked_for() -> None:
    cell = Cell(500, 3, 5, True)
    counts = np.concatenate([*tables_of(cell, 4001, seed=1)])
    assert counts.shape == (4001, 5, 9)
    assert (counts.sum(axis=(1, 2)) == 500).all()
    shares = counts.sum(axis=0).reshape(5, 3, 3) / counts.sum()
    weights = np.array([6, 3, 2]) / 11  # 1, 1/2, 1/3
    expected = (60 / np.arange(1, 6) / 137)[:, None, None] * np.outer(weights, weights)
    np.testing.assert_allclose(shares, expected, rtol=0.05)
