"""What a column can hold: the levels behind its codes, and the cut points behind numeric levels."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from bnx.errors import DataError
from bnx.text import nearest

__all__ = ["Coarsening", "Domain", "Schema", "codes_of", "interval_names", "together"]


@dataclass(frozen=True)
class Domain:
    """The levels of one column; code k stands for ``levels[k]``.

    A numeric column has ``len(cuts) + 1`` interval levels: level k holds values above ``cuts[k-1]``, up to ``cuts[k]``.
    Regular levels come first, then the pooled one if ``pooled``, then the one for blank cells if ``blank``. If
    ``veiled``, blank cells are no level but cells not observed: their code comes after those of all levels.
    """

    name: str
    levels: tuple[str, ...]
    numeric: bool = False
    cuts: tuple[float, ...] = ()
    pooled: bool = False
    blank: bool = False
    veiled: bool = False

    def __len__(self) -> int:
        """Count the levels."""
        return len(self.levels)

    @property
    def codes(self) -> int:
        """Count the codes that are in use: those of the levels, and that of cells not observed."""
        return len(self.levels) + self.veiled


@dataclass(frozen=True)
class Schema:
    """The attributes, in column order, and the class."""

    attributes: tuple[Domain, ...]
    target: Domain

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the attributes."""
        return tuple(domain.name for domain in self.attributes)

    @property
    def sizes(self) -> np.ndarray:
        """Codes per attribute, int64 (n,)."""
        return np.array([domain.codes for domain in self.attributes], dtype=np.int64)

    def index(self, name: str) -> int:
        """Find an attribute by name.

        Raises:
            DataError: no attribute has this name.
        """
        if name not in self.names:
            raise DataError(f"{name!r} is not an attribute of this table; {nearest(name, self.names)}")
        return self.names.index(name)


@dataclass(frozen=True)
class Coarsening:
    """How the codes of a fine domain (all levels, or up to 256 fine bins) fall into those of a coarser one.

    ``codes`` (codes of the fine domain,) uint16: the coarse code of every fine code.
    """

    domain: Domain
    codes: np.ndarray


def interval_names(cuts: Sequence[float]) -> tuple[str, ...]:
    """Name the intervals between cut points: ``<= 2.45``, ``2.45 to 4.75``, ``> 4.75``; no cuts: ``any``."""
    if not cuts:
        return ("any",)
    texts = [f"{cut:.12g}" for cut in cuts]
    if len(set(texts)) < len(texts):
        texts = [repr(float(cut)) for cut in cuts]
    inner = [f"{low} to {high}" for low, high in pairwise(texts)]
    return (f"<= {texts[0]}", *inner, f"> {texts[-1]}")


def codes_of(wanted: Sequence[Domain], codes: np.ndarray, domains: Sequence[Domain]) -> np.ndarray:
    """Keep the codes of some columns, of codes (n, N) under domains that hold them all."""
    place = {domain.name: number for number, domain in enumerate(domains)}
    return codes[[place[domain.name] for domain in wanted]]


def together(parts: Iterable[Sequence[Domain]]) -> tuple[Domain, ...]:
    """List the domains of all parts, each once."""
    return tuple({domain.name: domain for part in parts for domain in part}.values())
