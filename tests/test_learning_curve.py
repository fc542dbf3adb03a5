"""The learning curve: its last point is the ordinary score, shares are by-hand counts, rows left out change nothing."""

import copy
import json
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import coded_frame, compared, folds_of, recipe_of, started
from commandline import FAST, call
from jsonschema import Draft202012Validator
from test_yardstick import table

from bnx.comparison import Comparison
from bnx.curve_documents import curve_entry, curve_sentence
from bnx.engines.local import CHUNK
from bnx.evaluation import evaluate
from bnx.folds import assign_blocks, sub_blocks
from bnx.gating import Bounds
from bnx.learners import learner
from bnx.learning_curve import FLAT, HELPS, UNKNOWN, CurvePoint, LearningCurve
from bnx.paired import Difference, corrected_t
from bnx.report import report_html

SCHEMA = json.loads((Path(__file__).parent.parent / "docs/comparison.schema.json").read_text(encoding="utf-8"))


@cache
def curved(**more: Any) -> Comparison:
    return compared(table(), "grade", structures=("naive", "tan", "kdb1"), learning_curve=True, **more)


@pytest.mark.parametrize(
    ("more", "shares"),
    [
        ({"folds": 4}, [0.125, 0.25, 0.5, 1.0]),
        ({"folds": 3}, [0.125, 0.25, 0.5, 1.0]),
        ({"folds": 10}, [0.25, 0.5, 1.0]),
        ({"folds": 21}, [0.5, 1.0]),
        ({"folds": 3, "repeats": 2}, [0.125, 0.25, 0.5, 1.0]),
        ({"folds": 3, "group": "site"}, [0.25, 0.5, 1.0]),
    ],
)
def test_the_last_point_is_the_ordinary_score_and_costs_are_against_it(
    more: dict[str, Any], shares: list[float]
) -> None:
    found = curved(**more)
    curve, names = found.curve, found.recipe.structures
    assert curve is not None
    assert [point.share for point in curve.points] == pytest.approx(shares, abs=0.08)
    assert [names[s] for s in curve.structures] == list(
        dict.fromkeys(["naive", names[found.recommendation.recommended]])
    )
    last, rows = curve.points[-1], len(table())
    assert last.scores == tuple(found.results[s] for s in curve.structures)
    assert last.rows == pytest.approx(rows * (1 - 1 / found.folds), abs=1e-9)
    for point in curve.points[:-1]:
        for own, whole, cost in zip(point.scores, last.scores, point.costs, strict=True):
            assert sum(fold.rows for fold in own.by_fold) == rows * found.recipe.repeats, "all held-out rows are judged"
            assert cost == corrected_t(own.fold_losses - whole.fold_losses, found.folds)
        assert point.rows == pytest.approx(point.share * last.rows, rel=1e-12)
    assert list(np.unique([point.rows for point in curve.points])) == [point.rows for point in curve.points]
    assert curve.half == curve.points[-2].costs[-1]


def test_half_the_rows_by_hand() -> None:
    """Naive Bayes without any choice: counts of half the blocks of the other folds, with one record added per level."""
    frame = table()
    found = compared(
        frame, "grade", structures=("naive",), folds=4, smoothing="laplace:1", temperature=False, learning_curve=True
    )
    assert found.curve is not None
    evaluation = found.evaluations[0]
    codes = {name: np.unique(frame[name], return_inverse=True)[1] for name in frame}
    block = evaluation.engine.groups.astype(int) // evaluation.engine.classes
    fold, parts = folds_of(evaluation), sub_blocks(4)
    assert (fold == block // parts).all()
    truth, loss = codes.pop("grade"), np.zeros(len(frame))
    for number in range(4):
        train = (fold != number) & (block % parts < parts // 2)
        counts = np.bincount(truth[train], minlength=3)
        p = np.tile(counts / counts.sum(), (len(frame), 1))
        for own in codes.values():
            levels = int(own.max()) + 1
            cells = np.zeros((3, levels))
            np.add.at(cells, (truth[train], own[train]), 1)
            seen = cells.sum(axis=0) > 0  # a level that training rows lack says nothing
            chance = np.where(seen, (cells + 1) / (counts[:, None] + levels), 1)
            p *= chance[:, own].T
        right = p[np.arange(len(frame)), truth] / p.sum(axis=1)
        loss[fold == number] = -np.log2(right[fold == number])
    half = found.curve.points[-2]
    assert half.scores[0].pooled.log_loss == pytest.approx(loss.mean(), rel=1e-12)
    assert half.rows == np.mean([((fold != k) & (block % parts < parts // 2)).sum() for k in range(4)])


@pytest.mark.parametrize("chunk", [CHUNK, 100])
def test_rows_that_a_share_leaves_out_change_nothing_that_is_learnt(chunk: int) -> None:
    frame, folds = table(), 4
    parts = sub_blocks(folds)
    target = np.unique(frame["grade"], return_inverse=True)[1]
    blocks = assign_blocks(target, np.arange(len(frame)), 1, folds, 0).astype(np.int64)
    used, other = np.tile(np.arange(parts) < parts // 2, (folds, 1)), frame.copy()
    outside = np.flatnonzero(~used.ravel()[blocks])
    for k, name in enumerate(("dock", "alarm", "lane")):
        other.loc[outside, name] = np.random.default_rng(k).permutation(frame.loc[outside, name])
    assert not other.equals(frame)
    learners, recipe = [learner("naive"), learner("kdb2"), learner("kdb2-tested")], recipe_of("grade")
    bounds = Bounds(tuple(frame.columns.drop("grade")))

    def learnt(rows: pd.DataFrame, which: np.ndarray | None) -> list[Any]:
        coded = coded_frame(rows, "grade")
        engine = started(coded, blocks, folds * parts, chunk=chunk)
        found = evaluate(engine, coded.schema, folds, learners, bounds, recipe, which)
        return [
            (
                found.learned((fold,)).structures,
                [one.temperature for one in found.choices[(fold,)].calibrations],
                [one.offsets.tolist() for one in found.choices[(fold,)].calibrations],
                found.choices[(fold,)].smoothings,
                found.choices[(fold,)].losses.tolist(),
            )
            for fold in range(folds)
        ]

    assert learnt(frame, used) == learnt(other, used)
    assert learnt(frame, None) != learnt(other, None)
    assert learnt(frame, None) == learnt(frame, np.ones((folds, parts), bool))


@pytest.mark.parametrize(
    ("half", "verdict", "words"),
    [
        (Difference(0.03, 0.02, 0.04, 0.001), HELPS, "[+0.020, +0.040]: more rows would probably help."),
        (Difference(0.008, 0.003, 0.013, 0.01), HELPS, "more rows would probably help."),
        (Difference(0.003, 0.001, 0.005, 0.01), FLAT, "the curve is flat, to within 0.01 bits."),
        (Difference(-0.02, -0.03, -0.01, 0.01), FLAT, "the curve is flat"),
        (Difference(0.02, -0.01, 0.05, 0.2), UNKNOWN, "whether more rows would help cannot be told"),
        (None, UNKNOWN, "cannot be told, as a log loss is infinite"),
    ],
)
def test_what_half_the_rows_say(half: Difference | None, verdict: str, words: str) -> None:
    points = (CurvePoint(0.5, 50.0, (), (None, half)), CurvePoint(1.0, 100.0, (), (None, None)))
    curve = LearningCurve((0, 1), points, 0.01)
    assert curve.verdict == verdict
    assert words in curve_sentence(curve, "naive")


def test_what_is_written_and_printed(tmp_path: Path) -> None:
    table().to_csv(tmp_path / "t.csv", index=False)
    given = ("learn", str(tmp_path / "t.csv"), "--class", "grade", *FAST, "--structures", "naive,tan")
    took = call(*given, "--learning-curve", "-o", str(tmp_path / "out"))
    assert took.code == 0, took
    document = json.loads((tmp_path / "out/comparison.json").read_text(encoding="utf-8"))
    valid = Draft202012Validator(SCHEMA)
    assert [error.message for error in valid.iter_errors(document)] == []
    curve = document["learning_curve"]
    for one in curve["points"][-1]["structures"]:
        ordinary = next(entry for entry in document["structures"] if entry["name"] == one["name"])
        assert (one["log_loss"], one["log_loss_se"]) == (ordinary["log_loss"], ordinary["log_loss_se"])
        assert one["fold_log_losses"] == [fold["log_loss"] for fold in ordinary["by_fold"]]
    for key in curve:
        broken = copy.deepcopy(document)
        del broken["learning_curve"][key]
        assert not valid.is_valid(broken)
    assert curve["sentence"] in " ".join(took.out.split())
    page = report_html(document, {})
    assert 'id="curve-table"' in page
    assert curve["sentence"] in page
    for point in curve["points"]:
        assert f"  {point['training_rows']:,.0f} " in took.out
        assert f'<td class="num">{point["training_rows"]:,.0f}</td>' in page
    plain = call(*given, "-o", str(tmp_path / "plain"))
    assert "training rows" not in plain.out
    assert json.loads((tmp_path / "plain/comparison.json").read_text(encoding="utf-8"))["learning_curve"] is None


def test_without_the_option_nothing_is_learnt_again() -> None:
    found = compared(table(), "grade", structures=("naive",), folds=3)
    assert found.curve is None
    assert curve_entry(found) is None


def test_a_group_that_is_a_fold_cannot_be_shared_out() -> None:
    frame = table()
    frame["site"] = [f"s{number % 3}" for number in range(len(frame))]
    found = compared(frame, "grade", structures=("naive",), folds=3, group="site", learning_curve=True)
    assert found.curve is not None
    assert (len(found.curve.points), found.curve.verdict) == (1, UNKNOWN)
    assert curve_sentence(found.curve, "naive") == (
        "Whether more rows would help cannot be told, as every fold is one group."
    )
