"""Naive Bayes: no edges between attributes. It is the baseline, so required edges do not enter it."""

from dataclasses import dataclass

from bnx.dependence import Dependence
from bnx.gating import Bounds, Gate, Learning, settled
from bnx.structure import Structure

__all__ = ["Naive"]


@dataclass(frozen=True)
class Naive:
    """Give every attribute the class as its only parent."""

    name: str = "naive"
    depths: int = 0
    looks_at_pairs: bool = False
    tested: bool = False

    def learn(self, dependence: Dependence, gate: Gate, bounds: Bounds) -> Learning:
        """Return no edges."""
        return settled(Structure(self.name, ((),) * len(dependence.relevance)))
