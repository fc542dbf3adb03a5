"""Training sets: which blocks of rows they hold, and how each sees the table."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.coarsening import coarsen, needs_coarsening
from bnx.domains import Schema
from bnx.engines import LocalEngine
from bnx.views import View, make_view

__all__ = ["Training", "held_sets", "make_trainings", "mask_without"]


@dataclass(frozen=True)
class Training:
    """One training set.

    ``held``: the folds left out; ``mask`` (blocks,) bool: the blocks it holds; ``class_counts`` (C,): its rows.
    """

    held: tuple[int, ...]
    mask: np.ndarray
    view: View
    class_counts: np.ndarray

    @property
    def log_prior(self) -> np.ndarray:
        """Log share of each class (nats), (C,); minus infinity for a class without a row."""
        with np.errstate(divide="ignore"):
            return np.asarray(np.log(self.class_counts / self.class_counts.sum()))


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

    def make(held: tuple[int, ...]) -> Training:
        mask = masks[held]
        view = common
        if coarse:
            counts = {i: engine.margins[i][mask].sum(axis=0).T for i in coarse}
            view = make_view(schema, {i: coarsen(schema.attributes[i], counts[i], bins, max_levels) for i in coarse})
        return Training(held, mask, view, engine.class_counts[mask].sum(axis=0))

    return engine.map(make, masks)
