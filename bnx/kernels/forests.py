"""Forests over very many attributes: grown from edges in order, and the weakest link between any two.

A forest is kept as a *tree of joins*: whenever two trees are joined, the root of the smaller hangs on the root of the
larger with the strength of the joining edge as its link. Links weaken towards the root, and no path is longer than
log2(n). The weakest link on the path between two attributes in the forest is the weakest on the path in the joins.
"""

import numpy as np

from bnx.kernels.compiling import kernel, part

__all__ = ["bottleneck", "bounds_to_root", "directed", "grow", "joins_in_order"]


@kernel
def grow(left: np.ndarray, right: np.ndarray, strength: np.ndarray, parent: np.ndarray, link: np.ndarray) -> np.ndarray:
    """Grow a forest from edges in order, strongest first; an edge that closes a cycle is left out.

    Args:
        left: one end of each edge, int32 (E,).
        right: the other end.
        strength: of each edge, float64 (E,), falling.
        parent: tree of joins, int32 (n,), filled in; a root is its own parent.
        link: strength of the joining edge, float64 (n,), filled in; minus infinity at a root.

    Returns:
        Which edges the forest holds, bool (E,).

    Source: Kruskal 1956; joining the smaller to the larger: Galler & Fischer 1964.
    """
    attributes = parent.size
    size = np.ones(attributes, np.int32)
    for x in range(attributes):
        parent[x] = x
        link[x] = -np.inf
    kept = np.zeros(left.size, np.bool_)
    joined = 1
    for e in range(left.size):
        a, b = _root(parent, left[e]), _root(parent, right[e])
        if a == b:
            continue
        if size[a] < size[b]:
            a, b = b, a
        parent[b] = a
        link[b] = strength[e]
        size[a] += size[b]
        kept[e] = True
        joined += 1
        if joined == attributes:
            break
    return kept


@part
def _root(parent: np.ndarray, x: int) -> int:
    """Walk up to the root."""
    while parent[x] != x:
        x = parent[x]
    return x


@part
def bottleneck(parent: np.ndarray, link: np.ndarray, i: int, j: int) -> float:
    """Find the weakest link between two attributes in a forest; minus infinity where nothing joins them.

    parent, link: the tree of joins that ``grow`` made.
    """
    weakest = np.inf
    while i != j:
        if link[i] < link[j]:
            i, j = j, i
        weakest = link[i]
        if parent[i] == i:
            return -np.inf
        i = parent[i]
    return weakest


@kernel
def bounds_to_root(parent: np.ndarray, link: np.ndarray) -> np.ndarray:
    """Find the weakest link between every attribute and the root of the largest tree, float64 (n,).

    Infinity for that root itself, minus infinity in other trees. Two attributes whose bounds are both at least b are
    joined by links of at least b.
    """
    attributes = parent.size
    size = np.zeros(attributes, np.int32)
    top = np.empty(attributes, np.int32)
    bound = np.full(attributes, np.inf)
    for x in range(attributes):
        at = x
        while parent[at] != at:
            bound[x] = link[at]
            at = parent[at]
        top[x] = at
        size[at] += 1
    largest = np.argmax(size)
    for x in range(attributes):
        if top[x] != largest:
            bound[x] = -np.inf
    return bound


@kernel
def joins_in_order(left: np.ndarray, right: np.ndarray, attributes: int) -> np.ndarray:
    """Count the edges of the forest grown from the first 1, 2, ... pairs, int64 (E,)."""
    parent = np.arange(attributes)
    edges = np.zeros(left.size, np.int64)
    joined = 0
    for e in range(left.size):
        a, b = left[e], right[e]
        while parent[a] != a:
            parent[a] = parent[parent[a]]
            a = parent[a]
        while parent[b] != b:
            parent[b] = parent[parent[b]]
            b = parent[b]
        if a != b:
            parent[a] = b
            joined += 1
        edges[e] = joined
    return edges


@kernel
def directed(left: np.ndarray, right: np.ndarray, order: np.ndarray) -> np.ndarray:
    """Direct every tree of a forest away from the first of its attributes in ``order``: parents (n,), -1 without one.

    left, right (E,): the ends of its edges; order (n,): every attribute once.
    """
    attributes = order.size
    starts = np.zeros(attributes + 2, np.int64)
    for e in range(left.size):
        starts[left[e] + 2] += 1
        starts[right[e] + 2] += 1
    for x in range(attributes + 1):
        starts[x + 1] += starts[x]
    near = np.empty(2 * left.size, np.int64)
    for e in range(left.size):
        near[starts[left[e] + 1]] = right[e]
        starts[left[e] + 1] += 1
        near[starts[right[e] + 1]] = left[e]
        starts[right[e] + 1] += 1
    parents = np.full(attributes, -1)
    placed = np.zeros(attributes, np.bool_)
    waiting = np.empty(attributes, np.int64)
    for root in order:
        if placed[root]:
            continue
        placed[root] = True
        waiting[0] = root
        done, known = 0, 1
        while done < known:
            x = waiting[done]
            done += 1
            for place in range(starts[x], starts[x + 1]):
                y = near[place]
                if not placed[y]:
                    placed[y] = True
                    parents[y] = x
                    waiting[known] = y
                    known += 1
    return parents
