"""What a residual picture shows of a pair, and, where that is too much to read, which part of it."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from statistics import NormalDist

import numpy as np

from bnx.text import count_of

__all__ = ["LEVELS", "STRATA", "Grade", "PairPanels", "Panel", "chance_sentence", "grade", "readable"]

LEVELS = 20
"""At most so many levels of an attribute are shown."""
STRATA = 12
"""At most so many strata of a pair are shown, fewer where their tables are large."""
_FEWEST_STRATA = 4
_CELLS = 2400

Grade = int
"""0: the residual lies within 2 standard errors, 1: beyond 2, 2: beyond 4."""


@dataclass(frozen=True)
class Panel:
    """One stratum of one pair.

    Attributes:
        title: which stratum, ``arrival = rejected``.
        note: one line about it, ``0.0312 bits, p 2e-05, 480 rows``.
        observed: rows counted, integers (levels of a, levels of b).
        expected: rows that independence gives, same shape, NaN in unused rows and columns.
        residuals: adjusted residuals, same shape, NaN where undefined.
    """

    title: str
    note: str
    observed: np.ndarray
    expected: np.ndarray
    residuals: np.ndarray

    @property
    def x2(self) -> float:
        """Sum the squared differences to what independence gives, each over the latter (Pearson's statistic)."""
        with np.errstate(invalid="ignore", divide="ignore"):
            terms = (self.observed - self.expected) ** 2 / self.expected
        return float(np.sum(terms[np.isfinite(terms)]))


@dataclass(frozen=True)
class PairPanels:
    """A pair in all its strata: the levels of ``a`` are rows, those of ``b`` columns; ``headline`` is the verdict."""

    a: str
    b: str
    a_levels: tuple[str, ...]
    b_levels: tuple[str, ...]
    headline: str
    panels: tuple[Panel, ...]


def grade(residual: float) -> Grade:
    """Say how far a residual lies from 0; undefined ones are within reach of chance."""
    return int(abs(residual) > 2) + int(abs(residual) > 4)


def readable(pair: PairPanels) -> tuple[PairPanels, tuple[str, ...]]:
    """Take the strata and levels that can be shown, in their order, and say in sentences what is left out."""
    shape = min(LEVELS, len(pair.a_levels)), min(LEVELS, len(pair.b_levels))
    limit = max(_FEWEST_STRATA, min(STRATA, _CELLS // max(1, shape[0] * shape[1])))
    panels, said = _strata(pair, limit)
    rows = _strongest([_row_sums(panel.residuals) for panel in panels], len(pair.a_levels))
    columns = _strongest([_row_sums(panel.residuals.T) for panel in panels], len(pair.b_levels))
    said += _levels_left_out(pair.a, len(rows), len(pair.a_levels))
    said += _levels_left_out(pair.b, len(columns), len(pair.b_levels))
    cut = tuple(_cut(panel, rows, columns) for panel in panels)
    names = tuple(pair.a_levels[k] for k in rows), tuple(pair.b_levels[k] for k in columns)
    return replace(pair, a_levels=names[0], b_levels=names[1], panels=cut), tuple(said)


def _strata(pair: PairPanels, limit: int) -> tuple[tuple[Panel, ...], list[str]]:
    """Take all strata in the order given, or those with the largest X2, the largest first."""
    if len(pair.panels) <= limit:
        return pair.panels, []
    order = sorted(range(len(pair.panels)), key=lambda k: (-pair.panels[k].x2, k))
    largest_left = pair.panels[order[limit]].x2
    said = (
        f"{limit} of {len(pair.panels):,} strata shown: those with the largest X2, the largest first; "
        f"in each of the others X2 is at most {largest_left:.1f}."
    )
    return tuple(pair.panels[k] for k in order[:limit]), [said]


def _row_sums(residuals: np.ndarray) -> np.ndarray:
    return np.asarray(np.nansum(residuals**2, axis=1))


def _strongest(sums: Sequence[np.ndarray], count: int) -> list[int]:
    """Find the levels with the largest sums of squared residuals over the strata, in their order."""
    if count <= LEVELS:
        return list(range(count))
    total = np.sum(sums, axis=0)
    order = sorted(range(count), key=lambda k: (-total[k], k))
    return sorted(order[:LEVELS])


def _levels_left_out(name: str, shown: int, every: int) -> list[str]:
    if shown == every:
        return []
    return [f"{shown} of {every:,} levels of {name} shown: those with the largest residuals."]


def _cut(panel: Panel, rows: list[int], columns: list[int]) -> Panel:
    cells = np.ix_(rows, columns)
    return replace(
        panel,
        observed=panel.observed[cells],
        expected=panel.expected[cells],
        residuals=panel.residuals[cells],
    )


def chance_sentence(pair: PairPanels) -> str:
    """Say how many of a pair's cells lie beyond 2 standard errors, and how many would by chance alone.

    Source: an adjusted residual is about standard normal under independence (Haberman 1973).
    """
    residuals = np.concatenate([np.ravel(panel.residuals) for panel in pair.panels] or [np.empty(0)])
    defined = residuals[np.isfinite(residuals)]
    if not defined.size:
        return "No residual is defined: in no stratum do both attributes vary."
    beyond = int(np.sum(np.abs(defined) > 2))
    by_chance = 2 * NormalDist().cdf(-2) * defined.size
    rounded = f"{by_chance:.1f}" if by_chance < 10 else f"{by_chance:,.0f}"
    strata = f" in {len(pair.panels):,} strata" if len(pair.panels) > 1 else ""
    return (
        f"Beyond ±2 {'lies' if beyond == 1 else 'lie'} {beyond:,} of {count_of(defined.size, 'cell')}{strata}; "
        f"chance alone would put about {rounded} there."
    )
