"""Loops from evidence to probabilities, to losses, and to the sums that calibration is fitted by.

Evidence is that for each class against the first, (rows, at least C - 1) in nats: the first class has none. Rows go
through in blocks laid out class by class, so that one instruction serves several rows; sums are taken block by block.
"""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.exponentials import exponentials, logarithms, total_of

__all__ = ["calibrated_loss", "calibration_sums", "posteriors", "slope_sums"]

_ROWS = 256  # of a block
_TINIEST = 2.2250738585072014e-308  # the smallest normal number
_LOWEST = -708.0  # exponents below are taken one by one: the fast exponential stops there


@kernel
def below_top(power: np.ndarray, top: np.ndarray) -> None:
    """Subtract from log weights (C, rows) the largest of their row, which goes to top."""
    classes, rows = power.shape
    for k in range(rows):
        top[k] = power[0, k]
    for c in range(1, classes):
        for k in range(rows):
            top[k] = max(top[k], power[c, k])
    for c in range(classes):
        for k in range(rows):
            power[c, k] -= top[k]


@inlined
def _power(
    evidence: np.ndarray, first: int, bias: np.ndarray, temperature: float, power: np.ndarray, top: np.ndarray
) -> None:
    """Write log weights (C, rows) below the largest of their row, which goes to top (rows,)."""
    classes, rows = power.shape
    step = 1 if bias.shape[0] > 1 else 0
    for c in range(classes):
        for k in range(rows):
            power[c, k] = bias[step * (first + k), c] + (temperature * evidence[first + k, c - 1] if c else 0.0)
    below_top(power, top)


@part
def _exponentials(power: np.ndarray, work: np.ndarray) -> None:
    """Replace log weights (n,), none above 0, by weights; what lies too low for the fast way goes the slow one."""
    lowest = 0.0
    for k in range(power.size):
        lowest = min(lowest, power[k])
    if lowest >= _LOWEST:
        exponentials(power, work)
        return
    for k in range(power.size):
        power[k] = np.exp(power[k])


@kernel
def posteriors(
    evidence: np.ndarray,
    bias: np.ndarray,
    temperature: float,
    floor: float,
    shares: np.ndarray,
    out: np.ndarray,
) -> None:
    """Write calibrated probabilities (N, C).

    bias (N, C), or (1, C) for all rows: log prior plus offset, minus infinity for a class that is left out;
    shares (C,).
    """
    classes = bias.shape[1]
    room, work = np.empty(classes * _ROWS), np.empty(3 * classes * _ROWS)
    top = np.empty(_ROWS)
    for first in range(0, out.shape[0], _ROWS):
        rows = min(_ROWS, out.shape[0] - first)
        flat = room[: classes * rows]
        power = flat.reshape(classes, rows)
        _power(evidence, first, bias, temperature, power, top)
        _exponentials(flat, work)
        for k in range(rows):
            top[k] = 0.0
        for c in range(classes):
            for k in range(rows):
                top[k] += power[c, k]
        for c in range(classes):
            for k in range(rows):
                out[first + k, c] = (1.0 - floor) * (power[c, k] / top[k]) + floor * shares[c]


@kernel
def calibrated_loss(
    evidence: np.ndarray,
    bias: np.ndarray,
    temperature: float,
    floor: float,
    shares: np.ndarray,
    truth: np.ndarray,
    weights: np.ndarray,
) -> float:
    """Sum the weighted log losses (nats) of rows under a calibration, as in ``posteriors``; truth, weights (N,)."""
    classes = bias.shape[1]
    room, work = np.empty(classes * _ROWS), np.empty(3 * classes * _ROWS)
    top, own = np.empty(_ROWS), np.empty(_ROWS)
    total = 0.0
    for first in range(0, truth.size, _ROWS):
        rows = min(_ROWS, truth.size - first)
        flat = room[: classes * rows]
        power = flat.reshape(classes, rows)
        _power(evidence, first, bias, temperature, power, top)
        part = slice(first, first + rows)
        total += block_loss(power, flat, work, own, floor, shares, truth[part], weights[part])
    return total


@kernel
def block_loss(
    power: np.ndarray,
    flat: np.ndarray,
    work: np.ndarray,
    own: np.ndarray,
    floor: float,
    shares: np.ndarray,
    truth: np.ndarray,
    weights: np.ndarray,
) -> float:
    """Sum the weighted log losses (nats) of a block of log weights ``power`` (C, rows), ``flat`` being the same."""
    classes, rows = power.shape
    _exponentials(flat, work)
    least = 1.0
    for k in range(rows):
        whole = 0.0
        for c in range(classes):
            whole += power[c, k]
        own[k] = (1.0 - floor) * (power[truth[k], k] / whole) + floor * shares[truth[k]]
        least = min(least, own[k])
    if least > 1e-300:
        logarithms(own[:rows], work)
    else:
        for k in range(rows):
            own[k] = np.log(own[k])
    for k in range(rows):
        own[k] *= weights[k]
    return -total_of(own[:rows])


@kernel
def calibration_sums(
    evidence: np.ndarray,
    prior: np.ndarray,
    truth: np.ndarray,
    weights: np.ndarray,
    temperature: float,
    offsets: np.ndarray,
    curve: np.ndarray,
) -> float:
    """Sum the weighted log losses (nats) of rows at a temperature and offsets (C,), with their derivatives.

    prior (N, C): log prior, minus infinity for a class left out, never that of a row's own; curve (2 + C, 1 + C), added
    to: the gradient by (ln t, offsets) in its first row, below it the part of the Hessian that is positive definite.
    """
    classes = offsets.size
    room, slopes = np.empty(classes * _ROWS), np.zeros((classes, _ROWS))
    work, top, own, centre = np.empty(3 * classes * _ROWS), np.empty(_ROWS), np.empty(_ROWS), np.empty(_ROWS)
    value = 0.0
    for first in range(0, truth.size, _ROWS):
        rows = min(_ROWS, truth.size - first)
        flat = room[: classes * rows]
        p = flat.reshape(classes, rows)
        truth_, weights_ = truth[first : first + rows], weights[first : first + rows]
        _tilted(evidence, prior, first, temperature, offsets, slopes, p, top)
        for k in range(rows):
            own[k] = p[truth_[k], k]
        _exponentials(flat, work)
        for k in range(rows):
            top[k] = 0.0
        for c in range(classes):
            for k in range(rows):
                top[k] += p[c, k]
        for c in range(classes):
            for k in range(rows):
                p[c, k] /= top[k]
        logarithms(top[:rows], work)
        for k in range(rows):
            own[k] = weights_[k] * (top[k] - own[k])
        value += total_of(own[:rows])
        _derivatives(p, slopes, truth_, weights_, centre, own, top, curve)
    return value


@inlined
def _tilted(
    evidence: np.ndarray,
    prior: np.ndarray,
    first: int,
    temperature: float,
    offsets: np.ndarray,
    slopes: np.ndarray,
    power: np.ndarray,
    top: np.ndarray,
) -> None:
    """Write log weights (C, rows) below the largest of their row, and what of them grows with the temperature."""
    classes, rows = power.shape
    for c in range(classes):
        for k in range(rows):
            if c:
                slopes[c, k] = temperature * evidence[first + k, c - 1]
            power[c, k] = prior[first + k, c] + slopes[c, k] + offsets[c]
    below_top(power, top)


@inlined
def _derivatives(
    p: np.ndarray,
    slopes: np.ndarray,
    truth: np.ndarray,
    weights: np.ndarray,
    centre: np.ndarray,
    work: np.ndarray,
    more: np.ndarray,
    curve: np.ndarray,
) -> None:
    """Add a block's gradient and Hessian to the curve; p (C, rows) are the probabilities."""
    classes, rows = p.shape
    for k in range(rows):
        centre[k] = 0.0
    for c in range(classes):
        for k in range(rows):
            centre[k] += p[c, k] * slopes[c, k]
    for k in range(rows):
        work[k] = weights[k] * (centre[k] - slopes[truth[k], k])
        curve[0, 1 + truth[k]] -= weights[k]
    curve[0, 0] += total_of(work[:rows])
    for c in range(classes):
        for k in range(rows):
            weighed = weights[k] * p[c, k]
            work[k] = weighed * (slopes[c, k] - centre[k])
            more[k] = weighed
        offset_slope = total_of(work[:rows])
        curve[1, 1 + c] += offset_slope
        curve[2 + c, 0] += offset_slope
        whole = total_of(more[:rows])
        curve[0, 1 + c] += whole
        curve[2 + c, 1 + c] += whole
        for k in range(rows):
            work[k] *= slopes[c, k]
        curve[1, 0] += total_of(work[:rows])
        for d in range(c + 1):
            for k in range(rows):
                work[k] = more[k] * p[d, k]
            product = total_of(work[:rows])
            curve[2 + c, 1 + d] -= product
            if d < c:
                curve[2 + d, 1 + c] -= product


@kernel
def slope_sums(p: np.ndarray, first: int, last: int, truth: np.ndarray, power: float, out: np.ndarray) -> None:
    """Add the first and second derivative by t of the log losses (nats) of p ** t, made to sum to 1, at t = ``power``.

    p (N, C): of rows ``first:last``; a probability of 0 counts as the smallest normal number; truth (N,); out (2,).
    """
    classes = p.shape[1]
    room, room_logs = np.empty(classes * _ROWS), np.empty(classes * _ROWS)
    work, top = np.empty(3 * classes * _ROWS), np.empty(_ROWS)
    centre, square = np.empty(_ROWS), np.empty(_ROWS)
    for low in range(first, last, _ROWS):
        rows = min(_ROWS, last - low)
        flat, flat_logs = room[: classes * rows], room_logs[: classes * rows]
        weight, logs = flat.reshape(classes, rows), flat_logs.reshape(classes, rows)
        for c in range(classes):
            for k in range(rows):
                logs[c, k] = max(p[low + k, c], _TINIEST)
        logarithms(flat_logs, work)
        for c in range(classes):
            for k in range(rows):
                weight[c, k] = power * logs[c, k]
        below_top(weight, top)
        exponentials(flat, work)
        for k in range(rows):
            top[k] = centre[k] = square[k] = 0.0
        for c in range(classes):
            for k in range(rows):
                top[k] += weight[c, k]
                centre[k] += weight[c, k] * logs[c, k]
        for k in range(rows):
            centre[k] /= top[k]
        for c in range(classes):
            for k in range(rows):
                apart = logs[c, k] - centre[k]
                square[k] += weight[c, k] * (apart * apart)
        for k in range(rows):
            square[k] /= top[k]
            centre[k] -= logs[truth[low + k], k]
        out[0] += total_of(centre[:rows])
        out[1] += total_of(square[:rows])
