"""The probability of what was observed of a record: unobserved attributes summed out exactly along the structure."""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import chain
from math import prod

import numpy as np

from bnx.text import count_of, quoted
from bnx.unobserved import Group, Parents, groups_of

__all__ = ["MOST_CELLS", "approximate", "observed_terms", "summing_notes"]

MOST_CELLS = 1 << 20  # of a table that is made on the way, for one record and one column
_FLOATS = 1 << 22  # made at a time: 32 MB

Scope = tuple[int, ...]  # unobserved attributes, in their order


@dataclass(frozen=True)
class _Factor:
    """Log values of the joint levels of some unobserved attributes: ``table`` (K, levels of ``scope`` in order, T)."""

    scope: Scope
    table: np.ndarray


@dataclass(frozen=True)
class _Step:
    """Sums one attribute out: factors by number, those of each bucket multiplied first; their result is numbered next.

    One bucket is exact. Of several, the others are averaged over the attribute.
    """

    attribute: int
    buckets: tuple[tuple[int, ...], ...]


@dataclass(frozen=True)
class _Plan:
    """In which order attributes are summed out; ``widest``: cells of the largest table on the way."""

    steps: tuple[_Step, ...]
    widest: int

    @property
    def exact(self) -> bool:
        """Tell whether no product is split."""
        return all(len(step.buckets) == 1 for step in self.steps)


def observed_terms(
    codes: np.ndarray,
    parents: Parents,
    sizes: Sequence[int],
    log_table: Callable[[int], np.ndarray],
    columns: int,
    most: int = MOST_CELLS,
) -> tuple[np.ndarray, np.ndarray]:
    """Sum the unobserved attributes of N records out.

    codes (n, N), -1 for what was not observed; sizes: levels of all n attributes; log_table: of a child, log
    probabilities (levels of its parents in the order taken..., its own levels, T) in so many columns T.

    Returns:
        What the families that hold an unobserved attribute add to the log probability (nats) of what was observed,
        (N, T), and the records (N,) bool where that is an approximation, because it would take a table of more than
        ``most`` cells: there the sum over a product is split into a sum over a part of it and means over the others.

    Source: Zhang & Poole 1996 (variable elimination); after Dechter & Rish 2003 (mini-buckets) beyond ``most``.
    """
    out = np.zeros((codes.shape[1], columns))
    rough = np.zeros(codes.shape[1], np.bool_)
    for group, members, plan in _planned(codes, parents, sizes, most):
        around = sorted(set(chain(*members.values())) - set(group.members))
        seen, of_row = _different(codes[around][:, group.rows], [sizes[one] for one in around])
        step = max(1, _FLOATS // (plan.widest * columns))
        parts = []
        for first in range(0, seen.shape[1], step):
            levels = dict(zip(around, seen[:, first : first + step], strict=True))
            cut = [_factor(log_table(child), members[child], group, levels) for child in members]
            parts.append(_summed(cut, plan))
        out[group.rows] += np.concatenate(parts)[of_row]
        rough[group.rows] |= not plan.exact
    return out, rough


def approximate(codes: np.ndarray, parents: Parents, sizes: Sequence[int], most: int = MOST_CELLS) -> np.ndarray:
    """Tell for which records (N,) ``observed_terms`` gives an approximation."""
    rough = np.zeros(codes.shape[1], np.bool_)
    for group, _, plan in _planned(codes, parents, sizes, most):
        rough[group.rows] |= not plan.exact
    return rough


def _planned(
    codes: np.ndarray, parents: Parents, sizes: Sequence[int], most: int
) -> Iterator[tuple[Group, dict[int, Scope], _Plan]]:
    """Find what is to be summed out together, the members of the families in which it stands, and in which order."""
    plans: dict[tuple[Scope, ...], _Plan] = {}
    for group in groups_of(codes < 0, parents):
        members = {child: (*parents[child], child) for child in group.families}
        scopes = tuple(_scope(own, group) for own in members.values())
        if scopes not in plans:
            plans[scopes] = _plan(scopes, sizes, most)
        yield group, members, plans[scopes]


def _scope(members: Scope, group: Group) -> Scope:
    """Name the members of a family that are summed out."""
    return tuple(sorted(set(members) & set(group.members)))


def _different(levels: np.ndarray, sizes: Sequence[int]) -> tuple[np.ndarray, np.ndarray]:
    """Find the different columns of levels (m, N), and which of them each column is."""
    if not sizes:
        return levels[:, :1], np.zeros(levels.shape[1], np.int64)
    if prod(sizes) > 2**62:
        seen, of_row = np.unique(levels, axis=1, return_inverse=True)
        return seen, of_row.ravel()
    numbers = np.ravel_multi_index(tuple(levels), tuple(sizes))
    _, first, of_row = np.unique(numbers, return_index=True, return_inverse=True)
    return levels[:, first], of_row.ravel()


def _factor(table: np.ndarray, members: Scope, group: Group, levels: Mapping[int, np.ndarray]) -> _Factor:
    """Cut the table of a family down to what records observed of it."""
    scope = _scope(members, group)
    known = [place for place, one in enumerate(members) if one not in scope]
    moved = table.transpose([*known, *(members.index(one) for one in scope), len(members)])
    sizes = tuple(table.shape[place] for place in known)
    flat = moved.reshape(prod(sizes), *moved.shape[len(known) :])
    if not known:
        return _Factor(scope, flat)
    return _Factor(scope, flat[np.ravel_multi_index(tuple(levels[members[place]] for place in known), sizes)])


def _plan(scopes: Sequence[Scope], sizes: Sequence[int], most: int) -> _Plan:
    """Choose the order, always the attribute next whose product has the fewest cells (the first of these)."""
    left = dict(enumerate(map(frozenset, scopes)))
    steps: list[_Step] = []
    widest = max(_cells(scope, sizes) for scope in left.values())
    waiting = sorted(frozenset().union(*left.values()))
    made = len(left)
    while waiting:
        cells = [_cells(frozenset().union(*(s for s in left.values() if one in s)), sizes) for one in waiting]
        one = waiting.pop(cells.index(min(cells)))
        buckets: list[list[int]] = []
        unions: list[frozenset[int]] = []
        for number in [number for number, scope in left.items() if one in scope]:
            scope = left.pop(number)
            fit = next((k for k, union in enumerate(unions) if _cells(union | scope, sizes) <= most), None)
            if fit is None:
                buckets.append([number])
                unions.append(scope)
            else:
                buckets[fit].append(number)
                unions[fit] |= scope
        for union in unions:
            widest = max(widest, _cells(union, sizes))
            left[made] = union - {one}
            made += 1
        steps.append(_Step(one, tuple(map(tuple, buckets))))
    return _Plan(tuple(steps), widest)


def _cells(scope: frozenset[int], sizes: Sequence[int]) -> int:
    return prod(sizes[one] for one in scope)


def _summed(factors: Sequence[_Factor], plan: _Plan) -> np.ndarray:
    """Follow a plan: log of the sum over all attributes of the product of factors, (K, T)."""
    every = list(factors)
    left = set(range(len(every)))
    for step in plan.steps:
        for place, bucket in enumerate(step.buckets):
            product = _product([every[number] for number in bucket])
            axis = product.scope.index(step.attribute) + 1
            table = _log_sum(product.table, axis)
            if place:
                table -= np.log(product.table.shape[axis])
            left -= set(bucket)
            left.add(len(every))
            every.append(_Factor(tuple(one for one in product.scope if one != step.attribute), table))
    return np.asarray(sum(every[number].table for number in sorted(left)))


def _product(factors: Sequence[_Factor]) -> _Factor:
    """Multiply factors."""
    scope = tuple(sorted(set(chain(*(factor.scope for factor in factors)))))
    total: np.ndarray | None = None
    for factor in factors:
        spread = factor.table[(slice(None), *(slice(None) if one in factor.scope else None for one in scope))]
        total = spread if total is None else total + spread
    return _Factor(scope, np.asarray(total))


def _log_sum(table: np.ndarray, axis: int) -> np.ndarray:
    """Take logs of sums of exponentials along an axis."""
    top = table.max(axis=axis, keepdims=True)
    return np.asarray(np.log(np.exp(table - top).sum(axis=axis)) + top.squeeze(axis))


def summing_notes(names: Sequence[str], unknown: np.ndarray, rough: int) -> list[str]:
    """Say in sentences what was summed out: unknown (n,) records of each attribute; rough: how many approximately."""
    cells = [f"{name} ({count_of(n, 'record')})" for name, n in zip(names, unknown.tolist(), strict=True) if n]
    notes = []
    if cells:
        notes.append(f"cells that are blank or hold a value not known from training were summed out: {quoted(cells)}")
    if rough:
        notes.append(
            f"in {count_of(rough, 'record')} so many of them hang together that the sum is an approximation: exact it "
            f"would take a table of more than {MOST_CELLS:,} cells"
        )
    return notes
