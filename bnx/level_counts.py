"""How many records of each class the levels of every attribute hold, what is pooled, and how numbers are spread."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.columns import Extent
from bnx.dependence import relevance_of
from bnx.distributions import chosen_edges, outer_edges
from bnx.domains import Domain, Schema
from bnx.engines import LocalEngine
from bnx.trainings import Training

__all__ = ["MOST_NUMBERS", "POOLED_NAMED", "LevelCounts", "Pooled", "Spread", "count_levels"]

MOST_NUMBERS = 300_000
"""Counts that are kept of all attributes together; those of most bits with the class come first."""
POOLED_NAMED = 20
"""Pooled values that are named, those of most rows first."""


@dataclass(frozen=True)
class Pooled:
    """Values pooled into one level: how many, and those of most rows with their rows; others are not known by name."""

    level: int
    values: int
    named: tuple[tuple[str, int], ...]


@dataclass(frozen=True)
class Spread:
    """Rows of a numeric column, not blank: ``edges`` (b + 1,) of bins, ``rows`` (b, C)."""

    edges: np.ndarray
    rows: np.ndarray


@dataclass(frozen=True)
class LevelCounts:
    """One attribute in all rows.

    ``rows`` (L, C) int64 of each level and class; ``masses`` (L, C): what they weigh, None where all rows count alike;
    ``blank_rows`` and ``blank_masses`` (C,): of blank cells, be they a level (the last) or not observed.
    """

    domain: Domain
    extent: Extent
    rows: np.ndarray
    masses: np.ndarray | None
    blank_rows: np.ndarray
    blank_masses: np.ndarray | None
    pooled: Pooled | None
    spread: Spread | None


def count_levels(
    engine: LocalEngine, training: Training, stored: Schema, extents: Sequence[Extent]
) -> tuple[LevelCounts | None, ...]:
    """Count the levels of each attribute as a training set of all rows sees them, from the engine's margins.

    stored: what the stored codes stand for. Attributes of most bits with the class come first; one that does not fit
    into ``MOST_NUMBERS`` is skipped (None).
    """
    found: dict[int, LevelCounts] = {}
    room = MOST_NUMBERS
    for i in np.argsort(-relevance_of(engine, training), kind="stable").tolist():
        one = _counted(engine, training, i, stored.attributes[i], extents[i])
        named = len(one.pooled.named) if one.pooled else 0
        size = one.rows.size + (one.spread.rows.size if one.spread else 0) + named
        if size <= room:
            room -= size
            found[i] = one
    return tuple(found.get(i) for i in range(len(extents)))


def _counted(engine: LocalEngine, training: Training, i: int, stored: Domain, extent: Extent) -> LevelCounts:
    view, fine = training.view, engine.margins[i].sum(axis=0)
    domain = view.domains[i]
    rows = view.merge(i, fine).T
    masses = view.merge(i, engine.weighed.margins[i].sum(axis=0)).T if engine.weighed else None
    blank = domain.blank or domain.veiled
    levels = len(domain)
    return LevelCounts(
        domain,
        extent,
        rows[:levels],
        None if masses is None else masses[:levels],
        rows[-1] if blank else np.zeros(engine.classes, np.int64),
        None if masses is None else masses[-1] if blank else np.zeros(engine.classes),
        _pooled(domain, stored, extent, view.recode[i], fine.sum(axis=0)) if domain.pooled else None,
        _spread(domain, stored, extent, fine.T) if domain.numeric else None,
    )


def _pooled(domain: Domain, stored: Domain, extent: Extent, recode: np.ndarray, rows: np.ndarray) -> Pooled:
    """Say what went into the pooled level; rows (stored codes,)."""
    level = len(domain) - domain.blank - 1
    regular = len(stored) - stored.pooled - stored.blank
    inside = np.flatnonzero(recode[:regular] == level)
    order = inside[np.argsort(-rows[inside], kind="stable")][:POOLED_NAMED].tolist()
    return Pooled(level, extent.distinct - level, tuple((stored.levels[code], int(rows[code])) for code in order))


def _spread(domain: Domain, stored: Domain, extent: Extent, rows: np.ndarray) -> Spread | None:
    """Merge fine bins into few, rows (stored codes, C); None for a column of one value or none."""
    fine = np.array(stored.cuts)
    if not len(fine):
        return None
    own = rows[: len(fine) + 1]
    ends = outer_edges(fine, extent.lowest, extent.highest, extent.distinct)
    chosen = chosen_edges(fine, own.sum(axis=1), np.array(domain.cuts), ends)
    starts = np.concatenate([[0], chosen + 1]).astype(np.int64)
    return Spread(np.concatenate([ends[:1], fine[chosen], ends[1:]]), np.add.reduceat(own, starts, axis=0))
