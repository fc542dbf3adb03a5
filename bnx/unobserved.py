"""Which unobserved attributes of a record matter to the observed ones, and which of them hang together.

An unobserved attribute without a child that is observed, or that matters itself, sums to 1 and vanishes. Of the others,
those that meet in a family must be summed out together: they form a group.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

__all__ = ["Group", "Parents", "groups_of"]

Parents = Mapping[int, tuple[int, ...]]  # child -> its parents; families without an unobserved member may be missing


@dataclass(frozen=True)
class Group:
    """Unobserved attributes that are summed out together, in the same way in all of some records.

    ``members``: the attributes, in their order; ``families``: the children of all families that hold one of them and
    do not sum to 1; ``rows``: the records.
    """

    members: tuple[int, ...]
    families: tuple[int, ...]
    rows: np.ndarray


@dataclass(frozen=True)
class _Matter:
    """Attributes that are unobserved in some record, ``own`` (m,); of them, in each of N records: ``unknown`` (m, N)
    bool, ``matters`` (m, N) bool: whether they do not just sum to 1.
    """

    own: np.ndarray
    unknown: np.ndarray
    matters: np.ndarray


def groups_of(unknown: np.ndarray, parents: Parents) -> Iterator[Group]:
    """Find the groups of unobserved attributes, unknown (n, N) bool, in all of N records."""
    children: dict[int, list[int]] = {}
    for child, own_parents in parents.items():
        for parent in own_parents:
            children.setdefault(parent, []).append(child)
    matter = _matter(unknown, parents)
    if not matter.matters.any():
        return
    place = {attribute: k for k, attribute in enumerate(matter.own.tolist())}
    labels = _labels(matter, place, parents)
    for first in range(len(matter.own)):
        rows = np.flatnonzero(labels[first] == first)
        for together, chosen in _alike(labels[:, rows] == first):
            members = matter.own[together].tolist()
            below = sorted({child for member in members for child in children.get(member, ())} & place.keys())
            numbers = [place[child] for child in below]
            own = rows[chosen]
            idle = matter.unknown[numbers][:, own] & ~matter.matters[numbers][:, own]
            for sums_to_one, same in _alike(idle):
                left_out = {child for child, out in zip(below, sums_to_one.tolist(), strict=True) if out}
                families = {*members, *(child for member in members for child in children.get(member, ()))} - left_out
                yield Group(tuple(members), tuple(sorted(families)), own[same])


def _matter(unknown: np.ndarray, parents: Parents) -> _Matter:
    """Tell which unobserved attributes matter, children before their parents."""
    own = np.flatnonzero(unknown.any(axis=1))
    place = {attribute: k for k, attribute in enumerate(own.tolist())}
    here = unknown[own]
    matters = np.zeros(here.shape, np.bool_)
    for child in _children_first(parents):
        above = [place[parent] for parent in parents[child] if parent in place]
        if above:
            in_play = ~here[place[child]] | matters[place[child]] if child in place else np.ones(here.shape[1], bool)
            matters[above] |= here[above] & in_play
    return _Matter(own, here, matters)


def _children_first(parents: Parents) -> list[int]:
    """Order the children of all families so that each comes before its parents."""
    waiting = dict.fromkeys(parents, 0)
    for parent in (one for own in parents.values() for one in own if one in waiting):
        waiting[parent] += 1
    order = [child for child, children in waiting.items() if not children]
    for child in order:
        for parent in (one for one in parents[child] if one in waiting):
            waiting[parent] -= 1
            if not waiting[parent]:
                order.append(parent)
    return order


def _labels(matter: _Matter, place: dict[int, int], parents: Parents) -> np.ndarray:
    """Label every attribute that matters with the first one of its group, (m, N); -1 for others."""
    m = len(matter.own)
    labels = np.where(matter.matters, np.arange(m)[:, None], m)
    families = []
    for child, own_parents in parents.items():
        meeting = np.array([place[member] for member in (*own_parents, child) if member in place])
        if len(meeting) > 1:
            in_play = ~matter.unknown[place[child]] | matter.matters[place[child]] if child in place else True
            joined = matter.matters[meeting] & in_play
            if (joined.sum(axis=0) > 1).any():
                families.append((meeting, joined))
    changed = True
    while changed:
        changed = False
        for meeting, joined in families:
            here = labels[meeting]
            least = np.where(joined, here, m).min(axis=0)
            changed |= bool((joined & (least < here)).any())
            labels[meeting] = np.where(joined, least, here)
    return np.where(labels < m, labels, -1)


def _alike(marks: np.ndarray) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Group columns of marks (m, N) bool that are the same: (the marks (m,), the columns)."""
    if not marks.shape[1]:
        return
    packed = np.ascontiguousarray(np.packbits(marks, axis=0).T) if len(marks) else np.zeros((marks.shape[1], 1), "u1")
    _, first, group = np.unique(packed, axis=0, return_index=True, return_inverse=True)
    order = np.argsort(group.ravel(), kind="stable")
    ends = np.cumsum(np.bincount(group.ravel()))
    for column, rows in zip(first.tolist(), np.split(order, ends[:-1]), strict=True):
        yield marks[:, column], rows
