"""The strongest forest of directed edges in which every attribute has at most one parent."""

import numpy as np

__all__ = ["best_branching"]


def best_branching(weights: np.ndarray) -> list[int]:
    """Find the parent of every attribute in a branching of greatest total weight; -1 where it has none.

    weights (n, n): of the edge from row to column, minus infinity where there may be none; only edges above 0 are worth
    taking.

    Source: Edmonds 1967 (optimum branchings).
    """
    attributes = len(weights)
    rooted = np.full((attributes + 1, attributes + 1), -np.inf)
    rooted[1:, 1:] = weights
    rooted[0, 1:] = 0.0  # an attribute without a parent hangs on a root of its own
    np.fill_diagonal(rooted, -np.inf)
    return [int(parent) - 1 for parent in _arborescence(rooted)[1:]]


def _arborescence(weights: np.ndarray) -> np.ndarray:
    """Find the parent of every node but the root, node 0: its best one, with cycles contracted and broken up."""
    parents = np.argmax(weights, axis=0)
    cycle = _cycle(parents)
    if not cycle:
        return np.asarray(parents)
    outside = np.array([node for node in range(len(weights)) if node not in set(cycle)])
    inside = np.array(cycle)
    gains = weights[np.ix_(outside, inside)] - weights[parents[inside], inside]
    entry = np.argmax(gains, axis=1)
    leaving = weights[np.ix_(inside, outside)]
    smaller = np.full((len(outside) + 1, len(outside) + 1), -np.inf)
    smaller[:-1, :-1] = weights[np.ix_(outside, outside)]
    smaller[:-1, -1] = gains[np.arange(len(outside)), entry]
    smaller[-1, :-1] = leaving.max(axis=0)
    found = _arborescence(smaller)
    for place in range(1, len(outside)):
        into = found[place]
        from_cycle = into == len(outside)
        parents[outside[place]] = inside[np.argmax(leaving[:, place])] if from_cycle else outside[into]
    broken = found[-1]
    parents[inside[entry[broken]]] = outside[broken]
    return np.asarray(parents)


def _cycle(parents: np.ndarray) -> list[int]:
    """Find the nodes of a cycle in a list of parents whose root is node 0; none if there is no cycle."""
    done = {0}
    for start in range(1, len(parents)):
        path: list[int] = []
        node = start
        while node not in done and node not in path:
            path.append(node)
            node = int(parents[node])
        if node in path:
            return path[path.index(node) :]
        done.update(path)
    return []
