"""How one training set sees the coded table: its own cut points and pooled levels."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.domains import Coarsening, Domain, Schema

__all__ = ["View", "make_view"]


@dataclass(frozen=True)
class View:
    """The attributes as one training set sees them.

    ``recode`` (n, R) int32: the code that each stored code stands for; ``plain`` (n,) bool: stored codes are used as
    they are; ``sizes`` (n,) int64: levels.
    """

    domains: tuple[Domain, ...]
    recode: np.ndarray
    plain: np.ndarray
    sizes: np.ndarray

    def all_plain(self, members: Sequence[int]) -> bool:
        """Tell whether stored codes of all these attributes can be used as they are."""
        return bool(self.plain[list(members)].all())

    def sizes_of(self, members: Sequence[int]) -> tuple[int, ...]:
        """Levels of some attributes."""
        return tuple(int(self.sizes[member]) for member in members)

    def merge(self, attribute: int, counts: np.ndarray) -> np.ndarray:
        """Add counts (..., stored levels) of one attribute up to those of its levels in this view."""
        if self.plain[attribute]:
            return counts
        merged = np.zeros((*counts.shape[:-1], self.sizes[attribute]), counts.dtype)
        for code, level in enumerate(self.recode[attribute, : counts.shape[-1]].tolist()):
            merged[..., level] += counts[..., code]
        return merged


def make_view(schema: Schema, coarsenings: dict[int, Coarsening]) -> View:
    """Build a view from the coarsening of each attribute that has one."""
    widest = int(schema.sizes.max())
    recode = np.tile(np.arange(widest, dtype=np.int32), (len(schema.attributes), 1))
    domains = list(schema.attributes)
    for attribute, coarsening in coarsenings.items():
        recode[attribute, : len(coarsening.codes)] = coarsening.codes
        domains[attribute] = coarsening.domain
    plain = np.array([attribute not in coarsenings for attribute in range(len(domains))])
    return View(tuple(domains), recode, plain, np.array([len(domain) for domain in domains], dtype=np.int64))
