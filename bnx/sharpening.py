"""Probabilities that are surer, or less sure, where they are large."""

import numpy as np

__all__ = ["fit_sharpness", "sharpened"]

_LEAST = 2.220446049250313e-16  # left of 1 where a probability is as close to it as numbers come
_TINIEST = 2.2250738585072014e-308  # the smallest normal number
_UNLIKELIEST = 1e-12  # so that none is 1
_MOST = 1.0
_PENALTY = 20.0
_STEPS = 50
_LEAD = 1.0  # nats


def sharpened(p: np.ndarray, sharpness: float, prior: np.ndarray) -> np.ndarray:
    """Make probabilities (N, C) surer the further they are above their prior: p ((1 - prior) / (1 - p))^sharpness.

    prior: (C,) or (N, C). They are made to sum to 1, and what equals the prior stays. Experts that err apart from each
    other are surer together than their mean.

    Source: Kull, Silva Filho & Flach 2017 (beta calibration, here with one of its three parameters).
    """
    if sharpness == 0:
        return p
    power = np.log(np.maximum(p, _TINIEST)) + sharpness * (_surer(p) - _surer(prior))
    power -= power.max(axis=1, keepdims=True)
    np.exp(power, out=power)
    power /= power.sum(axis=1, keepdims=True)
    np.maximum(power, _UNLIKELIEST, out=power)
    return np.asarray(power / power.sum(axis=1, keepdims=True))


def fit_sharpness(p: np.ndarray, prior: np.ndarray, truth: np.ndarray, weights: np.ndarray) -> float:
    """Find the sharpness of probabilities p (N, C) that minimises total log loss (nats) + 20 sharpness^2.

    prior (N, C); truth (N,); weights (N,): how many rows each stands for. At most 1 either way, and 0 unless it saves
    more than a nat in all: what saves less tends to cost on other rows. The loss is convex in it: Newton's steps, of at
    most .5 each.
    """
    every, surer = np.arange(len(truth)), _surer(p) - _surer(prior)
    own, sharpness = surer[every, truth], 0.0
    for _ in range(_STEPS):
        moved = sharpened(p, sharpness, prior)
        mean = (moved * surer).sum(axis=1)
        slope = (weights * (mean - own)).sum() + 2 * _PENALTY * sharpness
        curve = (weights * ((moved * surer * surer).sum(axis=1) - mean * mean)).sum() + 2 * _PENALTY
        before = sharpness
        sharpness = float(np.clip(before - np.clip(slope / curve, -0.5, 0.5), -_MOST, _MOST))
        if abs(sharpness - before) <= 1e-9:
            break
    chances = np.maximum(np.stack([p[every, truth], sharpened(p, sharpness, prior)[every, truth]]), _TINIEST)
    saved = (weights * (np.log(chances[1]) - np.log(chances[0]))).sum() - _PENALTY * sharpness**2
    return sharpness if saved > _LEAD else 0.0


def _surer(p: np.ndarray) -> np.ndarray:
    return np.asarray(-np.log(np.maximum(1.0 - p, _LEAST)))
