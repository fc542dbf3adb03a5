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
    heights, widths = training.view.sizes[left], training.view.sizes[right]
    order = np.lexsort((widths, heights))
    filled = np.cumsum((engine.classes * heights * widths)[order])
    for together in _cut(order, (filled - 1) // _CELLS):
        requests = PairRequests(0, left[together], right[together])
        counted = for_each_family(engine, [training], requests, lambda counts, _: counts)
        for places in _cut(together, heights[together] * (int(widths.max()) + 1) + widths[together]):
            tables = np.stack([counted[0, (int(left[k]), int(right[k]))] for k in places.tolist()])
            yield places, tables.reshape(len(places), engine.classes, heights[places[0]], widths[places[0]])


def _cut(numbers: np.ndarray, group: np.ndarray) -> list[np.ndarray]:
    """Cut numbers (k,) where their groups, which come in order, change."""
    return np.split(numbers, np.flatnonzero(np.diff(group)) + 1) if len(numbers) else []
