"""Tables of pairs by class from the rows of a training set, a bounded number at a time, and what is made of them."""

from collections.abc import Iterator

import numpy as np

from bnx.double_counting import double_counted_bits
from bnx.engines import LocalEngine
from bnx.families import PairRequests, for_each_family
from bnx.trainings import Training

__all__ = ["measure_double_counting", "tables_by_shape"]

_CELLS = 8_000_000  # counts that are held at a time: 32 MB


def measure_double_counting(
    engine: LocalEngine, training: Training, left: np.ndarray, right: np.ndarray, stage: str = ""
) -> np.ndarray:
    """Measure what naive counts twice because of each of P pairs: bits of an average record, (P,).

    left, right (P,): the attributes; stage: what to tell the engine's progress callback, nothing without it. Records in
    which either cell is not observed are left out.
    """
    bits = np.full(len(left), np.nan)
    done = 0
    for places, counts in tables_by_shape(engine, training, left, right):
        bits[places] = double_counted_bits(counts)
        done += len(places)
        if stage:
            engine.progress(stage, done, len(left))
    return bits


def tables_by_shape(
    engine: LocalEngine, training: Training, left: np.ndarray, right: np.ndarray
) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Count P pairs, those of one shape together: yield their places (k,) and records, int32 (k, C, r, q)."""
    sizes = training.view.sizes
    heights, widths = sizes[left], sizes[right]
    order = np.lexsort((widths, heights))
    changes = np.flatnonzero((np.diff(heights[order]) != 0) | (np.diff(widths[order]) != 0)) + 1
    for same in np.split(order, changes) if len(order) else []:
        height, width = int(heights[same[0]]), int(widths[same[0]])
        step = max(1, _CELLS // (engine.classes * height * width))
        for first in range(0, len(same), step):
            places = same[first : first + step]
            requests = PairRequests(0, left[places], right[places])
            counted = for_each_family(engine, [training], requests, lambda counts, _: counts)
            tables = np.stack([counted[request] for request in requests])
            yield places, tables.reshape(len(places), engine.classes, height, width)
