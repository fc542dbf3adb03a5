"""Counts by block of rows and class. They are sums: count(A and B) = count(A) + count(B).

Folds, pairs of folds, random halves, threads and machines are all that one law.
"""

from dataclasses import dataclass

import numpy as np

__all__ = ["FamilyCounts", "PairCounts", "PairLayout"]


@dataclass(frozen=True)
class PairLayout:
    """Where the table of each pair lies in a line of cells.

    ``left``, ``right`` (P,): the attributes of a pair, left < right; ``heights``, ``widths`` (P,): their levels;
    ``offsets`` (P + 1,): pair p fills ``offsets[p]:offsets[p + 1]`` row-major.
    """

    left: np.ndarray
    right: np.ndarray
    heights: np.ndarray
    widths: np.ndarray
    offsets: np.ndarray

    @classmethod
    def of(cls, sizes: np.ndarray, left: np.ndarray, right: np.ndarray) -> "PairLayout":
        """Lay out the given pairs of attributes with ``sizes`` (n,) levels."""
        heights, widths = sizes[left], sizes[right]
        offsets = np.concatenate([[0], np.cumsum(heights * widths)]).astype(np.int64)
        return cls(left, right, heights, widths, offsets)


@dataclass(frozen=True)
class PairCounts:
    """Joint counts of many pairs: ``counts`` (blocks, C, cells) int32 under ``layout``."""

    layout: PairLayout
    counts: np.ndarray

    def __add__(self, other: "PairCounts") -> "PairCounts":
        """Count both sets of rows."""
        return PairCounts(self.layout, self.counts + other.counts)

    def __sub__(self, other: "PairCounts") -> "PairCounts":
        """Take rows away again."""
        return PairCounts(self.layout, self.counts - other.counts)


@dataclass(frozen=True)
class FamilyCounts:
    """Joint counts of a few attributes, the last member fastest: ``counts`` (blocks, C, cells) int32."""

    members: tuple[int, ...]
    sizes: tuple[int, ...]
    counts: np.ndarray

    def __add__(self, other: "FamilyCounts") -> "FamilyCounts":
        """Count both sets of rows."""
        return FamilyCounts(self.members, self.sizes, self.counts + other.counts)

    def __sub__(self, other: "FamilyCounts") -> "FamilyCounts":
        """Take rows away again."""
        return FamilyCounts(self.members, self.sizes, self.counts - other.counts)
