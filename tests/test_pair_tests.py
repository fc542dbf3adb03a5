"""Tests of chosen pairs on whole tables: against a second library, stratum by stratum."""

from collections.abc import Sequence
from itertools import combinations
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from commandline import NAMES, small_rows, small_table
from scipy.stats import chi2, chi2_contingency, false_discovery_control
from statsmodels.stats.multitest import multipletests
from tablefiles import parquet_of, source_of

from bnx.errors import DataError
from bnx.pair_tests import PairTests, run_pair_tests
from bnx.reading import open_source
from bnx.recipe import Recipe

DEMO = Path(__file__).parent.parent / "datasets" / "cold_chain.csv"
CATEGORICAL = ("route", "season", "carrier", "reefer_age", "precool", "door_alarm", "dock_wait")


def demo() -> pd.DataFrame:
    return pd.read_csv(DEMO, dtype=str, keep_default_na=False)


def probed(
    names: Sequence[str], given: Sequence[str] = (), everything: bool = False, path: str = str(DEMO), **settings: object
) -> PairTests:
    target = str(settings.pop("target", "arrival"))
    recipe = Recipe(target, **{"bins": "frequency:5"} | settings)  # type: ignore[arg-type]
    return run_pair_tests(open_source(path), recipe, names, given, everything, 1)


def summed(frame: pd.DataFrame, a: str, b: str, by: Sequence[str]) -> dict[str, float]:
    """Sum scipy's statistics over the strata, each without its empty rows and columns; plug-in bits on the way."""
    total = {"x2": 0.0, "g": 0.0, "df": 0, "strata": 0, "informative": 0, "least": np.inf}
    for _, part in frame.groupby(list(by)):
        counts = pd.crosstab(part[a], part[b]).to_numpy()
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
    found = probed(CATEGORICAL, given)
    assert {frozenset((one.a, one.b)) for one in found.results} == {
        frozenset(pair) for pair in combinations(CATEGORICAL, 2)
    }
    for result, strata, informative in zip(found.results, found.strata, found.informative, strict=True):
        expected = summed(frame, result.a, result.b, ("arrival", *given))
        assert (result.df, strata, informative) == (expected["df"], expected["strata"], expected["informative"])
        assert result.x2 == pytest.approx(expected["x2"], rel=1e-9)
        assert result.g == pytest.approx(expected["g"], rel=1e-9)
        assert result.bits == pytest.approx(expected["g"] / (2 * len(frame) * np.log(2)), rel=1e-9)
        assert result.min_expected == pytest.approx(expected["least"], rel=1e-9)
        table = pd.crosstab(frame[result.a], frame[result.b]).to_numpy()
        marginal = chi2_contingency(table, correction=False, lambda_="log-likelihood").statistic
        assert result.marginal_bits == pytest.approx(marginal / (2 * len(frame) * np.log(2)), rel=1e-9)


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
    assert result == same
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
    assert (by_class.strata, by_class.informative, by_class.rows) == ((2,), (2,), 12)
    further = probed(("a", "b"), ("c",), path=str(path), target="kind", keep=("all",))
    assert (further.strata, further.informative) == ((6,), (0,))
    assert (further.results[0].method, further.results[0].verdict) == ("none", "not enough data")
    assert str(further).splitlines()[-1] == "0 of 6 strata can show a dependence"


def test_results_go_by_bits_and_print_by_verdict() -> None:
    found = probed((), everything=True)
    bits = [one.bits for one in found.results]
    assert bits == sorted(bits, reverse=True)
    lines = str(found).splitlines()
    heads = [
        line for line in lines if line in ("dependent", "detected, but negligible", "negligible", "not enough data")
    ]
    assert heads[0] == "dependent"
    printed = [line.split("  ")[1] for line in lines if " ~ " in line]
    assert sorted(printed) == sorted(f"{one.a} ~ {one.b}" for one in found.results)
    for one in found.results:
        line = next(line for line in lines if line.startswith(f"  {one.a} ~ {one.b} "))
        assert line.split()[-1] == one.method
        assert f" {one.bits:.4f} " in line
    document = found.to_dict()
    assert [test["bits"] for test in document["tests"]] == bits
    assert {test["rows"] for test in document["tests"]} == {6000}


def test_rows_dropped_with_their_blanks_are_not_tested() -> None:
    used = sum(row[3] != "" for row in small_rows())
    found = probed(("dock", "alarm"), path=small_table(), target="grade", missing="drop", ignore=("gap",))
    assert (found.rows, found.warnings[0]) == (used, f"{240 - used} rows of 240 dropped because a cell is blank")


def test_a_parquet_table_gives_what_its_csv_gives(tmp_path: Path) -> None:
    columns = {name: [row[k] for row in small_rows()] for k, name in enumerate(NAMES) if name != "gap"}
    path = parquet_of(tmp_path, columns).files[0]
    from_csv = probed(("dock", "lane"), ("site",), path=small_table(), target="grade")
    from_parquet = probed(("dock", "lane"), ("site",), path=str(path), target="grade")
    assert from_parquet.to_dict() == from_csv.to_dict()


def test_the_class_and_columns_left_out_are_no_attributes() -> None:
    with pytest.raises(
        DataError, match=r"^'arrival' is the class, which is taken as given in every test; leave it out$"
    ):
        probed(("route", "arrival"))
    with pytest.raises(DataError, match=r"^'shipment_id' is left out of the table: a different value in every row; "):
        probed(("route", "shipment_id"))
