"""Where chips stand: layers for attributes joined by arrows, rows for those without."""

import math
from collections.abc import Mapping, Sequence
from heapq import heappop, heappush

from bnx.errors import StructureError

__all__ = ["layers", "parents_first", "rows"]


def layers(parents: Mapping[int, Sequence[int]], order: Sequence[int], capacity: int) -> list[list[int]]:
    """Put every attribute below all its parents, at most ``capacity`` to a layer.

    ``order`` lists parents before children; among attributes that compete for a layer the earlier ones win.
    """
    found: list[list[int]] = []
    layer_of: dict[int, int] = {}
    for one in order:
        layer = 1 + max((layer_of[parent] for parent in parents.get(one, ())), default=-1)
        while layer < len(found) and len(found[layer]) >= capacity:
            layer += 1
        if layer == len(found):
            found.append([])
        found[layer].append(one)
        layer_of[one] = layer
    return found


def rows(members: Sequence[int], least_columns: int = 1) -> list[list[int]]:
    """Wrap attributes without arrows into even rows that together look about half as high again as wide."""
    columns = max(least_columns, math.ceil(math.sqrt(0.64 * len(members))), 1)
    columns = math.ceil(len(members) / math.ceil(len(members) / columns)) if members else 1
    return [list(members[start : start + columns]) for start in range(0, len(members), columns)]


def parents_first(parents: Mapping[int, Sequence[int]], members: Sequence[int]) -> list[int]:
    """Order attributes with parents before children, otherwise as given.

    Raises:
        StructureError: there is no such order.
    """
    place = {one: number for number, one in enumerate(members)}
    missing = {one: len(set(parents.get(one, ()))) for one in members}
    children: dict[int, list[int]] = {}
    for one in members:
        for parent in set(parents.get(one, ())):
            children.setdefault(parent, []).append(one)
    free = [place[one] for one in members if not missing[one]]  # a heap, as it rises
    found = []
    while free:
        one = members[heappop(free)]
        found.append(one)
        for child in children.get(one, ()):
            missing[child] -= 1
            if not missing[child]:
                heappush(free, place[child])
    if len(found) < len(members):
        rest = sorted(set(members) - set(found))
        raise StructureError(f"the arrows form a cycle through attributes {rest}; none may lead back")
    return found
