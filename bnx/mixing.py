"""A mix of structures: their calibrated log posteriors, weighed and added up."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.picking import chances_of
from bnx.sharpening import fit_sharpness, sharpened
from bnx.simplex import least_on_simplex
from bnx.structure import Structure

__all__ = ["Mix", "fit_mix", "members_of", "mixed"]

_AHEAD, _LEVEL = 0.95, 0.1  # the least chance of being better than a single structure without edges, and with some
_FOLD = 10.0  # nats behind that lower a weight by a factor of e
_EDGES = 20.0  # nats that a structure with edges must be ahead to start like one without
_PENALTY = 20.0
_LEAST = 0.01
_STEPS = 50
_FEW = 5_000  # rows that a first guess is found from
_TINIEST = 2.2250738585072014e-308  # the smallest normal number


@dataclass(frozen=True)
class Mix:
    """What a training set mixes.

    ``weights`` (structures,), none below 0, sum 1; ``sharpness``: of what they give; ``losses`` (inner folds,): mean
    log loss in bits of each, mixed by weights fitted without it; ``taken``: whether the mix is taken there instead of
    the single structure.
    """

    weights: np.ndarray
    sharpness: float
    losses: np.ndarray
    taken: bool

    @property
    def members(self) -> dict[int, float]:
        """Weights of the structures that have one, by number."""
        return {s: float(weight) for s, weight in enumerate(self.weights) if weight}


@dataclass(frozen=True)
class _Rows:
    """Rows to fit on.

    ``ratios`` (members, C, N) nats: log posterior of each class less that of the row's own; ``weights`` (N,): how many
    rows each stands for; ``starts``: the first row of each fold that has any; ``towards`` (members,): the weights that
    they are drawn to; ``truth`` (N,); ``prior`` (N, C).
    """

    ratios: np.ndarray
    weights: np.ndarray
    starts: np.ndarray
    towards: np.ndarray
    truth: np.ndarray
    prior: np.ndarray


@dataclass(frozen=True)
class _Sums:
    """Losses of each fold, nats, with ``gradient`` (folds, members) and ``hessian`` (folds, members, members)."""

    losses: np.ndarray
    gradient: np.ndarray
    hessian: np.ndarray


def mixed(posteriors: Sequence[np.ndarray], weights: Sequence[float]) -> np.ndarray:
    """Mix probabilities (N, C) of several structures: their weighed geometric mean, made to sum to 1.

    A probability of 0 counts as the smallest normal number.

    Source: Genest & Zidek 1986 (logarithmic opinion pool).
    """
    power = np.zeros(posteriors[0].shape)
    for p, weight in zip(posteriors, weights, strict=True):
        power += weight * np.log(np.maximum(p, _TINIEST))
    power -= power.max(axis=1, keepdims=True)
    np.exp(power, out=power)
    power /= power.sum(axis=1, keepdims=True)
    return power


def members_of(structures: Sequence[Structure], single: int) -> list[int]:
    """List the structures that differ in more than their name, the one that is taken alone standing for its like."""
    first = {structure.what_it_says: s for s, structure in reversed(list(enumerate(structures)))}
    first[structures[single].what_it_says] = single
    return sorted(first.values())


def fit_mix(
    posteriors: Sequence[np.ndarray],
    members: Sequence[int],
    structures: Sequence[Structure],
    single: int,
    truth: np.ndarray,
    weights: np.ndarray,
    starts: np.ndarray,
    single_losses: np.ndarray,
    prior: np.ndarray | None,
) -> Mix:
    """Fit the weights of some structures on out-of-fold predictions.

    posteriors: of each of ``members``, (N, C); structures: all of them; single: the one of the members that is taken
    where none is mixed, with its mean losses by fold in bits; truth (N,); weights (N,): how many rows each stands for;
    starts (folds + 1,): the first row of each fold; prior (N, C): to sharpen over, None for no sharpness.

    Minimises total log loss (nats) + 20 sum (w - u)^2 over the simplex. The u are proportional to exp(-nats / 10), the
    total log loss of each structure, with 20 nats added to those that have edges: of a few rows a fit alone would
    follow chance. Weights below .01 are dropped. The loss of a fold is that by weights without it, from one step of
    Newton's off the weights of all, but as sharp as all. The mix is taken if it is better than the single structure
    with a probability of .95 where that one has no edges, and of .1 where it has.

    Source: Genest & Zidek 1986 (logarithmic opinion pool); Vovk 1990 (weights that fall exponentially with the loss).
    """
    sizes = np.diff(starts)
    filled = np.flatnonzero(sizes)
    first = starts[filled]
    nats = _nats(posteriors, truth, weights, first)
    handicap = np.array([_EDGES if structures[member].edges else 0.0 for member in members])
    over = np.full(posteriors[0].shape, 1 / posteriors[0].shape[1]) if prior is None else prior
    towards = _falling(nats.sum(axis=1) + handicap)
    rows = _Rows(_ratios(posteriors, truth), weights, first, towards, truth, over)
    point, sums = _minimum(rows, _guess(rows))
    whole = np.zeros(len(structures))
    whole[list(members)] = np.where(point >= _LEAST, point, 0.0)
    whole /= whole.sum()
    if whole[single] == 1.0:
        return Mix(whole, 0.0, single_losses, False)
    together = mixed(posteriors, whole[list(members)].tolist())
    sharpness = 0.0 if prior is None else fit_sharpness(together, prior, truth, weights)
    losses = np.zeros(len(sizes))
    for k, fold in enumerate(filled.tolist()):
        without = replace(rows, towards=_falling(np.delete(nats, k, axis=1).sum(axis=1) + handicap))
        part = slice(int(starts[fold]), int(starts[fold + 1]))
        losses[fold] = _loss_without(without, point, sums, k, part, sharpness)
    least = _LEVEL if structures[single].edges else _AHEAD
    return Mix(whole, sharpness, losses, chances_of(losses, single_losses, len(sizes), 0.0).better > least)


def _nats(posteriors: Sequence[np.ndarray], truth: np.ndarray, weights: np.ndarray, starts: np.ndarray) -> np.ndarray:
    """Sum up the log losses of each member in each fold, (members, folds)."""
    every = np.arange(len(truth))
    return np.array(
        [np.add.reduceat(-weights * np.log(np.maximum(p[every, truth], _TINIEST)), starts) for p in posteriors]
    )


def _falling(nats: np.ndarray) -> np.ndarray:
    """Give weights (members,) that fall exponentially with the nats behind the best."""
    weights = np.exp((nats.min() - nats) / _FOLD)
    return np.asarray(weights / weights.sum())


def _ratios(posteriors: Sequence[np.ndarray], truth: np.ndarray) -> np.ndarray:
    """Take logs, class by class, and subtract those of each row's own class."""
    out = np.empty((len(posteriors), posteriors[0].shape[1], len(truth)))
    every = np.arange(len(truth))
    for k, p in enumerate(posteriors):
        np.log(np.maximum(p.T, _TINIEST), out=out[k])
        out[k] -= out[k][truth, every]
    return out


def _guess(rows: _Rows) -> np.ndarray:
    """Guess the weights: equal ones or, of many rows, those that some of them, evenly spread, are mixed by."""
    equal = np.full(len(rows.towards), 1 / len(rows.towards))
    every = len(rows.weights) // _FEW
    if every < 2:
        return equal
    some = np.ascontiguousarray(rows.ratios[:, :, ::every])
    mass, first = rows.weights[::every] * every, np.zeros(1, np.int64)
    thin = _Rows(some, mass, first, rows.towards, rows.truth[::every], rows.prior[::every])
    return _minimum(thin, equal)[0]


def _minimum(rows: _Rows, point: np.ndarray) -> tuple[np.ndarray, _Sums]:
    """Find the weights of least penalised loss by damped Newton steps within the simplex, from a point there."""
    sums = _sums(rows, point)
    for _ in range(_STEPS):
        value = _value(rows, point, sums)
        gradient, hessian = sums.gradient.sum(axis=0), sums.hessian.sum(axis=0)
        reached = _stepped(rows, point, gradient, hessian)
        drop = -float(((gradient + 2 * _PENALTY * (point - rows.towards)) * (reached - point)).sum())
        if drop <= 1e-9 * (1.0 + value):
            break
        there = _sums(rows, reached)
        while _value(rows, reached, there) > value - 1e-4 * drop:
            drop /= 2
            reached = (point + reached) / 2
            there = _sums(rows, reached)
        point, sums = reached, there
    return point, sums


def _value(rows: _Rows, point: np.ndarray, sums: _Sums) -> float:
    return float(sums.losses.sum() + _PENALTY * np.square(point - rows.towards).sum())


def _stepped(rows: _Rows, point: np.ndarray, gradient: np.ndarray, hessian: np.ndarray) -> np.ndarray:
    """Minimise the penalised loss over the simplex as its first two derivatives at the point say."""
    curve = hessian + 2 * _PENALTY * np.eye(len(point))
    pull = (hessian * point).sum(axis=1) - gradient + 2 * _PENALTY * rows.towards
    return least_on_simplex(curve, pull, point)


def _sums(rows: _Rows, point: np.ndarray) -> _Sums:
    """Sum losses and their derivatives by the weights fold by fold."""
    power = _powers(rows.ratios, point)
    top = power.max(axis=0)
    p = np.exp(power - top)
    whole = p.sum(axis=0)
    p /= whole
    losses = rows.weights * (np.log(whole) + top)
    slopes = [(p * own).sum(axis=0) for own in rows.ratios]
    p *= rows.weights
    size = len(point)
    curves = np.empty((size, size, len(rows.starts)))
    for a in range(size):
        weighed = p * (rows.ratios[a] - slopes[a])
        for b in range(a + 1):
            curves[a, b] = curves[b, a] = np.add.reduceat((weighed * rows.ratios[b]).sum(axis=0), rows.starts)
    gradient = np.array([np.add.reduceat(rows.weights * slope, rows.starts) for slope in slopes])
    return _Sums(np.add.reduceat(losses, rows.starts), gradient.T, curves.T)


def _powers(ratios: np.ndarray, point: np.ndarray) -> np.ndarray:
    """Add up weighed log ratios, (C, N)."""
    power = np.zeros(ratios.shape[1:])
    for own, weight in zip(ratios, point.tolist(), strict=True):
        if weight:
            power += weight * own
    return power


def _loss_without(rows: _Rows, point: np.ndarray, sums: _Sums, k: int, part: slice, sharpness: float) -> float:
    """Take the mean loss of fold k, whose rows are ``part``, in bits, mixed by weights that they had no part in."""
    gradient, hessian = (np.delete(of, k, axis=0).sum(axis=0) for of in (sums.gradient, sums.hessian))
    power = _powers(rows.ratios[:, :, part], _stepped(rows, point, gradient, hessian)).T
    p = np.exp(power - power.max(axis=1, keepdims=True))
    p = sharpened(p / p.sum(axis=1, keepdims=True), sharpness, rows.prior[part])
    nats = -np.log(np.maximum(p[np.arange(len(p)), rows.truth[part]], _TINIEST))
    mean = (rows.weights[part] * nats).sum() / max(rows.weights[part].sum(), 1e-300)
    return float(mean / np.log(2))
