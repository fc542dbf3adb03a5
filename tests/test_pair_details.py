"""One pair looked at closely, against pandas' crosstabs, scipy and statsmodels stratum by stratum."""

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from probed import CLASSES, corrected_bits, planted, probed
from scipy.stats import chi2_contingency
from scipy.stats.contingency import association
from statsmodels.stats.contingency_tables import StratifiedTable, Table
from statsmodels.stats.multitest import multipletests

from bnx.domains import Domain
from bnx.ordered import generalised_cmh
from bnx.pair_details import Pair, PairDetail, compare_classes, look_closely
from bnx.pair_tests import PairTests
from bnx.plain import finite

DEMO = Path(__file__).parent.parent / "datasets" / "cold_chain.csv"


def demo() -> pd.DataFrame:
    return pd.read_csv(DEMO, dtype=str, keep_default_na=False).replace("", "(blank)")


def of(tests: PairTests, a: str, b: str) -> PairDetail:
    return tests.details[a, b]


def strata_of(
    tests: PairTests, frame: pd.DataFrame, a: str, b: str
) -> Iterator[tuple[dict[str, object], pd.DataFrame]]:
    """Yield every stratum of the JSON beside the crosstab of its records."""
    entry = next(one for one in tests.to_dict(True)["tests"] if (one["a"], one["b"]) == (a, b))
    assert entry["strata"] == len(entry["strata_tables"])
    for table in entry["strata_tables"]:
        rows = frame[(frame[list(table["of"])] == pd.Series(table["of"])).all(axis=1)]
        yield table, pd.crosstab(rows[a], rows[b])


@pytest.mark.parametrize("given", [(), ("precool",), ("precool", "pack_type")])
def test_strata_equal_crosstabs_with_the_residuals_of_statsmodels(given: tuple[str, ...]) -> None:
    frame = demo()
    tests = probed(frame.replace("(blank)", ""), "arrival", ("route", "door_alarm"), given=given)
    seen = 0
    for table, counts in strata_of(tests, frame, "route", "door_alarm"):
        seen += table["rows"]
        full = counts.reindex(index=table["a_levels"], columns=table["b_levels"], fill_value=0)
        assert table["observed"] == full.to_numpy().tolist()
        expected, residuals = (pd.DataFrame(table[key], full.index, full.columns) for key in ("expected", "residuals"))
        whole = Table(counts.to_numpy(float), shift_zeros=False)
        assert np.allclose(expected.loc[counts.index, counts.columns], whole.fittedvalues, rtol=1e-12)
        if min(counts.shape) > 1:
            found = residuals.loc[counts.index, counts.columns].to_numpy(float)
            assert np.allclose(found, whole.standardized_resids, rtol=1e-9, atol=1e-12)
            assert table["cramers_v"] == pytest.approx(association(counts.to_numpy(), "cramer"), rel=1e-9)
    assert seen == len(frame)


def test_classes_equal_scipy_and_are_adjusted_by_holm() -> None:
    frame = demo()
    parts = of(probed(frame, "arrival", ("season", "precool")), "season", "precool").classes
    assert [part.level for part in parts] == sorted(set(frame["arrival"]))
    for part in parts:
        rows = frame[frame["arrival"] == part.level]
        counts = pd.crosstab(rows["season"], rows["precool"]).to_numpy()
        found = chi2_contingency(counts, correction=False)
        assert (part.rows, part.df) == (len(rows), found.dof)
        assert part.x2 == pytest.approx(found.statistic, rel=1e-9)
        assert part.cramers_v == pytest.approx(association(counts, "cramer"), rel=1e-9)
        g = chi2_contingency(counts, correction=False, lambda_="log-likelihood").statistic
        assert part.bits == pytest.approx(g / (2 * len(rows) * np.log(2)), rel=1e-9)
        assert part.bits_corrected == pytest.approx(corrected_bits([counts]), rel=1e-7)
        if part.method == "chi2-tail":
            assert part.p_value == pytest.approx(found.pvalue, rel=1e-9)
    p = [part.p_value for part in parts]
    assert [part.adjusted_p for part in parts] == pytest.approx(multipletests(p, method="holm")[1], rel=1e-9)


def test_the_bits_of_the_classes_add_up_to_those_of_the_pair() -> None:
    tests = probed(demo(), "arrival", ("season", "precool"), given=("power_cut",))
    parts = of(tests, "season", "precool").classes
    assert sum(part.rows * part.bits for part in parts) / 6000 == pytest.approx(tests.results[0].bits, rel=1e-9)
    assert sum(part.df for part in parts) == tests.results[0].df
    assert sum(part.x2 for part in parts) == pytest.approx(tests.results[0].x2, rel=1e-9)


def test_odds_of_a_binary_pair_equal_statsmodels() -> None:
    frame = planted(900, 3, {"sound": 0.3, "worn": 0.4, "broken": 0.2}, levels=2)
    detail = of(probed(frame, "kind", ("left", "right")), "left", "right")
    tables = [pd.crosstab(rows["left"], rows["right"]).to_numpy(float) for _, rows in frame.groupby("kind")]
    known = StratifiedTable(tables)
    odds = detail.binary
    assert odds is not None
    assert odds.odds_ratio == pytest.approx(known.oddsratio_pooled, rel=1e-9)
    assert (odds.odds_low, odds.odds_high) == pytest.approx(known.oddsratio_pooled_confint(), rel=1e-9)
    assert (odds.cmh, odds.cmh_p) == pytest.approx(
        [known.test_null_odds().statistic, known.test_null_odds().pvalue], rel=1e-9
    )
    equal = known.test_equal_odds(adjust=True)
    assert (odds.tarone, odds.tarone_p) == pytest.approx([equal.statistic, equal.pvalue], rel=1e-9)
    ratio = known.oddsratio_pooled
    assert odds.yule_q.q == pytest.approx((ratio - 1) / (ratio + 1), rel=1e-9)
    for stratum in detail.strata:
        counts = stratum.observed.astype(float)
        own = counts[0, 0] * counts[1, 1] / (counts[0, 1] * counts[1, 0])
        assert stratum.yule is not None
        assert stratum.yule.q == pytest.approx((own - 1) / (own + 1), rel=1e-9)
    wide = of(probed(planted(300, 1, {}), "kind", ("left", "right")), "left", "right")
    assert wide.binary is None
    assert {stratum.yule for stratum in wide.strata} == {None}


@pytest.mark.parametrize("where", CLASSES)
def test_a_dependence_in_one_class_only_is_named(where: str) -> None:
    tests = probed(planted(900, 7, {where: 0.7}), "kind", ("left", "right"))
    detail = of(tests, "left", "right")
    assert (detail.differs, detail.only_in) == (True, where)
    assert tests.to_dict()["tests"][0]["only_in"] == where


@pytest.mark.parametrize("share", [0.0, 0.5])
def test_a_dependence_in_all_classes_or_none_is_not_named(share: float) -> None:
    detail = of(probed(planted(900, 7, dict.fromkeys(CLASSES, share)), "kind", ("left", "right")), "left", "right")
    assert (detail.differs, detail.only_in) == (False, "")
    assert [part.adjusted_p < 0.05 for part in detail.classes] == [share > 0] * 3


def test_two_of_three_classes_differ_but_neither_is_named_alone() -> None:
    detail = of(probed(planted(900, 7, {"sound": 0.7, "worn": 0.7}), "kind", ("left", "right")), "left", "right")
    assert (detail.differs, detail.only_in) == (True, "")


def test_a_further_given_attribute_does_not_hide_the_class_that_depends() -> None:
    """Levels of what is given change the margins of the pair, not its dependence."""
    frame = planted(2400, 9, {"worn": 0.6})
    random = np.random.default_rng(1)
    frame["place"] = np.where(random.random(2400) < 0.7, frame["left"], "l0")
    detail = of(probed(frame, "kind", ("left", "right"), given=("other",)), "left", "right")
    assert len(detail.strata) == 6
    assert detail.only_in == "worn"
    probed_again = of(probed(frame, "kind", ("right", "other"), given=("place",)), "right", "other")
    assert probed_again.only_in == ""


def closely(counts: np.ndarray, alpha: float = 0.05) -> PairDetail:
    """Look at counts (classes, r, c) as if every class were one stratum."""
    return looked_at(counts, (), alpha)


def looked_at(counts: np.ndarray, given: tuple[int, ...], alpha: float = 0.05) -> PairDetail:
    """Look at counts (S, r, c) of all combinations of the class (outermost) and given attributes of so many levels."""
    strata, height, width = counts.shape
    sizes = {"a": height, "b": width, "k": strata // int(np.prod(given, dtype=int))}
    sizes |= {f"z{k}": size for k, size in enumerate(given)}
    a, b, *others = (Domain(name, tuple(f"{name}{k}" for k in range(size))) for name, size in sizes.items())
    used = np.flatnonzero(counts.any(axis=(1, 2)))
    pair = Pair(a, b, tuple(others), None, None)
    detail = look_closely(pair, counts[used].astype(np.int32), used, "auto", alpha, 1)
    assert (detail.differs, detail.only_in) == (False, ""), "left open until all pairs have been looked at"
    return compare_classes([detail], "bh", alpha)[0]


def test_a_weak_common_dependence_is_rarely_called_one_of_a_single_class() -> None:
    """Only a test of equal patterns may say so: that one class happens to reject is no reason."""
    random = np.random.default_rng(2)
    shares = np.full((3, 3), 1 / 9) + (np.eye(3) - 1 / 3) / 18
    draws, named, lone = 300, 0, 0
    for _ in range(draws):
        detail = closely(random.multinomial(150, shares.ravel(), size=3).reshape(3, 3, 3))
        named += detail.only_in != ""
        lone += sum(part.adjusted_p <= 0.05 for part in detail.classes) == 1
    assert lone > 0.2 * draws, "in many draws exactly one class rejects"
    assert named <= draws * (0.05 + 2 * np.sqrt(0.05 * 0.95 / draws))


def test_the_level_of_the_classes_tests_is_the_one_asked_for() -> None:
    """Of 2 against 2 records each of the two most extreme tables has the probability 1/6: too much for a level of .05,
    so that the class leaves the family, but not for one of .2.
    """
    counts = np.array([[[2, 0], [0, 2]], [[0, 0], [0, 0]]])
    assert [part.method for part in closely(counts, 0.05).classes] == ["none", "none"]
    assert closely(counts, 0.2).classes[0].p_value == pytest.approx(1 / 3)


def test_what_carries_nothing_has_no_figures() -> None:
    counts = np.array([[[5, 5], [0, 0]], [[1, 0], [0, 0]], [[0, 0], [0, 0]]])
    detail = closely(counts)
    assert [stratum.of for stratum in detail.strata] == [("k0",), ("k1",)]
    assert [(part.rows, part.df, part.bits, part.method) for part in detail.classes] == [
        (10, 0, 0.0, "none"),
        (1, 0, 0.0, "none"),
        (0, 0, 0.0, "none"),
    ]
    assert np.isnan(detail.same.p)
    assert (detail.differs, detail.only_in) == (False, "")
    plain = finite(detail.to_dict(True))
    assert plain["strata_tables"][0]["expected"] == [[5.0, 5.0], [None, None]]
    assert plain["strata_tables"][0]["residuals"] == [[None, None], [None, None]]
    assert plain["classes"][2]["cramers_v"] is None


def test_strata_tables_come_only_when_asked_for() -> None:
    detail = closely(np.array([[[4, 2], [1, 5]], [[3, 3], [2, 2]]]))
    assert set(detail.to_dict(True)) - set(detail.to_dict(False)) == {"strata_tables"}


def test_general_association_is_left_out_where_it_takes_too_many_cells() -> None:
    """Its covariance matrix has the square of (rows - 1) (columns - 1) entries."""
    random = np.random.default_rng(5)
    for size, there in ((21, True), (22, False)):
        counts = random.poisson(1.0, (2, size, 21))
        trend = closely(counts).trend
        assert (trend is not None) == there
        if trend is not None:
            assert (trend.kind, trend.df) == ("general", 400)
            assert trend.statistic == generalised_cmh(counts).statistic


def test_strata_without_records_are_not_handed_over_and_change_nothing() -> None:
    """Class outermost, then the given attributes in their order, the last one fastest."""
    random = np.random.default_rng(3)
    full = random.poisson(3.0, (3, 2, 4, 3, 3))
    full[0, 1], full[1, :, 2], full[2] = 0, 0, 0
    detail = looked_at(full.reshape(24, 3, 3), (2, 4))
    used = [one for one in np.ndindex(3, 2, 4) if full[one].any()]
    assert len(used) == 10
    assert [stratum.of for stratum in detail.strata] == [(f"k{k}", f"z0{i}", f"z1{j}") for k, i, j in used]
    for stratum, place in zip(detail.strata, used, strict=True):
        assert (stratum.observed == full[place]).all()
    assert [part.level for part in detail.classes] == ["k0", "k1", "k2"]
    assert [part.rows for part in detail.classes] == full.sum(axis=(1, 2, 3, 4)).tolist()
    for part, one in zip(detail.classes[:2], full, strict=False):
        tables = [one[place] for place in np.ndindex(2, 4) if one[place].any()]
        assert part.df == 4 * len(tables)
        assert part.bits_corrected == pytest.approx(corrected_bits(tables), rel=1e-7)
    assert (detail.classes[2].df, detail.classes[2].bits_corrected) == (0, 0.0)


@pytest.mark.parametrize("where", [0, 1, 2])
def test_the_class_of_a_stratum_is_known_by_its_number(where: int) -> None:
    """Only two levels of what is given occur in each class, not the same ones: numbers, not places, tell the class."""
    even, bound = np.full((2, 2), 20), np.array([[35, 5], [5, 35]])
    counts = np.zeros((3, 5, 2, 2), int)
    for k, levels in enumerate(((0, 4), (1, 2), (3, 4))):
        counts[k, levels] = bound if k == where else even
    detail = looked_at(counts.reshape(15, 2, 2), (5,))
    assert detail.only_in == f"k{where}"
    assert [part.rows for part in detail.classes] == [160, 160, 160]
    assert [part.adjusted_p < 0.05 for part in detail.classes] == [k == where for k in range(3)]


@pytest.mark.parametrize(("adjust", "name"), [("bh", "fdr_bh"), ("holm", "holm"), ("by", "fdr_by")])
def test_whether_classes_differ_is_adjusted_for_the_pairs_looked_at(adjust: str, name: str) -> None:
    frame = planted(900, 11, {"worn": 0.25})
    frame["third"] = np.where(np.random.default_rng(2).random(900) < 0.8, frame["right"], frame["left"])
    tests = probed(frame, "kind", adjust=adjust)
    named = probed(frame, "kind", ("left", "right", "third", "other"), adjust=adjust)
    for found in (tests, named):
        details = list(found.details.values())
        p = [detail.same.p for detail in details]
        known = multipletests(p, method=name)[1]
        assert [detail.same_adjusted_p for detail in details] == pytest.approx(known, rel=1e-9)
        assert [detail.differs for detail in details] == [one <= 0.05 for one in known]
        for detail, one in zip(details, known, strict=True):
            rejecting = [part.level for part in detail.classes if part.adjusted_p <= 0.05]
            assert detail.only_in == (rejecting[0] if one <= 0.05 and len(rejecting) == 1 else "")
    assert len(named.details) == 6
    assert {detail.differs for detail in named.details.values()} == {True, False}


def test_the_odds_ratio_given_nothing_is_that_of_all_records() -> None:
    frame = planted(900, 3, {"sound": 0.3, "worn": 0.4, "broken": 0.2}, levels=2)
    detail = of(probed(frame, "kind", ("left", "right"), given=("other",)), "left", "right")
    (a, b), (c, d) = pd.crosstab(frame["left"], frame["right"]).to_numpy()
    assert detail.pooled_odds == pytest.approx(a * d / (b * c), rel=1e-12)
    odds = detail.to_dict(False)["odds"]
    assert odds["odds_ratio_given_nothing"] == detail.pooled_odds
    assert closely(np.array([[[3, 0], [0, 4]]])).pooled_odds == np.inf
    assert closely(np.array([[[0, 3], [4, 0]]])).pooled_odds == 0.0
    assert np.isnan(closely(np.array([[[3, 0], [4, 0]]])).pooled_odds)
    assert np.isnan(closely(np.ones((1, 3, 2), int)).pooled_odds)
