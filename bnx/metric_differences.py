"""A structure against the baseline by every metric, fold by fold."""

import numpy as np

from bnx.paired import Difference, corrected_t
from bnx.rating import StructureScore

__all__ = ["METRICS", "REGIONS", "differences"]

METRICS = ("log_loss", "brier", "accuracy", "balanced_accuracy", "auc", "calibration_error")

# Differences without practical meaning (Corani & Benavoli 2015: 1 % of accuracy); that of the log loss is its own.
REGIONS = {"accuracy": 0.01, "balanced_accuracy": 0.01}


def differences(score: StructureScore, baseline: StructureScore, folds: int) -> dict[str, Difference | None]:
    """Subtract the baseline's figures from a structure's, mean over the folds of all repeats, by name of the metric.

    None where a fold of either has no figure, or an infinite one.

    Source: Nadeau & Bengio 2003, section 4 (the interval).
    """
    found: dict[str, Difference | None] = {}
    for metric in METRICS:
        apart = [
            (getattr(own.scores, metric), getattr(other.scores, metric))
            for own, other in zip(score.by_fold, baseline.by_fold, strict=True)
        ]
        told = all(value is not None and np.isfinite(value) for pair in apart for value in pair)
        found[metric] = corrected_t(np.array([own - other for own, other in apart]), folds) if told else None
    return found
