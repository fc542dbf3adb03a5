"""How large a table may become: where structures of many parents stop taking more."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.trainings import Training

__all__ = ["Room", "room_of"]

_CELLS_PER_ROW = 4  # most cells of a family, over its parents' levels and its own
_FEWEST_CELLS = 1_024
_MOST_CELLS = 2_000_000  # of all families of a structure and all classes together


@dataclass(frozen=True)
class Room:
    """``sizes`` (n,): codes of each attribute; ``most``: cells that the families of one attribute may have."""

    sizes: np.ndarray
    most: int

    def first(self, child: int, parents: Sequence[int], others: Sequence[int], most: int) -> tuple[int, ...]:
        """Add others to an attribute's parents, in their order, until it has ``most``; pass over what has no room."""
        cells = int(np.prod(self.sizes[[child, *parents]], dtype=np.float64))
        found = list(parents)
        for other in others:
            if len(found) >= most:
                break
            if cells * int(self.sizes[other]) <= self.most:
                cells *= int(self.sizes[other])
                found.append(other)
        return tuple(found)


def room_of(training: Training) -> Room:
    """Say how large the families of a training set may be: 4 cells a row (1,024 where rows are few).

    But no more than a share of 2,000,000 cells, over all attributes and classes.
    """
    sizes = training.view.codes
    share = _MOST_CELLS // (len(sizes) * len(training.class_counts))
    wanted = min(_CELLS_PER_ROW * int(training.class_counts.sum()), share)
    return Room(sizes, max(_FEWEST_CELLS, wanted))
