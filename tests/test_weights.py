"""Weights that are no counts: tables, choices and scores by them, structures and tests by rows, and what is said."""

import json
import math
import re
from dataclasses import replace
from pathlib import Path

import jsonschema
import numpy as np
import pandas as pd
import pytest
from builders import coded, compared, folds_of, predicted, silent
from commandline import call, refusal
from hypothesis import given, settings
from hypothesis import strategies as st
from sklearn.metrics import accuracy_score, brier_score_loss, log_loss, roc_auc_score
from sklearn.naive_bayes import CategoricalNB

from bnx.cells import Cells
from bnx.comparison import Comparison
from bnx.documents import comparison_document
from bnx.engines import start_local
from bnx.kernels import slope_sums
from bnx.losses import scores
from bnx.results import json_text
from bnx.storing import MEMORY
from bnx.tables import Lines
from bnx.weighed_losses import weighed_scores, weighed_slope
from bnx.weighing import RowWeights, scaled

DOCS = Path(__file__).parent.parent / "docs"


def weighted(rows: int = 400, seed: int = 5, classes: str = "abc") -> pd.DataFrame:
    """Draw a table whose class is in part told by two attributes that hang together, with weights."""
    draw = np.random.default_rng(seed)
    kind = draw.integers(0, len(classes), rows)
    first = (kind + (draw.random(rows) < 0.4) * draw.integers(0, 3, rows)) % 3
    second = (first + (draw.random(rows) < 0.5) * draw.integers(0, 3, rows)) % 3
    third = draw.integers(0, 2, rows)
    columns = {name: np.array(list("xyz"))[own] for name, own in (("one", first), ("two", second), ("three", third))}
    weights = np.where(draw.random(rows) < 0.06, 0.0, np.round(draw.gamma(1.5, 2.0, rows) + 0.05, 3))
    return pd.DataFrame({**columns, "w": weights, "kind": np.array(list(classes))[kind]})


def used(frame: pd.DataFrame) -> tuple[pd.DataFrame, np.ndarray]:
    """Give the rows that have a weight, and the weights with the mean 1."""
    rows = frame[frame["w"] > 0].reset_index(drop=True)
    return rows, (rows["w"] / rows["w"].mean()).to_numpy()


def codes(rows: pd.DataFrame) -> np.ndarray:
    return np.column_stack([np.unique(rows[name], return_inverse=True)[1] for name in ("one", "two", "three")])


def weights_of(values: list[float]) -> RowWeights:
    cells = Cells(MEMORY, np.float64, len(values))
    for part, room in cells.add(len(values)):
        room[:] = values[part]
    return RowWeights("w", False, math.fsum(values), sum(one == 0 for one in values), cells)


@pytest.fixture(scope="module")
def plain() -> Comparison:
    """Compare structures with nothing chosen: smoothing given, no calibration."""
    fixed = {"smoothing": "laplace:1", "temperature": False, "folds": 5, "resamples": 4}
    return compared(weighted(), "kind", weight="w", structures=("naive", "kdb2", "heldout"), **fixed)


def test_naive_with_laplace_is_the_classifier_of_scikit_learn_with_these_weights(plain: Comparison) -> None:
    """Out of fold and on all rows, probabilities equal those of scikit-learn's CategoricalNB with sample_weight."""
    rows, mass = used(weighted())
    cells, truth, fold = codes(rows), rows["kind"].to_numpy(), folds_of(plain.evaluations[0])
    rival = CategoricalNB(alpha=1.0, min_categories=[3, 3, 2])
    whole = rival.fit(cells, truth, sample_weight=mass).predict_proba(cells)
    assert np.abs(plain.classifiers[0].probabilities(cells.T.astype(np.int32)) - whole).max() < 1e-12
    expected = np.empty(whole.shape)
    for number in range(5):
        inside = fold == number
        rival.fit(cells[~inside], truth[~inside], sample_weight=mass[~inside])
        expected[inside] = rival.predict_proba(cells[inside])
    assert np.abs(predicted(plain, 0) - expected).max() < 1e-12


def test_scores_are_those_of_scikit_learn_with_these_weights(plain: Comparison) -> None:
    rows, mass = used(weighted())
    truth = rows["kind"].to_numpy()
    for s, result in enumerate(plain.results):
        p, found = predicted(plain, s), result.pooled
        assert found.log_loss == pytest.approx(log_loss(truth, p, sample_weight=mass) / np.log(2), rel=1e-9)
        right = truth[:, None] == np.array(list("abc"))
        assert found.brier == pytest.approx(np.average(np.square(p - right).sum(axis=1), weights=mass), rel=1e-9)
        label = np.array(list("abc"))[p.argmax(axis=1)]
        assert found.accuracy == pytest.approx(accuracy_score(truth, label, sample_weight=mass), rel=1e-9)
        areas = [roc_auc_score(right[:, c], p[:, c], sample_weight=mass) for c in range(3)]
        assert found.auc == pytest.approx(np.mean(areas), rel=1e-9)
        assert np.sum(found.confusion) == pytest.approx(len(rows), rel=1e-9)
        losses = -np.log2(p[right])
        spread = np.average(np.square(losses - np.average(losses, weights=mass)), weights=mass)
        effective = mass.sum() ** 2 / np.square(mass).sum()  # Kish 1965 (from memory)
        assert result.error == pytest.approx(np.sqrt(spread / effective), rel=1e-9)


def test_brier_of_two_classes_is_twice_that_of_scikit_learn() -> None:
    draw = np.random.default_rng(2)
    p, truth, mass = draw.random(300), draw.integers(0, 2, 300), draw.gamma(1.0, 1.0, 300)
    found = weighed_scores(np.column_stack([1 - p, p]), truth, mass)
    assert found.brier == pytest.approx(2 * brier_score_loss(truth, p, sample_weight=mass), rel=1e-12)


def test_tables_with_parents_hold_the_sums_of_weights(plain: Comparison) -> None:
    rows, mass = used(weighted())
    classifier = plain.classifiers[1]
    assert max(map(len, classifier.structure.parents)) == 2
    cells, kinds = codes(rows), np.unique(rows["kind"], return_inverse=True)[1]
    for child, parents in enumerate(classifier.structure.parents):
        expected = np.zeros(classifier.counts[child].shape)
        np.add.at(expected, (kinds, *cells[:, [*parents, child]].T), mass)
        assert np.abs(classifier.counts[child] - expected).max() < 1e-9
        table = (expected + 1) / (expected.sum(axis=-1, keepdims=True) + expected.shape[-1])
        assert np.abs(classifier.table(child) - table).max() < 1e-12
    prior = np.bincount(kinds, mass) / mass.sum()
    assert np.exp(classifier.log_prior) == pytest.approx(prior, rel=1e-12)


def test_structures_pairs_and_tests_are_those_of_rows_counted_once(plain: Comparison) -> None:
    frame = weighted()
    left = frame.assign(kind=frame["kind"].where(frame["w"] > 0, "")).drop(columns="w")  # in the same lines, so folds
    fixed = {"smoothing": "laplace:1", "temperature": False, "folds": 5, "resamples": 4}
    bare = compared(left, "kind", structures=("naive", "kdb2", "heldout"), **fixed)
    assert plain.structures == bare.structures
    first, second = comparison_document(plain), comparison_document(bare)
    assert first["pairs"] == second["pairs"]
    assert first["rows"] == second["rows"] == int((frame["w"] > 0).sum())
    strong = [[edge["stability"] for edge in one["edges"]] for one in first["structures"]]
    assert strong == [[edge["stability"] for edge in one["edges"]] for one in second["structures"]]
    assert [one["log_loss"] for one in first["structures"]] != [one["log_loss"] for one in second["structures"]]


def test_inner_choices_and_gains_weigh_the_rows_of_their_sample(plain: Comparison) -> None:
    _, mass = used(weighted())
    one = plain.evaluations[0]
    assert one.sample.weights == pytest.approx(mass[one.engine.order], rel=1e-12)


def test_the_mix_is_judged_by_weights_and_so_are_structures_that_choose_for_themselves() -> None:
    frame = weighted(500, seed=4)
    rows, mass = used(frame)
    found = compared(frame, "kind", weight="w", structures=("naive", "kdb", "kdb-trimmed", "heldout"), folds=4)
    assert found.mix is not None
    numbers = range(5 if found.evaluations[0].mixes else 4)
    expected = [log_loss(rows["kind"], predicted(found, s), sample_weight=mass) / np.log(2) for s in numbers]
    told = [*(result.pooled.log_loss for result in found.results), found.mix.score.pooled.log_loss]
    assert told[: len(expected)] == pytest.approx(expected, rel=1e-9)


def test_equal_weights_change_nothing_but_what_is_said() -> None:
    frame = weighted().assign(w=0.5)
    chosen = {"structures": ("naive", "tan", "kdb2-tested"), "folds": 5}
    first = comparison_document(compared(frame, "kind", weight="w", **chosen))
    second = comparison_document(compared(frame.drop(columns="w"), "kind", **chosen))
    for one, other in zip(first["structures"], second["structures"], strict=True):
        for key in ("log_loss", "brier", "accuracy", "auc", "calibration_error", "calibration_slope", "log_loss_se"):
            assert one[key] == pytest.approx(other[key], rel=1e-9), key
        for key in ("temperature", "smoothing", "floor", "free_parameters", "confusion"):
            assert one[key] == other[key], key
        assert [edge["gain"] for edge in one["edges"]] == [edge["gain"] for edge in other["edges"]]
    assert first["recommended"] == second["recommended"] | {
        "honest_log_loss": pytest.approx(second["recommended"]["honest_log_loss"], rel=1e-9)
    }


@pytest.mark.parametrize("missing", ["level", "sum-out"])
def test_results_do_not_depend_on_threads_and_fit_the_schema(missing: str) -> None:
    frame = weighted(300, seed=8)
    frame.loc[::17, "two"] = ""
    chosen = {"structures": ("naive", "kdb-trimmed", "heldout"), "folds": 4, "repeats": 2, "missing": missing}
    texts = [json_text(comparison_document(compared(frame, "kind", jobs, weight="w", **chosen))) for jobs in (1, 2)]
    assert texts[0] == texts[1]
    document = json.loads(texts[0])
    jsonschema.validate(document, json.loads((DOCS / "comparison.schema.json").read_text()))
    rows, mass = used(frame)
    empty = int((frame["w"] == 0).sum())
    expected = {"column": "w", "kind": "real", "rows": 300, "left_out": empty}
    effective = pytest.approx(mass.sum() ** 2 / np.square(mass).sum(), rel=1e-9)
    assert document["weights"] == {**expected, "total": pytest.approx(frame["w"].sum()), "effective_rows": effective}
    assert f"{empty} rows of 300 left out because their weight in w is 0" in document["warnings"]
    assert any("rows counted once, so the tests are descriptive" in one for one in document["warnings"])
    assert document["rows"] == len(rows)


POSITIVE = st.lists(st.floats(1e-3, 1e3), min_size=1, max_size=200)


@given(POSITIVE)
def test_scaled_weights_have_the_mean_1_and_exact_sums(values: list[float]) -> None:
    found = scaled(weights_of(values), Lines.all(len(values)), MEMORY)
    assert found == pytest.approx(np.array(values) * len(values) / math.fsum(values), rel=1e-9)
    assert float(found.sum()) == math.fsum(found) == float(np.cumsum(found[::-1])[-1])
    assert float(found.sum()) - float(found[0]) == math.fsum(found[1:])


JUDGED = st.lists(st.tuples(st.integers(1, 9), st.integers(1, 9), st.integers(0, 1), st.integers(1, 4)), min_size=2)


@settings(deadline=None)
@given(JUDGED)
def test_weights_that_count_judge_as_rows_written_out(rows: list[tuple[int, int, int, int]]) -> None:
    a, b, truth, count = np.array(rows).T
    p, n = np.column_stack([a, b]) / (a + b)[:, None], len(rows)
    p, truth, count = np.tile(p, (300, 1)), np.tile(truth, 300), np.tile(count, 300)
    found = weighed_scores(p, truth, count.astype(float)).to_dict()
    expected = scores(np.repeat(p, count, axis=0), np.repeat(truth, count), 2).to_dict()
    assert found["confusion"] == expected["confusion"]
    recalls = [list(one["recall"].values()) for one in (found, expected)]
    assert [one is None for one in recalls[0]] == [one is None for one in recalls[1]]
    for key in expected.keys() - {"confusion", "recall"}:
        assert found[key] == (expected[key] and pytest.approx(expected[key], rel=1e-9, abs=1e-12)), key
    sums = np.zeros(2)
    slope_sums(np.repeat(p, count, axis=0), 0, int(count.sum()), np.repeat(truth, count), 1.3, sums)
    split = [slice(0, 7 * n), slice(7 * n, 300 * n)]
    assert weighed_slope(p, split, truth, count.astype(float), 1.3) == pytest.approx(sums, rel=1e-9, abs=1e-9)


def test_the_command_line_says_it_everywhere_and_what_it_wrote_can_be_used(tmp_path: Path) -> None:
    table, out = str(tmp_path / "t.csv"), tmp_path / "out"
    frame = weighted()
    frame.to_csv(table, index=False)
    options = ("--structures", "naive,tan", "--folds", "4", "--resamples", "4", "--predictions", "--holdout", table)
    run = call("learn", table, "--class", "kind", "--weight", "w", "-o", str(out), *options)
    assert run.code == 0, run
    said = "structures, cut points, bits and tests are from rows counted once, so the tests are descriptive"
    assert said in run.err
    assert said in re.sub(r"\s+", " ", (out / "report.html").read_text())
    document = json.loads((out / "comparison.json").read_text())
    rows, mass = used(frame)
    found = pd.read_parquet(out / "predictions.parquet")
    assert sorted(set(found["row"])) == np.flatnonzero(frame["w"] > 0).tolist(), "rows of the table"
    naive = found[found["structure"] == "naive"].sort_values("row")
    own = naive[["p:a", "p:b", "p:c"]].to_numpy()
    loss = log_loss(rows["kind"], own, sample_weight=mass) / np.log(2)
    assert document["structures"][0]["log_loss"] == pytest.approx(loss, rel=1e-9)
    structure = json.loads((out / "tan.json").read_text())
    jsonschema.validate(structure, json.loads((DOCS / "structure.schema.json").read_text()))
    classified = call("classify", str(out / "tan.json"), table, "-o", str(tmp_path / "p.csv"))
    assert classified.code == 0, classified
    probabilities = pd.read_csv(tmp_path / "p.csv").filter(regex="^p")
    own = probabilities[(frame["w"] > 0).to_numpy()].iloc[:, -3:].to_numpy()
    held = log_loss(rows["kind"], own, sample_weight=mass)
    assert document["structures"][1]["holdout"]["log_loss"] == pytest.approx(held / np.log(2), rel=1e-4)
    assert call("show", str(out / "tan.json"), "two").code == 0


def test_commands_that_only_count_refuse_them(tmp_path: Path) -> None:
    table = str(tmp_path / "t.csv")
    weighted(60).to_csv(table, index=False)
    for command in (("test", table, "--all"), ("profile", table)):
        said = refusal(*command, "--class", "kind", "--weight", "w")
        assert "holds numbers that are not whole" in said
        assert "give a column of counts, or bnx learn" in said


def test_weights_that_leave_no_row_or_are_missing_in_a_further_table_are_refused(tmp_path: Path) -> None:
    frame = pd.DataFrame({"one": list("xyxy"), "w": [0.5, 0, 0, 2.5], "kind": ["", "a", "b", ""]})
    table, good, bare = (str(tmp_path / name) for name in ("t.csv", "g.csv", "b.csv"))
    frame.to_csv(table, index=False)
    weighted(60).to_csv(good, index=False)
    weighted(60).drop(columns="w").to_csv(bare, index=False)
    command = ("--class", "kind", "--weight", "w", "-o", str(tmp_path / "o"))
    assert "the weight in w is 0 wherever the class is not blank" in refusal("learn", table, *command)
    assert "has no column 'w'" in refusal("learn", good, *command, "--holdout", bare)


def test_numeric_columns_are_cut_by_rows_and_summed_by_weights() -> None:
    frame = weighted(500, seed=3)
    draw = np.random.default_rng(9)
    frame["size"] = np.round(draw.normal(0, 1, 500) + (frame["kind"] == "a"), 2)
    frame = frame[["size", "one", "two", "w", "kind"]]
    fixed = {"smoothing": "laplace:1", "folds": 4, "bins": "frequency:5"}
    found = compared(frame, "kind", weight="w", structures=("naive", "kdb2"), **fixed)
    left = frame.assign(kind=frame["kind"].where(frame["w"] > 0, "")).drop(columns="w")
    assert found.classifiers[1].domains == compared(left, "kind", structures=("naive",), **fixed).classifiers[0].domains
    rows, mass = used(frame)
    cut = np.searchsorted(found.classifiers[1].domains[0].cuts, rows["size"], side="left")
    texts = [np.unique(rows[name], return_inverse=True)[1] for name in ("one", "two", "kind")]
    cells = np.array([cut, *texts])
    assert any(0 in parents or child == 0 < len(parents) for child, parents in enumerate(found.structures[1].parents))
    for child, parents in enumerate(found.structures[1].parents):
        expected = np.zeros(found.classifiers[1].counts[child].shape)
        np.add.at(expected, tuple(cells[[3, *parents, child]]), mass)
        assert np.abs(found.classifiers[1].counts[child] - expected).max() < 1e-9


@pytest.mark.parametrize("in_place", [False, True])
def test_chunks_of_rows_change_no_sum(in_place: bool) -> None:
    draw = np.random.default_rng(1)
    rows, target = draw.integers(0, 3, (4, 101)), draw.integers(0, 2, 101)
    mass, blocks = draw.integers(1, 99, 101) / 64, draw.integers(0, 5, 101).astype(np.uint8)
    whole, parts = (
        start_local(replace(coded(rows, target), weights=mass), blocks, 5, 1, silent, chunk=chunk, in_place=in_place)
        for chunk in (1000, 7)
    )
    for engine in (whole, parts):
        assert engine.weighed is not None
        assert (engine.weighed.of_rows == mass[engine.order]).all()
        for i, margin in enumerate(engine.weighed.margins):
            expected = np.zeros(margin.shape)
            np.add.at(expected, (blocks, target, rows[i]), mass)
            assert (margin == expected).all()
        assert (engine.weighed.by_class == engine.weighed.margins[0].sum(axis=2)).all()
