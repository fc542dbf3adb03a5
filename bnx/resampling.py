"""How often learning from a random half of the rows chooses an edge."""

from collections import Counter
from collections.abc import Mapping, Sequence

import numpy as np

from bnx.engines import LocalEngine
from bnx.folds import halves
from bnx.gating import Bounds
from bnx.learners import Heldout, KdbChosen, Learner
from bnx.learning import Learned, learn
from bnx.recipe import Recipe
from bnx.trainings import Training
from bnx.views import View

__all__ = ["MOST_HALVES_OF_HELDOUT", "Stability", "stability"]

MOST_HALVES_OF_HELDOUT = 25

Stability = Mapping[tuple[int, frozenset[int]], float]  # (structure, the two ends) -> share of the halves


def stability(
    engine: LocalEngine, learned: Learned, folds: int, learners: Sequence[Learner], bounds: Bounds, recipe: Recipe
) -> Stability:
    """Learn every structure from random halves, each half of the blocks of every fold.

    learned: from all rows, whose cut points and pooled levels the halves share, and the number of parents that was
    chosen out of fold. An edge counts in either direction. ``heldout`` learns from the first 25 halves.

    Source: Meinshausen & Buhlmann 2010 (halves without replacement).
    """
    if not recipe.resamples:
        return {}
    view = learned.training.view
    rows = engine.recoded(view)
    masks = halves(folds, engine.blocks // folds, recipe.resamples, recipe.seed)
    plain = _plain(view)
    trainings = [Training((), mask, plain, engine.class_counts[mask].sum(axis=0)) for mask in masks]
    settled = [
        one.of(structure.depth) if isinstance(one, KdbChosen) else one
        for one, structure in zip(learners, learned.structures, strict=True)
    ]
    found: dict[tuple[int, frozenset[int]], float] = {}
    for own, some in _shared_out(learners, trainings):
        known = [learned.structures[s] for s in own]
        counts: Counter[tuple[int, frozenset[int]]] = Counter()
        for half in learn(rows, some, [settled[s] for s in own], bounds, recipe, known):
            for s, structure in zip(own, half.structures, strict=True):
                counts.update((s, frozenset(edge)) for edge in structure.edges)
        found |= {key: number / len(some) for key, number in counts.items()}
    return found


def _shared_out(
    learners: Sequence[Learner], trainings: Sequence[Training]
) -> list[tuple[list[int], Sequence[Training]]]:
    """Say which structures are learnt in which halves: those that are judged on rows take too long for all."""
    slow = [s for s, member in enumerate(learners) if isinstance(member, Heldout)]
    quick = [s for s in range(len(learners)) if s not in slow]
    parts = ((quick, trainings), (slow, trainings[:MOST_HALVES_OF_HELDOUT]))
    return [(own, some) for own, some in parts if own]


def _plain(view: View) -> View:
    """See already recoded rows as they are."""
    recode = np.tile(np.arange(view.codes.max(), dtype=np.int32), (len(view.domains), 1))
    return View(view.domains, recode, np.ones(len(view.domains), bool), view.sizes, view.veiled)
