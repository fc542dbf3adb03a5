"""Trees over very many binary attributes in many training sets, without a matrix of pairs.

All pairs are gone through once for a group of training sets. Each set holds the forests that it has found so far; a
pair weaker than every link between its ends cannot enter and is dropped at once (`bnx.kernels.wide_pairs`). What is
kept is measured and tested exactly as in a table of few attributes, and the forests are grown again: the answer is the
same, whatever the order.
"""

from collections import Counter
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import pairwise
from threading import Lock

import numpy as np
from scipy.special import chdtri, gammainccinv

from bnx.engines import LocalEngine
from bnx.folds import keyed_hash
from bnx.kernels.forests import bounds_to_root, grow
from bnx.kernels.wide_pairs import FOREST, TESTED, Forests, Kept, Table, Tests, scan_pairs
from bnx.trainings import Training
from bnx.wide_forests import Asked, Edges, Grown, admitted
from bnx.wide_tables import Margins, Planes, margins_of, pack, sums_of

__all__ = ["grow_forests"]

_TOGETHER = (
    48  # training sets that go through the pairs side by side, at most: their margins and sums stay in the cache
)
_FEW = 8  # training sets that go first, and find pairs that the others hold too
_TILE = 128  # attributes j at a time
_RUN = 512  # attributes i at a time
_CAPACITY = 1 << 16  # pairs kept by a thread for a set between two rebuildings
_FIRST = 256  # the first round goes through a 256th of the pairs, every other through twice as many as before it,
_LAST = 0.25  # at most a quarter
_SEEDS = 4  # pairs that the next group begins with, for each attribute
_ROUNDING = 256 * 2.0**-52


@dataclass(frozen=True)
class _Pass:
    """A group of training sets on their way through all pairs."""

    planes: Planes
    trainings: tuple[Training, ...]
    margins: Margins
    asked: Asked
    table: Table
    tests: Tests
    nodes: int

    @property
    def attributes(self) -> int:
        """Number of attributes."""
        return len(self.planes.planes)


def grow_forests(
    engine: LocalEngine, trainings: Sequence[Training], asked: Asked, seeds: Edges | None = None
) -> list[Grown]:
    """Find the strongest forest, and the strongest forest of tested pairs, in every training set.

    seeds: pairs to begin with, such as forests of similar rows hold; they make it faster, and no other answer.
    """
    planes = pack(engine)
    common = _Common(_SEEDS * len(planes.planes))
    common.add(seeds or _first_seeds(planes, engine, trainings, asked))
    found: list[Grown] = []
    for first, stop in _groups(len(trainings)):
        group = _prepared(engine, planes, trainings[first:stop], asked)
        stage = f"growing trees of sets {first + 1} to {stop} of {len(trainings)}"
        grown = _through(engine, group, common.best(), stage)
        for one in grown:
            common.add(one.forest.joined(one.sure))
        found += grown
    return found


def _groups(sets: int) -> list[tuple[int, int]]:
    """Cut the sets into groups of one size, after a small one that finds the pairs to begin with."""
    first = min(_FEW, sets)
    groups = max(1, -(-(sets - first) // _TOGETHER))
    stops = [first + (sets - first) * k // groups for k in range(groups + 1)]
    return [(0, first), *((one, other) for one, other in pairwise(stops) if one < other)]


class _Common:
    """Pairs that forests hold, with how many hold each: what the forests of similar rows are likely to hold."""

    def __init__(self, most: int) -> None:
        self._most = most
        self._times: Counter[int] = Counter()

    def add(self, edges: Edges) -> None:
        """Count the pairs of one more set."""
        self._times.update(((edges.left << 32) | edges.right).tolist())

    def best(self) -> Edges:
        """Give the pairs that most sets hold."""
        keys = np.array([key for key, _ in self._times.most_common(self._most)], np.int64)
        return Edges.of(keys >> 32, keys & 0xFFFFFFFF)


def _first_seeds(planes: Planes, engine: LocalEngine, trainings: Sequence[Training], asked: Asked) -> Edges:
    """Begin with what the first training set holds in the end."""
    group = _prepared(engine, planes, trainings[:1], asked)
    grown = _through(engine, group, Edges.none(), "growing a first tree")[0]
    return grown.forest.joined(grown.sure)


def _prepared(engine: LocalEngine, planes: Planes, trainings: Sequence[Training], asked: Asked) -> _Pass:
    """Work out what a group of sets needs on its way."""
    margins = margins_of(engine, trainings, asked.forbidden)
    counts = np.arange(int(margins.records.max(initial=1)) + 1, dtype=np.float64)
    logs = counts * np.log(np.maximum(counts, 1.0))
    sums = sums_of(np.stack([training.mask for training in trainings]))
    slack = _ROUNDING * (float(logs[-1]) * engine.classes + 1.0)
    table = Table(planes.planes, planes.words, sums.plan, sums.wanted, margins.part, margins.records, logs, slack)
    return _Pass(planes, tuple(trainings), margins, asked, table, _tests(margins, asked), sums.nodes)


def _tests(margins: Margins, asked: Asked) -> Tests:
    """Work out what a pair must reach to pass in each set.

    Where Cochran's rule holds, that is X2 itself; elsewhere X2's deviate, by its skewness, which is below twice the
    root of the records (`tests/test_wide.py` measures it).
    """
    _, classes, attributes = margins.ones.shape
    most = _most_p(asked.alpha, attributes, margins.testable)
    tails = np.array([[0.0, *(chdtri(np.arange(1, classes + 1), min(1.0, p)) * (1.0 - 1e-9))] for p in most])
    deviates = _deviates(min(1.0, max(asked.rigour.high, float(most.max()))))
    mean = (margins.records / np.maximum(margins.records - 1.0, 1.0)).sum(axis=1)
    attainable = deviates[0] <= 2.0 * np.sqrt(margins.records.max(initial=1.0))
    least = deviates[1, attainable].min() - 1e-3
    far = tails[:, 1] - mean if least > 0 else np.full(len(tails), -1e30)
    limits = np.stack([far, np.full(len(tails), least * least * (1.0 - 1e-3))], axis=1)
    return Tests(asked.tested, limits, _ample(margins), tails, deviates)


def _ample(margins: Margins) -> np.ndarray:
    """Scale the rarer level of every attribute, (S, n): two of these multiply to a pair's least expected count or less.

    Classes in which an attribute does not vary do not count.
    """
    rare = np.minimum(margins.ones, margins.records[:, :, None] - margins.ones)
    scaled = rare / np.sqrt(np.maximum(margins.records, 1.0))[:, :, None]
    return np.asarray(np.where(rare > 0, scaled, np.inf).min(axis=1).astype(np.float32))


def _most_p(alpha: float, attributes: int, testable: np.ndarray) -> np.ndarray:
    """Find the largest p that could pass in each set: that of a forest that joins everything."""
    return np.asarray(alpha * (attributes - 1) / np.maximum(testable, 1) * (1.0 + 1e-9))


def _deviates(p: float) -> np.ndarray:
    """Tabulate, by skewness, the least deviates whose tail in `independence.p_values` by moments is p, (2, K)."""
    skewness = np.logspace(-3, 6, 4097)
    shape = 4.0 / skewness**2
    at = (gammainccinv(shape, p) - shape) * skewness / 2.0
    around = np.stack([np.roll(at, step) for step in (-2, -1, 0, 1)])[:, 2:-2]
    at[2:-2] = around.min(axis=0)
    at[:2], at[-2:] = at[:4].min(), at[-4:].min()
    return np.stack([skewness, at])


def _through(engine: LocalEngine, group: _Pass, seeds: Edges, stage: str) -> list[Grown]:
    """Take a group of sets through all pairs, in rounds between which the forests are grown again."""
    grown = _begun(engine, group, seeds)
    work = _work(group.attributes)
    threads = [_room(group, engine.classes) for _ in range(engine.jobs)]
    total, share = sum(cost for *_, cost in work), 1.0 / _FIRST
    while work:
        quota, chosen = max(1, int(total * share)), []
        while work and quota > 0:
            chosen.append(work.pop())
            quota -= chosen[-1][-1]
        work += _scan(engine, group, _state(group, grown), chosen, threads)
        before = list(enumerate(grown))
        grown = engine.map(lambda one: _absorbed(group, *one, threads), before)
        for thread in threads:
            thread.numbers[:] = 0
        share = min(2.0 * share, _LAST)
        engine.progress(stage, total - sum(cost for *_, cost in work), total)
    return grown


def _begun(engine: LocalEngine, group: _Pass, seeds: Edges) -> list[Grown]:
    """Let the first pairs in: a star, so that trees join everything from the start, and the seeds."""
    left, right = _star(group.attributes, group.asked.forbidden)
    what = np.concatenate([np.full(len(left), FOREST), np.full(len(seeds.left), FOREST | TESTED)])
    left, right = np.concatenate([left, seeds.left]), np.concatenate([right, seeds.right])
    counts = group.planes.counts(left, right).reshape(len(left), engine.blocks, engine.classes)
    empty = Grown(Edges.none(), Edges.none(), Edges.none())

    def begin(s: int) -> Grown:
        joint = counts[:, group.trainings[s].mask].sum(axis=1)
        return admitted(group.margins, s, group.asked, empty, left, right, what, joint)

    return engine.map(begin, range(len(group.trainings)))


def _absorbed(group: _Pass, s: int, now: Grown, threads: Sequence[Kept]) -> Grown:
    """Let what the threads kept for a set into its forests."""
    kept = np.concatenate([own.kept[s, : own.numbers[s]] for own in threads]).astype(np.int64)
    joint = np.concatenate([own.joints[s, : own.numbers[s]] for own in threads])
    left, right, what = kept.T
    return admitted(group.margins, s, group.asked, now, left, right, what, joint)


def _room(group: _Pass, classes: int) -> Kept:
    """Make room for what one thread keeps in a round."""
    sets = len(group.trainings)
    kind = np.uint16 if group.table.records.max(initial=0) < 2**16 else np.uint32
    return Kept(
        np.zeros((group.nodes, classes, _TILE), kind),
        np.zeros((sets, _CAPACITY, 3), np.int32),
        np.zeros((sets, _CAPACITY, classes), np.int32),
        np.zeros(sets, np.int64),
    )


def _work(attributes: int) -> list[tuple[int, int, int, int]]:
    """Cut all pairs into (first j, start, stop of i, pairs), in an order that shows all regions early."""
    work = []
    for first in range(0, attributes, _TILE):
        width = min(_TILE, attributes - first)
        for start in range(0, first + width, _RUN):
            stop = min(start + _RUN, first + width)
            work.append((first, start, stop, (stop - start) * width))
    order = np.argsort(keyed_hash(0, np.arange(len(work))), kind="stable")
    return [work[place] for place in order]


def _scan(
    engine: LocalEngine,
    group: _Pass,
    forests: Forests,
    work: list[tuple[int, int, int, int]],
    threads: Sequence[Kept],
) -> list[tuple[int, int, int, int]]:
    """Go through some work on all threads; give back what is left when a thread has no room left."""
    rest: list[tuple[int, int, int, int]] = []
    lock = Lock()

    def run(own: Kept) -> None:
        while True:
            with lock:
                if not work:
                    return
                first, start, stop, cost = work.pop()
            width = min(_TILE, group.attributes - first)
            reached = scan_pairs(group.table, forests, group.tests, own, first, width, start, stop)
            if reached < stop:
                with lock:
                    rest.append((first, reached, stop, cost * (stop - reached) // (stop - start)))
                return

    with ThreadPoolExecutor(engine.jobs) as pool:
        list(pool.map(run, threads))
    return rest + work


def _state(group: _Pass, grown: Sequence[Grown]) -> Forests:
    """Lay out what the scan must know of every set's forests."""
    shape = (2, len(grown), group.attributes)
    lows, parents, links = np.zeros(shape, np.float32), np.zeros(shape, np.int32), np.zeros(shape)
    for s, one in enumerate(grown):
        nats = group.margins.records[s].sum() * np.log(2)
        for kind, edges in enumerate((one.forest, one.sure)):
            strength = edges.bits * nats
            grow(edges.left, edges.right, strength, parents[kind, s], links[kind, s])
            low = bounds_to_root(parents[kind, s], links[kind, s])
            lows[kind, s] = low - 1e-6 * np.abs(np.where(np.isfinite(low), low, 0.0))
    return Forests(lows, parents, links)


def _star(attributes: int, forbidden: frozenset[tuple[int, int]]) -> tuple[np.ndarray, np.ndarray]:
    """List pairs that come before all others without any bits: they join everything that may be joined at all."""
    away = sorted({right for left, right in forbidden if left == 0})
    pairs = {(0, right) for right in range(1, attributes)}
    pairs |= {(min(x, y), max(x, y)) for x in away for y in range(attributes) if x != y}
    ends = np.array(sorted(pairs - forbidden), np.int64).reshape(-1, 2)
    return ends[:, 0], ends[:, 1]
