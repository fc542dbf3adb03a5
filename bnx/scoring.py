"""Evidence of rows for each class: the sum of the log table terms of all families."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import chain

import numpy as np

from bnx.kernels import add_terms, ratio_tables
from bnx.parameters import Smoothing, amounts_of
from bnx.structure import Structure
from bnx.views import View

__all__ = ["Counted", "Families", "Terms", "families_of", "padded", "terms_of"]


@dataclass(frozen=True)
class Families:
    """The different families of one training set's structures.

    ``members``, ``sizes`` (F, M): parents in the order taken, then the child, and their levels, of which the first
    ``depths`` (F,) count; ``plain`` (F,) bool: attributes used as stored; ``starts`` (F + 1,): first cell of each
    family when their tables lie side by side; ``recode``: of the view; ``of`` (structures, n): the family of each
    attribute in each structure; ``holder`` (structures,): the first structure with the same parents.
    """

    members: np.ndarray
    sizes: np.ndarray
    depths: np.ndarray
    plain: np.ndarray
    starts: np.ndarray
    recode: np.ndarray
    of: np.ndarray
    holder: tuple[int, ...]


@dataclass(frozen=True)
class Counted:
    """Families with their counts in the training set, ``counts`` (C, cells) int32."""

    families: Families
    counts: np.ndarray

    def table(self, structure: int, child: int) -> np.ndarray:
        """Counts of one family, (C, levels of its parents in the order taken..., levels of the child)."""
        f = self.families.of[structure, child]
        first, last = self.families.starts[f], self.families.starts[f + 1]
        sizes = self.families.sizes[f, : self.families.depths[f]].tolist()
        return np.ascontiguousarray(self.counts[:, first:last]).reshape(-1, *sizes)


@dataclass(frozen=True)
class Terms:
    """What the tables of some families say for each class against the first, nats.

    ``which`` (K,): the families; ``starts`` (K,): first cell of each in ``table`` (1 + cells, T), whose first row says
    nothing and whose first columns are in use, C - 1 for each smoothing.
    """

    families: Families
    which: np.ndarray
    starts: np.ndarray
    table: np.ndarray

    def of(self, structure: int) -> "Terms":
        """Narrow the terms of all families down to one structure's."""
        which = self.families.of[structure]
        return Terms(self.families, which, self.starts[which], self.table)

    def evidence(self, codes: np.ndarray, first: int, last: int) -> np.ndarray:
        """Sum the terms of rows ``first:last`` of codes (n, N) family by family: (last - first, T)."""
        out = np.zeros((last - first, self.table.shape[1]))
        one = self.families
        fixed = (one.recode, one.plain, one.members, one.sizes, one.depths)
        add_terms(codes, *fixed, self.which, self.starts, self.table, first, last, out)
        return out


def padded(columns: int) -> int:
    """Columns of evidence that are kept for so many in use: 1, 2, 4, or a multiple of 8."""
    return next((width for width in (1, 2, 4) if columns <= width), -(-columns // 8) * 8)


def parents_of(structures: Iterable[Structure]) -> np.ndarray:
    """Lay parents out side by side: int64 (structures, n, most parents), padded with -1."""
    depths = [np.fromiter(map(len, one.parents), np.int64, len(one.parents)) for one in structures]
    most = max((int(own.max(initial=0)) for own in depths), default=0)
    out = np.full((len(depths), len(depths[0]), most), -1)
    for k, (one, own) in enumerate(zip(structures, depths, strict=True)):
        out[k][np.arange(most) < own[:, None]] = np.fromiter(chain.from_iterable(one.parents), np.int64, int(own.sum()))
    return out


def families_of(structures: Sequence[Structure], view: View) -> Families:
    """List the different families of structures, child by child, each where a structure first has it."""
    parents = parents_of(structures)
    first = np.tile(np.arange(len(parents))[:, None], parents.shape[1])  # (structures, n): who has this family first
    for s in range(1, len(parents)):
        for earlier in reversed(range(s)):
            first[s][(parents[s] == parents[earlier]).all(axis=1)] = earlier
    new = first == np.arange(len(parents))[:, None]
    child, structure = np.nonzero(new.T)
    number = np.zeros_like(first)
    number[structure, child] = np.arange(len(child))
    of = np.take_along_axis(number, first, axis=0)
    own = parents[structure, child]
    depths = (own >= 0).sum(axis=1)
    members = np.concatenate([own, np.full((len(own), 1), -1)], axis=1)
    members[np.arange(len(own)), depths] = child
    sizes = np.where(members >= 0, view.sizes[members], 1)
    plain = (view.plain[members] | (members < 0)).all(axis=1)
    starts = np.concatenate([[0], np.cumsum(sizes.prod(axis=1))])
    parts = [tuple(row) for row in of.tolist()]
    holder = tuple(parts.index(row) for row in parts)
    return Families(np.maximum(members, 0), sizes, depths + 1, plain, starts, view.recode, of, holder)


def terms_of(counted: Counted, which: np.ndarray, smoothings: Sequence[Smoothing]) -> Terms:
    """Smooth some families (K,) in several ways."""
    one = counted.families
    ends = np.cumsum(one.starts[which + 1] - one.starts[which])
    starts = 1 + np.concatenate([[0], ends[:-1]]).astype(np.int64)
    columns = len(smoothings) * (len(counted.counts) - 1)
    table = np.zeros((1 + int(ends[-1]), padded(columns)))
    amounts, laplace = amounts_of(smoothings)
    ratio_tables(counted.counts, one.starts, one.sizes, one.depths, which, amounts, laplace, starts, table)
    return Terms(one, which, starts, table)
