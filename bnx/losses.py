"""How good probabilities are: log loss in bits, Brier, accuracy, ranking and calibration error."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.errors import DataError
from bnx.kernels import rank_sums, sort_whole

__all__ = ["Scores", "log_losses", "scores"]

_BINS = 15
_ROWS_PER_BIN = 20


@dataclass(frozen=True)
class Scores:
    """Every figure of one set of predictions.

    ``log_loss`` is in bits, mean over rows; it is infinite where a row's own class had probability exactly 0.
    ``brier`` is summed over classes, mean over rows. ``recall`` holds None for a class without rows, and
    ``balanced_accuracy`` is the mean over the others. ``auc`` (one class against the rest, mean over the classes that
    have both) is None where every row has one class. ``confusion`` has a row per true class.
    """

    log_loss: float
    brier: float
    accuracy: float
    balanced_accuracy: float
    auc: float | None
    recall: tuple[float | None, ...]
    confusion: tuple[tuple[int, ...], ...]
    calibration_error: float
    classwise_calibration_error: float

    def to_dict(self, levels: Sequence[str] | None = None) -> dict[str, object]:
        """Give plain values for JSON, recalls under the names of the class levels (their codes if not given).

        An infinite log loss becomes None: JSON has no infinity.
        """
        names = levels if levels is not None else [str(code) for code in range(len(self.recall))]
        return {
            "log_loss": self.log_loss if np.isfinite(self.log_loss) else None,
            "brier": self.brier,
            "accuracy": self.accuracy,
            "balanced_accuracy": self.balanced_accuracy,
            "auc": self.auc,
            "recall": dict(zip(names, self.recall, strict=True)),
            "confusion": [list(row) for row in self.confusion],
            "calibration_error": self.calibration_error,
            "classwise_calibration_error": self.classwise_calibration_error,
        }


@dataclass(frozen=True)
class _Ranking:
    """What ranking rows by a score tells: the ``area`` under the curve and the ``error`` of calibration.

    ``area``: share of (hit, miss) pairs in which the hit scores higher, equal scores counting one half; None without
    pairs. ``error``: mean over rows of | mean score - share of hits | in their bin, up to 15 bins of equal count, fewer
    so that each holds 20 rows. Rows of equal score stay together: a group falls into the bin that holds its middle row,
    so no order among equals matters and a bin may stay empty.
    """

    area: float | None
    error: float


def log_losses(p: np.ndarray, truth: np.ndarray) -> np.ndarray:
    """Take the log loss of each row, bits (N,): -log2 of the probability ``p`` (N, C) gave to ``truth`` (N,).

    Infinite where that probability is exactly 0; a probability above 1 by rounding counts as 1.
    """
    own = np.minimum(p[np.arange(len(truth)), truth], 1.0)
    with np.errstate(divide="ignore"):
        return np.asarray(0.0 - np.log2(own), dtype=np.float64)


def scores(p: np.ndarray, truth: np.ndarray, classes: int) -> Scores:
    """Judge probabilities ``p`` (N, classes) by the true class codes ``truth`` (N,).

    The label of a row is the first class with its largest probability. No figure depends on the order of rows,
    except log loss and Brier in the last digits of their sums.

    Raises:
        DataError: there are no rows.

    Source: Brier 1950; Hand & Till 2001, section 2 (ranking with ties); Naeini, Cooper & Hauskrecht 2015 (bins).
    """
    if len(truth) == 0:
        raise DataError("there are 0 rows to score; at least 1 is needed")
    columns = np.ascontiguousarray(p.T)
    label = np.argmax(p, axis=1)
    confusion = np.bincount(truth * np.int64(classes) + label, minlength=classes * classes).reshape(classes, classes)
    totals = confusion.sum(axis=1)
    recall = [int(confusion[k, k]) / int(totals[k]) if totals[k] else None for k in range(classes)]
    known = [value for value in recall if value is not None]
    rankings = [_ranking(columns[k], truth == k) for k in range(classes)]
    top = _ranking(columns.max(axis=0), label == truth)
    return Scores(
        log_loss=float(log_losses(p, truth).mean()),
        brier=_brier(columns, truth),
        accuracy=int(np.trace(confusion)) / len(truth),
        balanced_accuracy=sum(known) / len(known),
        auc=_macro_auc(rankings),
        recall=tuple(recall),
        confusion=tuple(tuple(int(count) for count in row) for row in confusion),
        calibration_error=top.error,
        classwise_calibration_error=sum(one.error for one in rankings) / classes,
    )


def _brier(columns: np.ndarray, truth: np.ndarray) -> float:
    """Sum the squared distances of ``columns`` (C, N) to the true classes; mean over rows."""
    return float(sum(np.square(column - (truth == k)).sum() for k, column in enumerate(columns)) / len(truth))


def _ranking(score: np.ndarray, right: np.ndarray) -> _Ranking:
    """Rank rows by ``score`` (N,), 0 to 1; ``right`` (N,) says which rows are hits.

    Bit patterns of numbers from 0 to below 2 order as the numbers do and leave two bits free, so one sort carries the
    hits along.
    """
    rows, bins = len(score), min(_BINS, max(1, len(score) // _ROWS_PER_BIN))
    packed = (score + 0.0).view(np.int64) << 1
    packed |= right
    packed = sort_whole(packed)
    score_sums, hit_sums = np.zeros(bins), np.zeros(bins)
    doubled = int(rank_sums(packed, (packed >> 1).view(np.float64), score_sums, hit_sums))
    hits = int(right.sum())
    pairs = hits * (rows - hits)
    return _Ranking(doubled / (2 * pairs) if pairs else None, float(np.abs(score_sums - hit_sums).sum() / rows))


def _macro_auc(rankings: Sequence[_Ranking]) -> float | None:
    """Average the areas of the classes that have one; with two classes take the second, as both are the same area."""
    areas = [one.area for one in (rankings[1:] if len(rankings) == 2 else rankings) if one.area is not None]
    return sum(areas) / len(areas) if areas else None
