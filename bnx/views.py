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
    they are; ``sizes`` (n,) int64: levels; ``veiled``: the attributes that have one code more, for cells not observed;
    ``unknown`` (n, R) bool: the stored codes of cells not observed and of levels that training rows do not hold, None
    if there are none.
    """

    domains: tuple[Domain, ...]
    recode: np.ndarray
    plain: np.ndarray
    sizes: np.ndarray
    veiled: tuple[int, ...] = ()
    unknown: np.ndarray | None = None

    @property
    def codes(self) -> np.ndarray:
        """Codes that are in use, (n,) int64: those of levels, and that of cells not observed."""
        codes = self.sizes.copy()
        codes[list(self.veiled)] += 1
        return codes

    def all_plain(self, members: Sequence[int]) -> bool:
        """Tell whether stored codes of all these attributes can be used as they are."""
        return bool(self.plain[list(members)].all())

    def sizes_of(self, members: Sequence[int]) -> tuple[int, ...]:
        """Levels of some attributes."""
        return tuple(int(self.sizes[member]) for member in members)

    def merge(self, attribute: int, counts: np.ndarray) -> np.ndarray:
        """Add counts (..., stored codes) of one attribute up to those of its codes in this view."""
        if self.plain[attribute]:
            return counts
        merged = np.zeros((*counts.shape[:-1], self.sizes[attribute] + (attribute in self.veiled)), counts.dtype)
        for code, level in enumerate(self.recode[attribute, : counts.shape[-1]].tolist()):
            merged[..., level] += counts[..., code]
        return merged

    def observed(self, members: Sequence[int], counts: np.ndarray) -> np.ndarray:
        """Keep the cells of a family in which all members are observed; counts (C, joint codes, last fastest)."""
        if not set(members) & set(self.veiled):
            return counts
        table = counts.reshape(-1, *(int(self.sizes[one]) + (one in self.veiled) for one in members))
        levels = table[(slice(None), *(slice(int(self.sizes[one])) for one in members))]
        return np.ascontiguousarray(levels).reshape(len(counts), -1)


def make_view(schema: Schema, coarsenings: dict[int, Coarsening]) -> View:
    """Build a view from the coarsening of each attribute that has one."""
    widest = int(schema.sizes.max())
    recode = np.tile(np.arange(widest, dtype=np.int32), (len(schema.attributes), 1))
    domains = list(schema.attributes)
    for attribute, coarsening in coarsenings.items():
        recode[attribute, : len(coarsening.codes)] = coarsening.codes
        domains[attribute] = coarsening.domain
    plain = np.array([attribute not in coarsenings for attribute in range(len(domains))])
    sizes = np.array([len(domain) for domain in domains], dtype=np.int64)
    return View(tuple(domains), recode, plain, sizes, tuple(i for i, one in enumerate(domains) if one.veiled))


@dataclass(frozen=True)
class Refinement:
    """The coarsest levels that K views all can be made of by merging.

    ``recode`` (n, R) int32: the fine level that each stored code stands for, itself where ``plain`` (n,) bool;
    ``sizes`` (n,): fine levels; ``starts`` (n + 1,): first fine level of each attribute in ``levels`` (K, fine levels)
    int32: the level that a view takes it for, of ``view_sizes`` (K, n), -1 for cells not observed.
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
    """Find the fine levels of some views, which veil the same attributes; stored (n,): codes as stored."""
    plain = np.all([view.plain for view in views], axis=0)
    recode = np.tile(np.arange(int(stored.max(initial=1)), dtype=np.int32), (len(stored), 1))
    levels, sizes, veiled = [], stored.astype(np.int64), set(views[0].veiled)
    for i, size in enumerate(sizes.tolist()):
        if plain[i]:
            levels.append(np.tile(np.arange(size), (len(views), 1)))
        else:
            fine, recode[i, :size] = np.unique([view.recode[i, :size] for view in views], axis=1, return_inverse=True)
            levels.append(fine)
            sizes[i] = fine.shape[1]
        if i in veiled:
            levels[-1][levels[-1] == [[view.sizes[i]] for view in views]] = -1
    plain[list(veiled)] = False
    starts = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    return Refinement(
        recode,
        plain,
        sizes,
        starts,
        np.ascontiguousarray(np.concatenate(levels, axis=1), dtype=np.int32),
        np.array([view.sizes for view in views], dtype=np.int64),
    )
