"""Which of the tested pairs a comparison lists, and what is said of each."""

import numpy as np

from bnx.class_tables import measure_double_counting
from bnx.comparison import Comparison
from bnx.verdicts import TestResult

__all__ = ["PAIRS_SHOWN", "pair_results"]

PAIRS_SHOWN = 20_000


def pair_results(comparison: Comparison, everything: bool = False) -> list[TestResult]:
    """List tested pairs, most bits first: all up to 20,000, else the drawn, the rejected and the strongest."""
    bits = comparison.judged.statistics.bits
    chosen = np.arange(len(bits)) if everything or len(bits) <= PAIRS_SHOWN else _first(comparison)
    order = chosen[np.argsort(-bits[chosen], kind="stable")]
    names = comparison.names
    left, right = comparison.pairs.left[order], comparison.pairs.right[order]
    ends = [(names[i], names[j]) for i, j in zip(left.tolist(), right.tolist(), strict=True)]
    first = comparison.evaluations[0]
    twice = measure_double_counting(first.engine, first.learned(()).training, left, right)
    return comparison.judged.results(ends, order, twice)


def _first(comparison: Comparison) -> np.ndarray:
    """Choose pairs: drawn ones, then rejected ones, then the strongest, 20,000 in all; in their own order."""
    attributes, bits = len(comparison.names), comparison.judged.statistics.bits
    left, right = comparison.pairs.left, comparison.pairs.right
    ends = {tuple(sorted((edge.parent, edge.child))) for edges in comparison.edges for edge in edges}
    number = np.array([a * attributes + b for a, b in ends], dtype=np.int64)
    is_drawn = np.isin(np.minimum(left, right) * np.int64(attributes) + np.maximum(left, right), number)
    rejected = comparison.judged.judgement.rejected
    chosen = np.empty(0, np.int64)
    for group in (is_drawn, rejected & ~is_drawn, ~rejected & ~is_drawn):
        chosen = np.concatenate([chosen, _strongest(bits, np.flatnonzero(group), PAIRS_SHOWN - len(chosen))])
    return np.sort(chosen)


def _strongest(bits: np.ndarray, group: np.ndarray, most: int) -> np.ndarray:
    """Take the members of a group with most bits, the first ones among equals, without sorting the others."""
    if len(group) <= most:
        return group
    if not most:
        return group[:0]
    own = bits[group]
    least = np.partition(own, -most)[-most]
    above = group[own > least]
    return np.concatenate([above, group[own == least][: most - len(above)]])
