"""How good probabilities are where rows have weights: sums, rankings and slopes, rows by their weight."""

from collections.abc import Sequence

import numpy as np

from bnx.losses import Ranking, Scores, Tally, bins_for, log_losses, scores_of

__all__ = ["weighed_ranking", "weighed_scores", "weighed_slope", "weighed_tally"]

_ROWS = 1 << 16  # summed at a time
_TINIEST = np.finfo(np.float64).tiny


def weighed_scores(p: np.ndarray, truth: np.ndarray, weights: np.ndarray) -> Scores:
    """Judge probabilities p (N, C) by the true class codes truth (N,), rows by their weights (N,)."""
    every = [slice(0, len(truth))]
    rankings = [weighed_ranking(p, every, truth, weights, column) for column in range(p.shape[1] + 1)]
    return scores_of(weighed_tally(p, every, truth, weights), rankings)


def weighed_tally(p: np.ndarray, parts: Sequence[slice], truth: np.ndarray, weights: np.ndarray) -> Tally:
    """Sum up some parts of the rows of p (N, C), truth (N,), weights (N,)."""
    pieces = [
        slice(first, min(first + _ROWS, part.stop)) for part in parts for first in range(part.start, part.stop, _ROWS)
    ]
    return Tally.merged([_tally(p[rows], truth[rows], weights[rows]) for rows in pieces])


def _tally(p: np.ndarray, truth: np.ndarray, weights: np.ndarray) -> Tally:
    classes = p.shape[1]
    losses, right = log_losses(p, truth), np.arange(classes) == truth[:, None]
    cell = truth.astype(np.int64) * classes + np.argmax(p, axis=1)
    confusion = np.bincount(cell, weights, classes * classes).reshape(classes, classes)
    mass, loss = float(weights.sum()), float((weights * losses).sum())
    with np.errstate(invalid="ignore"):
        spread = float((weights * np.square(losses - loss / mass)).sum())
    distances = np.square(p - right).sum(axis=1)
    return Tally(confusion, np.array([mass, loss, spread, (weights * distances).sum(), np.square(weights).sum()]))


def weighed_ranking(
    p: np.ndarray, parts: Sequence[slice], truth: np.ndarray, weights: np.ndarray, column: int
) -> Ranking:
    """Rank some parts of the rows of p (N, C) by the probability of a class or, for column C, by the largest.

    Pairs of a hit and a miss count by the product of their weights; bins of calibration hold equal weight.
    """
    own, true, mass = (np.concatenate([one[part] for part in parts]) for one in (p, truth, weights))
    top = column == p.shape[1]
    score = own.max(axis=1) if top else own[:, column]
    hit = np.argmax(own, axis=1) == true if top else true == column
    order = np.argsort(score, kind="stable")
    score, hit, mass = score[order], hit[order], mass[order]
    starts = np.flatnonzero(np.append(True, score[1:] != score[:-1]))
    hits, masses = np.add.reduceat(mass * hit, starts), np.add.reduceat(mass, starts)
    misses = np.add.reduceat(mass * ~hit, starts)
    ends = np.cumsum(masses)
    pairs = float(hits.sum() * misses.sum())
    area = float((hits * (np.cumsum(misses) - misses / 2)).sum()) / pairs if pairs else None
    bins = bins_for(len(score))
    middles = (2 * ends - masses) * bins / (2 * ends[-1])
    place = np.minimum(middles.astype(np.int64), bins - 1)
    apart = np.bincount(place, masses * score[starts] - hits, bins)
    return Ranking(area, float(np.abs(apart).sum() / ends[-1]))


def weighed_slope(
    p: np.ndarray, parts: Sequence[slice], truth: np.ndarray, weights: np.ndarray, power: float
) -> np.ndarray:
    """Sum the first and second derivative by t of the weighted log losses (nats) of p ** t, made to sum to 1, (2,).

    At t = ``power``; a probability of 0 counts as the smallest normal number.
    """
    sums = np.zeros(2)
    for part in parts:
        for first in range(part.start, part.stop, _ROWS):
            rows = slice(first, min(first + _ROWS, part.stop))
            logs = np.log(np.maximum(p[rows], _TINIEST))
            shares = np.exp(power * (logs - logs.max(axis=1, keepdims=True)))
            shares /= shares.sum(axis=1, keepdims=True)
            centre = (shares * logs).sum(axis=1)
            spread = (shares * np.square(logs - centre[:, None])).sum(axis=1)
            own = np.take_along_axis(logs, truth[rows].astype(np.int64)[:, None], axis=1).ravel()
            sums += [(weights[rows] * (centre - own)).sum(), (weights[rows] * spread).sum()]
    return sums
