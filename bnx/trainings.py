"""Training sets: which blocks of rows they hold, and how each sees the table."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.coarsening import coarsen, needs_coarsening
from bnx.domains import Schema
from bnx.engines import LocalEngine
from bnx.views import View, make_view

__all__ = ["Training", "held_sets", "make_trainings", "mask_without"]


@dataclass(frozen=True)
class Training:
    """One training set.

    ``held``: the folds left out; ``mask`` (blocks,) bool: the blocks it holds; ``class_counts`` (C,): its rows;
    ``class_weights`` (C,): their weights, None where all rows count alike.
    """

    held: tuple[int, ...]
    mask: np.ndarray
    view: View
    class_counts: np.ndarray
    class_weights: np.ndarray | None = None

    @property
    def class_mass(self) -> np.ndarray:
        """What the rows of each class weigh, (C,)."""
        return self.class_counts if self.class_weights is None else self.class_weights

    @property
    def log_prior(self) -> np.ndarray:
        """Log share of each class (nats), (C,); minus infinity for a class without a row."""
        with np.errstate(divide="ignore"):
            return np.asarray(np.log(self.class_mass / self.class_mass.sum()))


def held_sets(folds: int, nested: bool) -> list[tuple[int, ...]]:
    """List what is left out: nothing, every fold, and (if nested) every pair of folds."""
    single = [(fold,) for fold in range(folds)]
    pairs = [(a, b) for a in range(folds) for b in range(a + 1, folds)] if nested else []
    return [(), *single, *pairs]


def mask_without(held: Sequence[int], folds: int, parts: int) -> np.ndarray:
    """Mark the blocks of all folds but those held out; each fold has ``parts`` neighbouring blocks."""
    mask = np.ones((folds, parts), bool)
    mask[list(held)] = False
    return mask.ravel()


def make_trainings(
    engine: LocalEngine, schema: Schema, masks: dict[tuple[int, ...], np.ndarray], bins: str, max_levels: int
) -> list[Training]:
    """Learn cut points and pooled levels inside each training set.

    masks: what each set leaves out -> the blocks it holds, (blocks,) bool.
    """
    coarse = [i for i, domain in enumerate(schema.attributes) if needs_coarsening(domain, max_levels)]
    common = make_view(schema, {})

    rows = _rows_of_codes(engine, list(masks.values()))
    number = {held: k for k, held in enumerate(masks)}

    def make(held: tuple[int, ...]) -> Training:
        mask = masks[held]
        view = common
        if coarse:
            counts = {i: engine.margins[i][mask].sum(axis=0).T for i in coarse}
            view = make_view(schema, {i: coarsen(schema.attributes[i], counts[i], bins, max_levels) for i in coarse})
        view = replace(view, unknown=_unknown(engine.sizes, rows[number[held]], rows[-1], view))
        weights = engine.weighed.by_class[mask].sum(axis=0) if engine.weighed else None
        return Training(held, mask, view, engine.class_counts[mask].sum(axis=0), weights)

    return engine.map(make, masks)


def _rows_of_codes(engine: LocalEngine, masks: Sequence[np.ndarray]) -> np.ndarray:
    """Count the rows of every stored code, attribute by attribute, in each training set and last in all rows."""
    by_block = np.concatenate([margin.sum(axis=1) for margin in engine.margins], axis=1)
    held = np.array([*masks, np.ones(engine.blocks, np.bool_)])
    return np.asarray(held.astype(np.float64) @ by_block.astype(np.float64))


def _unknown(sizes: np.ndarray, rows: np.ndarray, of_all: np.ndarray, view: View) -> np.ndarray | None:
    """Mark stored codes, of ``sizes`` (n,), whose level has no row in the training set, and those of no level."""
    ends = np.cumsum(sizes)
    starts = ends - sizes
    none = rows == 0
    for i in np.flatnonzero(~view.plain).tolist():
        own = slice(starts[i], ends[i])
        level = view.recode[i, : sizes[i]]
        none[own] = np.bincount(level, rows[own])[level] == 0
    none[ends[list(view.veiled)] - 1] = True
    none &= of_all > 0
    if not none.any():
        return None
    unknown = np.zeros((len(sizes), int(sizes.max())), np.bool_)
    unknown[np.arange(unknown.shape[1]) < sizes[:, None]] = none
    return unknown
