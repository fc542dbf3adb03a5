"""Evidence of rows for each class: the sum of the log table terms of all families."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import chain

import numpy as np

from bnx.kernels import add_terms, ratio_tables
from bnx.masked import levels_unknown, masked_cells, rows_with_unknown, view_codes
from bnx.parameters import Smoothing, amounts_of, log_tables
from bnx.structure import Structure
from bnx.summing_out import approximate, observed_terms
from bnx.views import View

__all__ = ["Counted", "Families", "Terms", "families_of", "padded", "terms_of"]


@dataclass(frozen=True)
class Families:
    """The different families of one training set's structures.

    ``members``, ``sizes`` (F, M): parents in the order taken, then the child, and their levels, of which the first
    ``depths`` (F,) count; ``plain`` (F,) bool: attributes used as stored; ``starts`` (F + 1,): first cell of each
    family when their tables lie side by side; ``recode``: of the view; ``of`` (structures, n): the family of each
    attribute in each structure; ``holder`` (structures,): the first structure with the same parents; ``veiled``,
    ``unknown``: of the view; ``silent`` (F,) bool: those of attributes that a structure leaves out, which say nothing,
    None if there are none.
    """

    members: np.ndarray
    sizes: np.ndarray
    depths: np.ndarray
    plain: np.ndarray
    starts: np.ndarray
    recode: np.ndarray
    of: np.ndarray
    holder: tuple[int, ...]
    veiled: tuple[int, ...] = ()
    unknown: np.ndarray | None = None
    silent: np.ndarray | None = None

    def narrowed(self, structures: Sequence[int]) -> "Families":
        """Keep some structures, in this order."""
        of = self.of[list(structures)]
        return replace(self, of=of, holder=_holder(of))

    def levels_of(self, f: int) -> tuple[int, ...]:
        """Levels of the members of one family."""
        depth = self.depths[f]
        own = zip(self.sizes[f, :depth].tolist(), self.members[f, :depth].tolist(), strict=True)
        return tuple(size - (member in self.veiled) for size, member in own)


@dataclass(frozen=True)
class Counted:
    """Families with their counts in the training set, ``counts`` (C, cells), cells not observed included.

    Int32, or float64 where rows have weights.
    """

    families: Families
    counts: np.ndarray

    def table(self, structure: int, child: int) -> np.ndarray:
        """Counts of one family, (C, levels of its parents in the order taken..., levels of the child)."""
        return self.of_family(int(self.families.of[structure, child]))

    def of_family(self, f: int) -> np.ndarray:
        """Counts of a family by its number, where all members are observed."""
        first, last = self.families.starts[f], self.families.starts[f + 1]
        sizes = self.families.sizes[f, : self.families.depths[f]].tolist()
        whole = self.counts[:, first:last].reshape(-1, *sizes)
        levels = tuple(slice(size) for size in self.families.levels_of(f))
        return np.ascontiguousarray(whole[(slice(None), *levels)])


@dataclass(frozen=True)
class Terms:
    """What the tables of some families say for each class against the first, nats.

    ``which`` (K,): the families; ``starts`` (K,): first cell of each in ``table`` (1 + cells, T), whose first row says
    nothing and whose first columns are in use, C - 1 for each smoothing. Cells in which a member is not observed, or of
    a level that the training set does not hold, say nothing; rows with such a member are summed out.
    """

    counted: Counted
    smoothings: tuple[Smoothing, ...]
    which: np.ndarray
    starts: np.ndarray
    table: np.ndarray

    @property
    def families(self) -> Families:
        """The families that all of them belong to."""
        return self.counted.families

    def of(self, structure: int) -> "Terms":
        """Narrow the terms of all families down to one structure's."""
        which = self.families.of[structure]
        return replace(self, which=which, starts=self.starts[which])

    def evidence(self, codes: np.ndarray, first: int, last: int) -> np.ndarray:
        """Sum the terms of rows ``first:last`` of codes (n, N) family by family: (last - first, T)."""
        out = np.zeros((last - first, self.table.shape[1]))
        one = self.families
        fixed = (one.recode, one.plain, one.members, one.sizes, one.depths)
        add_terms(codes, *fixed, self.which, self.starts, self.table, first, last, out)
        if one.unknown is not None:
            self._add_unobserved(codes, first, last, out)
        return out

    def rows_of_nothing(self, codes: np.ndarray, first: int, last: int) -> np.ndarray:
        """Find the rows of ``first:last`` of which nothing is known."""
        unknown, silent = self.families.unknown, self.families.silent
        rows = np.arange(first, last)
        speaking = np.arange(len(codes)) if silent is None else np.flatnonzero(~silent[self.which])
        if not len(speaking):
            return rows
        if unknown is None or not unknown[speaking].any(axis=1).all():
            return rows[:0]
        for attribute in speaking.tolist():
            rows = rows[unknown[attribute][codes[attribute, rows]]]
        return rows

    @cached_property
    def _may_matter(self) -> np.ndarray:
        """Attributes that can be unknown and are parents: those without children sum to 1."""
        one = self.families
        parents = one.members[self.which][np.arange(one.members.shape[1]) < one.depths[self.which, None] - 1]
        return np.unique(parents[self._unknown[parents].any(axis=1)])

    @property
    def _unknown(self) -> np.ndarray:
        """The stored codes that are unknown, (n, R) bool."""
        return np.zeros((len(self.which), 1), np.bool_) if self.families.unknown is None else self.families.unknown

    @property
    def _levels(self) -> list[int]:
        """Levels of every attribute."""
        one = self.families
        codes = np.take_along_axis(one.sizes[self.which], one.depths[self.which, None] - 1, axis=1).ravel()
        codes[list(one.veiled)] -= 1
        return [int(size) for size in codes]

    def rows_approximated(self, codes: np.ndarray, first: int, last: int) -> int:
        """Count the rows of ``first:last`` in which so much is unknown that it is summed out approximately."""
        rows = rows_with_unknown(codes, self._unknown, self._may_matter, first, last)
        seen = view_codes(codes, rows, self.families.recode, self._unknown)
        return int(approximate(seen, self._parents(seen), self._levels).sum())

    def _add_unobserved(self, codes: np.ndarray, first: int, last: int, out: np.ndarray) -> None:
        """Add what the families say that hold something unknown, summed out, to the evidence of rows ``first:last``."""
        rows = rows_with_unknown(codes, self._unknown, self._may_matter, first, last)
        if not len(rows):
            return
        classes = len(self.counted.counts)
        seen = view_codes(codes, rows, self.families.recode, self._unknown)
        columns = len(self.smoothings) * classes
        terms, _ = observed_terms(seen, self._parents(seen), self._levels, self._log_table, columns)
        by_class = terms.reshape(len(rows), -1, classes)
        against = (by_class[:, :, 1:] - by_class[:, :, :1]).reshape(len(rows), -1)
        out[rows - first, : against.shape[1]] += against

    def _parents(self, seen: np.ndarray) -> dict[int, tuple[int, ...]]:
        """List the families that hold something unknown in one of the rows seen (n, rows): child -> parents."""
        one = self.families
        members, depths = one.members[self.which], one.depths[self.which]
        counts = np.arange(members.shape[1]) < depths[:, None]
        unknown = np.asarray((seen < 0).any(axis=1))
        some = (counts & unknown[members]).any(axis=1)
        return {child: tuple(members[child, : depths[child] - 1].tolist()) for child in np.flatnonzero(some).tolist()}

    @cached_property
    def _log_tables(self) -> dict[int, np.ndarray]:
        """Log tables made so far, by attribute."""
        return {}

    def _log_table(self, child: int) -> np.ndarray:
        """Log probabilities of an attribute's family, (levels of its parents..., its own, V * C)."""
        if child not in self._log_tables:
            counts = self.counted.of_family(int(self.which[child]))
            logs = log_tables(counts.reshape(len(counts), -1), counts.shape[1:], self.smoothings)
            self._log_tables[child] = logs.reshape(*counts.shape[1:], -1)
        return self._log_tables[child]


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
    out = np.zeros(parents.shape[:2], np.bool_)
    for s, one in enumerate(structures):
        out[s, list(one.dropped)] = True
    first = np.tile(np.arange(len(parents))[:, None], parents.shape[1])  # (structures, n): who has this family first
    for s in range(1, len(parents)):
        for earlier in reversed(range(s)):
            first[s][(parents[s] == parents[earlier]).all(axis=1) & (out[s] == out[earlier])] = earlier
    new = first == np.arange(len(parents))[:, None]
    child, structure = np.nonzero(new.T)
    number = np.zeros_like(first)
    number[structure, child] = np.arange(len(child))
    of = np.take_along_axis(number, first, axis=0)
    own = parents[structure, child]
    depths = (own >= 0).sum(axis=1)
    members = np.concatenate([own, np.full((len(own), 1), -1)], axis=1)
    members[np.arange(len(own)), depths] = child
    sizes = np.where(members >= 0, view.codes[members], 1)
    plain = (view.plain[members] | (members < 0)).all(axis=1)
    starts = np.concatenate([[0], np.cumsum(sizes.prod(axis=1))])
    silent = out[structure, child] if out.any() else None
    seen = (view.recode, of, _holder(of), view.veiled, view.unknown, silent)
    return Families(np.maximum(members, 0), sizes, depths + 1, plain, starts, *seen)


def _holder(of: np.ndarray) -> tuple[int, ...]:
    """Find for every structure the first with the same families."""
    parts = [tuple(row) for row in of.tolist()]
    return tuple(parts.index(row) for row in parts)


def terms_of(counted: Counted, which: np.ndarray, smoothings: Sequence[Smoothing]) -> Terms:
    """Smooth some families (K,) in several ways."""
    one = counted.families
    ends = np.cumsum(one.starts[which + 1] - one.starts[which])
    starts = 1 + np.concatenate([[0], ends[:-1]]).astype(np.int64)
    columns = len(smoothings) * (len(counted.counts) - 1)
    table = np.zeros((1 + int(ends[-1]), padded(columns)))
    amounts, laplace = amounts_of(smoothings)
    if one.unknown is None:
        ratio_tables(counted.counts, one.starts, one.sizes, one.depths, which, amounts, laplace, starts, table)
    else:
        _masked_tables(counted, which, one.unknown, amounts, laplace, table[1:])
    for k in np.flatnonzero(one.silent[which]).tolist() if one.silent is not None else ():
        table[starts[k] : 1 + ends[k]] = 0.0
    return Terms(counted, tuple(smoothings), which, starts, table)


def _masked_tables(
    counted: Counted, which: np.ndarray, unknown: np.ndarray, amounts: np.ndarray, laplace: np.ndarray, out: np.ndarray
) -> None:
    """Write the tables of some families, side by side, from the records in which all members are observed.

    Cells with a member that is not observed or unknown stay zero.
    """
    one = counted.families
    members, sizes, depths = one.members[which], one.sizes[which], one.depths[which]
    veiled = np.zeros(len(one.recode), np.bool_)
    veiled[list(one.veiled)] = True
    blank, hidden = masked_cells(members, sizes, depths, veiled, levels_unknown(unknown, one.recode))
    levels = sizes - (veiled[members] & (np.arange(sizes.shape[1]) < depths[:, None]))
    starts = np.concatenate([[0], np.cumsum(levels.prod(axis=1))])
    lengths = sizes.prod(axis=1)
    cells = np.repeat(one.starts[which] - np.cumsum(lengths) + lengths, lengths) + np.arange(len(blank))
    counts = np.ascontiguousarray(counted.counts[:, cells[~blank]])
    table = np.zeros((len(counts.T), out.shape[1]))
    every = np.arange(len(which))
    ratio_tables(counts, starts, levels, depths, every, amounts, laplace, starts[:-1], table)
    out[~blank] = table
    out[hidden] = 0.0
