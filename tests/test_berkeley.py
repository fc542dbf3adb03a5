"""A published case looked at closely: admission and gender given department.

Source: Bickel, Hammel & O'Connell 1975, Science 187; the figures of the tests by scipy and statsmodels.
"""

import numpy as np
import pytest
from published import BERKELEY
from scipy.stats import chi2_contingency
from statsmodels.stats.contingency_tables import StratifiedTable

from bnx.domains import Domain
from bnx.pair_details import Pair, PairDetail, compare_classes, look_closely

PAIR = Pair(
    Domain("gender", ("men", "women")),
    Domain("admission", ("admitted", "rejected")),
    (Domain("department", tuple("ABCDEF")),),
    None,
    None,
)


def looked_at(counts: np.ndarray) -> PairDetail:
    """Look at one pair, the only one."""
    return compare_classes([look_closely(PAIR, counts, np.arange(6), "auto", 0.05, 1)], "bh", 0.05)[0]


@pytest.fixture(scope="module")
def berkeley() -> PairDetail:
    return looked_at(np.asarray(BERKELEY, np.int32))


def test_every_department_speaks_for_itself(berkeley: PairDetail) -> None:
    for part, table in zip(berkeley.classes, BERKELEY, strict=True):
        x2 = chi2_contingency(table, correction=False)
        g = chi2_contingency(table, correction=False, lambda_="log-likelihood").statistic
        assert (part.x2, part.p_value, part.df) == (pytest.approx(x2.statistic), pytest.approx(x2.pvalue), 1)
        assert part.bits == pytest.approx(g / (2 * table.sum() * np.log(2)), rel=1e-9)


def test_the_dependence_is_in_department_a_only(berkeley: PairDetail) -> None:
    assert berkeley.differs
    assert berkeley.only_in == "A"
    assert [part.level for part in berkeley.classes if part.adjusted_p <= 0.05] == ["A"]


def test_the_odds_ratio_is_that_of_a_second_library(berkeley: PairDetail) -> None:
    other = StratifiedTable([np.asarray(table) for table in BERKELEY])
    assert berkeley.binary is not None
    assert berkeley.binary.odds_ratio == pytest.approx(other.oddsratio_pooled, rel=1e-9)
    assert berkeley.binary.tarone == pytest.approx(other.test_equal_odds(adjust=True).statistic, rel=1e-9)
    assert round(berkeley.binary.odds_ratio, 7) == 0.9046968


def test_no_other_class_is_named_when_all_are_alike() -> None:
    alike = np.tile(np.array([[[60, 20], [20, 60]]], np.int32), (6, 1, 1))
    found = looked_at(alike)
    assert not found.differs
    assert found.only_in == ""
