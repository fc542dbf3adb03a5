"""A structure: which attributes each attribute takes as parents, besides the class."""

import re
from dataclasses import dataclass

from bnx.errors import StructureError

__all__ = ["Structure", "words"]


@dataclass(frozen=True)
class Structure:
    """Parents per attribute, in the order they were taken; the class is a parent of all and is not listed.

    Raises:
        StructureError: the parents form a cycle, or an attribute is its own parent or names a parent twice.
    """

    name: str
    parents: tuple[tuple[int, ...], ...]

    def __post_init__(self) -> None:
        """Refuse parents that contradict each other."""
        for child, parents in enumerate(self.parents):
            if child in parents or len(set(parents)) < len(parents):
                raise StructureError(
                    f"attribute {child} of {self.name} has itself or one parent twice among its parents"
                )
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


def words(name: str) -> str:
    """Say a structure's name in words: ``up to 2 parents, tested``."""
    base, _, tested = name.partition("-")
    ending = ", tested" if tested == "tested" else ""
    if base == "naive":
        return "no edges"
    if base == "tan":
        return "tree" + ending
    if base == "heldout":
        return "up to 3 parents, chosen by held-out log loss"
    found = re.fullmatch(r"kdb(\d+)", base)
    if found:
        number = int(found[1])
        return f"up to {number} parent{'' if number == 1 else 's'}{ending}"
    return name
