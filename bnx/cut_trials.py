"""Every training set under each kind of cut points that it may choose."""

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from bnx.choosing import Losses, Trial, inner_losses, make_trial
from bnx.domains import Schema
from bnx.engines import LocalEngine
from bnx.gating import Bounds
from bnx.learners import Single
from bnx.learning import learn
from bnx.parameters import candidates
from bnx.recipe import Recipe
from bnx.sampling import Sample
from bnx.trainings import Training, make_trainings

__all__ = ["FILLED", "bins_to_try", "try_cuts"]

FILLED = "mdl+frequency:5"  # tried where columns have no cut by mdl

_Held = tuple[int, ...]


def bins_to_try(schema: Schema, bins: str) -> tuple[str, ...]:
    """List the kinds of cut points to choose from; without numeric columns there is nothing to choose."""
    if bins != "auto":
        return (bins,)
    return ("mdl", "frequency:5") if any(domain.numeric for domain in schema.attributes) else ("mdl",)


def try_cuts(
    engine: LocalEngine,
    schema: Schema,
    masks: Mapping[_Held, np.ndarray],
    members: Sequence[Single],
    bounds: Bounds,
    recipe: Recipe,
    sample: Sample,
    judged: bool,
) -> tuple[list[Trial], list[Losses]]:
    """Learn in all training sets under every kind of cut points, and judge smoothings on what each leaves out.

    masks: as ``make_trainings`` takes them. Where there is something to choose and mdl leaves a column without a cut,
    its cut points filled up by those of equal frequency are one kind more; only the training sets that this changes are
    learnt again. Unless ``judged`` no losses are given.
    """
    options = candidates(recipe.smoothing)

    def learnt(kind: str, some: Mapping[_Held, np.ndarray]) -> tuple[Trial, Losses]:
        trainings = make_trainings(engine, schema, dict(some), kind, recipe.max_levels)
        trial = make_trial(engine, kind, learn(engine, trainings, members, bounds, recipe))
        return trial, inner_losses(engine, trial, sample, options, recipe.temperature) if judged else {}

    found = [learnt(kind, masks) for kind in bins_to_try(schema, recipe.bins)]
    if len(found) > 1:
        by_mdl, losses = found[0]
        some = {held: masks[held] for held, one in by_mdl.learned.items() if _leaves_uncut(one.training, schema)}
        if some:
            trial, own = learnt(FILLED, some)
            filled = replace(
                trial, learned={**by_mdl.learned, **trial.learned}, counts={**by_mdl.counts, **trial.counts}
            )
            found.append((filled, {**losses, **own}))
    return [trial for trial, _ in found], [own for _, own in found if judged]


def _leaves_uncut(training: Training, schema: Schema) -> bool:
    """Tell whether a numeric column of several values has one level only."""
    seen = zip(training.view.domains, schema.attributes, strict=True)
    return any(stored.numeric and len(stored.cuts) > 0 and not own.cuts for own, stored in seen)
