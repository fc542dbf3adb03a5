"""Figures of out-of-fold probabilities, in nats: losses, accuracy, and calibration against what chance alone shows."""

from typing import Any

import numpy as np

from bnx.calibrating import slope
from bnx.losses import ranking

__all__ = ["DRAWS", "calibration_if_perfect", "judged", "nats", "paired"]

DRAWS = 200
Figures = dict[str, Any]


def nats(p: np.ndarray, truth: np.ndarray) -> np.ndarray:
    """Take the log loss of every row: p (N, C), truth (N,)."""
    with np.errstate(divide="ignore"):
        return np.asarray(-np.log(p[np.arange(len(truth)), truth]))


def judged(p: np.ndarray, truth: np.ndarray) -> Figures:
    """Judge out-of-fold probabilities p (N, C) by the class codes truth (N,)."""
    wrong = p.argmax(axis=1) != truth
    return {
        "log_loss": float(nats(p, truth).mean()),
        "accuracy": float(1 - wrong.mean()),
        "errors": int(wrong.sum()),
        "calibration_error": _calibration_error(p, truth),
        "calibration_slope": slope(np.ascontiguousarray(p), truth),
        "least": float(p.min()),
        "most": float(p.max()),
    }


def _calibration_error(p: np.ndarray, truth: np.ndarray) -> float:
    """Calibration error of the most probable class, in up to 15 bins of equal count."""
    return float(ranking(np.ascontiguousarray(p), [slice(0, len(p))], truth, p.shape[1]).error)


def calibration_if_perfect(p: np.ndarray, draws: int = DRAWS, seed: int = 1) -> float:
    """Average the calibration error over classes drawn from the probabilities themselves, so that none is wrong.

    What is left is what chance puts into the bins of so few rows.
    """
    random, below = np.random.default_rng(seed), np.cumsum(p, axis=1)[:, :-1]
    drawn = [(random.random((len(p), 1)) >= below).sum(axis=1) for _ in range(draws)]
    return float(np.mean([_calibration_error(p, classes) for classes in drawn]))


def paired(losses: np.ndarray, others: np.ndarray) -> tuple[float, float]:
    """Give the mean difference of the losses of the same rows, and its standard error."""
    apart = losses - others
    return float(apart.mean()), float(apart.std(ddof=1) / np.sqrt(len(apart)))
