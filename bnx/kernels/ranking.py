"""Rows in the order of a score: sorting, and the sums that areas and calibration bins need, in one pass."""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part

__all__ = [
    "HISTOGRAM_BINS",
    "HISTOGRAM_END",
    "HISTOGRAM_WIDTH",
    "add_to_histograms",
    "pack_scores",
    "rank_sums",
    "sort_whole",
]

_LOW, _HIGH = 33, 63  # numbers are sorted by these bits first, the lower ones then only need mending
_DIGIT, _LOW_DIGIT = 10, 11  # bits sorted by at a time, above and below
_PATIENCE = 4  # moves per number that mending may take before runs are sorted by their lower bits
_FEW = 24  # numbers that are always sorted by insertion

_FINE = 8  # leading binary digits of a score, and of what it lacks to 1, that tell its bin in a histogram
_OCTAVES = 32  # halvings of 1/2 that are told apart
_HALF = _OCTAVES << _FINE
HISTOGRAM_BINS = 2 * _HALF + 1
HISTOGRAM_WIDTH = 2.0**-_FINE  # of a bin, relative to the score or to what it lacks to 1
HISTOGRAM_END = 2.0 ** -(_OCTAVES + 1)  # width of the first bin and of the last
_SMALLEST = (1023 - 1 - _OCTAVES) << _FINE  # the leading digits of the smallest score with a bin of its own


@kernel
def sort_whole(numbers: np.ndarray) -> np.ndarray:
    """Sort whole numbers (N,) int64 from 0 to below 2 ** 63, best those that differ above bit 33.

    By digits of 10 bits from bit 33 up; the order is then mended by insertion or, where that takes long, by sorting
    runs of equal upper bits by the lower ones. The input is overwritten.

    Source: Knuth 1998, section 5.2.5 (radix sorting; from memory).
    """
    here = _sort_by_bits(
        numbers, np.empty(numbers.size, np.int64), int(np.int64(_LOW)), int(np.int64(_HIGH)), int(np.int64(_DIGIT))
    )
    if _insert(here, int(np.int64(0)), here.size, _PATIENCE * here.size):
        return here
    start = int(np.int64(0))
    while start < here.size:
        end = start + 1
        while end < here.size and here[end] >> _LOW == here[start] >> _LOW:
            end += 1
        if end - start <= _FEW:
            _insert(here, start, end, int(np.int64(_FEW * _FEW)))
        else:
            run, room = np.empty(end - start, np.int64), np.empty(end - start, np.int64)
            for k in range(run.size):
                run[k] = here[start + k]
            run = _sort_by_bits(run, room, int(np.int64(0)), int(np.int64(_LOW)), int(np.int64(_LOW_DIGIT)))
            for k in range(run.size):
                here[start + k] = run[k]
        start = end
    return here


@inlined
def _insert(numbers: np.ndarray, start: int, end: int, moves: int) -> bool:
    """Sort in place by insertion; give up after so many moves, each number being there once."""
    for k in range(start + 1, end):
        one, at = numbers[k], k
        while at > start and numbers[at - 1] > one:
            numbers[at] = numbers[at - 1]
            at -= 1
        numbers[at] = one
        moves -= k - at
        if moves < 0:
            return False
    return True


@part
def _sort_by_bits(here: np.ndarray, there: np.ndarray, low: int, high: int, digit: int) -> np.ndarray:
    """Sort by the bits ``low:high``, a digit at a time; both arrays are overwritten, and one of them is returned."""
    passes = (high - low) // digit
    width = 1 << digit
    counts, mask = np.zeros(passes * width, np.int64), width - 1
    for number in here:
        for k in range(passes):
            counts[k * width + ((number >> (low + k * digit)) & mask)] += 1
    for k in range(passes):
        own = counts[k * width : (k + 1) * width]
        at, most = 0, 0
        for d in range(width):
            held = own[d]
            own[d] = at
            at += held
            most = max(most, held)
        if most == here.size:
            continue
        for number in here:
            d = (number >> (low + k * digit)) & mask
            there[own[d]] = number
            own[d] += 1
        here, there = there, here
    return here


@kernel
def pack_scores(p: np.ndarray, first: int, last: int, truth: np.ndarray, column: int, out: np.ndarray) -> None:
    """Pack the scores of rows ``first:last``, twice the bit pattern and 1 more for a hit, into out (last - first,).

    p (N, C), truth (N,). The score is the probability of class ``column``, a hit a row of that class; for column C it
    is the largest probability, a hit a row of the first class with it. Bit patterns of numbers from 0 to below 2 order
    as the numbers do and leave two bits free, so one sort carries the hits along.
    """
    scores = np.empty(last - first)
    classes = p.shape[1]
    if column < classes:
        for row in range(first, last):
            scores[row - first] = p[row, column] + 0.0
            out[row - first] = truth[row] == column
    else:
        for row in range(first, last):
            label, largest = 0, p[row, 0]
            for c in range(1, classes):
                better = p[row, c] > largest
                label = c if better else label
                largest = p[row, c] if better else largest
            scores[row - first] = largest + 0.0
            out[row - first] = truth[row] == label
    patterns = scores.view(np.int64)
    for k in range(out.size):
        out[k] |= patterns[k] << 1


@kernel
def rank_sums(packed: np.ndarray, score_sums: np.ndarray, hit_sums: np.ndarray) -> int:
    """Go through rows in ascending order of a score, rows of equal score as one group.

    packed (N,): as by ``pack_scores``, sorted; score_sums, hit_sums (bins,): added to in the bin, of as many of equal
    count, that holds a group's middle row.

    Returns:
        The number of (hit, miss) pairs in which the hit scores higher, twice, and of those with equal scores, once.
    """
    rows, bins = packed.size, score_sums.size
    scores = (packed >> 1).view(np.float64)
    start, below, area = 0, 0, 0
    while start < rows:
        end, hits = start, 0
        while end < rows and packed[end] >> 1 == packed[start] >> 1:
            hits += packed[end] & 1
            end += 1
        misses = end - start - hits
        place = (start + end) * bins // (2 * rows)
        score_sums[place] += scores[start] * (end - start)
        hit_sums[place] += hits
        area += hits * (2 * below + misses)
        below += misses
        start = end
    return area


@kernel
def add_to_histograms(p: np.ndarray, truth: np.ndarray, counts: np.ndarray, sums: np.ndarray) -> None:
    """Add rows to the histograms of their scores.

    p (N, C), truth (N,); counts (C + 1, bins, 2) int64: misses and hits, sums (C + 1, bins): of the scores, for every
    class and, last, for the largest probability. A bin holds the scores that agree in the first eight binary digits of
    themselves or, from 1/2 up, of what they lack to 1.
    """
    classes = p.shape[1]
    scores, lacks = np.empty(classes + 1), np.empty(classes + 1)
    patterns = lacks.view(np.int64)
    for row in range(truth.size):
        label = 0
        for c in range(classes):
            scores[c] = min(p[row, c], 1.0)
            if p[row, c] > p[row, label]:
                label = c
        scores[classes] = scores[label]
        for c in range(classes + 1):
            lacks[c] = scores[c] if scores[c] < 0.5 else 1.0 - scores[c]
        for c in range(classes + 1):
            place = max(0, (patterns[c] >> (52 - _FINE)) - _SMALLEST)
            if scores[c] >= 0.5:
                place = 2 * _HALF - place
            hit = label == truth[row] if c == classes else c == truth[row]
            counts[c, place, 1 if hit else 0] += 1
            sums[c, place] += scores[c]
