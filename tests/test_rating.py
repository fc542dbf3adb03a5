"""Scores joined from folds, ranked one by one or from histograms, against scores of all rows at once."""

from dataclasses import replace
from functools import cache

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, in_turns, predicted

from bnx import observing, rating
from bnx.calibrating import slope
from bnx.comparison import Comparison
from bnx.documents import predictions_table
from bnx.judging import inner_picks
from bnx.losses import Histograms, Tally, log_losses, ranking, scores, scores_of


@cache
def run(repeats: int = 1) -> Comparison:
    """Run four structures, two of which learn the same, on rows with several dependences."""
    random = np.random.default_rng(2)
    target = random.choice(3, 900, p=[0.5, 0.3, 0.2])
    columns = [random.integers(0, 3, 900)]
    for noise in (0.3, 0.5, 0.6, 0.9):
        columns.append(np.where(random.random(900) < noise, random.integers(0, 3, 900), (columns[-1] + target) % 3))
    frame = pd.DataFrame({f"x{i}": [f"v{level}" for level in column] for i, column in enumerate(columns)})
    frame["kind"] = np.array(["p", "q", "r"])[target]
    names = ("naive", "tan", "tan-tested", "kdb1", "kdb2")
    return compared(frame, "kind", folds=5, repeats=repeats, structures=names, require=("x1:x2",))


def whole_truth(found: Comparison) -> np.ndarray:
    engine = found.evaluations[0].engine
    truth = np.empty(engine.rows, np.int64)
    truth[engine.order] = engine.target
    return truth


def test_joined_scores_are_those_of_all_rows_at_once() -> None:
    found, truth = run(), whole_truth(run())
    fold = folds_of(found.evaluations[0])
    for s, result in enumerate(found.results):
        p = predicted(found, s)
        expected = scores(p, truth, 3)
        assert replace(result.pooled, log_loss=0, brier=0) == replace(
            expected, log_loss=0, brier=0, calibration_error=result.pooled.calibration_error
        ) or result.pooled.auc == pytest.approx(expected.auc, abs=1e-15)
        assert result.pooled.confusion == expected.confusion
        assert result.pooled.log_loss == pytest.approx(log_losses(p, truth).mean(), rel=1e-13)
        assert result.pooled.brier == pytest.approx(expected.brier, rel=1e-13)
        assert result.pooled.calibration_error == pytest.approx(expected.calibration_error, abs=1e-13)
        assert result.error == pytest.approx(log_losses(p, truth).std() / np.sqrt(900), rel=1e-12)
        assert result.slope == pytest.approx(slope(p, truth), rel=1e-7)
        for one in result.by_fold:
            own = fold == one.fold
            alone = scores(p[own], truth[own], 3)
            assert one.scores.auc == pytest.approx(alone.auc, abs=1e-15)
            assert one.scores.log_loss == pytest.approx(alone.log_loss, rel=1e-13)
            expected_slope = slope(p[own], truth[own])
            assert one.slope == (None if expected_slope is None else pytest.approx(expected_slope, rel=1e-7))


def test_the_mixture_takes_each_fold_from_its_pick() -> None:
    found, truth = run(), whole_truth(run())
    fold = folds_of(found.evaluations[0])
    picks = [0, 4, 1, 0, 2]
    _, mixed = rating.score(found.evaluations, picks)
    p = np.stack([predicted(found, s) for s in range(5)])[np.array(picks)[fold], np.arange(900)]
    expected = scores(p, truth, 3)
    assert mixed.confusion == expected.confusion
    assert mixed.log_loss == pytest.approx(expected.log_loss, rel=1e-13)
    assert mixed.auc == pytest.approx(expected.auc, abs=1e-15)
    _, same = rating.score(found.evaluations, [1] * 5)
    assert same == found.results[1].pooled


@pytest.mark.parametrize("repeats", [1, 2])
def test_histograms_bound_what_they_leave_open(repeats: int, monkeypatch: pytest.MonkeyPatch) -> None:
    found = run(repeats)
    picks = [k % 5 for k in range(5 * repeats)]
    exact, mixed = rating.score(found.evaluations, picks)
    monkeypatch.setattr(rating, "EXACT_ROWS", 100)
    monkeypatch.setattr(rating, "_BLOCK", 50)
    binned, binned_mixed = rating.score(found.evaluations, picks)
    pairs = [(one.pooled, other.pooled) for one, other in zip(exact, binned, strict=True)]
    for one, other in [*pairs, (mixed, binned_mixed)]:
        assert other.confusion == one.confusion
        assert other.log_loss == pytest.approx(one.log_loss, rel=1e-13)
        assert other.brier == pytest.approx(one.brier, rel=1e-13)
        assert one.auc is not None
        assert other.auc is not None
        assert one.auc_within == 0 < other.auc_within < 1e-2
        assert abs(other.auc - one.auc) <= other.auc_within + 1e-15
        assert abs(other.calibration_error - one.calibration_error) <= other.calibration_within + 1e-12
        classwise = abs(other.classwise_calibration_error - one.classwise_calibration_error)
        assert classwise <= other.calibration_within + 1e-12
    for one, other in zip(exact, binned, strict=True):
        assert other.slope == pytest.approx(one.slope, rel=1e-7), "all rows are among the 200,000"
        assert other.error == pytest.approx(one.error, rel=1e-12)
        assert [fold.scores.confusion for fold in one.by_fold] == [fold.scores.confusion for fold in other.by_fold]
    monkeypatch.setattr(rating, "SLOPE_ROWS", 450 * repeats)
    some, _ = rating.score(found.evaluations, picks)
    assert 0 < abs(some[0].slope - exact[0].slope) < 0.3


def test_the_note_names_the_bounds(monkeypatch: pytest.MonkeyPatch) -> None:
    found = run()
    assert observing.rating_notes(found.results) == []
    monkeypatch.setattr(rating, "EXACT_ROWS", 100)
    monkeypatch.setattr(observing, "EXACT_ROWS", 100)
    results, _ = rating.score(found.evaluations, inner_picks(found.evaluations))
    note = observing.rating_notes(results)[0]
    assert note.startswith("900 rows are too many to rank one by one: areas under the curve come from histograms")
    assert note.endswith("calibration slopes are found from 200,000 rows")


@pytest.mark.parametrize("exact", [True, False])
def test_rows_that_come_round_in_turns_and_threads_change_nothing(exact: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    found = run()
    one = found.evaluations[0]
    if not exact:
        monkeypatch.setattr(rating, "EXACT_ROWS", 100)
    picks = inner_picks([one])
    expected, honest = rating.score([one], picks)
    two = replace(one, engine=replace(one.engine, jobs=2))
    assert rating.score([two], picks) == (expected, honest)
    engine = in_turns(one.engine, 3)
    parts = engine.blocks // 5
    turned = replace(
        one, engine=engine, fold_rows=tuple(engine.rows_of(fold * parts, (fold + 1) * parts) for fold in range(5))
    )
    assert turned.rows_by_fold == one.rows_by_fold
    other, honest_too = rating.score([turned], picks)
    for a, b in zip([*(r.pooled for r in expected), honest], [*(r.pooled for r in other), honest_too], strict=True):
        assert a.confusion == b.confusion
        assert a.auc == pytest.approx(b.auc, abs=1e-15)
        assert a.log_loss == pytest.approx(b.log_loss, rel=1e-12)
    tables = [predictions_table(replace(found, evaluations=(each,))) for each in (one, turned)]
    assert tables[0].combine_chunks().to_pylist() == tables[1].combine_chunks().to_pylist()


def test_histograms_keep_scores_in_order_and_apart() -> None:
    """Every bin holds a run of scores, and scores half a percent apart lie in different ones, near 0 and near 1."""
    small = np.exp(np.linspace(np.log(1e-9), np.log(0.5), 4001))
    score = np.concatenate([[0.0], small, 1 - small[::-1], [1.0]])
    p = np.column_stack([score, 1 - score])
    places = []
    for k in range(len(score)):
        one = Histograms.empty(2)
        one.add(p[k : k + 1], np.zeros(1, np.uint8))
        places.append(int(one.counts[0].sum(axis=1).argmax()))
        assert one.counts[0, places[-1]].tolist() == [0, 1]
    assert (np.diff(places) >= 0).all()
    assert len(set(places)) > 0.9 * len(score)


def test_tallies_of_parts_make_the_whole() -> None:
    random = np.random.default_rng(4)
    p, truth = random.dirichlet(np.ones(3), 2000), random.integers(0, 3, 2000).astype(np.uint8)
    parts = []
    for low, high in ((0, 1), (1, 600), (600, 601), (601, 2000)):
        parts.append(Tally.empty(3))
        parts[-1].add(p, slice(low, high), truth)
    whole = Tally.merged(parts)
    losses = log_losses(p, truth)
    assert whole.rows == 2000
    assert whole.errors == (p.argmax(axis=1) != truth).sum()
    assert whole.loss_deviation == pytest.approx(losses.std(), rel=1e-12)
    found = scores_of(whole, [ranking(p, [slice(0, 2000)], truth, column) for column in range(4)])
    assert found.log_loss == pytest.approx(losses.mean(), rel=1e-13)
