"""What the class explains of a pair: each outcome by a table that shows it, and the order of the rules."""

import numpy as np
import pytest
from simulated import measured

from bnx.independence import p_values
from bnx.verdicts import OUTCOMES, judge, outcomes

# Two classes of 2 x 2 tables.
TABLES = {
    "explained": [[[638, 162], [162, 38]], [[40, 160], [160, 640]]],  # two effects of one cause
    "remains": [[[300, 200], [200, 300]], [[300, 200], [200, 300]]],  # the classes alike
    "strengthened": [[[400, 100], [100, 400]], [[250, 250], [250, 250]]],  # in one class alone
    "appears only given the class": [[[300, 200], [200, 300]], [[200, 300], [300, 200]]],  # opposite in the two
    "not enough data": [[[13, 7], [7, 13]], [[10, 10], [10, 10]]],  # in one class alone, too few records
}


def outcome(table: np.ndarray, alpha: float = 0.05, negligible: float = 0.005) -> str:
    """Judge one table (S, h, w) as a family of its own, given the class and without it."""
    given, marginal = measured(table[None]), measured(table.sum(0)[None, None])
    judged, without = (judge(stats, p_values(stats), alpha=alpha, negligible=negligible) for stats in (given, marginal))
    return OUTCOMES[int(outcomes(given, judged, marginal, without)[0])]


@pytest.mark.parametrize("name", OUTCOMES)
def test_every_outcome(name: str) -> None:
    table = np.array(TABLES[name])
    assert outcome(table) == name
    assert outcome(table.transpose(0, 2, 1)[::-1]) == name


def test_explained_needs_what_could_remain_to_be_negligible() -> None:
    effects = np.array(TABLES["explained"])
    assert outcome(effects, negligible=1e-4) == "not enough data"
    few = np.rint(effects / 10).astype(np.int64)  # the marginal test still rejects
    assert p_values(measured(few.sum(0)[None, None])).p[0] < 1e-6
    assert outcome(few) == "not enough data"


def test_strengthened_needs_the_lower_bound_above_the_bits_without_the_class() -> None:
    # Given the class .13 bit, without it .06; of a tenth of the records the lower bound still says so, of less not.
    one_class = np.array(TABLES["strengthened"])
    assert outcome(one_class // 10) == "strengthened"
    fewer = np.rint(one_class / 14).astype(np.int64)
    given, marginal = measured(fewer[None]), measured(fewer.sum(0)[None, None])
    assert given.bits_corrected[0] > marginal.bits_corrected[0]
    assert max(p_values(stats).p[0] for stats in (given, marginal)) < 0.05
    assert outcome(fewer) == "remains"


def test_the_level_decides_what_is_rejected() -> None:
    table = np.rint(np.array(TABLES["remains"]) / 10).astype(np.int64)  # p .018 given the class, .005 without
    assert outcome(table) == "remains"
    assert outcome(table, alpha=0.01) == "not enough data"
    opposite = np.rint(np.array(TABLES["appears only given the class"]) / 10).astype(np.int64)
    assert outcome(opposite) == "appears only given the class"
    assert outcome(opposite, alpha=0.01) == "not enough data"
