"""Forests and nearest neighbours in dense matrices: plain arrays in, plain arrays out."""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part

__all__ = ["forest_level", "strongest_few", "strongest_forest"]


@kernel
def strongest_forest(strength: np.ndarray, allowed: np.ndarray) -> np.ndarray:
    """Find the strongest forest of allowed edges, whatever their strengths: as many edges as can be.

    Of equally strong edges the one of the lowest first attribute comes first, then of the lowest second; that order is
    strict, so there is one such forest.

    Args:
        strength: (n, n), symmetric.
        allowed: bool (n, n), symmetric.

    Returns:
        int64 (n,): an attribute that each one is joined to, -1 for one per tree.

    Source: Prim 1957.
    """
    n = strength.shape[0]
    joined = np.full(n, -1, np.int64)
    best = np.full(n, -1, np.int64)
    inside = np.zeros(n, np.bool_)
    for start in range(n):
        new = -1 if inside[start] else start
        while new >= 0:
            inside[new] = True
            joined[new] = best[new]
            for node in range(n):
                open_ = not inside[node] and allowed[new, node]
                if open_ and (best[node] < 0 or _before(strength, new, node, best[node], node)):
                    best[node] = new
            new = -1
            for node in range(n):
                reached = not inside[node] and best[node] >= 0
                if reached and (new < 0 or _before(strength, best[node], node, best[new], new)):
                    new = node
    return joined


@part
def _before(strength: np.ndarray, a: int, b: int, c: int, d: int) -> bool:
    """Tell whether edge a - b comes before edge c - d."""
    if strength[a, b] != strength[c, d]:
        return bool(strength[a, b] > strength[c, d])
    low, other = min(a, b), min(c, d)
    return low < other or (low == other and max(a, b) < max(c, d))


@kernel
def forest_level(left: np.ndarray, right: np.ndarray, p: np.ndarray, n: int, tested: int, alpha: float) -> float:
    """Find the largest p with p x tested / edges <= alpha, edges being those of the forest of pairs up to p.

    left, right, p (m,): attributes of pairs among n, by rising p. NaN if there is none.
    """
    root = np.arange(n)
    edges, found, start = 0, np.nan, 0
    while start < p.size:
        stop = start
        while stop < p.size and p[stop] == p[start]:
            tree, other = _root(root, left[stop]), _root(root, right[stop])
            if tree != other:
                root[tree] = other
                edges += 1
            stop += 1
        if p[start] * tested <= alpha * edges:
            found = p[start]
        if edges == n - 1:
            return float(p[p.size - 1])
        start = stop
    return found


@inlined
def _root(root: np.ndarray, node: int) -> int:
    """Find the root of a tree, halving the path on the way."""
    while root[node] != node:
        root[node] = root[root[node]]
        node = root[node]
    return node


@kernel
def strongest_few(strength: np.ndarray, rank: np.ndarray, barred: np.ndarray, most: int) -> np.ndarray:
    """List, for every attribute, the strongest of those of a lower rank, strongest first, ties by number.

    Args:
        strength: (n, n).
        rank: (n,).
        barred: bool (n, n): pairs that are left out.
        most: how many are listed.

    Returns:
        int64 (n, most), -1 where there are no more.
    """
    n = strength.shape[0]
    found = np.full((n, most), -1, np.int64)
    for child in range(n):
        number = 0
        for other in range(n):
            if rank[other] >= rank[child] or barred[child, other]:
                continue
            value = strength[child, other]
            if number == most and not value > strength[child, found[child, most - 1]]:
                continue
            place = number if number < most else most - 1
            while place > 0 and value > strength[child, found[child, place - 1]]:
                found[child, place] = found[child, place - 1]
                place -= 1
            found[child, place] = other
            number = min(number + 1, most)
    return found
