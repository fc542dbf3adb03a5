"""Tests of chosen pairs on whole tables: against a second library, stratum by stratum."""

from collections.abc import Sequence
from itertools import combinations
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from commandline import NAMES, small_rows, small_table
from probed import corrected_bits, planted, words
from probed import probed as frame_probed
from scipy.stats import chi2, chi2_contingency, false_discovery_control
from statsmodels.stats.multitest import multipletests
from tablefiles import parquet_of, source_of

from bnx.errors import DataError
from bnx.pair_tests import Asked, PairTests, run_pair_tests
from bnx.plain import finite
from bnx.reading import open_source
from bnx.recipe import Recipe
from bnx.tested_text import written

DEMO = Path(__file__).parent.parent / "datasets" / "cold_chain.csv"
CATEGORICAL = ("route", "season", "carrier", "reefer_age", "precool", "door_alarm", "dock_wait")


def demo() -> pd.DataFrame:
    return pd.read_csv(DEMO, dtype=str, keep_default_na=False)


def probed(
    names: Sequence[str],
    given: Sequence[str] = (),
    everything: bool = False,
    path: str = str(DEMO),
    close: int | None = None,
    **settings: object,
) -> PairTests:
    target = str(settings.pop("target", "arrival"))
    recipe = Recipe(target, **{"bins": "frequency:5"} | settings)  # type: ignore[arg-type]
    asked = Asked(tuple(names), tuple(given), everything, close=close)
    return run_pair_tests(open_source(path), recipe, asked, 1)


def tables_of(frame: pd.DataFrame, a: str, b: str, by: Sequence[str]) -> list[np.ndarray]:
    """Count a pair by pandas in every stratum that holds records, without its empty rows and columns."""
    cells = frame.groupby([*by, a, b]).size().unstack(b, fill_value=0)
    parts = [part.to_numpy() for _, part in cells.groupby(level=list(range(len(by))))] if by else [cells.to_numpy()]
    return [part[:, part.any(axis=0)] for part in parts]


def summed(frame: pd.DataFrame, a: str, b: str, by: Sequence[str]) -> dict[str, float]:
    """Sum scipy's statistics over the strata."""
    total = {"x2": 0.0, "g": 0.0, "df": 0, "strata": 0, "informative": 0, "least": np.inf}
    for counts in tables_of(frame, a, b, by):
        total["strata"] += 1
        if min(counts.shape) < 2:
            continue
        found = chi2_contingency(counts, correction=False)
        total["informative"] += 1
        total["x2"] += found.statistic
        total["g"] += chi2_contingency(counts, correction=False, lambda_="log-likelihood").statistic
        total["df"] += found.dof
        total["least"] = min(total["least"], found.expected_freq.min())
    return total


@pytest.mark.parametrize("given", [(), ("power_cut",), ("power_cut", "pack_type")])
def test_pairs_equal_scipy_summed_over_the_strata(given: tuple[str, ...]) -> None:
    frame = demo()
    others = {*frame.columns} - {*CATEGORICAL, *given, "arrival"}
    found = probed((), given, everything=True, close=0, ignore=tuple(others))
    assert {frozenset((one.a, one.b)) for one in found.results} == {
        frozenset(pair) for pair in combinations(CATEGORICAL, 2)
    }
    for result in found.results:
        expected = summed(frame, result.a, result.b, ("arrival", *given))
        counted = (result.df, result.strata, result.strata_informative)
        assert counted == (expected["df"], expected["strata"], expected["informative"])
        assert result.x2 == pytest.approx(expected["x2"], rel=1e-9)
        assert result.g == pytest.approx(expected["g"], rel=1e-9)
        assert result.bits == pytest.approx(expected["g"] / (2 * len(frame) * np.log(2)), rel=1e-9)
        assert result.min_expected == pytest.approx(expected["least"], rel=1e-9)
        tables = tables_of(frame, result.a, result.b, ("arrival", *given))
        assert result.bits_corrected == pytest.approx(corrected_bits(tables), rel=1e-7, abs=1e-12)
        whole = tables_of(frame, result.a, result.b, ())
        marginal = chi2_contingency(whole[0], correction=False, lambda_="log-likelihood").statistic
        assert result.marginal_bits == pytest.approx(marginal / (2 * len(frame) * np.log(2)), rel=1e-9)
        assert result.marginal_bits_corrected == pytest.approx(corrected_bits(whole), rel=1e-9, abs=1e-12)


@pytest.mark.parametrize(("test", "statistic"), [("chi2", "x2"), ("g", "g")])
def test_tails_are_those_of_chi_square(test: str, statistic: str) -> None:
    for result in probed(CATEGORICAL, test=test).results:
        assert result.statistic == getattr(result, statistic)
        assert result.p_value == pytest.approx(chi2.sf(result.statistic, result.df), rel=1e-9)
        assert result.method == {"chi2": "chi2-tail", "g": "g-tail"}[test]


@pytest.mark.parametrize(("adjust", "name"), [("bh", "fdr_bh"), ("by", "fdr_by"), ("holm", "holm")])
def test_pairs_are_adjusted_as_one_family(adjust: str, name: str) -> None:
    found = probed((), everything=True, adjust=adjust)
    p = np.array([one.p_value for one in found.results])
    assert len(p) == 66
    assert [one.adjusted_p for one in found.results] == pytest.approx(multipletests(p, method=name)[1], rel=1e-9)
    if adjust != "holm":
        assert [one.adjusted_p for one in found.results] == pytest.approx(false_discovery_control(p, method=adjust))


def test_numeric_attributes_are_cut_into_equal_shares() -> None:
    frame = demo()
    result = probed(("route", "setpoint_dev"), bins="auto").results[0]
    same = probed(("route", "setpoint_dev"), bins="frequency:5").results[0]
    assert result.to_dict() == same.to_dict()
    assert probed(("route", "setpoint_dev"), bins="frequency:3").results[0].df < result.df
    blank = frame["setpoint_dev"] == ""
    values = pd.to_numeric(frame["setpoint_dev"], errors="coerce")
    shares = np.histogram(values.dropna(), np.quantile(values.dropna(), np.linspace(0, 1, 6)))[0] / len(values)
    assert result.df == sum(
        3 * (4 + int((blank & (frame["arrival"] == level)).any())) for level in sorted(set(frame["arrival"]))
    )
    assert shares == pytest.approx(np.full(5, 0.2 * (~blank).mean()), abs=0.01)


def test_given_attributes_make_a_copied_dependence_vanish(tmp_path: Path) -> None:
    """A chain first -> second -> third: the ends depend given the class, and no more given the middle."""
    random = np.random.default_rng(11)
    first = random.integers(0, 3, 6000)
    second = np.where(random.random(6000) < 0.7, first, random.integers(0, 3, 6000))
    third = np.where(random.random(6000) < 0.7, second, random.integers(0, 3, 6000))
    columns = {"first": first, "second": second, "third": third, "kind": random.integers(0, 2, 6000)}
    path = source_of(tmp_path, {name: [f"v{k}" for k in codes] for name, codes in columns.items()}).files[0]
    ends = probed(("first", "third"), path=str(path), target="kind").results[0]
    middle = probed(("first", "third"), ("second",), path=str(path), target="kind").results[0]
    assert (ends.verdict, middle.verdict) == ("dependent", "negligible")


def test_strata_without_a_choice_are_counted_but_carry_nothing(tmp_path: Path) -> None:
    columns = {
        "a": list("xxyyxxyyxxxx"),
        "b": list("uvuvuvuvuvuv"),
        "c": list("ppppqqqqrrrr"),
        "kind": list("mnmnmnmnmnmn"),
    }
    path = source_of(tmp_path, columns).files[0]
    by_class = probed(("a", "c"), path=str(path), target="kind", keep=("all",))
    first = by_class.results[0]
    assert (first.strata, first.strata_informative, by_class.rows) == (2, 2, 12)
    further = probed(("a", "b"), ("c",), path=str(path), target="kind", keep=("all",))
    second = further.results[0]
    assert (second.strata, second.strata_informative) == (6, 0)
    assert (second.method, second.verdict, second.outcome) == ("none", "not enough data", "not enough data")
    assert "0 of 6 strata informative" in written(further)


def test_results_go_by_bits_less_chance() -> None:
    """Of two pairs with as many bits the one with fewer levels stands first, as chance explains less of them."""
    found = probed((), everything=True)
    bits = [one.bits_corrected for one in found.results]
    assert bits == sorted(bits, reverse=True)
    assert [one.bits for one in found.results] != sorted((one.bits for one in found.results), reverse=True)
    document = found.to_dict()
    assert [test["bits_corrected"] for test in document["tests"]] == bits
    assert (document["class"], document["given"], document["rows"]) == ("arrival", [], 6000)


def test_all_pairs_are_those_of_the_attributes_not_given() -> None:
    found = probed((), ("route", "season"), everything=True, close=0)
    rest = {*demo().columns} - {"shipment_id", "arrival", "route", "season"}
    assert {frozenset((one.a, one.b)) for one in found.results} == {frozenset(p) for p in combinations(rest, 2)}


def test_all_looks_closely_at_the_first_of_what_is_rejected_and_names_at_everything() -> None:
    found = probed((), everything=True)
    rejected = [(one.a, one.b) for one in found.results if one.adjusted_p <= 0.05]
    assert 10 < len(rejected) < len(found.results)
    assert set(found.details) == set(rejected[:10])
    assert any(note.startswith(f"10 of {len(rejected)} rejected pairs looked at closely") for note in found.warnings)
    asked = Asked(everything=True, close=100)
    whole = run_pair_tests(open_source(str(DEMO)), Recipe("arrival", bins="frequency:5"), asked, 1)
    assert set(whole.details) == set(rejected)
    assert not any("looked at closely" in note for note in whole.warnings)
    named = probed(CATEGORICAL)
    assert set(named.details) == {(one.a, one.b) for one in named.results}


def test_blanks_that_coincide_are_told_from_dependence() -> None:
    """Two columns blank together but otherwise independent: the bits where neither is blank are next to none."""
    random = np.random.default_rng(5)
    empty = random.random(3000) < 0.3
    columns = [np.where(empty, "", [f"{name}{k}" for k in random.integers(0, 3, 3000)]) for name in "ab"]
    frame = pd.DataFrame({"a": columns[0], "b": columns[1], "kind": [f"k{k}" for k in random.integers(0, 2, 3000)]})
    result = frame_probed(frame, "kind", ("a", "b")).results[0]
    both = frame[(frame["a"] != "") & (frame["b"] != "")]
    expected = summed(both, "a", "b", ("kind",))
    corrected = (expected["g"] - expected["df"]) / (2 * len(both) * np.log(2))
    assert result.verdict == "dependent"
    assert result.bits_without_blanks == pytest.approx(corrected, rel=1e-9)
    assert result.bits_without_blanks < 0.05 * result.bits_corrected
    full = frame_probed(both, "kind", ("a", "b")).results[0]
    assert np.isnan(full.bits_without_blanks)


@pytest.mark.parametrize("test", ["auto", "monte-carlo"])
def test_results_do_not_depend_on_threads_or_on_other_pairs(test: str) -> None:
    """Random tables are seeded by the pair's own counts; 60 rows of 4 x 4 levels do not carry a chi-square tail."""
    frame = planted(60, 2, {"sound": 0.4}, levels=4)
    one, two = (frame_probed(frame, "kind", jobs=jobs, test=test) for jobs in (1, 2))
    assert finite(one.to_dict(True)) == finite(two.to_dict(True))
    pair = frame_probed(frame, "kind", ("left", "right"), test=test).results[0]
    among = next(each for each in one.results if {each.a, each.b} == {"left", "right"})
    assert pair.method == "monte-carlo"
    assert (pair.x2, pair.bits, pair.min_expected) == (among.x2, among.bits, among.min_expected)


def test_rows_dropped_with_their_blanks_are_not_tested() -> None:
    used = sum(row[3] != "" for row in small_rows())
    found = probed(("dock", "alarm"), path=small_table(), target="grade", missing="drop", ignore=("gap",))
    assert (found.rows, found.warnings[0]) == (used, f"{240 - used} rows of 240 dropped because a cell is blank")


def test_a_parquet_table_gives_what_its_csv_gives(tmp_path: Path) -> None:
    columns = {name: [row[k] for row in small_rows()] for k, name in enumerate(NAMES) if name != "gap"}
    path = parquet_of(tmp_path, columns).files[0]
    from_csv = probed(("dock", "lane"), ("site",), path=small_table(), target="grade")
    from_parquet = probed(("dock", "lane"), ("site",), path=str(path), target="grade")
    assert from_parquet.to_dict()["tests"] == from_csv.to_dict()["tests"]


def test_a_given_attribute_of_fifty_levels_for_two_of_fifty_each() -> None:
    """100 strata of 2,500 cells and 20 records each, with thousands of rows and columns together."""
    random = np.random.default_rng(1)
    sizes = {"a": 50, "b": 50, "z": 50, "k": 2}
    frame = pd.DataFrame({name: words(random.integers(0, size, 2000), name) for name, size in sizes.items()})
    found = frame_probed(frame, "k", ("a", "b"), given=("z",))
    result, expected = found.results[0], summed(frame, "a", "b", ("k", "z"))
    assert (result.df, result.strata, result.strata_informative) == (expected["df"], 100, 100)
    assert result.x2 == pytest.approx(expected["x2"], rel=1e-9)
    assert (result.verdict, result.method, result.min_expected < 0.1) == ("not enough data", "monte-carlo", True)
    tables = tables_of(frame, "a", "b", ("k", "z"))
    assert result.bits_corrected == pytest.approx(corrected_bits(tables), rel=1e-6)
    assert result.bits > 3.5
    assert abs(result.bits_corrected) < 0.05
    detail = found.details["a", "b"]
    assert len(detail.strata) == 100
    assert sum(stratum.rows for stratum in detail.strata) == 2000
    assert (detail.same.df, detail.differs) == (None, False)


def test_the_class_and_columns_left_out_are_no_attributes() -> None:
    with pytest.raises(
        DataError, match=r"^'arrival' is the class, which is taken as given in every test; leave it out$"
    ):
        probed(("route", "arrival"))
    with pytest.raises(DataError, match=r"^'shipment_id' is left out of the table: a different value in every row; "):
        probed(("route", "shipment_id"))


def test_bits_without_blanks_are_corrected_as_the_bits_they_are_compared_with() -> None:
    """Forty levels each, six blanks among 300: half the degrees of freedom would take off more than there is."""
    random = np.random.default_rng(3)
    a = random.integers(0, 40, 300)
    b = np.where(random.random(300) < 0.5, a, random.integers(0, 40, 300))
    frame = pd.DataFrame({"a": words(a, "a"), "b": words(b, "b"), "k": words(random.integers(0, 2, 300), "k")})
    frame.loc[:5, "a"] = ""
    found = frame_probed(frame, "k", ("a", "b"))
    kept = tables_of(frame[frame["a"] != ""], "a", "b", ("k",))
    assert found.results[0].bits_without_blanks == pytest.approx(corrected_bits(kept), rel=1e-6)
    assert not any("no cell is blank" in note for note in found.warnings)
