"""Out-of-fold predictions: everything that is learnt is learnt again inside every training fold."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from bnx.calibrating import Calibration, probabilities, without_evidence
from bnx.choosing import Choice, choose
from bnx.cut_trials import bins_to_try, try_cuts
from bnx.domains import Schema
from bnx.engines import LocalEngine
from bnx.gating import Bounds
from bnx.learners import Learner, singles
from bnx.learning import Learned
from bnx.mixing import mixed
from bnx.parameters import candidates
from bnx.recipe import Recipe
from bnx.sampling import Sample, sample_for_choices
from bnx.scoring import Terms, terms_of
from bnx.sharpening import sharpened
from bnx.trainings import held_sets, mask_without

__all__ = ["Evaluation", "MixedPredictor", "Predictor", "Predicts", "evaluate", "predict", "write"]

_ROWS = 16_384  # predicted at a time


class Predicts(Protocol):
    """Whatever gives rows of the engine their probabilities."""

    def probabilities(self, first: int, last: int) -> np.ndarray:
        """Predict rows ``first:last`` of the engine, (last - first, C)."""


@dataclass(frozen=True)
class Predictor:
    """What gives one fold's rows their probabilities under one structure learnt without them."""

    codes: np.ndarray
    terms: Terms
    log_prior: np.ndarray
    calibration: Calibration

    def probabilities(self, first: int, last: int) -> np.ndarray:
        """Predict rows ``first:last`` of the engine, (last - first, C)."""
        return self.calibrated(self.terms.evidence(self.codes, first, last), self.calibration, first, last)

    def calibrated(self, evidence: np.ndarray, calibration: Calibration, first: int, last: int) -> np.ndarray:
        """Turn the evidence of rows ``first:last``, (last - first, at least C - 1) nats, into probabilities."""
        p = probabilities(calibration, self.log_prior, evidence)
        p[self.terms.rows_of_nothing(self.codes, first, last) - first] = without_evidence(calibration, self.log_prior)
        return p


@dataclass(frozen=True)
class MixedPredictor:
    """What gives one fold's rows the mixed probabilities of several structures learnt without them."""

    members: tuple[Predictor, ...]
    weights: tuple[float, ...]
    sharpness: float

    def probabilities(self, first: int, last: int) -> np.ndarray:
        """Predict rows ``first:last`` of the engine, (last - first, C)."""
        p = mixed([member.probabilities(first, last) for member in self.members], self.weights)
        return sharpened(p, self.sharpness, np.exp(self.members[0].log_prior))


@dataclass(frozen=True)
class Evaluation:
    """One repeat of the folds.

    ``choices``: by what is held out, () for all rows; ``fold_rows``: the engine's rows of each fold, as runs;
    ``sample``: the rows of inner choices.
    """

    engine: LocalEngine
    sample: Sample
    choices: Mapping[tuple[int, ...], Choice]
    fold_rows: tuple[list[slice], ...]

    @property
    def rows_by_fold(self) -> list[int]:
        """Rows of each fold."""
        return [sum(run.stop - run.start for run in runs) for runs in self.fold_rows]

    def learned(self, held: tuple[int, ...]) -> Learned:
        """Look up what was learnt without the held-out folds, under the cut points chosen there."""
        return self.choices[held].trial.learned[held]

    @property
    def structures(self) -> int:
        """Number of structures; what is numbered by it is their mix."""
        return len(self.choices[()].smoothings)

    @property
    def mixes(self) -> bool:
        """Whether any training set mixes structures, or takes its mix, be it all of one that is not picked."""
        mixes = [one.mix for one in self.choices.values() if one.mix]
        return any(mix.taken or len(mix.members) > 1 for mix in mixes)

    def predictor(self, fold: int, structure: int) -> Predictor:
        """Make the tables that predict a fold."""
        choice, held = self.choices[(fold,)], (fold,)
        counted = choice.trial.counts[held]
        terms = terms_of(counted, counted.families.of[structure], [choice.smoothings[structure]])
        prior = self.learned(held).training.log_prior
        return Predictor(self.engine.codes, terms, prior, choice.calibrations[structure])

    def predictor_of(self, fold: int, number: int) -> Predictor | MixedPredictor:
        """Make what predicts a fold: the tables of a structure or, for the number after the last, those of the mix."""
        mix = self.choices[(fold,)].mix
        if mix is None or number < self.structures:
            return self.predictor(fold, number)
        members = tuple(self.predictor(fold, s) for s in mix.members)
        return MixedPredictor(members, tuple(mix.members.values()), mix.sharpness)


def evaluate(
    engine: LocalEngine,
    schema: Schema,
    folds: int,
    learners: Sequence[Learner],
    bounds: Bounds,
    recipe: Recipe,
    used: np.ndarray | None = None,
) -> Evaluation:
    """Learn, choose and calibrate in every training fold, and on all rows.

    engine: its blocks are ``folds`` runs of equal length; used: the blocks of every run that are learnt from, (folds,
    blocks of a fold) bool, all if None.
    """
    options = candidates(recipe.smoothing)
    members, own = singles(learners, bounds)
    choices_open = len(options) > 1 or len(bins_to_try(schema, recipe.bins)) > 1 or len(members) > len(own)
    nested = choices_open or recipe.temperature or len(learners) > 1
    parts = engine.blocks // folds
    used = np.ones((folds, parts), np.bool_) if used is None else used
    masks = {held: mask_without(held, folds, parts) & used.ravel() for held in held_sets(folds, nested)}
    sample = sample_for_choices(engine, folds, used)
    trials, losses = try_cuts(engine, schema, masks, members, bounds, recipe, sample, choices_open)
    outer: list[tuple[int, ...]] = [(), *((fold,) for fold in range(folds))]

    def settle(held: tuple[int, ...]) -> Choice:
        return choose(held, folds, trials, losses, options, sample, recipe.temperature, nested, recipe.mix, own)

    choices = dict(zip(outer, engine.map(settle, outer, "calibrating"), strict=True))
    rows = tuple(engine.rows_of(fold * parts, (fold + 1) * parts) for fold in range(folds))
    return Evaluation(engine, sample, choices, rows)


def predict(evaluation: Evaluation, fold: int, structure: int, runs: Sequence[slice], out: np.ndarray) -> None:
    """Write the probabilities of some of a fold's rows, given as runs of the engine's rows, to the same rows of out."""
    write(evaluation.predictor_of(fold, structure), runs, out)


def write(predictor: Predicts, runs: Sequence[slice], out: np.ndarray) -> None:
    """Write the probabilities of some of the engine's rows to the same rows of out."""
    for run in runs:
        for first in range(run.start, run.stop, _ROWS):
            last = min(first + _ROWS, run.stop)
            out[first:last] = predictor.probabilities(first, last)
