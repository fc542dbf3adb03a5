"""Reliability before and after calibration: one more pass of predictions out of fold, of a few structures only."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np

from bnx.calibrating import Calibration, uncalibrated
from bnx.engines import LocalEngine
from bnx.evaluation import Evaluation, MixedPredictor, Predictor
from bnx.fold_cells import Cell, cells_of
from bnx.kernels import pack_scores
from bnx.losses import Histograms, Scores, log_losses
from bnx.rating import rows_ranked
from bnx.reliability import BinSums, Curve, curve_of, sums_of_histogram, sums_of_packed, sums_of_weighed

__all__ = ["Reliability", "reliability_of"]

_ROWS = 16_384  # predicted at a time


@dataclass(frozen=True)
class Reliability:
    """``after`` is of the probabilities as they are given, ``before`` of the same tables without calibration.

    ``before`` is None for a mix, whose members are calibrated before it is made.
    """

    before: Curve | None
    after: Curve


@dataclass(frozen=True)
class _Pass:
    """All rows of one structure; ``sides``: 2 with what it says before calibration, which comes first, else 1.

    ``packed`` (sides, rows) where rows are ranked one by one, of no length if they are not; ``weights`` (rows,) or
    None.
    """

    evaluations: Sequence[Evaluation]
    cells: Sequence[Cell]
    number: int
    sides: int
    packed: np.ndarray
    weights: np.ndarray | None

    @property
    def engine(self) -> LocalEngine:
        """The engine whose threads work."""
        return self.evaluations[0].engine


@dataclass(frozen=True)
class _Part:
    """What one fold adds: log losses before calibration (bits), rows by weight, and histograms by side."""

    loss: float
    mass: float
    histograms: Sequence[Histograms]


def reliability_of(evaluations: Sequence[Evaluation], number: int, pooled: Scores, tempered: bool) -> Reliability:
    """Judge the most probable class of one structure or, by the number after the last, of the mix, out of fold.

    pooled: its scores, which are those after calibration; tempered: whether there is any. Before calibration the
    temperature is 1, and there are no offsets and no floor, but where training rows lack a class. Bins are those of the
    calibration error; where rows are too many to be ranked one by one they come from histograms.
    """
    cells, rows = cells_of(evaluations), sum(one.engine.rows for one in evaluations)
    exact, weights = rows_ranked(evaluations, rows)
    mix = number == evaluations[0].structures
    sides = 1 if mix or not tempered else 2
    packed = np.empty((sides, rows if exact else 0), np.int64)
    work = _Pass(evaluations, cells, number, sides, packed, weights)
    parts = work.engine.map(partial(_part, work), range(len(cells)), "scoring folds")
    loss = sum(part.loss for part in parts) / sum(part.mass for part in parts)
    losses = [loss, pooled.log_loss] if sides == 2 else [pooled.log_loss]
    curves = [curve_of(_sums(work, parts, side), len(evaluations), losses[side]) for side in range(sides)]
    return Reliability(None if mix else curves[0], curves[-1])


def _part(work: _Pass, k: int) -> _Part:
    """Predict one fold's rows, a few at a time."""
    cell = work.cells[k]
    evaluation = work.evaluations[cell.repeat]
    predictor = evaluation.predictor_of(cell.fold, work.number)
    bare = uncalibrated(evaluation.learned((cell.fold,)).training.class_mass)
    histograms = [] if work.packed.size else [Histograms.empty(evaluation.engine.classes) for _ in range(work.sides)]
    loss = mass = 0.0
    for run in evaluation.fold_rows[cell.fold]:
        for first in range(run.start, run.stop, _ROWS):
            last = min(first + _ROWS, run.stop)
            truth = evaluation.engine.target[first:last]
            own = slice(first + cell.shift, last + cell.shift)
            every, losses = _predicted(predictor, bare, work.sides, truth, first, last)
            weights = np.ones(len(truth)) if work.weights is None else work.weights[own]
            loss += float((weights * losses).sum())
            mass += float(weights.sum())
            for side, p in enumerate(every):
                if histograms:
                    histograms[side].add(p, truth)
                else:
                    pack_scores(p, 0, len(p), truth, p.shape[1], work.packed[side, own])
    return _Part(loss, mass, histograms)


def _predicted(
    predictor: Predictor | MixedPredictor, bare: Calibration, sides: int, truth: np.ndarray, first: int, last: int
) -> tuple[list[np.ndarray], np.ndarray]:
    """Predict rows before, if that is a side, and after; second, their log losses before, else zeros."""
    if sides == 1 or isinstance(predictor, MixedPredictor):
        return [predictor.probabilities(first, last)], np.zeros(last - first)
    evidence = predictor.terms.evidence(predictor.codes, first, last)
    before, after = (
        predictor.calibrated(evidence, calibration, first, last) for calibration in (bare, predictor.calibration)
    )
    return [before, after], _losses(before, evidence, predictor.log_prior, truth)


def _losses(p: np.ndarray, evidence: np.ndarray, log_prior: np.ndarray, truth: np.ndarray) -> np.ndarray:
    """Take the log losses in bits of uncalibrated p (N, C), by logs where a probability is too small to be a number."""
    losses = log_losses(p, truth)
    for row in np.flatnonzero(np.isinf(losses)).tolist():
        power = log_prior + np.concatenate([[0.0], evidence[row, : len(log_prior) - 1]])
        losses[row] = (np.logaddexp.reduce(power) - power[truth[row]]) / np.log(2)
    return losses


def _sums(work: _Pass, parts: Sequence[_Part], side: int) -> BinSums:
    """Sum up all rows of one side by bin."""
    if not work.packed.size:
        whole = parts[0].histograms[side]
        for part in parts[1:]:
            whole.merge(part.histograms[side])
        return sums_of_histogram(whole.counts[-1], whole.sums[-1])
    if work.weights is not None:
        return sums_of_weighed(work.packed[side], work.weights)
    return sums_of_packed(work.packed[side])
