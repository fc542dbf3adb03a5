"""Reliability: how often the most probable class is right, by how probable it was said to be."""

from dataclasses import dataclass
from statistics import NormalDist

import numpy as np

from bnx.kernels import rank_sums, sort_whole
from bnx.losses import bins_for

__all__ = ["Bin", "BinSums", "Curve", "curve_of", "sums_of_histogram", "sums_of_packed", "sums_of_weighed", "wilson"]


@dataclass(frozen=True)
class Bin:
    """Rows whose most probable class was about equally probable.

    ``mean``: of these probabilities; ``right``: share of the rows of which that class is the true one, with a 95 %
    ``interval``; ``rows``: by their weight, if they have some, each as often as it was predicted; ``effective_rows``:
    rows of equal weight, each taken once, that would be worth as much.
    """

    mean: float
    right: float
    rows: float
    effective_rows: float
    interval: tuple[float, float]


@dataclass(frozen=True)
class Curve:
    """Bins in ascending order of probability, with the calibration error over them and the log loss in bits."""

    bins: tuple[Bin, ...]
    calibration_error: float
    log_loss: float


@dataclass(frozen=True)
class BinSums:
    """Sums over the rows of each bin (bins,): of scores, of hits, of rows and of their squares, by weight."""

    scores: np.ndarray
    hits: np.ndarray
    rows: np.ndarray
    squares: np.ndarray


def wilson(hits: float, rows: float, level: float = 0.95) -> tuple[float, float]:
    """Bound the share that ``hits`` of ``rows`` independent rows, more than 0, are drawn from.

    Source: Wilson 1927 (score interval).
    """
    z = NormalDist().inv_cdf((1.0 + level) / 2.0)
    share, whole = hits / rows, 1.0 + z * z / rows
    middle = (share + z * z / (2.0 * rows)) / whole
    half = z * np.sqrt(share * (1.0 - share) / rows + z * z / (4.0 * rows * rows)) / whole
    return max(0.0, float(middle - half)), min(1.0, float(middle + half))


def curve_of(sums: BinSums, repeats: int, log_loss: float) -> Curve:
    """Make a curve of the sums; repeats: how often each row was predicted, which makes it no further evidence."""
    bins = []
    for k in np.flatnonzero(sums.rows).tolist():
        rows = float(sums.rows[k])
        mean, right = (min(1.0, float(one[k]) / rows) for one in (sums.scores, sums.hits))
        effective = rows * rows / float(sums.squares[k]) / repeats
        bins.append(Bin(mean, right, rows, effective, wilson(right * effective, effective)))
    error = float(np.abs(sums.scores - sums.hits).sum() / sums.rows.sum())
    return Curve(tuple(bins), error, log_loss)


def sums_of_packed(packed: np.ndarray) -> BinSums:
    """Sum up rows (N,), scores and hits packed as by ``pack_scores``; overwritten. Bins are those of ``Ranking``."""
    bins = bins_for(len(packed))
    scores, hits, rows = np.zeros(bins), np.zeros(bins), np.zeros(bins)
    ordered = sort_whole(packed)
    rank_sums(ordered, scores, hits)
    ordered |= 1  # every row a hit: the same bins, and the hits of each are its rows
    rank_sums(ordered, np.zeros(bins), rows)
    return BinSums(scores, hits, rows, rows)


def sums_of_weighed(packed: np.ndarray, weights: np.ndarray) -> BinSums:
    """Sum up rows (N,), packed as by ``pack_scores``, by their weights (N,); bins hold equal weight."""
    order = np.argsort(packed >> 1, kind="stable")
    score, hit, mass = (packed[order] >> 1).view(np.float64), packed[order] & 1, weights[order]
    starts = np.flatnonzero(np.append(True, score[1:] != score[:-1]))
    hits, masses, squares = (np.add.reduceat(one, starts) for one in (mass * hit, mass, np.square(mass)))
    ends, bins = np.cumsum(masses), bins_for(len(packed))
    place = np.minimum(((2 * ends - masses) * bins / (2 * ends[-1])).astype(np.int64), bins - 1)
    return BinSums(*(np.bincount(place, one, bins) for one in (masses * score[starts], hits, masses, squares)))


def sums_of_histogram(counts: np.ndarray, sums: np.ndarray) -> BinSums:
    """Sum up rows that lie in a histogram of scores: counts (bins, 2) of misses and hits, sums (bins,) of scores.

    The rows of a bin of the histogram stay together, as in ``Histograms.rankings``.
    """
    used = np.flatnonzero(counts.sum(axis=1))
    hits, rows = counts[used, 1], counts[used].sum(axis=1)
    ends, bins = np.cumsum(rows), bins_for(int(rows.sum()))
    place = (2 * ends - rows) * bins // (2 * int(ends[-1]))
    scores, own, all_rows = (np.bincount(place, one, bins) for one in (sums[used], hits, rows))
    return BinSums(scores, own, all_rows, all_rows)
