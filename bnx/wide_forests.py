"""The forests that one training set over very many binary attributes holds, and how further pairs enter them.

Pairs are measured and tested exactly as in a table of few attributes.
"""

from dataclasses import dataclass

import numpy as np

from bnx.independence import Statistics
from bnx.kernels.contingency import NATS, ROWS, table_statistics
from bnx.kernels.forests import grow, joins_in_order
from bnx.kernels.wide_pairs import FOREST, TESTED
from bnx.refining import Rigour, gated, visit_arrays
from bnx.wide_tables import Margins, joint_tables

__all__ = ["Asked", "Edges", "Grown", "admitted"]


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
        return cls.of(np.zeros(0, np.int64), np.zeros(0, np.int64))

    @classmethod
    def of(cls, left: np.ndarray, right: np.ndarray) -> "Edges":
        """Hold pairs that are not measured, their bits and p NaN."""
        return cls(left, right, np.full(len(left), np.nan), np.full(len(left), np.nan))

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


def admitted(
    margins: Margins,
    s: int,
    asked: Asked,
    now: Grown,
    left: np.ndarray,
    right: np.ndarray,
    what: np.ndarray,
    joint: np.ndarray,
) -> Grown:
    """Let pairs (P,) with joint counts (P, C) into the forests of a set; what: a sum of FOREST and TESTED."""
    ones, attributes = margins.ones[s], margins.ones.shape[2]
    if asked.forbidden:
        free = np.array([pair not in asked.forbidden for pair in zip(left.tolist(), right.tolist(), strict=True)], bool)
        left, right, what, joint = left[free], right[free], what[free], joint[free]
    records = margins.records[s].astype(np.int64)
    tables = joint_tables(joint.astype(np.int64), ones[:, left].T, ones[:, right].T, records)
    found, p = _measured(tables, np.flatnonzero(what & TESTED), asked)
    bits = found[:, NATS] / np.maximum(found[:, ROWS], 1.0) / np.log(2)
    new = Edges(left, right, bits, p)
    forest = _strongest(now.forest.joined(new.take((what & FOREST) > 0)), attributes)
    if not asked.tested:
        return Grown(forest, now.sure, now.open_)
    testable = int(margins.testable[s])
    may = new.p * testable <= asked.alpha * (attributes - 1)
    return Grown(forest, *_settled(now.sure.joined(now.open_).joined(new.take(may)), attributes, testable, asked))


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
