"""How one training set sees the coded table: its own cut points and pooled levels."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.domains import Coarsening, Domain, Schema

__all__ = ["Refinement", "View", "make_view", "refine"]


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


@dataclass(frozen=True)
class Refinement:
    """The coarsest levels that K views all can be made of by merging.

    ``recode`` (n, R) int32: the fine level that each stored code stands for, itself where ``plain`` (n,) bool;
    ``sizes`` (n,): fine levels; ``starts`` (n + 1,): first fine level of each attribute in ``levels`` (K, fine levels)
    int32: the level that a view takes it for, of ``view_sizes`` (K, n).
    """

    recode: np.ndarray
    plain: np.ndarray
    sizes: np.ndarray
    starts: np.ndarray
    levels: np.ndarray
    view_sizes: np.ndarray

    def part(self, first: int, last: int) -> "Refinement":
        """Keep the views ``first:last``."""
        return replace(self, levels=self.levels[first:last], view_sizes=self.view_sizes[first:last])


def refine(views: Sequence[View], stored: np.ndarray) -> Refinement:
    """Find the fine levels of some views; stored (n,): levels as stored."""
    plain = np.all([view.plain for view in views], axis=0)
    recode = np.tile(np.arange(int(stored.max(initial=1)), dtype=np.int32), (len(stored), 1))
    levels, sizes = [], stored.astype(np.int64)
    for i, size in enumerate(sizes.tolist()):
        if plain[i]:
            levels.append(np.broadcast_to(np.arange(size), (len(views), size)))
        else:
            fine, recode[i, :size] = np.unique([view.recode[i, :size] for view in views], axis=1, return_inverse=True)
            levels.append(fine)
            sizes[i] = fine.shape[1]
    starts = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    return Refinement(
        recode,
        plain,
        sizes,
        starts,
        np.ascontiguousarray(np.concatenate(levels, axis=1), dtype=np.int32),
        np.array([view.sizes for view in views], dtype=np.int64),
    )
