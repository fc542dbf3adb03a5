"""Calibration of the posterior: one temperature for the evidence, an offset per class, and a floor."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from bnx.errors import DataError
from bnx.kernels import calibration_sums, posteriors, slope_sums

__all__ = [
    "FEWEST_ERRORS",
    "Calibration",
    "apply",
    "fit",
    "fit_against_first",
    "identity",
    "probabilities",
    "slope",
    "solved",
    "steepness",
    "uncalibrated",
    "without_evidence",
]

_TEMPERATURE_PENALTY = 4.0
_OFFSET_PENALTY = 2.0
_FLOORS = (0.5, 1.0, 3.0)
_STEPS = 200
_LONGEST_STEP = 2.0
_STEEPEST_SLOPE = 100.0
FEWEST_ERRORS = 10


@dataclass(frozen=True)
class Calibration:
    """What turns evidence into probabilities.

    ``temperature`` multiplies the evidence; ``offsets`` (C,) in nats are added per class; a share ``floor`` of every
    probability is replaced by ``shares`` (C,), the class shares.
    """

    temperature: float
    offsets: np.ndarray
    floor: float
    shares: np.ndarray


@dataclass(frozen=True)
class _Rows:
    """Rows to fit on: ``evidence`` (N, at least C - 1) for each class against the first, ``prior`` (N, C), both nats.

    ``truth`` (N,): a class that the prior allows; ``weights`` (N,): how many rows each stands for; ``mass``: their sum.
    """

    evidence: np.ndarray
    prior: np.ndarray
    truth: np.ndarray
    weights: np.ndarray
    mass: float


@dataclass(frozen=True)
class _Curve:
    """The penalised loss at one point, in nats per row.

    ``value`` itself; ``gradient`` (C + 1,) and ``hessian`` by (ln t, offsets); ``fisher`` is the part of the Hessian
    that is always positive definite, with no pivot below ``least``.
    """

    value: float
    gradient: np.ndarray
    hessian: np.ndarray
    fisher: np.ndarray
    least: float


def identity(classes: int) -> Calibration:
    """Leave probabilities as they are: temperature 1, no offsets, no floor."""
    return Calibration(1.0, np.zeros(classes), 0.0, np.full(classes, 1 / classes))


def uncalibrated(class_counts: np.ndarray) -> Calibration:
    """Leave probabilities as they are, unless the training rows (C,) lack a class: then a floor of half a record.

    Otherwise such a class would have the probability 0, and a single record of it an infinite loss.
    """
    if class_counts.all():
        return identity(len(class_counts))
    rows = int(class_counts.sum())
    shares = (class_counts + 1 / len(class_counts)) / (rows + 1)
    return replace(identity(len(class_counts)), floor=min(_FLOORS[0] / rows, 1.0), shares=shares)


def fit(
    evidence: np.ndarray,
    log_prior: np.ndarray,
    truth: np.ndarray,
    shares: np.ndarray,
    weights: np.ndarray | None = None,
) -> Calibration:
    """Fit temperature t and offsets b, then choose the floor on the same rows.

    ``evidence`` (N, C) nats: sum of log table terms per class; ``log_prior`` (N, C) or (C,) nats, -inf for a class
    absent from the rows a model was learnt on; ``truth`` (N,) codes; ``shares`` (C,) sum to 1;
    ``weights`` (N,): how many rows each stands for, 1 if not given. N below is their sum.
    Minimises mean log loss + (4 (ln t)^2 + 2 sum b^2) / N over the rows whose class the prior allows. The floor is .5,
    1 or 3 by the number of rows (at most 1), whichever has the least log loss over all rows, the smallest among equals.

    Raises:
        DataError: there are no rows.

    Source: Guo, Pleiss, Sun & Weinberger 2017, section 4 (temperature).
    """
    prior = np.broadcast_to(log_prior, evidence.shape)
    mass = np.ones(len(truth)) if weights is None else weights
    return fit_against_first(_against_first(evidence, prior), prior, truth, shares, mass)


def fit_against_first(
    evidence: np.ndarray, log_prior: np.ndarray, truth: np.ndarray, shares: np.ndarray, weights: np.ndarray
) -> Calibration:
    """Fit as ``fit`` does, to evidence (N, at least C - 1) for each class against the first.

    log_prior (N, C).

    Raises:
        DataError: there are no rows.
    """
    if len(truth) == 0:
        raise DataError("there are 0 rows to calibrate on; at least 1 is needed")
    prior = np.ascontiguousarray(log_prior)
    known = np.isfinite(prior[np.arange(len(truth)), truth])
    rows = _Rows(evidence, prior, truth, weights, float(weights.sum()))
    if not known.all():
        rows = _Rows(evidence[known], prior[known], truth[known], weights[known], float(weights[known].sum()))
    point = _minimum(rows) if len(rows.truth) else np.zeros(prior.shape[1] + 1)
    bare = Calibration(float(np.exp(point[0])), point[1:], 0.0, shares)
    own = probabilities(bare, prior, evidence)[np.arange(len(truth)), truth]
    floors = [min(rows_share / float(weights.sum()), 1.0) for rows_share in _FLOORS]
    losses = [_floored_loss(own, shares[truth], floor, weights) for floor in floors]
    return Calibration(bare.temperature, bare.offsets, floors[int(np.argmin(losses))], shares)


def apply(calibration: Calibration, log_prior: np.ndarray, evidence: np.ndarray) -> np.ndarray:
    """Give calibrated probabilities (N, C); rows sum to 1.

    ``log_prior`` (N, C) or (C,) and ``evidence`` (N, C) in nats. A class with prior -inf gets the floor's share only.
    """
    return probabilities(calibration, log_prior, _against_first(evidence, log_prior))


def probabilities(calibration: Calibration, log_prior: np.ndarray, evidence: np.ndarray) -> np.ndarray:
    """Give calibrated probabilities (N, C) as ``apply`` does, from evidence for each class against the first.

    evidence (N, at least C - 1), C-contiguous.
    """
    bias = np.ascontiguousarray(np.atleast_2d(log_prior) + calibration.offsets)
    out = np.empty((len(evidence), bias.shape[1]))
    posteriors(evidence, bias, calibration.temperature, calibration.floor, calibration.shares, out)
    return out


def without_evidence(calibration: Calibration, log_prior: np.ndarray) -> np.ndarray:
    """Give the probabilities (C,) of a record of which nothing was observed: the prior (C,), nats, as it is.

    Calibration is of evidence, and there is none. Only where the prior rules a class out does the floor come in.
    """
    prior = np.exp(log_prior)
    if (prior > 0).all():
        return np.asarray(prior / prior.sum())
    return np.asarray((1 - calibration.floor) * prior / prior.sum() + calibration.floor * calibration.shares)


def slope(p: np.ndarray, truth: np.ndarray) -> float | None:
    """Find the calibration slope: the power t at which ``p`` (N, C) ** t, made to sum to 1, fits ``truth`` (N,) best.

    Below 1: too sure; above 1: too timid. No penalty and no offsets; searched from 0 to 100. None with fewer than 10
    errors. A probability of 0 counts as the smallest normal number.

    Source: Cox 1958 (slope of the log odds), without the intercept.
    """
    if int((np.argmax(p, axis=1) != truth).sum()) < FEWEST_ERRORS:
        return None

    def derivatives(t: float) -> np.ndarray:
        sums = np.zeros(2)
        slope_sums(p, 0, len(truth), truth, t, sums)
        return sums

    return steepness(derivatives)


def steepness(derivatives: Callable[[float], np.ndarray], start: float = 1.0) -> float:
    """Find the power of least log loss from the first and second derivative (2,) of the loss by it.

    Newton's steps within a shrinking interval. What is left after a step of Newton's is about its square.
    """
    low, high, t = 0.0, _STEEPEST_SLOPE, start
    for _ in range(_STEPS):
        first, second = derivatives(t).tolist()
        low, high = (low, t) if first > 0 else (t, high)
        newton = t - first / second if second > 0 else np.inf
        following = newton if low < newton < high else (low + high) / 2
        apart = abs(following - t) / max(t, 1e-3)
        t = following
        if apart <= (1e-5 if following == newton else 1e-9):
            break
    return float(t)


def _against_first(evidence: np.ndarray, log_prior: np.ndarray) -> np.ndarray:
    """Subtract the evidence (N, C) for the first class; evidence for a class that cannot be is 0."""
    terms = np.where(np.isneginf(log_prior), 0.0, evidence)
    return np.ascontiguousarray(terms[:, 1:] - terms[:, :1])


def _floored_loss(own: np.ndarray, share: np.ndarray, floor: float, weights: np.ndarray) -> float:
    """Sum the weighted log loss in nats of probabilities ``own`` (N,) that give way to ``share`` (N,) by ``floor``."""
    with np.errstate(divide="ignore"):
        return float(-(weights * np.log((1 - floor) * own + floor * share)).sum())


def _minimum(rows: _Rows) -> np.ndarray:
    """Find (ln t, offsets) of least penalised loss by damped Newton steps from t = 1, no offsets."""
    point = np.zeros(rows.prior.shape[1] + 1)
    curve = _curve(rows, point)
    for _ in range(_STEPS):
        step, drop = _newton_step(curve)
        if drop <= 1e-11 * (1.0 + curve.value):
            point = np.add(point, step)
            break
        point, curve, moved = _damped(rows, point, curve, step, drop)
        if not moved:
            break
    return point


def _newton_step(curve: _Curve) -> tuple[np.ndarray, float]:
    """Give the step and the drop that it promises, by the exact Hessian where that leads down, else its safe part."""
    step, lowest = solved(curve.hessian, -curve.gradient, curve.least)
    if lowest < curve.least:
        step, _ = solved(curve.fisher, -curve.gradient, curve.least)
    step *= _LONGEST_STEP / max(abs(float(step[0])), _LONGEST_STEP)
    return step, float(-(curve.gradient * step).sum())


def solved(matrix: np.ndarray, right: np.ndarray, least: float) -> tuple[np.ndarray, float]:
    """Solve a small symmetric system by elimination in a fixed order; pivots below ``least`` are raised to it.

    Gives the solution and the lowest pivot as it was.
    """
    rest, solution = matrix.copy(), right.copy()
    pivots = np.empty(len(right))
    for k in range(len(right)):
        pivots[k] = rest[k, k]
        factors = rest[k + 1 :, k] / max(pivots[k], least)
        rest[k + 1 :, k + 1 :] -= factors[:, None] * rest[k, k + 1 :]
        solution[k + 1 :] -= factors * solution[k]
    for k in reversed(range(len(right))):
        known = (rest[k, k + 1 :] * solution[k + 1 :]).sum()
        solution[k] = (solution[k] - known) / max(pivots[k], least)
    return solution, float(pivots.min())


def _damped(
    rows: _Rows, point: np.ndarray, curve: _Curve, step: np.ndarray, drop: float
) -> tuple[np.ndarray, _Curve, bool]:
    """Halve the step until the loss falls by a fair part of what it promises; False if none does."""
    share = 1.0
    value = curve.value
    for _ in range(60):
        reached = point + share * step
        there = _curve(rows, reached)
        fair = there.value <= value - 1e-4 * share * drop
        if fair or (share == 1.0 and drop < 1e-11 and there.value <= value * (1 + 1e-13)):
            return reached, there, True
        share /= 2
    return point, curve, False


def _penalty(rows: _Rows, point: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Weigh the penalty: its weights (C + 1,) per row, and their product with the point."""
    weights = np.full(len(point), _OFFSET_PENALTY / rows.mass)
    weights[0] = _TEMPERATURE_PENALTY / rows.mass
    return weights, weights * point


def _curve(rows: _Rows, point: np.ndarray) -> _Curve:
    """Take the penalised loss at (ln t, offsets) with gradient and Hessian, nats per row."""
    sums = np.zeros((len(point) + 1, len(point)))
    loss = calibration_sums(
        rows.evidence, rows.prior, rows.truth, rows.weights, float(np.exp(point[0])), point[1:], sums
    )
    sums /= rows.mass
    penalty, pull = _penalty(rows, point)
    fisher = sums[1:] + 2 * np.diag(penalty)
    hessian = fisher.copy()
    hessian[0, 0] += sums[0, 0]
    value = loss / rows.mass + float((pull * point).sum())
    return _Curve(value, sums[0] + 2 * pull, hessian, fisher, 2 * float(penalty.min()))
