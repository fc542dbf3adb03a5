"""How often learning from a random half of the rows chooses an edge."""

from collections import Counter
from collections.abc import Mapping, Sequence

import numpy as np

from bnx.engines import LocalEngine
from bnx.folds import halves
from bnx.gating import Bounds
from bnx.learners import KdbChosen, Learner
from bnx.learning import Learned, learn
from bnx.recipe import Recipe
from bnx.trainings import Training
from bnx.views import View

__all__ = ["Stability", "stability"]

Stability = Mapping[tuple[int, frozenset[int]], float]  # (structure, the two ends) -> share of the halves


def stability(
    engine: LocalEngine, learned: Learned, folds: int, learners: Sequence[Learner], bounds: Bounds, recipe: Recipe
) -> Stability:
    """Learn every structure from random halves, each half of the blocks of every fold.

    learned: from all rows, whose cut points and pooled levels the halves share, and the number of parents that was
    chosen out of fold. An edge counts in either direction.

    Source: Meinshausen & Buhlmann 2010 (halves without replacement).
    """
    if not recipe.resamples:
        return {}
    view = learned.training.view
    rows = engine.recoded(view)
    plain = _plain(view)
    found: Counter[tuple[int, frozenset[int]]] = Counter()
    masks = halves(folds, engine.blocks // folds, recipe.resamples, recipe.seed)
    trainings = [Training((), mask, plain, engine.class_counts[mask].sum(axis=0)) for mask in masks]
    settled = [
        one.of(structure.depth) if isinstance(one, KdbChosen) else one
        for one, structure in zip(learners, learned.structures, strict=True)
    ]
    for half in learn(rows, trainings, settled, bounds, recipe, learned.structures):
        for s, structure in enumerate(half.structures):
            found.update((s, frozenset(edge)) for edge in structure.edges)
    return {key: number / recipe.resamples for key, number in found.items()}


def _plain(view: View) -> View:
    """See already recoded rows as they are."""
    recode = np.tile(np.arange(view.codes.max(), dtype=np.int32), (len(view.domains), 1))
    return View(view.domains, recode, np.ones(len(view.domains), bool), view.sizes, view.veiled)
