"""From a raw column to a domain and codes: all levels of a text column, fine bins of a numeric one."""

from collections.abc import Collection
from dataclasses import dataclass

import numpy as np

from bnx.columns import NumberColumn, Tally, TextColumn, plain_numbers
from bnx.discretising import fine_cuts
from bnx.domains import Domain, interval_names

__all__ = ["Levelled", "level", "natural_order", "spare_name"]

FINE_LEVELS = 256
TEXT_LEVELS = 65_000


@dataclass(frozen=True)
class Levelled:
    """A column with its domain: ``codes`` (N,) uint8 or uint16; ``pooled`` levels were too many to keep."""

    domain: Domain
    codes: np.ndarray
    pooled: int


def level(column: TextColumn | NumberColumn, found: Tally) -> Levelled:
    """Give every cell the code of its level; numeric columns at most 256 levels, text columns at most 65,002."""
    if isinstance(column, NumberColumn):
        return _number_levels(column, found)
    return _text_levels(column, found)


def _number_levels(column: NumberColumn, found: Tally) -> Levelled:
    cuts = fine_cuts(found.values, found.counts, FINE_LEVELS - (found.blanks > 0))
    names = interval_names([float(cut) for cut in cuts])
    codes = np.searchsorted(cuts, column.values, side="left").astype(np.uint8)
    if found.blanks:
        codes[column.blanks] = len(names)
    domain = Domain(
        column.name,
        names + (("(blank)",) if found.blanks else ()),
        numeric=True,
        cuts=tuple(float(cut) for cut in cuts),
        blank=found.blanks > 0,
    )
    return Levelled(domain, codes, 0)


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
    codes_of = np.full(len(column.texts) + 1, len(kept), dtype=np.uint16)
    codes_of[found.values[order]] = np.arange(len(kept))
    codes_of[0] = len(kept) + bool(pooled)
    size = len(kept) + len(extra)
    codes = codes_of.astype(np.uint8 if size <= 1 << 8 else np.uint16)[column.codes]
    return Levelled(
        Domain(column.name, (*kept, *extra), pooled=bool(pooled), blank=found.blanks > 0),
        codes,
        pooled,
    )


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
