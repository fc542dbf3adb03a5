"""Trees over very many binary attributes in many training sets, without a matrix of pairs.

All pairs are gone through once for a group of training sets. Each set holds the forests that it has found so far; a
pair weaker than every link between its ends cannot enter and is dropped at once (`bnx.kernels.wide_pairs`). What is
kept is measured and tested exactly as in a table of few attributes, and the forests are grown again: the answer is the
same, whatever the order.
"""

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from threading import Lock

import numpy as np
from scipy.special import chdtri, gammainccinv

from bnx.engines import LocalEngine
from bnx.folds import keyed_hash
from bnx.independence import Statistics
from bnx.kernels.contingency import NATS, ROWS, table_statistics
from bnx.kernels.forests import bounds_to_root, grow, joins_in_order
from bnx.kernels.wide_pairs import FOREST, TESTED, scan_pairs
from bnx.refining import Rigour, gated, visit_arrays
from bnx.trainings import Training
from bnx.wide_tables import Margins, Planes, Sums, joint_tables, margins_of, pack, sums_of

__all__ = ["Asked", "Edges", "Grown", "grow_forests"]

_TOGETHER = 32  # training sets that go through the pairs side by side: their margins and sums stay in the cache
_TILE = 128  # attributes j at a time
_RUN = 512  # attributes i at a time
_CAPACITY = 1 << 16  # pairs kept by a thread for a set between two rebuildings
_FIRST = 256  # share of the pairs gone through before the first rebuilding, as its inverse; then twice as many
_ROUNDING = 256 * 2.0**-52


@dataclass(frozen=True)
class Asked:
    """What is wanted: the level, how p is computed, whether forests of tested pairs too, pairs (i < j) left out."""

    alpha: float
    rigour: Rigour
    tested: bool
    forbidden: frozenset[tuple[int, int]]


@dataclass(frozen=True)
class Edges:
    """Pairs: ``left`` < ``right``, ``bits`` given the class, and ``p``, NaN where it was not asked for; all (E,)."""

    left: np.ndarray
    right: np.ndarray
    bits: np.ndarray
    p: np.ndarray

    @classmethod
    def none(cls) -> "Edges":
        """Hold no pair."""
        return cls(np.zeros(0, np.int64), np.zeros(0, np.int64), np.zeros(0), np.zeros(0))

    def take(self, chosen: np.ndarray) -> "Edges":
        """Keep the chosen pairs."""
        return Edges(self.left[chosen], self.right[chosen], self.bits[chosen], self.p[chosen])

    def joined(self, other: "Edges") -> "Edges":
        """Hold the pairs of both, each once."""
        left, right = np.concatenate([self.left, other.left]), np.concatenate([self.right, other.right])
        values = [np.concatenate(both) for both in ((self.bits, other.bits), (self.p, other.p))]
        _, first = np.unique((left << 32) | right, return_index=True)
        return Edges(left, right, *values).take(first)


@dataclass(frozen=True)
class Grown:
    """What one training set holds: its strongest ``forest``; the strongest of tested pairs that are ``sure`` to pass,
    and tested pairs that may yet pass, ``open_``.
    """

    forest: Edges
    sure: Edges
    open_: Edges


@dataclass(frozen=True)
class _Pass:
    """A group of training sets on their way through all pairs."""

    planes: Planes
    trainings: tuple[Training, ...]
    margins: Margins
    sums: Sums
    asked: Asked
    limits: np.ndarray
    tails: np.ndarray
    deviates: np.ndarray
    logs: np.ndarray

    @property
    def attributes(self) -> int:
        """Number of attributes."""
        return len(self.planes.planes)


def grow_forests(engine: LocalEngine, trainings: Sequence[Training], asked: Asked, seeds: Edges | None = None) -> list[Grown]:
    """Find the strongest forest, and the strongest forest of tested pairs, in every training set.

    seeds: pairs to begin with, as from another set.
    """
    planes = pack(engine)
    start = seeds or _first_seeds(planes, engine, trainings, asked)
    found: list[Grown] = []
    for first in range(0, len(trainings), _TOGETHER):
        group = _prepared(engine, planes, trainings[first : first + _TOGETHER], asked)
        found += _through(engine, group, start, f"growing trees of sets {first + 1} to {first + len(group.trainings)} of {len(trainings)}")
    return found


def _first_seeds(planes: Planes, engine: LocalEngine, trainings: Sequence[Training], asked: Asked) -> Edges:
    """Begin with what the first training set holds in the end."""
    group = _prepared(engine, planes, trainings[:1], asked)
    grown = _through(engine, group, Edges.none(), "growing a first tree")[0]
    return grown.forest.joined(grown.sure)


def _prepared(engine: LocalEngine, planes: Planes, trainings: Sequence[Training], asked: Asked) -> _Pass:
    margins = margins_of(engine, trainings, asked.forbidden)
    attributes, classes = margins.ones.shape[2], engine.classes
    most = _most_p(asked.alpha, attributes, margins.testable)
    df = np.arange(1, classes + 1)
    tails = np.array([[0.0, *(chdtri(df, min(1.0, p)) * (1.0 - 1e-9))] for p in most])
    deviates = _deviates(min(1.0, max(asked.rigour.high, float(most.max()))))
    mean = (margins.records / np.maximum(margins.records - 1.0, 1.0)).sum(axis=1)
    attainable = deviates[0] <= 2.0 * np.sqrt(margins.records.max(initial=1.0))  # skewness of X2; see the tests
    least = deviates[1, attainable].min() - 1e-3
    far = tails[:, 1] - mean if least > 0 else np.full(len(tails), -1e30)
    limits = np.stack([far, np.full(len(tails), least * least * (1.0 - 1e-3))], axis=1)
    counts = np.arange(int(margins.records.max(initial=1)) + 1, dtype=np.float64)
    logs = counts * np.log(np.maximum(counts, 1.0))
    sums = sums_of(np.stack([training.mask for training in trainings]))
    return _Pass(planes, tuple(trainings), margins, sums, asked, limits, tails, deviates, logs)


def _most_p(alpha: float, attributes: int, testable: np.ndarray) -> np.ndarray:
    """Find the largest p that could pass in each set: that of a forest that joins everything."""
    return np.asarray(alpha * (attributes - 1) / np.maximum(testable, 1) * (1.0 + 1e-9))


def _deviates(p: float) -> np.ndarray:
    """Tabulate, by skewness, the least standard deviates whose tail in `independence.p_values` by moments is p, (2, K)."""
    skewness = np.logspace(-3, 6, 4097)
    shape = 4.0 / skewness**2
    at = (gammainccinv(shape, p) - shape) * skewness / 2.0
    around = np.stack([np.roll(at, step) for step in (-2, -1, 0, 1)])[:, 2:-2]
    at[2:-2] = around.min(axis=0)
    at[:2], at[-2:] = at[:4].min(), at[-4:].min()
    return np.stack([skewness, at])


def _through(engine: LocalEngine, group: _Pass, seeds: Edges, stage: str) -> list[Grown]:
    """Take a group of sets through all pairs, in rounds between which the forests are grown again."""
    numbers = range(len(group.trainings))
    left, right = _star(group.attributes, group.asked.forbidden)
    left, right = np.concatenate([left, seeds.left]), np.concatenate([right, seeds.right])
    by_group = group.planes.counts(left, right).reshape(len(left), engine.blocks, engine.classes)
    what = np.concatenate([np.full(len(left) - len(seeds.left), FOREST), np.full(len(seeds.left), FOREST | TESTED)])
    empty = Grown(Edges.none(), Edges.none(), Edges.none())

    def begin(s: int) -> Grown:
        joint = by_group[:, group.trainings[s].mask].sum(axis=1)
        return _grown(group, s, empty, left, right, what, joint)

    grown = engine.map(begin, numbers)
    work = _work(group.attributes)
    total, share = sum(cost for *_, cost in work), 1.0 / _FIRST
    threads = [_Kept.empty(group, engine.classes) for _ in range(engine.jobs)]
    done = 0
    while work:
        quota = max(1, int(total * share))
        state = _state(group, grown)
        round_: list[tuple[int, int, int, int]] = []
        while work and quota > 0:
            round_.append(work.pop())
            quota -= round_[-1][-1]
        done += sum(cost for *_, cost in round_)
        rest = _scan(engine, group, state, round_, threads)
        work += rest
        done -= sum(cost for *_, cost in rest)

        def absorb(s: int, grown: list[Grown] = grown) -> Grown:
            now = grown[s]
            for thread in threads:
                found = thread.kept[s, : thread.numbers[s]].astype(np.int64)
                joint = thread.joints[s, : thread.numbers[s]]
                now = _grown(group, s, now, found[:, 0], found[:, 1], found[:, 2], joint)
            return now

        grown = engine.map(absorb, numbers)
        for thread in threads:
            thread.numbers[:] = 0
        share = min(2.0 * share, 0.25)
        engine.progress(stage, done, total)
    return grown


@dataclass(frozen=True)
class _Kept:
    """What one thread keeps in a round, see ``scan_pairs``."""

    nodes: np.ndarray
    kept: np.ndarray
    joints: np.ndarray
    numbers: np.ndarray

    @classmethod
    def empty(cls, group: _Pass, classes: int) -> "_Kept":
        sets = len(group.trainings)
        small = group.margins.records.max(initial=0) < 2**16
        nodes = np.zeros((group.sums.nodes, classes, _TILE), np.uint16 if small else np.uint32)
        kept = np.zeros((sets, _CAPACITY, 3), np.int32)
        return cls(nodes, kept, np.zeros((sets, _CAPACITY, classes), np.int32), np.zeros(sets, np.int64))


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
    state: tuple[np.ndarray, np.ndarray, np.ndarray],
    work: list[tuple[int, int, int, int]],
    threads: Sequence[_Kept],
) -> list[tuple[int, int, int, int]]:
    """Go through some work on all threads; give back what is left when a thread has no room left."""
    rest: list[tuple[int, int, int, int]] = []
    lock = Lock()

    def run(own: _Kept) -> None:
        while True:
            with lock:
                if not work:
                    return
                first, start, stop, cost = work.pop()
            width = min(_TILE, group.attributes - first)
            reached = _scan_one(group, state, own, first, width, start, stop)
            if reached < stop:
                with lock:
                    rest.append((first, reached, stop, cost * (stop - reached) // (stop - start)))
                return

    with ThreadPoolExecutor(engine.jobs) as pool:
        list(pool.map(run, threads))
    return rest + work


def _scan_one(
    group: _Pass,
    state: tuple[np.ndarray, np.ndarray, np.ndarray],
    own: _Kept,
    first: int,
    width: int,
    start: int,
    stop: int,
) -> int:
    slack = _ROUNDING * float(group.logs[-1] + 1.0)
    sums, margins = group.sums, group.margins
    return int(
        scan_pairs(
            group.planes.planes,
            group.planes.words,
            sums.plan,
            sums.wanted,
            own.nodes,
            margins.part,
            margins.records,
            *state,
            group.asked.tested,
            group.limits,
            group.tails,
            group.deviates,
            group.logs,
            slack,
            first,
            width,
            start,
            stop,
            own.kept,
            own.joints,
            own.numbers,
        )
    )


def _state(group: _Pass, grown: Sequence[Grown]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Lay out what the scan must know of every set's forests: see ``lows``, ``parents``, ``links`` there."""
    shape = (2, len(grown), group.attributes)
    lows, parents, links = np.zeros(shape, np.float32), np.zeros(shape, np.int32), np.zeros(shape)
    for s, one in enumerate(grown):
        nats = group.margins.records[s].sum() * np.log(2)
        for kind, edges in enumerate((one.forest, one.sure)):
            strength = edges.bits * nats
            grow(edges.left, edges.right, strength, parents[kind, s], links[kind, s])
            low = bounds_to_root(parents[kind, s], links[kind, s])
            lows[kind, s] = low - 1e-6 * np.abs(np.where(np.isfinite(low), low, 0.0))
    return lows, parents, links


def _grown(
    group: _Pass, s: int, now: Grown, left: np.ndarray, right: np.ndarray, what: np.ndarray, joint: np.ndarray
) -> Grown:
    """Let pairs (P,) with joint counts (P, C) into the forests of a set; what: a sum of FOREST and TESTED."""
    asked, ones = group.asked, group.margins.ones[s]
    if asked.forbidden:
        free = np.array([pair not in asked.forbidden for pair in zip(left.tolist(), right.tolist(), strict=True)], bool)
        left, right, what, joint = left[free], right[free], what[free], joint[free]
    records = group.margins.records[s].astype(np.int64)
    tables = joint_tables(joint.astype(np.int64), ones[:, left].T, ones[:, right].T, records)
    found, p = _measured(tables, np.flatnonzero(what & TESTED), asked)
    bits = found[:, NATS] / np.maximum(found[:, ROWS], 1.0) / np.log(2)
    new = Edges(left, right, bits, p)
    forest = _strongest(now.forest.joined(new.take((what & FOREST) > 0)), group.attributes)
    if not asked.tested:
        return Grown(forest, now.sure, now.open_)
    testable = int(group.margins.testable[s])
    may = new.p * testable <= asked.alpha * (group.attributes - 1)
    return Grown(forest, *_settled(now.sure.joined(now.open_).joined(new.take(may)), group.attributes, testable, asked))


def _measured(tables: np.ndarray, tested: np.ndarray, asked: Asked) -> tuple[np.ndarray, np.ndarray]:
    """Measure 2 x 2 tables (P, C, 4) as `dependence.measure` does, and test those of ``tested`` as a gate does."""
    flat = np.ascontiguousarray(tables.transpose(1, 0, 2)).reshape(tables.shape[1], -1)
    two = np.full(len(tables), 2, np.int64)
    found = table_statistics(flat, np.arange(len(tables), dtype=np.int64) * 4, two, two)
    p = np.full(len(tables), np.nan)
    if asked.tested and len(tested):
        visit = visit_arrays(tables[tested], 2, 2)
        p[tested] = gated(visit, Statistics.of(found[tested]), asked.rigour).p
    return found, p


def _strongest(edges: Edges, attributes: int) -> Edges:
    """Keep the strongest forest; ties go to the lower left, then the lower right attribute."""
    edges = edges.take(np.lexsort((edges.right, edges.left, -edges.bits)))
    parent, link = np.empty(attributes, np.int32), np.empty(attributes)
    return edges.take(grow(edges.left, edges.right, edges.bits, parent, link))


def _settled(edges: Edges, attributes: int, testable: int, asked: Asked) -> tuple[Edges, Edges]:
    """Split tested pairs into the strongest forest of those that are sure to pass, and those that may yet pass.

    More pairs can only join more, so what passes among the pairs found so far passes among all (see
    `multiplicity.forest_threshold`).
    """
    edges = edges.take(np.argsort(edges.p, kind="stable"))
    joins = joins_in_order(edges.left, edges.right, attributes)
    last = np.searchsorted(edges.p, edges.p, side="right") - 1
    passing = np.flatnonzero(edges.p * testable <= asked.alpha * joins[last])
    sure = last[passing[-1]] + 1 if len(passing) else 0
    rest = np.arange(len(edges.p))
    return _strongest(edges.take(rest[:sure]), attributes), edges.take(rest[sure:])


def _star(attributes: int, forbidden: frozenset[tuple[int, int]]) -> tuple[np.ndarray, np.ndarray]:
    """List pairs that come before all others without any bits: they join everything that may be joined at all."""
    away = sorted({right for left, right in forbidden if left == 0})
    pairs = {(0, right) for right in range(1, attributes)}
    pairs |= {(min(x, y), max(x, y)) for x in away for y in range(attributes) if x != y}
    ends = np.array(sorted(pairs - forbidden), np.int64).reshape(-1, 2)
    return ends[:, 0], ends[:, 1]
