"""Quadratic functions of a few weights that sum to 1, none below 0."""

import numpy as np

from bnx.calibrating import solved

__all__ = ["least_on_simplex"]

_TIGHT = 1e-10


def least_on_simplex(curve: np.ndarray, pull: np.ndarray, start: np.ndarray) -> np.ndarray:
    """Minimise w' curve w / 2 - pull' w over weights w (K,) that sum to 1, none below 0.

    curve (K, K): positive definite; pull (K,); start (K,): weights to begin at. Weights at 0 are freed and bound one at
    a time: from the point where the free ones stand best, the one whose release lowers the value most.

    Source: Nocedal & Wright 2006, algorithm 16.3 (active sets).
    """
    point, free = start.copy(), start > 0
    for _ in range(20 * len(start)):
        target, level = _best_of(curve, pull, free)
        if (target >= 0).all():
            point = target
            slope = np.where(free, np.inf, (curve * point).sum(axis=1) - pull)
            k = int(np.argmin(slope))
            if slope[k] >= level - _TIGHT * (1.0 + abs(level)):
                break
            free[k] = True
        else:
            point, free = _bound(point, target, free)
    return np.asarray(point / point.sum())


def _best_of(curve: np.ndarray, pull: np.ndarray, free: np.ndarray) -> tuple[np.ndarray, float]:
    """Minimise over the free weights, whatever their sign; also give the slope that they share there."""
    own = np.flatnonzero(free)
    part = curve[np.ix_(own, own)]
    least = 1e-300
    toward, _ = solved(part, pull[own], least)
    ones, _ = solved(part, np.ones(len(own)), least)
    level = float((1.0 - toward.sum()) / ones.sum())
    target = np.zeros(len(pull))
    target[own] = toward + level * ones
    return target, level


def _bound(point: np.ndarray, target: np.ndarray, free: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Walk towards the target until a weight reaches 0, and bind it there."""
    falling = free & (target < 0)
    shares = np.where(falling, point / np.where(falling, point - target, 1.0), np.inf)
    k = int(np.argmin(shares))
    reached = point + shares[k] * (target - point)
    reached[k] = 0.0
    return np.maximum(reached, 0.0), free & (np.arange(len(point)) != k)
