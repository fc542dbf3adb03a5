"""Out-of-fold predictions: everything that is learnt is learnt again inside every training fold."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from bnx.calibrating import apply
from bnx.choosing import Choice, choose, inner_losses, make_trial
from bnx.domains import Schema
from bnx.engines import LocalEngine
from bnx.gating import Bounds
from bnx.learners import Learner
from bnx.learning import Learned, learn
from bnx.parameters import candidates
from bnx.recipe import Recipe
from bnx.sampling import Sample, draw_sample
from bnx.scoring import evidence
from bnx.trainings import held_sets, make_trainings, mask_without

__all__ = ["Evaluation", "evaluate"]


@dataclass(frozen=True)
class Evaluation:
    """One repeat of the folds.

    ``choices``: by what is held out, () for all rows; ``p``: per structure, out-of-fold probabilities (N, C) in the
    engine's row order; ``fold_rows``: the engine's rows of each fold, in runs; ``sample``: the rows of inner choices.
    """

    engine: LocalEngine
    sample: Sample
    choices: Mapping[tuple[int, ...], Choice]
    p: tuple[np.ndarray, ...]
    fold_rows: tuple[list[slice], ...]

    def learned(self, held: tuple[int, ...]) -> Learned:
        """Look up what was learnt without the held-out folds, under the cut points chosen there."""
        return self.choices[held].trial.learned[held]


def bins_to_try(schema: Schema, bins: str) -> tuple[str, ...]:
    """List the kinds of cut points to choose from; without numeric columns there is nothing to choose."""
    if bins != "auto":
        return (bins,)
    return ("mdl", "frequency:5") if any(domain.numeric for domain in schema.attributes) else ("mdl",)


def evaluate(
    engine: LocalEngine, schema: Schema, folds: int, learners: Sequence[Learner], bounds: Bounds, recipe: Recipe
) -> Evaluation:
    """Learn, choose, calibrate and predict in every training fold, and on all rows.

    engine: its blocks are ``folds`` runs of equal length.
    """
    options = candidates(recipe.smoothing)
    kinds = bins_to_try(schema, recipe.bins)
    choices_open = len(options) > 1 or len(kinds) > 1
    nested = choices_open or recipe.temperature or len(learners) > 1
    parts = engine.blocks // folds
    masks = {held: mask_without(held, folds, parts) for held in held_sets(folds, nested)}
    sample = draw_sample(engine, folds)
    trials, losses = [], []
    for kind in kinds:
        trainings = make_trainings(engine, schema, masks, kind, recipe.max_levels)
        trial = make_trial(engine, kind, learn(engine, trainings, learners, bounds, recipe))
        trials.append(trial)
        if choices_open:
            losses.append(inner_losses(engine, trial, sample, options, recipe.temperature))
    outer: list[tuple[int, ...]] = [(), *((fold,) for fold in range(folds))]

    def settle(held: tuple[int, ...]) -> Choice:
        return choose(held, folds, trials, losses, options, sample, recipe.temperature, nested)

    choices = dict(zip(outer, engine.map(settle, outer, "calibrating"), strict=True))
    rows = tuple(engine.rows_of(fold * parts, (fold + 1) * parts) for fold in range(folds))
    p = tuple(np.empty((engine.rows, engine.classes)) for _ in learners)
    engine.map(lambda fold: _predict(engine, choices[(fold,)], (fold,), rows[fold], p), range(folds), "scoring folds")
    return Evaluation(engine, sample, choices, p, rows)


def _predict(
    engine: LocalEngine, choice: Choice, held: tuple[int, ...], rows: Sequence[slice], p: Sequence[np.ndarray]
) -> None:
    """Fill in the probabilities of one fold's rows."""
    learned = choice.trial.learned[held]
    options = [(smoothing,) for smoothing in choice.smoothings]
    counts = choice.trial.counts[held]
    for run in rows:
        found = evidence(engine.codes, run, learned.training.view, learned.structures, options, counts)
        for own, calibration, out in zip(found, choice.calibrations, p, strict=True):
            out[run] = apply(calibration, learned.training.log_prior, own)
