"""From a raw column to a domain and codes: all levels of a text column, fine bins of a numeric one."""

from collections.abc import Collection
from dataclasses import dataclass, replace

import numpy as np

from bnx.blocks import plain_numbers
from bnx.columns import Column, NumberColumn, Tally, TextColumn
from bnx.domains import Domain, interval_names

__all__ = ["Levelled", "level", "natural_order", "spare_name"]

TEXT_LEVELS = 65_000


@dataclass(frozen=True)
class Levelled:
    """How a column becomes codes of a domain; ``pooled`` levels were too many to keep.

    ``lookup``: the code of every raw code, uint8 or uint16; of no length if cells are numbers, which ``cuts`` part.
    """

    domain: Domain
    pooled: int
    lookup: np.ndarray
    cuts: np.ndarray

    def write(self, raw: np.ndarray, codes: np.ndarray) -> None:
        """Fill in the codes of raw cells, uint8 or uint16."""
        if len(self.lookup):
            np.take(self.lookup.astype(codes.dtype, copy=False), raw, out=codes, mode="clip")
            return
        codes[:] = np.searchsorted(self.cuts, raw, side="left")
        if self.domain.blank or self.domain.veiled:
            codes[np.isnan(raw)] = self.domain.codes - 1

    def veiled(self) -> "Levelled":
        """Take blank cells for cells not observed rather than for a level; their code stays."""
        if not self.domain.blank:
            return self
        return replace(self, domain=replace(self.domain, levels=self.domain.levels[:-1], blank=False, veiled=True))


def level(column: Column, found: Tally) -> Levelled:
    """Give every cell the code of its level; numeric columns at most 256 levels, text columns at most 65,002."""
    if isinstance(column, NumberColumn):
        return _number_levels(column, found)
    return _text_levels(column, found)


def _number_levels(column: NumberColumn, found: Tally) -> Levelled:
    cuts = tuple(found.cuts.tolist())
    names = interval_names(cuts) + (("(blank)",) if found.blanks else ())
    domain = Domain(column.name, names, numeric=True, cuts=cuts, blank=found.blanks > 0)
    plain = Levelled(domain, 0, np.zeros(0, np.uint8), found.cuts)
    lookup = np.zeros(len(column.values), np.uint8)
    plain.write(column.values, lookup)
    return Levelled(domain, 0, lookup, found.cuts)


def _text_levels(column: TextColumn, found: Tally) -> Levelled:
    texts = [column.texts[raw - 1] for raw in found.values]
    order = np.array(natural_order(texts), dtype=np.int64)
    pooled = max(len(texts) - TEXT_LEVELS, 0)
    if pooled:
        frequent = np.argsort(-found.counts[order], kind="stable")[:TEXT_LEVELS]
        order = order[np.sort(frequent)]
    kept = [texts[k] for k in order]
    extra = [spare_name("(other)", texts)] if pooled else []
    extra += [spare_name("(blank)", texts)] if found.blanks else []
    size = len(kept) + len(extra)
    lookup = np.full(len(column.texts) + 1, len(kept), dtype=np.uint16)
    lookup[found.values[order]] = np.arange(len(kept))
    lookup[0] = len(kept) + bool(pooled)
    domain = Domain(column.name, (*kept, *extra), pooled=bool(pooled), blank=found.blanks > 0)
    return Levelled(domain, pooled, lookup.astype(np.uint8) if size <= 1 << 8 else lookup, np.zeros(0))


def natural_order(texts: list[str]) -> list[int]:
    """Order texts by value if all are numbers (1, 2, 10), else as text; the positions in that order."""
    values = plain_numbers(texts)
    if values is None:
        return sorted(range(len(texts)), key=texts.__getitem__)
    return sorted(range(len(texts)), key=lambda k: (values[k], texts[k]))


def spare_name(name: str, taken: Collection[str]) -> str:
    """Change ``(other)`` to ``(other 2)`` and so on until no level has this name."""
    number, spare = 2, name
    while spare in taken:
        spare = f"{name[:-1]} {number})"
        number += 1
    return spare
