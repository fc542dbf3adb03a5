"""All pairs of very many binary attributes tested, given the class and without it, a run of attributes at a time.

From bit planes to p-values without a table: X2 of every pair, its moments only where a chi-square tail does not hold.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from threading import Lock

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels.wide_counts import kinds_of_margins
from bnx.kernels.wide_tests import LEAST, WideRows, Written, moments_of_margins, x2_of_pairs
from bnx.tails import chi_square_tail, moment_tail
from bnx.wide_tables import Margins, Planes, joint_tables

__all__ = ["Family", "WideTable", "test_all"]

_PAIRS = 400_000  # tested at a time by a thread: enough of them that packing planes side by side takes a small share
_TAILS = 1 << 15  # p-values worked out at a time, so that all stays in the cache
_STAGE = "testing all pairs"


@dataclass(frozen=True)
class Family:
    """P tests: ``p`` in the order of pairs, NaN where untestable; ``sparse`` (P,): by moments; and of those that could
    be too few to reach the threshold, ``doubtful`` (k,), the ``least`` p.
    """

    p: np.ndarray
    sparse: np.ndarray
    doubtful: np.ndarray
    least: np.ndarray


@dataclass(frozen=True)
class WideTable:
    """All rows of a table of binary attributes; planes by class alone."""

    engine: LocalEngine
    planes: Planes
    margins: Margins

    @property
    def attributes(self) -> int:
        """Number of attributes."""
        return len(self.planes.planes)

    @property
    def pairs(self) -> int:
        """Number of pairs."""
        return self.attributes * (self.attributes - 1) // 2

    @property
    def ones(self) -> np.ndarray:
        """Records of every class that have each attribute, int64 (C, n)."""
        return np.asarray(self.margins.ones[0], np.int64)

    @property
    def records(self) -> np.ndarray:
        """Records of every class, int64 (C,)."""
        return np.asarray(self.margins.records[0], np.int64)

    def firsts(self) -> np.ndarray:
        """Place of the first pair of every attribute, and how many there are, int64 (n + 1,)."""
        i = np.arange(self.attributes + 1, dtype=np.int64)
        return np.asarray(i * self.attributes - i * (i + 1) // 2)

    def ends(self, places: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Find the attributes of pairs by their places in the order (0, 1), (0, 2), ..., each (k,)."""
        firsts = self.firsts()[:-1]
        left = np.searchsorted(firsts, places, side="right") - 1
        return left, places - firsts[left] + left + 1

    def places(self, left: np.ndarray, right: np.ndarray) -> np.ndarray:
        """Find the places of pairs, left < right."""
        return np.asarray(self.firsts()[left] + right - left - 1)

    def tables(self, places: np.ndarray) -> np.ndarray:
        """Count pairs by class, int32 (k, C, 4)."""
        left, right = self.ends(places)
        joint = self.planes.counts(left, right)
        return joint_tables(joint, self.ones[:, left].T, self.ones[:, right].T, self.records)


class _Strongest:
    """The pairs with most nats x records seen so far, at least ``most`` of them as soon as there are as many."""

    def __init__(self, most: int) -> None:
        self._most = most
        self._lock = Lock()
        self._nats, self._places = np.zeros(0), np.zeros(0, np.int64)
        self.bound = -np.inf
        """What a pair must have to be among them."""

    def add(self, nats: np.ndarray, places: np.ndarray) -> None:
        """Take pairs in, and drop what cannot be among the strongest any more."""
        with self._lock:
            kept = nats >= self.bound
            self._nats = np.concatenate([self._nats, nats[kept]])
            self._places = np.concatenate([self._places, places[kept]])
            if 0 < self._most < len(self._nats):
                least = len(self._nats) - self._most
                self.bound = float(np.partition(self._nats, least)[least])
                kept = self._nats >= self.bound
                self._nats, self._places = self._nats[kept], self._places[kept]

    def ordered(self) -> np.ndarray:
        """Place them, strongest first, of equals the first first, (most,) or fewer."""
        return np.asarray(self._places[np.lexsort((self._places, -self._nats))][: self._most])


def test_all(table: WideTable, most: int, alpha: float) -> tuple[Family, Family, np.ndarray]:
    """Test all pairs given the class and without it; also place the strongest given it, ``most``, strongest first."""
    families = [(np.empty(table.pairs), np.empty(table.pairs, np.bool_)) for _ in range(2)]
    firsts = table.firsts().tolist()
    strongest = _Strongest(most)
    rows = _wide_rows(table)
    margins = ((table.ones, table.records), (table.ones.sum(axis=0)[None], table.records.sum()[None]))

    def test(share: tuple[int, int]) -> list[tuple[np.ndarray, np.ndarray]]:
        begin, end = firsts[share[0]], firsts[share[1]]
        given, without = (
            Written(p[begin:end], np.empty(end - begin, np.int8), sparse[begin:end]) for p, sparse in families
        )
        places, nats = np.empty(end - begin, np.int64), np.empty(end - begin)
        hits = x2_of_pairs(rows, *share, strongest.bound, given, without, places, nats)
        strongest.add(nats[:hits], places[:hits] + begin)
        return [_to_p(table, own, begin, one, alpha) for own, one in zip(margins, (given, without), strict=True)]

    found = table.engine.map(test, _shares(firsts), _STAGE)
    given, without = (Family(*families[k], *_joined([one[k] for one in found])) for k in range(2))
    return given, without, strongest.ordered()


def _joined(parts: Sequence[tuple[np.ndarray, np.ndarray]]) -> tuple[np.ndarray, np.ndarray]:
    """Join what the runs of a family say."""
    return np.concatenate([one for one, _ in parts]), np.concatenate([other for _, other in parts])


def _wide_rows(table: WideTable) -> WideRows:
    """Lay out what the tests must know of the rows."""
    ones = np.vstack([table.ones, table.ones.sum(axis=0)])
    records = np.append(table.records, table.records.sum())
    kinds = kinds_of_margins(ones, records)
    return WideRows(table.planes.planes, table.planes.words, ones.astype(np.float64), records.astype(np.float64), kinds)


def _to_p(
    table: WideTable, margins: tuple[np.ndarray, np.ndarray], begin: int, tests: Written, alpha: float
) -> tuple[np.ndarray, np.ndarray]:
    """Replace X2 of the pairs from ``begin`` on by p, as `independence.p_values` does.

    Returns:
        Places of the sparse ones that may be too few to reach a threshold of the family, and their least p.
    """
    few = np.flatnonzero(tests.sparse)
    moments = moments_of_margins(*margins, *table.ends(few + begin))
    p = moment_tail(tests.x2[few], *moments[:LEAST])
    for start in range(0, len(tests.x2), _TAILS):
        part = slice(start, start + _TAILS)
        tests.x2[part] = chi_square_tail(np.maximum(tests.df[part], 1), tests.x2[part])
    tests.x2[few] = p
    unsure = moments[LEAST] > alpha / table.pairs
    return few[unsure] + begin, moments[LEAST, unsure]


def _shares(firsts: Sequence[int]) -> list[tuple[int, int]]:
    """Cut the attributes into runs (start, stop) that begin about _PAIRS pairs each."""
    shares, start = [], 0
    for stop in range(1, len(firsts)):
        if firsts[stop] - firsts[start] >= _PAIRS or stop == len(firsts) - 1:
            if firsts[stop] > firsts[start]:
                shares.append((start, stop))
            start = stop
    return shares
