"""What is chosen inside a training set, out of fold: cut points, smoothing, calibration."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.calibrating import Calibration, fit_against_first, probabilities, uncalibrated
from bnx.engines import LocalEngine
from bnx.kernels import calibrated_loss, tempered_losses
from bnx.learning import Learned
from bnx.mixing import Mix, fit_mix, members_of
from bnx.parameters import Smoothing
from bnx.picking import pick
from bnx.sampling import Sample
from bnx.scoring import Counted, Terms, families_of, terms_of
from bnx.structure import Structure
from bnx.tabulating import tabulate

__all__ = ["Choice", "Losses", "Trial", "choose", "inner_losses", "make_trial", "mean_loss"]

Held = tuple[int, ...]
Losses = Mapping[tuple[Held, int], np.ndarray]  # of smoothings, see ``inner_losses``

_TEMPERATURES = 3  # 1, 3/4 and 1/2
_SMOOTHING_LEAD = 2.0  # nats in all by which a smoothing must be ahead of the first one
_PARENT_LEAD = 2.0  # nats in all that each further parent must save where their number is chosen
_CUTS_LEAD = 5.0  # nats in all by which cut points must be ahead of the first kind
_ROWS = 4096  # rows judged at a time


@dataclass(frozen=True)
class Trial:
    """Every training set under one kind of cut points: what was learnt there, and the counts of its families."""

    bins: str
    learned: Mapping[Held, Learned]
    counts: Mapping[Held, Counted]

    def narrowed(self, sets: Sequence[Held], structures: Sequence[int]) -> "Trial":
        """Keep some structures of some training sets."""
        if list(structures) == list(range(len(self.learned[sets[0]].structures))):
            return self
        learned, counts = {}, {}
        for held in sets:
            one, counted = self.learned[held], self.counts[held]
            learned[held] = replace(one, structures=tuple(one.structures[s] for s in structures))
            counts[held] = replace(counted, families=counted.families.narrowed(structures))
        return Trial(self.bins, learned, counts)


@dataclass(frozen=True)
class Choice:
    """What one training set settled on, out of fold.

    ``trial``: which kind of cut points; per structure its ``smoothings`` and ``calibrations``; ``losses``
    (structures, inner folds): mean held-out log loss in bits. ``single``: the structure that these recommend; ``mix``:
    what all of them are mixed by, None where nothing is.
    """

    trial: Trial
    smoothings: tuple[Smoothing, ...]
    calibrations: tuple[Calibration, ...]
    losses: np.ndarray
    single: int
    mix: Mix | None


@dataclass(frozen=True)
class _Inner:
    """The rows of the inner folds, one after the other.

    ``prior`` (rows, C) nats: that of the training set each fold is judged by; ``starts`` (folds + 1,); ``shares`` (C,)
    of the classes.
    """

    truth: np.ndarray
    weights: np.ndarray
    prior: np.ndarray
    starts: np.ndarray
    shares: np.ndarray


def make_trial(engine: LocalEngine, bins: str, learned: Sequence[Learned]) -> Trial:
    """Count every family that was learnt in any training set."""
    families = engine.map(lambda one: families_of(one.structures, one.training.view), learned)
    counted = tabulate(engine, [one.training for one in learned], families)
    held = [one.training.held for one in learned]
    return Trial(bins, dict(zip(held, learned, strict=True)), dict(zip(held, counted, strict=True)))


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
        counted = trial.counts[held]
        holder = counted.families.holder
        terms = terms_of(counted, np.arange(len(counted.families.depths)), options)
        prior = trial.learned[held].training.log_prior
        sums = np.zeros((len(held), len(holder), len(options), temperatures))
        for s in sorted(set(holder)):
            own = terms.of(s)
            for place, fold in enumerate(held):
                _add_losses(own, prior, sample, fold, sums[place, s])
        return [((held, fold), sums[place, list(holder)]) for place, fold in enumerate(held)]

    sets = [held for held in trial.learned if held]
    return {key: sums for results in engine.map(judge, sets, "trying smoothings") for key, sums in results}


def _add_losses(terms: Terms, log_prior: np.ndarray, sample: Sample, fold: int, out: np.ndarray) -> None:
    """Add the losses of one fold's rows to out (V, temperatures), a few rows at a time."""
    rows = sample.rows(fold)
    for first in range(rows.start, rows.stop, _ROWS):
        part = slice(first, min(first + _ROWS, rows.stop))
        evidence = terms.evidence(sample.codes, part.start, part.stop)
        tempered_losses(evidence, log_prior, sample.target[part], sample.weights[part], out)


def choose(
    held: Held,
    folds: int,
    trials: Sequence[Trial],
    losses: Sequence[Losses],
    options: Sequence[Smoothing],
    sample: Sample,
    calibrate: bool,
    nested: bool,
    mix: bool,
    members: Sequence[range] | None = None,
) -> Choice:
    """Choose for the training set without ``held``, on its own rows only.

    losses: of each trial, from ``inner_losses``; empty when there is one trial and one smoothing. members: the learnt
    structures that each one wanted is chosen from, together with its smoothing; itself alone if None. Without
    ``nested`` there is nothing to choose or to calibrate at all. The first kind of cut points, smoothing and member
    stay unless another is ahead by some nats: what leads by less in a training fold tends to fall behind in the fold
    left out. With ``mix`` different structures are mixed.
    """
    members = [range(s, s + 1) for s in range(len(trials[0].learned[held].structures))] if members is None else members
    structures = len(members)
    if not nested:
        bare = uncalibrated(trials[0].learned[held].training.class_mass)
        return Choice(trials[0], (options[0],) * structures, (bare,) * structures, np.zeros((structures, 0)), 0, None)
    inner = inner_sets(held, folds)
    trial, chosen = trials[0], [options[0]] * structures
    if losses:
        lead = _SMOOTHING_LEAD * (np.arange(len(options)) > 0)
        place = np.concatenate([np.arange(len(own)) for own in members])
        lead = lead + _PARENT_LEAD * place[:, None]
        totals = [
            np.sum([table[key] for key in inner], axis=0).min(axis=2) + lead + (_CUTS_LEAD if k else 0.0)
            for k, table in enumerate(losses)
        ]
        best = int(np.argmin([total.min() for total in totals]))
        least = [np.argwhere(totals[best][own] == totals[best][own].min())[0] for own in members]
        chosen = [options[v] for _, v in least]
        picked = [own[m] for own, (m, _) in zip(members, least, strict=True)]
        trial = trials[best].narrowed([held, *(one for one, _ in inner)], picked)
    plain = None if calibrate else uncalibrated(trial.learned[held].training.class_mass)
    return _calibrated(held, trial, tuple(chosen), inner, sample, plain, mix)


def _calibrated(
    without: Held,
    trial: Trial,
    chosen: tuple[Smoothing, ...],
    inner: Sequence[tuple[Held, int]],
    sample: Sample,
    plain: Calibration | None,
    mix: bool,
) -> Choice:
    """Fit each structure's calibration on out-of-fold evidence, unless ``plain``; judge it fold by fold, and mix."""
    rows = _inner_rows(trial, inner, sample)
    calibrations: list[Calibration] = []
    losses = np.zeros((len(chosen), len(inner)))
    done: dict[tuple[object, ...], int] = {}
    predicted: list[np.ndarray] = []
    for s, smoothing in enumerate(chosen):
        same = done.setdefault((smoothing, *(trial.counts[held].families.holder[s] for held, _ in inner)), s)
        if same < s:
            calibrations.append(calibrations[same])
            losses[s] = losses[same]
            predicted.append(predicted[same])
            continue
        own = np.concatenate([_evidence(trial, held, s, smoothing, sample, fold) for held, fold in inner])
        fitted = plain or fit_against_first(own, rows.prior, rows.truth, rows.shares, rows.weights)
        calibrations.append(fitted)
        parts = []
        for k, (held, _) in enumerate(inner):
            part = slice(rows.starts[k], rows.starts[k + 1])
            training = trial.learned[held].training
            used = uncalibrated(training.class_mass) if plain else fitted
            losses[s, k] = mean_loss(own[part], training.log_prior, used, rows.truth[part], rows.weights[part])
            parts.append(probabilities(used, training.log_prior, own[part]) if mix else own[:0])
        predicted.append(np.concatenate(parts))
    structures = trial.learned[without].structures
    single = pick(losses, structures, losses.mean(axis=1).tolist(), len(inner))[1] if len(chosen) > 1 else 0
    found = _mixed(predicted, structures, single, losses, rows, plain is None) if mix else None
    return Choice(trial, chosen, tuple(calibrations), losses, single, found)


def _mixed(
    predicted: Sequence[np.ndarray],
    structures: Sequence[Structure],
    single: int,
    losses: np.ndarray,
    rows: _Inner,
    calibrate: bool,
) -> Mix | None:
    """Fit the weights of different structures; there is nothing to mix in fewer than two."""
    if len(structures) < 2:
        return None
    members = members_of(structures, single)
    own = [predicted[s] for s in members]
    prior = np.exp(rows.prior) if calibrate else None
    return fit_mix(own, members, structures, single, rows.truth, rows.weights, rows.starts, losses[single], prior)


def _inner_rows(trial: Trial, inner: Sequence[tuple[Held, int]], sample: Sample) -> _Inner:
    """Lay the rows of the inner folds one after the other."""
    parts = [sample.rows(fold) for _, fold in inner]
    priors = [trial.learned[held].training.log_prior for held, _ in inner]
    truth = np.concatenate([sample.target[part] for part in parts])
    weights = np.concatenate([sample.weights[part] for part in parts])
    sizes = [part.stop - part.start for part in parts]
    rows = np.bincount(truth, weights, len(priors[0]))
    shares = (rows + 1 / len(rows)) / (rows.sum() + 1)  # a class without a row here may still turn up elsewhere
    starts = np.concatenate([[0], np.cumsum(sizes)])
    return _Inner(truth, weights, np.repeat(np.array(priors), sizes, axis=0), starts, shares)


def _evidence(trial: Trial, held: Held, s: int, smoothing: Smoothing, sample: Sample, fold: int) -> np.ndarray:
    """Sum up the evidence of one fold's rows under a structure learnt without them."""
    counted, rows = trial.counts[held], sample.rows(fold)
    return terms_of(counted, counted.families.of[s], [smoothing]).evidence(sample.codes, rows.start, rows.stop)


def mean_loss(
    evidence: np.ndarray, log_prior: np.ndarray, calibration: Calibration, truth: np.ndarray, weights: np.ndarray
) -> float:
    """Take the weighted mean log loss in bits under a calibration, of evidence for each class against the first."""
    total = calibrated_loss(
        evidence,
        np.atleast_2d(log_prior + calibration.offsets),
        calibration.temperature,
        calibration.floor,
        calibration.shares,
        truth,
        weights,
    )
    return float(total / max(weights.sum(), 1e-300) / np.log(2))
