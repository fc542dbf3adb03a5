"""Which attribute explains a dependence: a planted cause is found, a column that only scatters is not praised."""

from collections.abc import Sequence

import numpy as np
import pandas as pd
import pytest
from probed import copied, corrected_bits, probed, words
from scipy.stats import chi2_contingency
from statsmodels.stats.multitest import multipletests

from bnx.explaining import EXPLANATIONS, Explanation
from bnx.pair_tests import PairTests

EXPLAINS, MAY_EXPLAIN, LEAVES = EXPLANATIONS


def caused(rows: int, seed: int, share: float = 0.6, extra: int = 4, scatter: int = 60) -> pd.DataFrame:
    """Draw two effects of one cause, some columns of noise, and one of many levels that has to do with nothing."""
    random = np.random.default_rng(seed)
    cause = random.integers(0, 3, rows)
    columns = {
        "first": words(copied(random, cause, 3, share), "f"),
        "second": words(copied(random, cause, 3, share), "s"),
        "cause": words(cause, "c"),
        "scatter": words(random.integers(0, scatter, rows), "x"),
    }
    columns |= {f"noise{k}": words(random.integers(0, 2, rows), "n") for k in range(extra)}
    return pd.DataFrame(columns | {"kind": words(random.integers(0, 2, rows), "k")})


def ranked(tests: PairTests, a: str = "first", b: str = "second") -> Sequence[Explanation]:
    return tests.explained[a, b]


def explained(frame: pd.DataFrame, **settings: object) -> Sequence[Explanation]:
    return ranked(probed(frame, "kind", ("first", "second"), explain=True, max_levels=100, **settings))  # type: ignore[arg-type]


def test_a_planted_cause_is_ranked_first_and_said_to_explain() -> None:
    """The cause is a true null, so that at most one in twenty draws may say that it leaves a dependence."""
    draws, first, named = 40, 0, 0
    for seed in range(draws):
        found = explained(caused(2000, seed))
        first += found[0].attribute == "cause"
        named += found[0].attribute == "cause" and found[0].words != LEAVES
        assert {one.words for one in found if one.attribute.startswith("noise")} == {LEAVES}
    assert first >= 0.92 * draws
    assert named >= draws * (0.95 - 2 * np.sqrt(0.05 * 0.95 / draws))


def test_with_many_records_the_cause_explains_and_nothing_else_may() -> None:
    found = explained(caused(12_000, 3))
    assert (found[0].attribute, found[0].words) == ("cause", EXPLAINS)
    assert {one.words for one in found[1:]} == {LEAVES}
    assert found[0].bits_upper < 0.005 <= found[1].bits_upper


@pytest.mark.parametrize("rows", [300, 600])
def test_a_column_that_scatters_the_records_is_not_praised(rows: int) -> None:
    """Sixty levels leave two or three records a stratum: nothing is rejected there, because nothing can be seen."""
    for seed in range(10):
        found = explained(caused(rows, seed, share=0.8))
        places = {one.attribute: place for place, one in enumerate(found)}
        scatter = found[places["scatter"]]
        assert scatter.words != EXPLAINS
        assert places["cause"] < places["scatter"]
        assert scatter.strata > 100
        assert scatter.strata_informative < scatter.strata


def test_words_follow_the_tests_and_the_tests_are_adjusted_for_their_number() -> None:
    for seed in range(5):
        found = explained(caused(1500, seed))
        assert len(found) == 6
        p = [one.p_value for one in found]
        assert [one.adjusted_p for one in found] == pytest.approx(multipletests(p, method="holm")[1], rel=1e-9)
        for one in found:
            rejected = one.adjusted_p <= 0.05
            expected = LEAVES if rejected else EXPLAINS if one.bits_upper < 0.005 else MAY_EXPLAIN
            assert one.words == expected
        order = [EXPLANATIONS.index(one.words) for one in found]
        assert order == sorted(order)
        left = [one.bits_corrected for one in found if one.words == LEAVES]
        assert left == sorted(left)


def test_the_bits_left_are_those_given_the_attribute_too() -> None:
    frame = caused(1500, 1)
    sparse = set()
    for one in explained(frame):
        strata = frame.groupby(["kind", one.attribute])
        tables = [pd.crosstab(rows["first"], rows["second"]).to_numpy() for _, rows in strata]
        informative = [table for table in tables if min(table.shape) > 1]
        found = [chi2_contingency(table, correction=False, lambda_="log-likelihood") for table in informative]
        g, df = sum(each.statistic for each in found), sum(each.dof for each in found)
        assert (one.strata, one.strata_informative) == (len(tables), len(informative))
        assert one.bits == pytest.approx(g / (2 * len(frame) * np.log(2)), rel=1e-9)
        assert one.bits_corrected == pytest.approx(corrected_bits(tables), rel=1e-7)
        if abs(one.bits_corrected - (g - df) / (2 * len(frame) * np.log(2))) > 1e-4:
            sparse.add(one.attribute)
    assert sparse == {"cause", "scatter"}, "half the degrees of freedom are wrong where records are scattered"


def test_the_test_given_too_is_the_same_as_with_given() -> None:
    frame = caused(600, 2)
    for one in explained(frame, test="chi2"):
        same = probed(frame, "kind", ("first", "second"), given=(one.attribute,), max_levels=100, test="chi2").results[
            0
        ]
        assert one.p_value == pytest.approx(same.p_value, rel=1e-9)
        assert one.bits == pytest.approx(same.bits, rel=1e-12)


def test_what_is_given_already_is_not_tried_again() -> None:
    tests = probed(caused(1500, 4), "kind", ("first", "second"), given=("noise0",), explain=True, max_levels=100)
    assert {one.attribute for one in ranked(tests)} == {"cause", "scatter", "noise1", "noise2", "noise3"}


def test_only_what_is_rejected_needs_an_explanation() -> None:
    tests = probed(caused(1500, 5, scatter=4), "kind", explain=True)
    rejected = {(one.a, one.b) for one in tests.results if one.adjusted_p <= 0.05}
    assert len(rejected) == 3
    assert set(tests.explained) == rejected
    assert set(probed(caused(1500, 5, scatter=4), "kind").explained) == set()


def test_a_table_of_two_attributes_has_nothing_to_try() -> None:
    frame = caused(500, 6)[["first", "second", "kind"]]
    assert probed(frame, "kind", ("first", "second"), explain=True).explained == {}
