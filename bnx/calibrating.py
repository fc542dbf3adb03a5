"""Calibration of the posterior: one temperature for the evidence, an offset per class, and a floor."""

from dataclasses import dataclass

import numpy as np

from bnx.errors import DataError

__all__ = ["Calibration", "apply", "fit", "identity", "slope"]

_TEMPERATURE_PENALTY = 4.0
_OFFSET_PENALTY = 2.0
_FLOORS = (0.5, 1.0, 3.0)
_BLOCK = 8192
_STEPS = 200
_LONGEST_STEP = 2.0
_STEEPEST_SLOPE = 100.0
_FEWEST_ERRORS = 10


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
    """Rows to fit on: ``prior`` and ``evidence`` (C, N) in nats, ``truth`` (N,), a class that the prior allows.

    ``weights`` (N,): how many rows each stands for; ``mass``: their sum.
    """

    prior: np.ndarray
    evidence: np.ndarray
    truth: np.ndarray
    weights: np.ndarray
    mass: float


@dataclass(frozen=True)
class _Curve:
    """The penalised loss at one point, in nats per row.

    ``gradient`` (C + 1,) and ``hessian`` by (ln t, offsets); ``fisher`` is the part of the Hessian that is always
    positive definite, with no pivot below ``least``.
    """

    gradient: np.ndarray
    hessian: np.ndarray
    fisher: np.ndarray
    least: float


def identity(classes: int) -> Calibration:
    """Leave probabilities as they are: temperature 1, no offsets, no floor."""
    return Calibration(1.0, np.zeros(classes), 0.0, np.full(classes, 1 / classes))


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
    if len(truth) == 0:
        raise DataError("there are 0 rows to calibrate on; at least 1 is needed")
    prior = np.broadcast_to(log_prior, evidence.shape)
    known = np.isfinite(prior[np.arange(len(truth)), truth])
    mass = np.ones(len(truth)) if weights is None else weights
    rows = _Rows(*_columns(evidence[known], prior[known]), truth[known], mass[known], float(mass[known].sum()))
    point = _minimum(rows) if len(rows.truth) else np.zeros(evidence.shape[1] + 1)
    bare = Calibration(float(np.exp(point[0])), point[1:], 0.0, shares)
    own = apply(bare, log_prior, evidence)[np.arange(len(truth)), truth]
    floors = [min(rows_share / float(mass.sum()), 1.0) for rows_share in _FLOORS]
    losses = [_floored_loss(own, shares[truth], floor, mass) for floor in floors]
    return Calibration(bare.temperature, bare.offsets, floors[int(np.argmin(losses))], shares)


def apply(calibration: Calibration, log_prior: np.ndarray, evidence: np.ndarray) -> np.ndarray:
    """Give calibrated probabilities (N, C); rows sum to 1.

    ``log_prior`` (N, C) or (C,) and ``evidence`` (N, C) in nats. A class with prior -inf gets the floor's share only.
    """
    prior, terms = _columns(evidence, np.broadcast_to(log_prior, evidence.shape))
    p = np.empty(evidence.shape)
    for start in range(0, evidence.shape[0], _BLOCK):
        part = slice(start, start + _BLOCK)
        power = prior[:, part] + calibration.temperature * terms[:, part] + calibration.offsets[:, None]
        p[part] = _softmax(power).T
    return p if calibration.floor == 0 else (1 - calibration.floor) * p + calibration.floor * calibration.shares


def slope(p: np.ndarray, truth: np.ndarray) -> float | None:
    """Find the calibration slope: the power t at which ``p`` (N, C) ** t, made to sum to 1, fits ``truth`` (N,) best.

    Below 1: too sure; above 1: too timid. No penalty and no offsets; searched from 0 to 100. None with fewer than 10
    errors. A probability of 0 counts as the smallest normal number.

    Source: Cox 1958 (slope of the log odds), without the intercept.
    """
    if int((np.argmax(p, axis=1) != truth).sum()) < _FEWEST_ERRORS:
        return None
    logs = np.log(np.maximum(np.ascontiguousarray(p.T), np.finfo(np.float64).tiny))
    low, high, t = 0.0, _STEEPEST_SLOPE, 1.0
    for _ in range(_STEPS):
        first, second = _slope_derivatives(logs, truth, t)
        low, high = (low, t) if first > 0 else (t, high)
        newton = t - first / second if second > 0 else np.inf
        following = newton if low < newton < high else (low + high) / 2
        if abs(following - t) <= 1e-9 * max(t, 1e-3):
            break
        t = following
    return float(following)


def _columns(evidence: np.ndarray, prior: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Lay out prior and evidence class by class, (C, N) each; evidence for a class that cannot be is 0."""
    columns = np.array(prior.T, order="C")
    terms = np.array(evidence.T, order="C")
    terms[np.isneginf(columns)] = 0.0
    return columns, terms


def _softmax(power: np.ndarray) -> np.ndarray:
    """Turn log weights (C, n) into probabilities that sum to 1 over the classes."""
    weight: np.ndarray = np.exp(power - power.max(axis=0))
    weight /= weight.sum(axis=0)
    return weight


def _floored_loss(own: np.ndarray, share: np.ndarray, floor: float, weights: np.ndarray) -> float:
    """Sum the weighted log loss in nats of probabilities ``own`` (N,) that give way to ``share`` (N,) by ``floor``."""
    with np.errstate(divide="ignore"):
        return float(-(weights * np.log((1 - floor) * own + floor * share)).sum())


def _minimum(rows: _Rows) -> np.ndarray:
    """Find (ln t, offsets) of least penalised loss by damped Newton steps from t = 1, no offsets."""
    point = np.zeros(len(rows.prior) + 1)
    value = _value(rows, point)
    for _ in range(_STEPS):
        step, drop = _newton_step(_curve(rows, point))
        if drop <= 1e-11 * (1.0 + value):
            point = np.add(point, step)
            break
        point, value, moved = _damped(rows, point, value, step, drop)
        if not moved:
            break
    return point


def _newton_step(curve: _Curve) -> tuple[np.ndarray, float]:
    """Give the step and the drop that it promises, by the exact Hessian where that leads down, else its safe part."""
    step, lowest = _solved(curve.hessian, -curve.gradient, curve.least)
    if lowest < curve.least:
        step, _ = _solved(curve.fisher, -curve.gradient, curve.least)
    step *= _LONGEST_STEP / max(abs(float(step[0])), _LONGEST_STEP)
    return step, float(-(curve.gradient * step).sum())


def _solved(matrix: np.ndarray, right: np.ndarray, least: float) -> tuple[np.ndarray, float]:
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
    rows: _Rows, point: np.ndarray, value: float, step: np.ndarray, drop: float
) -> tuple[np.ndarray, float, bool]:
    """Halve the step until the loss falls by a fair part of what it promises; False if none does."""
    share = 1.0
    for _ in range(60):
        reached = point + share * step
        loss = _value(rows, reached)
        if loss <= value - 1e-4 * share * drop or (share == 1.0 and drop < 1e-11 and loss <= value * (1 + 1e-13)):
            return reached, loss, True
        share /= 2
    return point, value, False


def _penalty(rows: _Rows, point: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Weigh the penalty: its weights (C + 1,) per row, and their product with the point."""
    weights = np.full(len(point), _OFFSET_PENALTY / rows.mass)
    weights[0] = _TEMPERATURE_PENALTY / rows.mass
    return weights, weights * point


def _value(rows: _Rows, point: np.ndarray) -> float:
    """Take the penalised loss at (ln t, offsets), nats per row."""
    total = 0.0
    for start in range(0, len(rows.truth), _BLOCK):
        part = slice(start, start + _BLOCK)
        truth = rows.truth[part]
        power = rows.prior[:, part] + np.exp(point[0]) * rows.evidence[:, part] + point[1:, None]
        power -= power.max(axis=0)
        own = power[truth, np.arange(len(truth))]
        total += float((rows.weights[part] * (np.log(np.exp(power).sum(axis=0)) - own)).sum())
    return total / rows.mass + float((_penalty(rows, point)[1] * point).sum())


def _curve(rows: _Rows, point: np.ndarray) -> _Curve:
    """Take gradient and Hessian of the penalised loss at (ln t, offsets), nats per row."""
    size = len(point)
    gradient, fisher = np.zeros(size), np.zeros((size, size))
    t = np.exp(point[0])
    for start in range(0, len(rows.truth), _BLOCK):
        part = slice(start, start + _BLOCK)
        slopes = t * rows.evidence[:, part]
        p = _softmax(rows.prior[:, part] + slopes + point[1:, None])
        by_slope = p * slopes
        centre = by_slope.sum(axis=0)
        truth, weights = rows.truth[part], rows.weights[part]
        weighed = weights * p
        gradient[0] += (weights * (centre - slopes[truth, np.arange(len(truth))])).sum()
        gradient[1:] += weighed.sum(axis=1) - np.bincount(truth, weights, size - 1)
        fisher[0, 0] += (weights * by_slope * (slopes - centre)).sum()
        fisher[0, 1:] += (weights * by_slope - weighed * centre).sum(axis=1)
        fisher[1:, 1:] += np.diag(weighed.sum(axis=1)) - np.einsum("in,jn->ij", weighed, p)
    fisher[1:, 0] = fisher[0, 1:]
    penalty, pull = _penalty(rows, point)
    fisher = fisher / rows.mass + 2 * np.diag(penalty)
    hessian = fisher.copy()
    hessian[0, 0] += gradient[0] / rows.mass
    return _Curve(gradient / rows.mass + 2 * pull, hessian, fisher, 2 * float(penalty.min()))


def _slope_derivatives(logs: np.ndarray, truth: np.ndarray, t: float) -> tuple[float, float]:
    """Take first and second derivative by ``t`` of the log loss of probabilities with logs (C, N), nats in all."""
    first = second = 0.0
    for start in range(0, len(truth), _BLOCK):
        part = logs[:, start : start + _BLOCK]
        own = truth[start : start + _BLOCK]
        p = _softmax(t * part)
        centre = (p * part).sum(axis=0)
        first += float((centre - part[own, np.arange(len(own))]).sum())
        second += float((p * np.square(part - centre)).sum())
    return first, second
