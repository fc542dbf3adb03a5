"""Whether more rows would help: everything learnt anew from shares of every training fold (``--learning-curve``)."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.coding import Coded
from bnx.engines import LocalEngine
from bnx.evaluation import Evaluation, evaluate
from bnx.gating import Bounds
from bnx.judging import Recommendation
from bnx.learners import learner
from bnx.paired import Difference, corrected_t
from bnx.picking import apart, region_of
from bnx.rating import StructureScore, score
from bnx.recipe import Recipe

__all__ = ["FLAT", "HELPS", "UNKNOWN", "CurvePoint", "LearningCurve", "measure_curve"]

_SHARES = (0.125, 0.25, 0.5)
FLAT, HELPS, UNKNOWN = "flat", "more rows would probably help", "cannot be told"


@dataclass(frozen=True)
class CurvePoint:
    """What a share of the blocks of every training fold gives, on the same held-out folds.

    ``rows``: mean number of training rows; per structure its ``scores`` and its ``costs``: log loss by fold less that
    of all training rows, bits, None for all rows and where a log loss is infinite.
    """

    share: float
    rows: float
    scores: tuple[StructureScore, ...]
    costs: tuple[Difference | None, ...]


@dataclass(frozen=True)
class LearningCurve:
    """Log loss by training rows of ``structures`` (by number, the recommended one last), all rows last.

    ``region`` of no practical difference, bits.
    """

    structures: tuple[int, ...]
    points: tuple[CurvePoint, ...]
    region: float

    @property
    def share(self) -> float | None:
        """The largest share before all rows, about half; None where rows of a group cannot be told apart."""
        return self.points[-2].share if len(self.points) > 1 else None

    @property
    def half(self) -> Difference | None:
        """What that share costs the recommended structure, bits."""
        return self.points[-2].costs[-1] if len(self.points) > 1 else None

    @property
    def verdict(self) -> str:
        """Tell what half the rows say of more rows."""
        half = self.half
        if half is None or half.low <= 0 <= self.region < half.high:
            return UNKNOWN
        return FLAT if half.high <= self.region else HELPS


def measure_curve(
    evaluations: Sequence[Evaluation],
    coded: Coded,
    results: Sequence[StructureScore],
    recommendation: Recommendation,
    bounds: Bounds,
    recipe: Recipe,
    folds: int,
) -> LearningCurve | None:
    """Learn the baseline and the recommended structure from shares of the rows; None unless the recipe asks for it.

    results: of the structures from all rows, which are the last point of the curve.

    Source: Nadeau & Bengio 2003.
    """
    if not recipe.learning_curve:
        return None
    chosen = tuple(dict.fromkeys((recipe.structures.index(recipe.baseline), recommendation.recommended)))
    names = [recipe.structures[s] for s in chosen]
    whole = [results[s] for s in chosen]
    shares, points = _shares(evaluations, folds), []
    for k, masks in enumerate(shares):
        ones = []
        for r, (one, used) in enumerate(zip(evaluations, masks, strict=True)):
            engine = _told(one.engine, k * len(evaluations) + r, len(shares) * len(evaluations))
            learners = [learner(name) for name in names]
            ones.append(evaluate(engine, coded.table.schema, folds, learners, bounds, replace(recipe, mix=False), used))
        scores, rows = score(ones, ())[0], _training_rows(ones)
        costs = tuple(_cost(own, all_rows, folds) for own, all_rows in zip(scores, whole, strict=True))
        points.append(CurvePoint(rows / _training_rows(evaluations), rows, tuple(scores), costs))
    points.append(CurvePoint(1.0, _training_rows(evaluations), tuple(whole), (None,) * len(whole)))
    return LearningCurve(chosen, tuple(points), region_of([one.pooled.log_loss for one in results]))


def _shares(evaluations: Sequence[Evaluation], folds: int) -> list[list[np.ndarray]]:
    """List different shares but all, smallest first: the blocks to use in every repeat, (folds, blocks of a fold) bool.

    In every fold the first blocks are used, as many as come nearest to the share of its rows: where rows of a group
    stay together, blocks differ in size.
    """
    blocks = [one.engine.class_counts.sum(axis=1).reshape(folds, -1) for one in evaluations]
    found: dict[tuple[bytes, ...], list[np.ndarray]] = {}
    for share in _SHARES:
        masks = [_nearest(rows, share) for rows in blocks]
        if any(rows[~used].any() for rows, used in zip(blocks, masks, strict=True)):
            found.setdefault(tuple(used.tobytes() for used in masks), masks)
    return list(found.values())


def _nearest(rows: np.ndarray, share: float) -> np.ndarray:
    """Mark the first blocks of every fold that hold about a share of its rows (folds, blocks), but not none of them."""
    reached = np.cumsum(rows, axis=1) / np.maximum(rows.sum(axis=1, keepdims=True), 1)
    last = np.where(reached > 0, np.abs(reached - share), np.inf).argmin(axis=1)
    return np.asarray(np.arange(rows.shape[1]) <= last[:, None])


def _told(engine: LocalEngine, done: int, total: int) -> LocalEngine:
    """Let everything that an engine does be told as one step of the curve."""
    return replace(engine, progress=lambda *_: engine.progress("learning curve", done, total))


def _cost(own: StructureScore, whole: StructureScore, folds: int) -> Difference | None:
    differences = apart(own.fold_losses, whole.fold_losses)
    return corrected_t(differences, folds) if np.isfinite(differences).all() else None


def _training_rows(evaluations: Sequence[Evaluation]) -> float:
    """Take the mean number of rows that a fold is predicted from."""
    rows = [
        int(one.learned((fold,)).training.class_counts.sum())
        for one in evaluations
        for fold in range(len(one.fold_rows))
    ]
    return sum(rows) / len(rows)
