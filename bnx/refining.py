"""Make the p of doubtful pairs exact: near the threshold, where the sample is too sparse for a chi-square tail.

What decides needs no table of a pair but those in doubt; a ``Visit`` fetches their counts, wherever they come from.
"""

import hashlib
from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import NamedTuple

import numpy as np

from bnx.engines import LocalEngine
from bnx.families import Request, for_each_family
from bnx.independence import Statistics, Tested, p_values
from bnx.kernels.attainable import least_p
from bnx.kernels.chance import expected_nats
from bnx.kernels.exact import exact_tail
from bnx.kernels.montecarlo import ENOUGH, SHUFFLED, log_factorials, monte_carlo_tail
from bnx.multiplicity import testable, threshold
from bnx.trainings import Training

__all__ = [
    "FAR_ABOVE",
    "FAR_BELOW",
    "MOST_DRAWN",
    "Report",
    "Rigour",
    "Visit",
    "gated",
    "in_doubt",
    "pooled",
    "reported",
    "visit_arrays",
    "visit_families",
    "with_chance",
]

MOST_DRAWN = 2000  # pairs whose p is drawn at random; those nearest the threshold come first

# p by moments is in doubt from a thirtieth of the threshold to a hundred times as much. On tables of some hundred
# records it is within a factor of 3 even at 1e-5; on tables of a dozen it can be some thirty times too small, or, where
# a margin holds one or two records, hundreds of times too large. Far above the threshold a few draws suffice.
FAR_BELOW, FAR_ABOVE = 30.0, 100.0
_DRAWS = 200.0  # tables drawn at most, times the threshold
_MOST_TABLES = 2_000_000
_EFFORT = 1.5e10  # records dealt and cells filled, some nanoseconds each
_KEPT = 200_000_000  # bytes of counts
_TOGETHER = 1000  # pairs counted before their counts are kept or dropped

Use = Callable[[np.ndarray, int, int], float]  # records, int32 (S, height * width), height, width -> a figure
Visit = Callable[[Sequence[int], Use], np.ndarray]  # numbers of k pairs, what to do with their counts -> figures, (k,)


class Rigour(NamedTuple):
    """How a gate tests: the test; the p-values by moments, ``low`` to ``high``, that are worth an exact one; a seed."""

    test: str
    low: float
    high: float
    seed: int


class Report(NamedTuple):
    """Tests as reported: ``undrawn`` pairs are near the threshold, but more than are drawn at random."""

    tested: Tested
    undrawn: int


def visit_families(
    engine: LocalEngine, trainings: Sequence[Training], requests: Sequence[Request], stage: str = ""
) -> Visit:
    """Fetch counts from the rows; requests: of each pair, its training set and members, the pair last.

    stage: what to tell the engine's progress callback as pairs are done; nothing is told without it.

    Counts are kept, up to 200 MB of them, since a report visits the same sparse pairs several times.
    """
    kept: dict[Request, tuple[np.ndarray, int, int]] = {}
    room = _KEPT

    def visit(chosen: Sequence[int], use: Use) -> np.ndarray:
        nonlocal room

        def take(counts: np.ndarray, sizes: tuple[int, ...]) -> tuple[float, tuple[np.ndarray, int, int]]:
            table = counts.reshape(-1, sizes[-2] * sizes[-1]), sizes[-2], sizes[-1]
            return use(*table), table

        wanted = [requests[k] for k in chosen]
        known = list(dict.fromkeys(request for request in wanted if request in kept))
        found = dict(zip(known, engine.map(lambda request: use(*kept[request]), known), strict=True))
        fresh = [request for request in wanted if request not in found]
        for start in range(0, len(fresh), _TOGETHER):
            if stage:
                engine.progress(stage, start, len(fresh))
            counted = for_each_family(engine, trainings, fresh[start : start + _TOGETHER], take)
            for request, (value, table) in counted.items():
                found[request] = value
                if table[0].nbytes <= room:
                    room -= table[0].nbytes
                    kept[request] = table
        return np.array([found[request] for request in wanted])

    return visit


def visit_arrays(counts: Sequence[np.ndarray] | np.ndarray, height: int, width: int) -> Visit:
    """Fetch counts from arrays, of each of P pairs (its strata, height * width)."""
    return lambda chosen, use: np.array([use(counts[k], height, width) for k in chosen])


def pooled(visit: Visit) -> Visit:
    """Fetch the same counts added up over all strata."""
    return lambda chosen, use: visit(
        chosen, lambda counts, height, width: use(counts.sum(axis=0, dtype=np.int32)[None], height, width)
    )


def with_chance(visit: Visit, stats: Statistics) -> Statistics:
    """Take off the exact mean under independence, given the margins, where the sample is too sparse for df / 2."""
    sparse = np.flatnonzero(~stats.cochran & (stats.df > 0))
    chance = stats.chance.copy()
    chance[sparse] = visit(sparse.tolist(), expected_nats) if len(sparse) else []
    return replace(stats, chance=chance)


def in_doubt(stats: Statistics, rigour: Rigour) -> tuple[Tested, np.ndarray]:
    """Test P pairs without their tables; also find those whose p ``gated`` would replace, bool (P,)."""
    tested = p_values(stats, rigour.test)
    replaced = stats.varies if rigour.test == "monte-carlo" else tested.by_moments & (stats.levels == 2)
    return tested, replaced & (tested.p >= rigour.low) & (tested.p <= rigour.high)


def gated(visit: Visit, stats: Statistics, rigour: Rigour) -> Tested:
    """Test P pairs for a gate whose thresholds lie well inside the p-values in doubt.

    There the exact p replaces p by moments where all strata are 2 x 2, and with ``monte-carlo`` one from random tables
    every other p.
    """
    tested, near = in_doubt(stats, rigour)
    tested = _exact(visit, stats, tested, near)
    if rigour.test == "monte-carlo":
        chosen = np.flatnonzero(near & ~tested.is_exact)
        tested = _drawn(visit, stats, tested, chosen, float(np.sqrt(rigour.low * rigour.high)), rigour.seed)
    return tested


def reported(visit: Visit, stats: Statistics, test: str, adjust: str, alpha: float, seed: int) -> Report:
    """Test P pairs as one family.

    A pair whose margins allow no p that a family of such pairs could reject is left out of it in advance. p by moments
    is replaced by the exact p where all strata are 2 x 2, and near the threshold elsewhere by one from random tables,
    drawn with a seed of the table's own, so that it depends on no other pair and on no order. ``monte-carlo`` draws for
    every pair tested whose p is not exact.

    Raises:
        SettingError: the test or the adjustment is not known.

    Source: Tarone 1990; Gilbert 2005 (the same before Benjamini & Hochberg's steps).
    """
    tested = p_values(stats, test)
    threshold(tested.p, adjust, alpha)  # refuses an unknown adjustment before the work starts
    if test in ("chi2", "g"):
        return Report(tested, 0)
    sparse = np.flatnonzero(tested.by_moments)
    least = np.zeros(len(tested.p))
    least[np.isnan(tested.p)] = np.inf
    least[sparse] = visit(sparse.tolist(), least_p)
    tested = tested.without(~testable(least, alpha, adjust))
    at = threshold(tested.p, adjust, alpha)
    tested = _exact(visit, stats, tested, tested.by_moments)
    if test == "monte-carlo":
        wanted = chosen = np.flatnonzero(~np.isnan(tested.p) & ~tested.is_exact)
    else:
        near = (tested.p <= FAR_ABOVE * at) & (tested.p * FAR_BELOW >= at)
        wanted = np.flatnonzero(tested.by_moments & near)
        chosen = np.sort(_affordable(stats, tested, wanted, at))
    return Report(_drawn(visit, stats, tested, chosen, at, seed), len(wanted) - len(chosen))


def _affordable(stats: Statistics, tested: Tested, wanted: np.ndarray, at: float) -> np.ndarray:
    """Take the pairs nearest the threshold, at most MOST_DRAWN and as many as a fixed amount of work allows."""
    p = np.maximum(tested.p[wanted], 1e-300)
    nearest = np.argsort(np.abs(np.log(p / at)), kind="stable")[:MOST_DRAWN]
    chosen, p = wanted[nearest], p[nearest]
    table = np.minimum(stats.rows[chosen], SHUFFLED * stats.cells[chosen]) + stats.cells[chosen]
    spent = np.cumsum(table * np.minimum(_most_tables(at), ENOUGH / p))
    return np.asarray(chosen[(spent <= _EFFORT) | (np.arange(len(chosen)) == 0)])


def _most_tables(at: float) -> int:
    """Say how many tables a threshold needs at most."""
    return int(min(_MOST_TABLES, max(1.0, _DRAWS / at)))


def _exact(visit: Visit, stats: Statistics, tested: Tested, near: np.ndarray) -> Tested:
    """Make p by moments exact where it is in doubt and all strata are 2 x 2."""
    chosen = np.flatnonzero(near & tested.by_moments & (stats.levels == 2))
    return tested.replaced(chosen, visit(chosen.tolist(), exact_tail), "exact") if len(chosen) else tested


def _drawn(visit: Visit, stats: Statistics, tested: Tested, chosen: np.ndarray, at: float, seed: int) -> Tested:
    """Replace the chosen p by those from random tables, as many as a threshold needs."""
    if not len(chosen):
        return tested
    most = _most_tables(at)
    table = log_factorials(int(stats.rows[chosen].max()))

    def use(counts: np.ndarray, height: int, width: int) -> float:
        own = hashlib.blake2b(counts.tobytes(), digest_size=7, key=seed.to_bytes(8, "little")).digest()
        return float(monte_carlo_tail(counts, height, width, table, int.from_bytes(own, "little"), most)[0])

    return tested.replaced(chosen, visit(chosen.tolist(), use), "monte-carlo")
