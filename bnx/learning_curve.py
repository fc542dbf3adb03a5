"""Whether more rows would help: everything learnt anew from shares of every training fold (``--learning-curve``)."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.domains import Schema
from bnx.engines import LocalEngine
from bnx.evaluation import Evaluation, evaluate
from bnx.folds import sub_blocks
from bnx.gating import Bounds
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

    ``half``: what half the rows cost the recommended structure, bits; ``region`` of no practical difference, bits.
    """

    structures: tuple[int, ...]
    points: tuple[CurvePoint, ...]
    half: Difference | None
    region: float

    @property
    def verdict(self) -> str:
        """Tell what half the rows say of more rows."""
        if self.half is None or self.half.low <= 0 <= self.region < self.half.high:
            return UNKNOWN
        return FLAT if self.half.high <= self.region else HELPS


def measure_curve(
    evaluations: Sequence[Evaluation],
    schema: Schema,
    results: Sequence[StructureScore],
    recommended: int,
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
    chosen = tuple(dict.fromkeys((recipe.structures.index(recipe.baseline), recommended)))
    names = [recipe.structures[s] for s in chosen]
    whole = [results[s] for s in chosen]
    parts, points = sub_blocks(folds), []
    shares = sorted({max(1, round(parts * share)) for share in _SHARES})
    for k, taken in enumerate(shares):
        used = np.arange(parts) < taken
        ones = []
        for r, one in enumerate(evaluations):
            engine = _told(one.engine, k * len(evaluations) + r, len(shares) * len(evaluations))
            learners = [learner(name) for name in names]
            ones.append(evaluate(engine, schema, folds, learners, bounds, replace(recipe, mix=False), used))
        scores = score(ones, ())[0]
        costs = tuple(_cost(own, all_rows, folds) for own, all_rows in zip(scores, whole, strict=True))
        points.append(CurvePoint(taken / parts, _training_rows(ones), tuple(scores), costs))
    half = next(point.costs[-1] for point in points if point.share == 0.5)
    points.append(CurvePoint(1.0, _training_rows(evaluations), tuple(whole), (None,) * len(whole)))
    return LearningCurve(chosen, tuple(points), half, region_of([one.pooled.log_loss for one in results]))


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
