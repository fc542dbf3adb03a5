"""What is chosen inside a training set, out of fold: cut points, smoothing, calibration."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from bnx.calibrating import Calibration, fit, identity
from bnx.engines import LocalEngine
from bnx.families import for_each_family
from bnx.kernels import calibrated_loss, tempered_losses
from bnx.learning import Learned
from bnx.parameters import Smoothing
from bnx.sampling import Sample
from bnx.scoring import Members, Terms, evidence, families, terms_of

__all__ = ["Choice", "Trial", "choose", "inner_losses", "make_trial", "mean_loss"]

Held = tuple[int, ...]

_TEMPERATURES = 3  # 1, 3/4 and 1/2
_ROWS = 512  # rows judged at a time, so that their evidence stays in the cache


@dataclass(frozen=True)
class Trial:
    """Every training set under one kind of cut points: what was learnt there, and the counts of its families."""

    bins: str
    learned: Mapping[Held, Learned]
    counts: Mapping[Held, Mapping[Members, np.ndarray]]


@dataclass(frozen=True)
class Choice:
    """What one training set settled on, out of fold.

    ``trial``: which kind of cut points; per structure its ``smoothings`` and ``calibrations``; ``losses``
    (structures, inner folds): mean held-out log loss in bits.
    """

    trial: Trial
    smoothings: tuple[Smoothing, ...]
    calibrations: tuple[Calibration, ...]
    losses: np.ndarray


def make_trial(engine: LocalEngine, bins: str, learned: Sequence[Learned]) -> Trial:
    """Count every family that was learnt in any training set."""
    trainings = [one.training for one in learned]
    requests = [
        (number, members)
        for number, one in enumerate(learned)
        for structure in one.structures
        for members in families(structure)
    ]
    found = for_each_family(engine, trainings, requests, lambda counts, sizes: counts, "counting families")
    counts: dict[Held, dict[Members, np.ndarray]] = {training.held: {} for training in trainings}
    for (number, members), table in found.items():
        counts[trainings[number].held][members] = table
    return Trial(bins, {one.training.held: one for one in learned}, counts)


def inner_sets(held: Held, folds: int) -> list[tuple[Held, int]]:
    """List (what a model is learnt without, the fold it is judged on) inside the training set without ``held``."""
    return [(tuple(sorted((*held, fold))), fold) for fold in range(folds) if fold not in held]


def inner_losses(
    engine: LocalEngine, trial: Trial, sample: Sample, options: Sequence[Smoothing], tempered: bool
) -> dict[tuple[Held, int], np.ndarray]:
    """Judge every smoothing on every fold that a training set leaves out.

    Returns:
        (held, fold) -> weighted sums of log losses in nats, (structures, V, temperatures).
    """
    temperatures = _TEMPERATURES if tempered else 1

    def judge(held: Held) -> list[tuple[tuple[Held, int], np.ndarray]]:
        learned = trial.learned[held]
        every = [options] * len(learned.structures)
        terms = terms_of(learned.training.view, learned.structures, every, trial.counts[held])
        prior = learned.training.log_prior
        return [((held, fold), _losses(terms, prior, sample, fold, len(options), temperatures)) for fold in held]

    sets = [held for held in trial.learned if held]
    return {key: sums for results in engine.map(judge, sets, "trying smoothings") for key, sums in results}


def _losses(
    terms: Terms, log_prior: np.ndarray, sample: Sample, fold: int, options: int, temperatures: int
) -> np.ndarray:
    """Sum the losses of one fold's rows, (structures, V, temperatures), a few rows at a time."""
    rows = sample.rows(fold)
    sums = np.zeros((max(terms.holder) + 1, options, temperatures))
    for first in range(rows.start, rows.stop, _ROWS):
        part = slice(first, min(first + _ROWS, rows.stop))
        found = terms.empty(part.stop - part.start)
        terms.add(sample.codes, part.start, part.stop, found)
        for one, total in zip(found, sums, strict=True):
            tempered_losses(one, log_prior, sample.target[part], sample.weights[part], total)
    return np.asarray(sums[list(terms.holder)])


def choose(
    held: Held,
    folds: int,
    trials: Sequence[Trial],
    losses: Sequence[Mapping[tuple[Held, int], np.ndarray]],
    options: Sequence[Smoothing],
    sample: Sample,
    calibrate: bool,
    nested: bool,
) -> Choice:
    """Choose for the training set without ``held``, on its own rows only.

    losses: of each trial, from ``inner_losses``; empty when there is one trial and one smoothing. Without ``nested``
    there is nothing to choose or to calibrate at all.
    """
    if not nested:
        structures = len(trials[0].learned[held].structures)
        plain = identity(len(trials[0].learned[held].training.class_counts))
        return Choice(trials[0], (options[0],) * structures, (plain,) * structures, np.zeros((structures, 0)))
    inner = inner_sets(held, folds)
    trial, chosen = trials[0], [options[0]] * len(trials[0].learned[held].structures)
    if losses:
        totals = [np.sum([table[key] for key in inner], axis=0).min(axis=2) for table in losses]
        best = int(np.argmin([total.min() for total in totals]))
        trial, chosen = trials[best], [options[k] for k in totals[best].argmin(axis=1)]
    return _calibrated(trial, tuple(chosen), inner, sample, calibrate)


def _calibrated(
    trial: Trial, chosen: tuple[Smoothing, ...], inner: Sequence[tuple[Held, int]], sample: Sample, calibrate: bool
) -> Choice:
    """Fit the calibration of each structure on out-of-fold evidence, and judge it fold by fold."""
    scores = []
    options = [(smoothing,) for smoothing in chosen]
    for held, fold in inner:
        learned = trial.learned[held]
        view, structures = learned.training.view, learned.structures
        scores.append(evidence(sample.codes, sample.rows(fold), view, structures, options, trial.counts[held]))
    priors = [trial.learned[held].training.log_prior for held, _ in inner]
    truths = [sample.target[sample.rows(fold)] for _, fold in inner]
    weights = [sample.weights[sample.rows(fold)] for _, fold in inner]
    rows = np.bincount(np.concatenate(truths), np.concatenate(weights), len(priors[0]))
    shares = (rows + 1 / len(rows)) / (rows.sum() + 1)  # a class without a row here may still turn up elsewhere
    prior_rows = np.concatenate([np.tile(prior, (len(truth), 1)) for prior, truth in zip(priors, truths, strict=True)])
    calibrations: list[Calibration] = []
    losses = np.zeros((len(chosen), len(inner)))
    done: dict[tuple[int, ...], int] = {}
    for s in range(len(chosen)):
        same = done.setdefault(tuple(id(one[s]) for one in scores), s)
        if same < s:
            calibrations.append(calibrations[same])
            losses[s] = losses[same]
            continue
        own = np.concatenate([one[s] for one in scores])
        calibration = identity(len(shares))
        if calibrate:
            calibration = fit(own, prior_rows, np.concatenate(truths), shares, np.concatenate(weights))
        calibrations.append(calibration)
        for k, (one, prior, truth, weight) in enumerate(zip(scores, priors, truths, weights, strict=True)):
            losses[s, k] = mean_loss(one[s], prior, calibration, truth, weight)
    return Choice(trial, chosen, tuple(calibrations), losses)


def mean_loss(
    own: np.ndarray, log_prior: np.ndarray, calibration: Calibration, truth: np.ndarray, weights: np.ndarray
) -> float:
    """Take the weighted mean log loss in bits of evidence (rows, C) under a calibration."""
    total = calibrated_loss(
        own,
        log_prior + calibration.offsets,
        calibration.temperature,
        calibration.floor,
        calibration.shares,
        truth,
        weights,
    )
    return float(total / max(weights.sum(), 1e-300) / np.log(2))
