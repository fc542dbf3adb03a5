"""A structure: which attributes each attribute takes as parents, besides the class."""

import re
from collections.abc import Sequence
from dataclasses import dataclass

from bnx.errors import StructureError

__all__ = ["Structure", "words"]

_TOLD = 5  # attributes left out that are named
_WORDS = {
    "naive": "no edges",
    "tan": "tree",
    "tan-tested": "tree, tested",
    "heldout": "up to 3 parents, chosen by held-out log loss",
    "kdb": "up to 5 parents, their number chosen out of fold",
    "kdb-trimmed": "up to 5 parents, their number and that of attributes chosen by leave-one-out",
}


@dataclass(frozen=True)
class Structure:
    """Parents per attribute, in the order they were taken; the class is a parent of all and is not listed.

    ``depth``: most parents of an attribute, where that was chosen, else None; ``dropped``: attributes that are left
    out, so that the class is no parent of theirs and they take no part in classifying.

    Raises:
        StructureError: the parents form a cycle, an attribute is its own parent or names a parent twice, or one that
            is left out has an edge.
    """

    name: str
    parents: tuple[tuple[int, ...], ...]
    depth: int | None = None
    dropped: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        """Refuse parents that contradict each other."""
        for child, parents in enumerate(self.parents):
            if child in parents or len(set(parents)) < len(parents):
                raise StructureError(
                    f"attribute {child} of {self.name} has itself or one parent twice among its parents"
                )
        out = set(self.dropped)
        if out and any(out & {child, *parents} for child, parents in enumerate(self.parents) if parents):
            raise StructureError(f"an attribute that {self.name} leaves out has a parent or a child")
        if self._has_cycle():
            raise StructureError(f"the parents in {self.name} form a cycle; no attribute may be an ancestor of itself")

    def _has_cycle(self) -> bool:
        """Take away attributes whose parents are gone, as long as there are any; what stays is on a cycle or below."""
        missing = [len(parents) for parents in self.parents]
        children: list[list[int]] = [[] for _ in self.parents]
        for parent, child in self.edges:
            children[parent].append(child)
        free = [attribute for attribute, number in enumerate(missing) if not number]
        for attribute in free:
            for child in children[attribute]:
                missing[child] -= 1
                if not missing[child]:
                    free.append(child)
        return len(free) < len(missing)

    @property
    def edges(self) -> tuple[tuple[int, int], ...]:
        """(parent, child) of every edge, by child, then in the order taken."""
        return tuple((parent, child) for child, parents in enumerate(self.parents) for parent in parents)

    def kept(self) -> tuple[tuple[int, ...], "Structure"]:
        """List the attributes that take part, and number them anew in a structure of these alone."""
        out = set(self.dropped)
        kept = tuple(one for one in range(len(self.parents)) if one not in out)
        place = {attribute: number for number, attribute in enumerate(kept)}
        parents = tuple(tuple(place[parent] for parent in self.parents[child]) for child in kept)
        return kept, Structure(self.name, parents, self.depth)

    @property
    def what_it_says(self) -> tuple[tuple[tuple[int, ...], ...], tuple[int, ...]]:
        """All but its name: two structures that agree in this are the same model."""
        return self.parents, self.dropped


def words(name: str, depth: int | None = None, dropped: Sequence[str] = ()) -> str:
    """Say a structure's name in words: ``up to 2 parents, tested``.

    depth, dropped: most parents and names of attributes left out, of a structure where that was chosen.
    """
    if depth is not None:
        how = "a number chosen out of fold" if name == "kdb" else "chosen by leave-one-out"
        return ", ".join([_up_to(depth), *_without(dropped), how])
    if name in _WORDS:
        return _WORDS[name]
    base, _, tested = name.partition("-")
    ending = ", tested" if tested == "tested" else ""
    found = re.fullmatch(r"kdb(\d+)", base)
    if found:
        return _up_to(int(found[1])) + ending
    return name


def _up_to(number: int) -> str:
    return f"up to {number} parent{'' if number == 1 else 's'}"


def _without(dropped: Sequence[str]) -> list[str]:
    """Say which attributes are left out, the first few by name."""
    if not dropped:
        return []
    more = f" and {len(dropped) - _TOLD} more" if len(dropped) > _TOLD else ""
    return [f"without {', '.join(dropped[:_TOLD])}{more}"]
