"""Pairs in the documents: tables by class, double-counted bits, gains by fold; every metric against the baseline."""

import json
from dataclasses import replace
from functools import cache
from itertools import pairwise
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared, recipe_of
from probed import probed
from statsmodels.stats.contingency_tables import StratifiedTable, Table2x2
from test_double_counting import in_loops

from bnx import pair_table_entries
from bnx.comparison import Comparison
from bnx.documents import comparison_document, pair_results, structure_document
from bnx.metric_differences import METRICS
from bnx.paired import corrected_t
from bnx.score_entries import against_entry

Document = dict[str, Any]

STRUCTURES = ("naive", "tan-tested", "kdb2")


def drawn(rows: int = 900) -> pd.DataFrame:
    """Draw a table: ``twin`` nearly copies ``left``, ``right`` and ``flag`` have two levels, ``holes`` has blanks."""
    random = np.random.default_rng(11)
    kind = random.choice(3, rows, p=[0.5, 0.3, 0.2])
    left = (kind + random.choice(4, rows, p=[0.5, 0.2, 0.2, 0.1])) % 4
    twin = np.where(random.random(rows) < 0.9, left, random.integers(0, 4, rows))
    right = random.random(rows) < np.array([0.3, 0.5, 0.7])[kind]
    flag = np.where(random.random(rows) < np.array([0.8, 0.6, 0.1])[kind], right, random.random(rows) < 0.5)
    holes = np.where(random.random(rows) < 0.15, "", random.choice(["low", "high", "top"], rows))
    frame = pd.DataFrame({"left": left, "twin": twin, "right": right.astype(int), "flag": flag.astype(int)})
    frame = frame.astype(str).radd("v").assign(holes=holes, number=(kind + random.normal(size=rows)).round(2))
    return frame.assign(kind=np.array(["p", "q", "r"])[kind])


@cache
def found(**settings: Any) -> Comparison:
    return compared(drawn(), "kind", structures=STRUCTURES, folds=4, repeats=2, **settings)


@cache
def written() -> Document:
    document: Document = json.loads(json.dumps(comparison_document(found()), allow_nan=False))
    return document


def counted(frame: pd.DataFrame, a: str, b: str) -> np.ndarray:
    """Count a pair by class with pandas, (C, levels of a, levels of b)."""
    levels = [sorted(frame[name].unique()) for name in (a, b)]
    tables = [pd.crosstab(part[a], part[b]) for _, part in frame.groupby("kind")]
    return np.array([table.reindex(index=levels[0], columns=levels[1], fill_value=0).to_numpy() for table in tables])


def pair_of(document: Document, a: str, b: str) -> Document:
    return next(one for one in document["pairs"] if {one["a"], one["b"]} == {a, b})


def test_double_counted_bits_are_those_of_the_tables_of_all_records() -> None:
    frame = drawn()
    for a, b in (("left", "twin"), ("left", "right"), ("right", "flag"), ("twin", "flag"), ("left", "holes")):
        assert pair_of(written(), a, b)["double_counted_bits"] == pytest.approx(
            in_loops(counted(frame, a, b)), abs=1e-5
        )


def test_records_with_unknown_cells_are_left_out_and_real_weights_do_not_count() -> None:
    frame = drawn()
    known = in_loops(counted(frame[frame["holes"] != ""], "left", "holes"))
    weighed = frame.assign(w=np.random.default_rng(2).random(len(frame)) + 0.5)
    for table, settings in ((frame, {"missing": "sum-out"}), (weighed, {"missing": "sum-out", "weight": "w"})):
        document = comparison_document(compared(table, "kind", folds=4, **settings))
        assert pair_of(document, "left", "holes")["double_counted_bits"] == pytest.approx(known, abs=1e-5)


def test_bnx_test_tells_the_same_with_more_given_too() -> None:
    for given in ((), ("flag",)):
        tests = probed(drawn(), "kind", ("left", "twin", "right"), given=given)
        for entry in tests.to_dict()["tests"]:
            known = pair_of(written(), entry["a"], entry["b"])["double_counted_bits"]
            assert entry["double_counted_bits"] == pytest.approx(known, abs=1e-12)


def test_all_pairs_have_double_counted_bits_and_those_listed_the_same() -> None:
    every = {(one.a, one.b): one.double_counted_bits for one in pair_results(found(), everything=True)}
    assert len(every) == 15
    assert {(one["a"], one["b"]): one["double_counted_bits"] for one in written()["pairs"]} == every


def test_tables_come_in_order_joined_pairs_first() -> None:
    document = written()
    recommended = document["recommended"]["name"]
    order = sorted(document["structures"], key=lambda one: one["name"] != recommended)
    joined = [frozenset((edge["parent"], edge["child"])) for one in order for edge in one["edges"]]
    ends = [frozenset((one["a"], one["b"])) for one in document["pair_tables"]]
    first = list(dict.fromkeys(joined))
    assert ends[: len(first)] == first
    assert len(set(ends)) == len(ends) == len(document["pairs"]) == 15
    rest = [pair_of(document, *pair) for pair in ends[len(first) :]]
    twice = [one["double_counted_bits"] for one in rest if one["double_counted_bits"] > 0.005]
    assert twice == sorted(twice, reverse=True) == [one["double_counted_bits"] for one in rest][: len(twice)]
    assert all(one["bits"] >= other["bits"] for one, other in pairwise(rest[len(twice) :]))
    assert document["pair_tables_left_out"] == 0


def test_tables_hold_observed_expected_and_adjusted_residuals() -> None:
    for a, b in (("left", "twin"), ("right", "flag"), ("left", "holes")):
        entry = next(one for one in written()["pair_tables"] if {one["a"], one["b"]} == {a, b})
        counts = counted(drawn(), entry["a"], entry["b"])
        words = [[level or "(blank)" for level in sorted(drawn()[name].unique())] for name in (a, b)]
        assert [sorted(entry["a_levels"]), sorted(entry["b_levels"])] == [sorted(one) for one in words]
        places = [np.argsort(np.argsort([level.replace("(blank)", "") for level in entry[key]]))
                  for key in ("a_levels", "b_levels")]  # fmt: skip
        assert entry["residual"] == "adjusted"
        assert [one["class"] for one in entry["classes"]] == ["p", "q", "r"]
        for one, table in zip(entry["classes"], counts[:, places[0]][:, :, places[1]], strict=True):
            assert one["observed"] == table.tolist()
            assert one["rows"] == table.sum()
            share = np.outer(table.sum(1), table.sum(0)) / table.sum()
            assert np.array(one["expected"]) == pytest.approx(share, rel=1e-12)
            spread = np.outer(1 - table.sum(1) / table.sum(), 1 - table.sum(0) / table.sum())
            wanted = (table - share) / np.sqrt(share * spread)  # Haberman 1973
            assert np.array(one["residuals"]) == pytest.approx(wanted, rel=1e-9)


def test_pairs_of_two_levels_have_odds_ratios_equal_to_statsmodels() -> None:
    entries = {frozenset((one["a"], one["b"])): one for one in written()["pair_tables"]}
    entry = entries.pop(frozenset(("right", "flag")))
    tables = [np.array(one["observed"], float) for one in entry["classes"]]
    for one, table in zip(entry["classes"], tables, strict=True):
        known = Table2x2(table, shift_zeros=False)
        assert one["odds"]["odds_ratio"] == pytest.approx(known.oddsratio, rel=1e-9)
        assert (one["odds"]["odds_low"], one["odds"]["odds_high"]) == pytest.approx(known.oddsratio_confint(), rel=1e-9)
    known = StratifiedTable(tables)
    common = entry["common_odds"]
    assert common["odds_ratio"] == pytest.approx(known.oddsratio_pooled, rel=1e-9)
    assert (common["odds_low"], common["odds_high"]) == pytest.approx(known.oddsratio_pooled_confint(), rel=1e-9)
    assert common["cmh_p"] == pytest.approx(known.test_null_odds().pvalue, rel=1e-9)
    assert common["breslow_day_p"] == pytest.approx(known.test_equal_odds().pvalue, rel=1e-9)
    assert common["tarone_p"] == pytest.approx(known.test_equal_odds(adjust=True).pvalue, rel=1e-9)
    for other in entries.values():
        assert other["common_odds"] is None
        assert {one["odds"] for one in other["classes"]} == {None}


@pytest.mark.parametrize(("most_pairs", "most_cells"), [(2, 60_000), (200, 12), (200, 100), (0, 60_000)])
def test_what_does_not_fit_is_skipped_and_counted(
    most_pairs: int, most_cells: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(pair_table_entries, "_MOST_PAIRS", most_pairs)
    monkeypatch.setattr(pair_table_entries, "_MOST_CELLS", most_cells)
    document = comparison_document(found())
    wanted: list[tuple[str, str]] = []
    room = most_cells
    for one in written()["pair_tables"]:
        cells = 3 * len(one["a_levels"]) * len(one["b_levels"])
        if len(wanted) < most_pairs and cells <= room:
            wanted.append((one["a"], one["b"]))
            room -= cells
    assert [(one["a"], one["b"]) for one in document["pair_tables"]] == wanted
    joined = {frozenset((e["parent"], e["child"])) for one in document["structures"] for e in one["edges"]}
    assert document["pair_tables_left_out"] == len(joined - set(map(frozenset, wanted))) > 0


def test_an_edge_has_a_gain_for_every_fold_that_drew_it() -> None:
    folds = found().folds * 2
    edges = [edge for one in written()["structures"] for edge in one["edges"]]
    for edge in edges:
        gains = edge["gain_by_fold"]
        assert len(gains) == folds
        assert sum(gain is not None for gain in gains) == edge["chosen_in"]
        assert np.mean([gain or 0.0 for gain in gains]) == pytest.approx(edge["gain"], abs=1e-12)
    assert {len(edge["gain_by_fold"]) - edge["chosen_in"] > 0 for edge in edges} == {True, False}
    for s, one in enumerate(written()["structures"]):
        assert json.loads(json.dumps(structure_document(found(), s)))["edges"] == one["edges"]


def test_every_metric_is_compared_with_the_baseline_fold_by_fold() -> None:
    naive, *others = written()["structures"]
    assert naive["against_baseline"]["by_metric"] is None
    for one in others:
        against = one["against_baseline"]
        assert list(against["by_metric"]) == list(METRICS)
        for metric, entry in against["by_metric"].items():
            apart = [fold[metric] - other[metric] for fold, other in zip(one["by_fold"], naive["by_fold"], strict=True)]
            known = corrected_t(np.array(apart), found().folds)
            assert entry["difference"] == pytest.approx(np.mean(apart), rel=1e-9, abs=1e-15)
            assert entry["interval"] == pytest.approx([known.low, known.high], rel=1e-9, abs=1e-15)
        whole = against["by_metric"]["log_loss"]
        assert whole["difference"] == pytest.approx(against["difference"], rel=1e-9)
        assert whole["interval"] == pytest.approx(against["interval"], rel=1e-9)
        assert whole["region"] == against["region_bits"]
        assert [against["by_metric"][metric]["region"] for metric in METRICS[1:]] == [None, 0.01, 0.01, None, None]


def test_the_mix_is_compared_by_every_metric_too() -> None:
    document = comparison_document(compared(drawn(400), "kind", structures=STRUCTURES, folds=4, mix=True))
    naive, mix = document["structures"][0], document["mix"]
    for metric, entry in mix["against_baseline"]["by_metric"].items():
        apart = [fold[metric] - other[metric] for fold, other in zip(mix["by_fold"], naive["by_fold"], strict=True)]
        assert entry["difference"] == pytest.approx(np.mean(apart), rel=1e-9, abs=1e-15)


def test_a_metric_that_a_fold_lacks_is_null() -> None:
    """Folds that hold one class only have no area under the curve."""
    frame = drawn(200).sort_values("kind").assign(era=[f"e{k}" for k in np.arange(200) * 5 // 200])
    document = comparison_document(compared(frame, "kind", structures=("naive", "kdb2"), fold_column="era"))
    assert any(fold["auc"] is None for fold in document["structures"][0]["by_fold"])
    against = document["structures"][1]["against_baseline"]
    assert against["by_metric"]["auc"] == {"difference": None, "interval": None, "region": None}
    assert against["by_metric"]["accuracy"]["difference"] is not None


def test_an_infinite_log_loss_is_compared_by_the_other_metrics() -> None:
    whole = found()
    first, *others = whole.results[1].by_fold
    broken = replace(first, scores=replace(first.scores, log_loss=np.inf))
    score = replace(whole.results[1], by_fold=(broken, *others))
    told = against_entry(None, whole.by_metric(score))
    assert told["difference"] is None
    assert told["by_metric"]["log_loss"] == {"difference": None, "interval": None, "region": None}
    known = written()["structures"][1]["against_baseline"]["by_metric"]
    assert told["by_metric"]["brier"]["difference"] == pytest.approx(known["brier"]["difference"], rel=1e-12)


def test_the_setting_names_what_is_negligible_in_the_order_of_tables() -> None:
    document = comparison_document(compared(drawn(), "kind", structures=("naive",), folds=4, negligible=0.5))
    ends = [(one["a"], one["b"]) for one in document["pair_tables"]]
    assert recipe_of("kind").negligible == 0.005
    assert ends == [(one["a"], one["b"]) for one in document["pairs"]]
