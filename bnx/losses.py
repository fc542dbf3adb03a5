"""How good probabilities are: log loss in bits, Brier, accuracy, ranking and calibration error."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.errors import DataError
from bnx.kernels import add_to_histograms, pack_scores, rank_sums, sort_whole, tally
from bnx.kernels.ranking import HISTOGRAM_BINS, HISTOGRAM_END, HISTOGRAM_WIDTH

__all__ = ["Histograms", "Ranking", "Scores", "Tally", "bins_for", "log_losses", "ranking", "scores", "scores_of"]

_BINS = 15
_ROWS_PER_BIN = 20


@dataclass(frozen=True)
class Scores:
    """Every figure of one set of predictions.

    ``log_loss`` is in bits, mean over rows; it is infinite where a row's own class had probability exactly 0.
    ``brier`` is summed over classes, mean over rows. ``recall`` holds None for a class without rows, and
    ``balanced_accuracy`` is the mean over the others. ``auc`` (one class against the rest, mean over the classes that
    have both) is None where every row has one class. ``confusion`` has a row per true class, of whole
    numbers unless rows have weights. ``auc_within`` and
    ``calibration_within``: how far areas and calibration errors may lie from those of the rows themselves.
    """

    log_loss: float
    brier: float
    accuracy: float
    balanced_accuracy: float
    auc: float | None
    recall: tuple[float | None, ...]
    confusion: tuple[tuple[float, ...], ...]
    calibration_error: float
    classwise_calibration_error: float
    auc_within: float = 0.0
    calibration_within: float = 0.0

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
class Tally:
    """Sums over rows that can be merged.

    ``confusion`` (C, C) int64, a row per true class; ``sums`` (4,): rows, log losses in bits, their squared distances
    from their mean, squared distances of the probabilities from the truth. Of rows with weights, ``confusion`` is
    float64, rows count by their weight, and a last sum is that of the squared weights.
    """

    confusion: np.ndarray
    sums: np.ndarray

    @classmethod
    def empty(cls, classes: int) -> "Tally":
        """Start with no rows."""
        return cls(np.zeros((classes, classes), np.int64), np.zeros(4))

    def add(self, p: np.ndarray, rows: slice, truth: np.ndarray) -> None:
        """Add some rows of probabilities p (N, C)."""
        tally(p, rows.start, rows.stop, truth, self.confusion, self.sums)

    @property
    def rows(self) -> int:
        """Rows added."""
        return int(self.sums[0])

    @property
    def effective_rows(self) -> float:
        """Rows of equal weight that would be worth as much.

        Source: Kish 1965 (effective sample size; from memory).
        """
        return float(self.sums[0]) if len(self.sums) == 4 else float(self.sums[0] ** 2 / self.sums[4])

    @property
    def errors(self) -> int:
        """Rows whose label is wrong."""
        return int(self.confusion.sum() - np.trace(self.confusion))

    @property
    def loss_deviation(self) -> float:
        """Standard deviation of the log losses in bits, over the rows themselves; not a number if one is infinite."""
        return float(np.sqrt(self.sums[2] / self.sums[0]))

    @classmethod
    def merged(cls, parts: Sequence["Tally"]) -> "Tally":
        """Join the sums of different rows, in the order given."""
        confusion, sums = parts[0].confusion.copy(), parts[0].sums.copy()
        for part in parts[1:]:
            confusion += part.confusion
            rows = sums[0] + part.sums[0]
            with np.errstate(invalid="ignore"):
                apart = part.sums[1] / part.sums[0] - sums[1] / sums[0]
                between = np.square(apart) * sums[0] * part.sums[0] / rows
            sums += part.sums
            sums[2] += between
        return cls(confusion, sums)


@dataclass(frozen=True)
class Ranking:
    """What ranking rows by a score tells: the ``area`` under the curve and the ``error`` of calibration.

    ``area``: share of (hit, miss) pairs in which the hit scores higher, equal scores counting one half; None without
    pairs. ``error``: mean over rows of | mean score - share of hits | in their bin, up to 15 bins of equal count, fewer
    so that each holds 20 rows. Rows of equal score stay together: a group falls into the bin that holds its middle row,
    so no order among equals matters and a bin may stay empty. ``area_within``, ``error_within``: bounds of what the two
    may be off by.
    """

    area: float | None
    error: float
    area_within: float = 0.0
    error_within: float = 0.0


@dataclass(frozen=True)
class Histograms:
    """Rows by score, for every class and, last, for the largest probability: what rankings need, to a stated error.

    ``counts`` (C + 1, bins, 2) int64: misses and hits; ``sums`` (C + 1, bins): of the scores.
    """

    counts: np.ndarray
    sums: np.ndarray

    @classmethod
    def empty(cls, classes: int) -> "Histograms":
        """Start with no rows."""
        return cls(np.zeros((classes + 1, HISTOGRAM_BINS, 2), np.int64), np.zeros((classes + 1, HISTOGRAM_BINS)))

    def add(self, p: np.ndarray, truth: np.ndarray) -> None:
        """Add rows of probabilities p (N, C)."""
        add_to_histograms(p, truth, self.counts, self.sums)

    def merge(self, other: "Histograms") -> None:
        """Take other rows in."""
        np.add(self.counts, other.counts, out=self.counts)
        np.add(self.sums, other.sums, out=self.sums)

    def rankings(self) -> list[Ranking]:
        """Rank by every class and by the largest probability, the scores of a bin counting as equal.

        Pairs within a bin are counted one half each, so an area is off by at most half of them. Rows are in another bin
        of calibration than by their own score only where a bin here reaches over the border of two there; a row that
        moves changes what it leaves and what it enters by its score if it is a miss, else by what that lacks to 1.
        """
        return [_binned_ranking(*one) for one in zip(self.counts, self.sums, strict=True)]


def _binned_ranking(counts: np.ndarray, sums: np.ndarray) -> Ranking:
    used = np.flatnonzero(counts.sum(axis=1))
    misses, hits, scores_ = counts[used, 0], counts[used, 1], sums[used]
    ends = np.cumsum(misses + hits)
    starts, rows = ends - misses - hits, int(ends[-1])
    bins = bins_for(rows)
    place = (starts + ends) * bins // (2 * rows)
    apart = np.bincount(place, scores_ - hits, bins)
    moving = starts * bins // rows != (2 * ends - 1) * bins // (2 * rows)
    pairs = int(hits.sum()) * int(misses.sum())
    below = np.cumsum(misses) - misses
    doubled = sum(int(h) * (2 * int(b) + int(m)) for h, b, m in zip(hits, below, misses, strict=True))
    within = sum(int(h) * int(m) for h, m in zip(hits, misses, strict=True)) / (2 * pairs) if pairs else 0.0
    area = doubled / (2 * pairs) if pairs else None
    mean = scores_ / (misses + hits)
    low, wide = mean < 0.5, 1 + HISTOGRAM_WIDTH
    highest = np.where(low, mean * wide, 1 - (1 - mean) / wide) + HISTOGRAM_END
    lack = np.where(low, 1 - mean / wide, (1 - mean) * wide) + HISTOGRAM_END
    moved = float(2 * (misses * highest + hits * lack)[moving].sum() / rows)
    return Ranking(area, float(np.abs(apart).sum() / rows), within, moved)


def bins_for(rows: int) -> int:
    """Choose how many bins of equal count so many rows are worth."""
    return min(_BINS, max(1, rows // _ROWS_PER_BIN))


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
    whole, every = Tally.empty(classes), [slice(0, len(truth))]
    p = np.ascontiguousarray(p)
    whole.add(p, every[0], truth)
    return scores_of(whole, [ranking(p, every, truth, column) for column in range(classes + 1)])


def scores_of(whole: Tally, rankings: Sequence[Ranking]) -> Scores:
    """Make the scores of some rows from their sums and their rankings by every class and by the largest probability."""
    classes = len(whole.confusion)
    totals = whole.confusion.sum(axis=1)
    plain = float if whole.confusion.dtype.kind == "f" else int
    recall = [float(whole.confusion[k, k]) / float(totals[k]) if totals[k] else None for k in range(classes)]
    known = [value for value in recall if value is not None]
    by_class, top = rankings[:-1], rankings[-1]
    auc, auc_within = _macro_auc(by_class)
    return Scores(
        log_loss=float(whole.sums[1] / whole.sums[0]),
        brier=float(whole.sums[3] / whole.sums[0]),
        accuracy=float(np.trace(whole.confusion)) / float(whole.sums[0]),
        balanced_accuracy=sum(known) / len(known),
        auc=auc,
        recall=tuple(recall),
        confusion=tuple(tuple(plain(count) for count in row) for row in whole.confusion),
        calibration_error=top.error,
        classwise_calibration_error=sum(one.error for one in by_class) / classes,
        auc_within=auc_within,
        calibration_within=max(top.error_within, sum(one.error_within for one in by_class) / classes),
    )


def ranking(p: np.ndarray, parts: Sequence[slice], truth: np.ndarray, column: int) -> Ranking:
    """Rank the rows of some parts of p (N, C) by the probability of a class or, for column C, by the largest."""
    packed = np.empty(sum(part.stop - part.start for part in parts), np.int64)
    at = 0
    for part in parts:
        size = part.stop - part.start
        pack_scores(p, part.start, part.stop, truth, column, packed[at : at + size])
        at += size
    rows, hits, bins = len(packed), int((packed & 1).sum()), bins_for(len(packed))
    score_sums, hit_sums = np.zeros(bins), np.zeros(bins)
    doubled = int(rank_sums(sort_whole(packed), score_sums, hit_sums))
    pairs = hits * (rows - hits)
    return Ranking(doubled / (2 * pairs) if pairs else None, float(np.abs(score_sums - hit_sums).sum() / rows))


def _macro_auc(rankings: Sequence[Ranking]) -> tuple[float | None, float]:
    """Average the areas of the classes that have one, and their bounds.

    With two classes take the second, as both are the same area.
    """
    known = [one for one in (rankings[1:] if len(rankings) == 2 else rankings) if one.area is not None]
    areas = [one.area for one in known if one.area is not None]
    return (sum(areas) / len(areas), sum(one.area_within for one in known) / len(known)) if areas else (None, 0.0)
