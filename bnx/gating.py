"""Which edges may enter: what the learners ask, and the rules that keep the false share among drawn edges down."""

from collections.abc import Callable, Generator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import networkx as nx
import numpy as np

from bnx.errors import StructureError
from bnx.structure import Structure

__all__ = [
    "Answer",
    "Bounds",
    "Gate",
    "Learning",
    "Question",
    "fixed_family_steps",
    "learn_together",
    "settled",
]


class Question(NamedTuple):
    """Does ``candidate`` depend on ``child`` given the class and the parents already taken?"""

    child: int
    candidate: int
    given: tuple[int, ...]


class Answer(NamedTuple):
    """``p`` of the test, 1 when no test was possible; ``bits`` left given all that, less what chance alone gives."""

    p: float
    bits: float


Learning = Generator[Sequence[Question], Sequence[Answer], Structure]
Ask = Callable[[Sequence[tuple[int, Question]]], Sequence[Answer]]


@dataclass(frozen=True)
class Gate:
    """The level at which edges are tested, and the p of every pair given the class, (n, n); NaN where untestable.

    ``doubtful`` bool (n, n): p that are near a threshold and not exact; a question about such a pair is answered
    exactly. None: there are none.
    """

    alpha: float
    p: np.ndarray
    doubtful: np.ndarray | None = None


@dataclass(frozen=True)
class Bounds:
    """What the trade knows: ``required`` (parent, child) edges, and pairs that are ``forbidden`` in either direction.

    Raises:
        StructureError: required edges form a cycle, or one is also forbidden.
    """

    names: tuple[str, ...]
    required: tuple[tuple[int, int], ...] = ()
    forbidden: tuple[tuple[int, int], ...] = ()

    def __post_init__(self) -> None:
        """Refuse bounds that contradict each other."""
        for parent, child in self.required:
            if self.forbids(parent, child):
                raise StructureError(
                    f"{self.names[parent]}:{self.names[child]} is both required and forbidden; drop one"
                )
        graph = nx.DiGraph(self.required)
        if not nx.is_directed_acyclic_graph(graph):
            cycle = [self.names[edge[0]] for edge in nx.find_cycle(graph)]
            path = " -> ".join([*cycle, cycle[0]])
            raise StructureError(f"the required edges form a cycle, {path}; leave one of them out")

    def forbids(self, a: int, b: int) -> bool:
        """Tell whether no edge may join two attributes."""
        return (a, b) in self.forbidden or (b, a) in self.forbidden

    def parents(self, child: int) -> tuple[int, ...]:
        """List the required parents of an attribute."""
        return tuple(parent for parent, other in self.required if other == child)

    def check_room(self, most: int, name: str) -> None:
        """Refuse a structure that has no room for the required parents of some attribute.

        Raises:
            StructureError: an attribute has more required parents than ``most``.
        """
        for child in dict.fromkeys(child for _, child in self.required):
            if len(self.parents(child)) > most:
                wanted = ", ".join(self.names[parent] for parent in self.parents(child))
                raise StructureError(
                    f"{name} gives an attribute at most {most} parent{'s' * (most != 1)}, but {self.names[child]} "
                    f"has {len(self.parents(child))} required ones ({wanted}); leave {name} out with --structures"
                )


def fixed_family_steps(p: np.ndarray, alpha: float, family: int) -> np.ndarray:
    """Reject by Holm's steps in a family whose size was fixed before the data chose which members to test.

    Source: Holm 1979; members that were not tested count as p = 1.
    """
    rejected = np.zeros(len(p), bool)
    for taken, index in enumerate(np.argsort(p, kind="stable")):
        if not p[index] <= alpha / max(family - taken, 1):
            break
        rejected[index] = True
    return rejected


def settled(structure: Structure) -> Learning:
    """Make the learning of a structure that needs no questions."""
    yield from ()
    return structure


def learn_together(learnings: Sequence[Learning], ask: Ask) -> list[Structure]:
    """Run learners side by side; questions that are open at the same time are answered together.

    ask: takes (number of the learning, question) pairs and answers them in order.
    """
    finished: dict[int, Structure] = {}
    waiting: dict[int, Sequence[Question]] = {}

    def advance(number: int, answers: Sequence[Answer] | None) -> None:
        try:
            waiting[number] = next(learnings[number]) if answers is None else learnings[number].send(answers)
        except StopIteration as stop:
            finished[number] = stop.value

    for number in range(len(learnings)):
        advance(number, None)
    while waiting:
        asked = [(number, question) for number, questions in waiting.items() for question in questions]
        answers = iter(ask(asked))
        for number, questions in list(waiting.items()):
            del waiting[number]
            advance(number, [next(answers) for _ in questions])
    return [finished[number] for number in range(len(learnings))]
