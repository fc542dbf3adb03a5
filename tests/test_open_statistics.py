"""Statistics of all pairs on open tables against scipy, stratum by stratum."""

import tempfile
from pathlib import Path

import numpy as np
import pytest
from builders import silent
from opentables import TABLES, load
from scipy.stats import chi2_contingency
from tablestore import TableUnavailable

from bnx.dependence import measure
from bnx.engines import start_local
from bnx.independence import Statistics
from bnx.reading import open_source
from bnx.recipe import Recipe
from bnx.trainings import make_trainings

MOST_PAIRS = 150


def by_scipy(a: np.ndarray, b: np.ndarray, target: np.ndarray) -> tuple[float, float, int]:
    """X2, G and degrees of freedom summed over the classes, empty rows and columns dropped in each."""
    x2, g, df = 0.0, 0.0, 0
    for c in np.unique(target):
        _, left = np.unique(a[target == c], return_inverse=True)
        _, right = np.unique(b[target == c], return_inverse=True)
        table = np.zeros((left.max() + 1, right.max() + 1))
        np.add.at(table, (left, right), 1)
        if min(table.shape) > 1:
            found = chi2_contingency(table, correction=False)
            x2, df = x2 + found.statistic, df + found.dof
            g += chi2_contingency(table, correction=False, lambda_="log-likelihood").statistic
    return x2, g, df


def measured(name: str) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, Statistics]:
    """Pairs of attributes, their codes in cut points of all rows, the class, and what bnx measured."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "table.csv"
        load(name).to_csv(path, index=False)
        coded = Recipe(TABLES[name].target, keep=("all",)).code(open_source(str(path)))
    engine = start_local(coded.table, np.arange(len(coded.table.target)) % 7, 7, 2, silent)
    training = make_trainings(engine, coded.table.schema, {(): np.ones(7, bool)}, "frequency:5", 50)[0]
    _, pairs = measure(engine, [training])[0]
    codes = np.array([training.view.recode[i, row] for i, row in enumerate(engine.codes)])
    return pairs.left, pairs.right, codes, engine.target, Statistics.of(pairs.statistics)


@pytest.mark.parametrize(
    "name", [pytest.param(name, marks=[pytest.mark.tables] * TABLES[name].fetched) for name in TABLES]
)
def test_pairs_equal_scipy_summed_over_classes(name: str) -> None:
    try:
        left, right, codes, target, statistics = measured(name)
    except TableUnavailable as error:
        pytest.skip(str(error))
    assert statistics.g == pytest.approx(2 * statistics.rows * statistics.bits * np.log(2), rel=1e-12, abs=1e-9)
    chosen = np.random.default_rng(1).permutation(len(left))[:MOST_PAIRS]
    for p in chosen:
        x2, g, df = by_scipy(codes[left[p]], codes[right[p]], target)
        assert statistics.x2[p] == pytest.approx(x2, rel=1e-9, abs=1e-9)
        assert statistics.g[p] == pytest.approx(g, rel=1e-9, abs=1e-9)
        assert statistics.df[p] == df
