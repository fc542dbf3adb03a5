"""The main job from file to documents: published tables, determinism, folds of every kind, and what is refused."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared, named_edges, recipe_of, silent
from opentables import led7_draw, load
from published import CORRAL_ACROSS_NATS, CORRAL_WITHIN_G, CORRAL_WITHIN_NATS, MONK1_NATS

from bnx.comparison import Comparison, compare
from bnx.documents import comparison_document, predictions_table, structure_document
from bnx.errors import BnxError, DataError, SettingError, StructureError
from bnx.reading import open_source

ALL = ("naive", "tan", "tan-tested", "kdb1", "kdb1-tested", "kdb2", "kdb2-tested", "kdb3-tested")


def by_ends(comparison: Comparison) -> dict[frozenset[str], dict[str, Any]]:
    """Look pairs up by their two ends."""
    return {frozenset((pair["a"], pair["b"])): pair for pair in comparison_document(comparison)["pairs"]}


def entries(comparison: Comparison) -> dict[str, dict[str, Any]]:
    return {entry["name"]: entry for entry in comparison_document(comparison)["structures"]}


def test_monk1_is_solved_by_a_tree_and_not_by_naive_bayes() -> None:
    """MONK-1, Thrun et al. 1991: only a1 and a2 depend given the class."""
    found = compared(load("monk1"), "class", structures=("naive", "tan", "tan-tested", "kdb1", "kdb1-tested"))
    scores = entries(found)
    assert scores["naive"]["accuracy"] == 324 / 432
    assert all(scores[name]["accuracy"] == 1.0 for name in scores if name != "naive")
    assert named_edges(found.names, found.structures[2]) == {frozenset(("a1", "a2"))}
    pairs = by_ends(found)
    assert pairs.pop(frozenset(("a1", "a2")))["bits"] * np.log(2) == pytest.approx(MONK1_NATS, abs=5e-7)
    assert len(pairs) == 14
    assert max(pair["bits"] for pair in pairs.values()) < 1e-12
    assert comparison_document(found)["recommended"]["name"] == "tan-tested"


def test_corral_tree_holds_both_conjunctions() -> None:
    """John, Kohavi & Pfleger 1994; the bits are derived from the definition of the table."""
    found = compared(load("corral"), "class", structures=("naive", "tan"), folds=8, keep=("Irrelevant", "Correlated"))
    edges = named_edges(found.names, found.structures[1])
    assert {frozenset(("A0", "A1")), frozenset(("B0", "B1"))} <= edges
    pairs = by_ends(found)
    for a, b in (("A0", "A1"), ("B0", "B1")):
        pair = pairs[frozenset((a, b))]
        assert pair["bits"] * np.log(2) == pytest.approx(CORRAL_WITHIN_NATS, abs=5e-7)
        assert pair["g"] == pytest.approx(CORRAL_WITHIN_G, abs=5e-5)
        assert pair["df"] == 2
    for a in ("A0", "A1"):
        for b in ("B0", "B1"):
            assert pairs[frozenset((a, b))]["bits"] * np.log(2) == pytest.approx(CORRAL_ACROSS_NATS, abs=5e-7)
    others = [pair for ends, pair in pairs.items() if ends & {"Irrelevant", "Correlated"}]
    assert len(others) == 9
    assert max(pair["bits"] for pair in others) < 1e-12


def test_g_is_twice_the_rows_times_the_nats() -> None:
    """Kullback 1959."""
    found = compared(load("titanic"), "Survived", structures=("naive",), folds=3)
    pairs = comparison_document(found)["pairs"]
    assert len(pairs) == 3
    for pair in pairs:
        assert pair["g"] == pytest.approx(2 * 2201 * pair["bits"] * np.log(2), rel=1e-12)


def mixed(rows: int = 400) -> pd.DataFrame:
    """Draw a table with numbers, blanks and a dependence."""
    random = np.random.default_rng(77)
    target = random.choice(3, rows, p=[0.5, 0.3, 0.2])
    a = (target + random.integers(0, 3, rows)) % 4
    b = (a + random.choice(4, rows, p=[0.6, 0.2, 0.1, 0.1])) % 4
    frame = pd.DataFrame({"a": [f"v{k}" for k in a], "b": [f"v{k}" for k in b]})
    frame["c"] = np.round(random.normal(size=rows) + 0.5 * target, 2)
    frame["d"] = [["low", "mid", "high", ""][k] for k in random.integers(0, 4, rows)]
    frame["site"] = [f"s{k}" for k in random.integers(0, 25, rows)]
    frame["era"] = [f"e{k}" for k in np.arange(rows) * 5 // rows]
    return frame.assign(kind=np.array(["p", "q", "r"])[target])


@pytest.fixture(scope="module")
def table(tmp_path_factory: pytest.TempPathFactory) -> str:
    path = tmp_path_factory.mktemp("table") / "mixed.csv"
    mixed().to_csv(path, index=False)
    return str(path)


def documents(path: str, jobs: int, **settings: Any) -> list[str]:
    """Run the job and write its documents out."""
    found = compare(open_source(path), recipe_of("kind", **settings), jobs, silent)
    written = [comparison_document(found), *(structure_document(found, s) for s in range(len(found.structures)))]
    return [json.dumps(document, allow_nan=False) for document in written]


def test_documents_are_the_same_byte_for_byte_twice_and_with_any_number_of_jobs(table: str) -> None:
    settings = {"structures": ALL, "folds": 4, "resamples": 20, "ignore": ("site", "era"), "repeats": 2}
    first = documents(table, 1, **settings)
    assert documents(table, 1, **settings) == first
    assert documents(table, 2, **settings) == first
    assert documents(table, 5, **settings) == first


def test_another_seed_deals_other_folds(table: str) -> None:
    ignored = ("site", "era")
    runs = [json.loads(documents(table, 1, ignore=ignored, folds=4, seed=seed, bins="mdl")[0]) for seed in (1, 2)]
    losses = [run["structures"][0]["log_loss"] for run in runs]
    assert losses[0] != losses[1]
    assert abs(losses[0] - losses[1]) < 0.1
    told = ("a", "b", "bits", "bits_corrected", "marginal_bits_corrected", "x2", "g", "df", "method", "min_expected")
    for one, other in zip(
        *(sorted(run["pairs"], key=lambda pair: (pair["a"], pair["b"])) for run in runs), strict=True
    ):
        assert [one[key] for key in told] == [other[key] for key in told]
        by_draws = one["method"] == "monte-carlo"
        assert one["p_value"] == pytest.approx(other["p_value"], rel=0.6 if by_draws else 1e-12)


RUN = "format class rows attributes settings structures best recommended pairs pairs_total pairs_rejected warnings"
STRUCTURE = (
    "name words edges free_parameters log_loss log_loss_se brier accuracy balanced_accuracy auc recall confusion "
    "calibration_error calibration_slope temperature class_offsets floor smoothing by_fold against_baseline"
)
EDGE = "parent child bits gain gain_se gain_interval chosen_in stability gate_p gate_given carried_by_blanks verdict"
AGAINST = "difference interval p_value region_bits probability_better probability_equivalent"
PAIR = (
    "a b bits bits_corrected marginal_bits x2 g statistic df p_value adjusted_p method sample_carries_it min_expected "
    "share_expected_below_5 cramers_v detectable_bits detectable_at verdict"
)


def test_documents_hold_the_promised_keys(table: str) -> None:
    settings = {"structures": ("naive", "kdb2-tested"), "folds": 4, "ignore": ("site", "era")}
    document = json.loads(documents(table, 1, **settings)[0])
    entry = document["structures"][1]
    for part, keys in (
        (document, RUN),
        (document["recommended"], "name reason honest_log_loss honest_accuracy"),
        (document["pairs"][0], PAIR),
        (entry, STRUCTURE),
        (entry["edges"][0], EDGE),
        (entry["by_fold"][0], "repeat fold rows log_loss brier accuracy"),
        (entry["against_baseline"], AGAINST),
    ):
        assert set(keys.split()) <= set(part)


def test_groups_stay_in_one_fold_and_given_folds_are_kept() -> None:
    frame = mixed()
    grouped = predictions_table(compared(frame, "kind", folds=4, group="site", ignore=("era",))).to_pandas()
    assert grouped.groupby(frame["site"].to_numpy())["fold"].nunique().max() == 1
    found = compared(frame, "kind", fold_column="era", ignore=("site",))
    given = predictions_table(found).to_pandas()
    assert found.folds == 5
    assert pd.crosstab(frame["era"].to_numpy(), given["fold"].to_numpy()).gt(0).sum().tolist() == [1] * 5
    assert "era" not in found.names


def test_repeats_deal_anew_and_every_row_is_predicted_once_in_each() -> None:
    found = compared(mixed(), "kind", folds=4, repeats=3, structures=("naive", "tan"), ignore=("site", "era"))
    frame = predictions_table(found).to_pandas()
    assert (frame.groupby(["repeat", "structure"])["row"].nunique() == 400).all()
    assert frame.groupby("repeat")["fold"].apply(tuple).nunique() == 3
    assert len(found.results[0].by_fold) == 12
    rows = frame[frame["structure"] == "tan"].to_dict("records")
    losses = [-np.log2(row[f"p:{row['truth']}"]) for row in rows]
    assert found.results[1].pooled.log_loss == pytest.approx(np.mean(losses), rel=1e-12)


def test_a_table_that_took_no_part_is_scored_by_the_final_structures(tmp_path: Path) -> None:
    frame = mixed()
    frame.iloc[:300].to_csv(tmp_path / "train.csv", index=False)
    frame.iloc[300:].assign(d="never seen").to_csv(tmp_path / "new.csv", index=False)
    recipe = recipe_of("kind", folds=3, structures=("naive", "tan"), ignore=("site", "era"))
    found = compare(open_source(str(tmp_path / "train.csv")), recipe, 1, silent, open_source(str(tmp_path / "new.csv")))
    assert len(found.held_out) == 2 + (found.mix is not None), "two structures, and their mix where one is made"
    assert all(np.isfinite(one.log_loss) for one in found.held_out)
    assert sum(map(sum, found.held_out[0].confusion)) == 100
    assert "holdout" in entries(found)["tan"]
    note = f"{tmp_path / 'new.csv'} (--holdout): cells that are blank or hold a value not known from training were "
    assert f"{note}summed out: d (100 records)" in found.warnings


def test_required_and_forbidden_edges_reach_every_fold() -> None:
    names = ("naive", "tan", "tan-tested", "kdb1", "kdb2-tested")
    found = compared(
        mixed(), "kind", folds=4, structures=names, ignore=("site", "era"), require=("d:c",), forbid=("a:b",)
    )
    for held in [(), *((fold,) for fold in range(4))]:
        learned = found.evaluations[0].learned(held)
        for structure in learned.structures:
            edges = {(found.names[p], found.names[c]) for p, c in structure.edges}
            assert structure.name == "naive" or ("d", "c") in edges
            assert not {("a", "b"), ("b", "a")} & edges


def test_seven_segments_are_recommended_without_an_edge() -> None:
    """LED-7 (Breiman et al. 1984): naive Bayes is the true structure, and its accuracy comes near .74002248."""
    found = compared(led7_draw(3000, seed=4), "digit", structures=("naive", "tan", "tan-tested"), folds=5)
    assert found.recipe.structures[found.recommendation.recommended] == "naive"
    accuracy = found.results[0].pooled.accuracy
    assert accuracy == pytest.approx(0.74, abs=3 * np.sqrt(0.74 * 0.26 / 3000))


def test_a_class_with_one_row_and_one_attribute_do_not_crash() -> None:
    frame = mixed(90)[["a", "kind"]]
    frame.loc[7, "kind"] = "lonely"
    found = compared(frame, "kind", folds=3, structures=("naive", "tan", "kdb2-tested"))
    document = comparison_document(found)
    assert json.dumps(document, allow_nan=False)
    assert any("lonely" in warning for warning in document["warnings"])
    assert all(np.isfinite(result.pooled.log_loss) for result in found.results)
    bare = compared(frame, "kind", folds=3, temperature=False, smoothing="laplace:1", structures=("naive", "tan"))
    assert comparison_document(bare)["structures"][0]["log_loss"] < 2


REFUSED = [
    ({"require": ("a:b", "b:c", "c:a")}, StructureError, "the required edges form a cycle"),
    ({"require": ("a:b",), "forbid": ("b:a",)}, StructureError, "a:b is both required and forbidden"),
    ({"require": ("a:zz",)}, DataError, "--require a:zz: 'zz' is not an attribute in use"),
    ({"forbid": ("a:a",)}, DataError, "the two ends are the same attribute"),
    ({"require": ("ab",)}, SettingError, "'ab' is not a pair of attributes; write PARENT:CHILD"),
    ({"structures": ("naive", "forest")}, SettingError, "'forest' is not a structure"),
    ({"structures": ("naive", "naive")}, SettingError, "names one structure twice"),
    ({"structures": ("tan",), "baseline": "naive"}, SettingError, "--baseline naive is not among the structures"),
    ({"alpha": 0.0}, SettingError, "--alpha: 0 cannot be used; give a number above 0 and below 1"),
    ({"folds": 2}, SettingError, "--folds: 2 cannot be used; give a whole number from 3 to 50"),
    ({"folds": 500}, SettingError, "--folds: 500 cannot be used; give a whole number from 3 to 50"),
    ({"seed": -1}, SettingError, "--seed: -1 cannot be used"),
    ({"smoothing": "none"}, SettingError, "--smoothing: 'none' cannot be used"),
    ({"bins": "many"}, SettingError, "many"),
    ({"test": "t"}, SettingError, "--test: 't' cannot be used; give one of auto, chi2, g"),
    ({"group": "site", "fold_column": "era"}, SettingError, "both decide the folds"),
    ({"fold_column": "eras"}, DataError, "did you mean era?"),
    ({"target": "kinds"}, DataError, "did you mean kind?"),
]


@pytest.mark.parametrize(("settings", "kind", "words"), REFUSED, ids=[str(case[0]) for case in REFUSED])
def test_what_cannot_be_used_is_refused_in_one_sentence(
    settings: dict[str, Any], kind: type[BnxError], words: str, table: str
) -> None:
    with pytest.raises(kind) as caught:
        compare(open_source(table), recipe_of(**({"target": "kind"} | settings)), 1, silent)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)
