"""Which doubtful p-values a forest of tested pairs depends on; making a p exact costs a thousand times as much."""

import numpy as np

from bnx.kernels.graphs import strongest_forest
from bnx.multiplicity import forest_threshold

__all__ = ["doubts_that_matter"]


def doubts_that_matter(
    strength: np.ndarray, allowed: np.ndarray, p: np.ndarray, doubtful: np.ndarray, alpha: float
) -> np.ndarray:
    """Find the doubtful pairs without whose exact p the strongest forest of tested pairs is not certain.

    The forest grown from p that are certain has a threshold of its own, and the one of all pairs is no lower, since
    further pairs only add edges. The pairs below it are sure to enter. Another pair within one of their trees adds no
    edge at any threshold from there on; and if it is weaker than every link between its ends, it is not in the
    strongest forest either. So its p decides nothing.

    Args:
        strength: (n, n), symmetric.
        allowed: bool (n, n), symmetric: the pairs that may be joined.
        p: (n, n), symmetric; NaN where nothing was tested.
        doubtful: bool (n, n), symmetric: p that may be exact or not.
        alpha: false-discovery rate among the edges.

    Returns:
        bool (n, n), set above the diagonal only.

    Source: Katsevich, Sabatti & Bogomolov 2021 (the threshold); Tarjan 1983, section 6.1 (the red rule for cycles).
    """
    asked: np.ndarray = np.triu(allowed & doubtful)
    if not asked.any():
        return asked
    certain = np.where(doubtful, np.inf, p)
    left, right = np.nonzero(np.triu(allowed))
    at = forest_threshold(np.stack([left, right], axis=1), certain[left, right], len(p), alpha)
    forest = strongest_forest(strength, allowed & (certain <= at))
    return np.asarray(asked & (strength >= _weakest_links(forest, strength)))


def _weakest_links(joined: np.ndarray, strength: np.ndarray) -> np.ndarray:
    """Find the weakest link between any two attributes of one tree, (n, n); minus infinity between trees.

    joined (n,): the attribute that each one is joined to, -1 for one per tree.
    """
    weakest = np.full(strength.shape, -np.inf)
    tree = np.arange(len(joined))
    for new, other in _outward(joined):
        inside = np.flatnonzero(tree == tree[other])
        link = np.minimum(weakest[other, inside], strength[new, other])
        link[inside == other] = strength[new, other]
        weakest[new, inside] = weakest[inside, new] = link
        tree[new] = tree[other]
    return weakest


def _outward(joined: np.ndarray) -> list[tuple[int, int]]:
    """List the links as (attribute, the one it is joined to), the latter always placed before."""
    followers: list[list[int]] = [[] for _ in joined]
    for node, other in enumerate(joined.tolist()):
        if other >= 0:
            followers[other].append(node)
    waiting = np.flatnonzero(joined < 0).tolist()
    links = []
    while waiting:
        other = waiting.pop()
        links += [(node, other) for node in followers[other]]
        waiting += followers[other]
    return links
