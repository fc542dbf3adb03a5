"""Learners: from a ``Dependence`` to a ``Structure``. A member never sees a row."""

import re
from collections.abc import Sequence
from typing import Protocol

from bnx.dependence import Dependence
from bnx.errors import SettingError
from bnx.gating import Bounds, Gate, Learning
from bnx.learners.heldout import Heldout, Judge
from bnx.learners.kdb import Kdb, KdbTested, relevance_order
from bnx.learners.kdb_chosen import KdbChosen, KdbTrimmed
from bnx.learners.naive import Naive
from bnx.learners.tan import Tan

__all__ = [
    "Heldout",
    "Judge",
    "KdbChosen",
    "KdbTrimmed",
    "Learner",
    "PairLearner",
    "Single",
    "learner",
    "relevance_order",
    "singles",
]


class PairLearner(Protocol):
    """What a member that learns from pairs offers: a name, the most parents of an attribute, the learning itself."""

    @property
    def name(self) -> str:
        """Name the structure."""

    @property
    def depths(self) -> int:
        """Most parents of an attribute, besides the class."""

    @property
    def looks_at_pairs(self) -> bool:
        """Whether it reads what two attributes share; ``strength`` is zero if no learner at work does."""

    @property
    def tested(self) -> bool:
        """Whether an edge has to pass a test."""

    def learn(self, dependence: Dependence, gate: Gate, bounds: Bounds) -> Learning:
        """Start learning; questions are yielded, the structure is returned."""


Single = PairLearner | Heldout | KdbTrimmed
Learner = Single | KdbChosen


def singles(learners: Sequence[Learner], bounds: Bounds) -> tuple[list[Single], list[range]]:
    """List the learners behind those asked for, and which of these each is chosen from, simpler ones first."""
    found: list[Single] = []
    own = []
    for member in learners:
        before = len(found)
        found += member.members(bounds) if isinstance(member, KdbChosen) else [member]
        own.append(range(before, len(found)))
    return found, own


def learner(name: str) -> Learner:
    """Find the learner of a structure by its name.

    Raises:
        SettingError: no structure has this name.
    """
    fixed: dict[str, Learner] = {
        "naive": Naive(),
        "tan": Tan(tested=False),
        "tan-tested": Tan(tested=True),
        "heldout": Heldout(),
        "kdb": KdbChosen(),
        "kdb-trimmed": KdbTrimmed(),
    }
    if name in fixed:
        return fixed[name]
    found = re.fullmatch(r"kdb([1-9]\d?)(-tested)?", name)
    if found:
        return KdbTested(int(found[1])) if found[2] else Kdb(int(found[1]))
    raise SettingError(
        f"--structures: {name!r} is not a structure; known: naive, tan, tan-tested, kdbK, kdbK-tested (K = 1, 2, ...), "
        "kdb, kdb-trimmed, heldout"
    )
