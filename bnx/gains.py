"""The held-out gain of every edge: the loss without it minus the loss with it, in folds that did not learn it."""

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from bnx.calibrating import probabilities
from bnx.evaluation import Evaluation, Predictor
from bnx.kernels import changed_losses, drop_parent
from bnx.masked import rows_with_unknown, view_codes
from bnx.sampling import Sample, sample_for_gains
from bnx.scoring import Counted, Terms, terms_of

__all__ = ["Gains", "edge_gains"]

_PAIRS = 100_000  # of an edge and a row, looked at together

Edge = tuple[int, int]
Gains = Mapping[tuple[int, Edge], float]  # (structure, (parent, child)) -> bits per row


def edge_gains(evaluation: Evaluation) -> list[Gains]:
    """Judge every edge of every fold's own structures on the rows that the fold held out; one mapping per fold."""
    folds = range(len(evaluation.fold_rows))
    sample = sample_for_gains(evaluation.engine, len(folds))
    structures = range(len(evaluation.choices[()].smoothings))
    work = [(fold, s) for fold in folds for s in structures]
    found = evaluation.engine.map(lambda item: _gains(evaluation, sample, *item), work, "judging edges")
    by_work = dict(zip(work, found, strict=True))
    return [{(s, edge): gain for s in structures for edge, gain in by_work[(fold, s)]} for fold in folds]


def _gains(evaluation: Evaluation, sample: Sample, fold: int, s: int) -> list[tuple[Edge, float]]:
    """Take the edges out of one structure, one at a time."""
    predictor, rows = evaluation.predictor(fold, s), sample.rows(fold)
    structure = evaluation.learned((fold,)).structures[s]
    truth, weights = sample.target[rows], sample.weights[rows]
    if not structure.edges or not len(truth):
        return [(edge, 0.0) for edge in structure.edges]
    choice, terms = evaluation.choices[(fold,)], predictor.terms
    counted = choice.trial.counts[(fold,)]
    children, places = _edges(counted, s)
    less = _without(counted, counted.families.of[s][children], places)
    fewer = terms_of(less, np.arange(len(children)), [choice.smoothings[s]])
    own, calibration = counted.families, predictor.calibration
    changes = np.zeros(len(children))
    changed_losses(
        sample.codes,
        own.recode,
        (own.plain, own.members, own.sizes, own.depths, terms.which[children], terms.starts[children], terms.table),
        (
            less.families.plain,
            less.families.members,
            less.families.sizes,
            less.families.depths,
            fewer.starts,
            fewer.table,
        ),
        rows.start,
        terms.evidence(sample.codes, rows.start, rows.stop),
        np.atleast_2d(predictor.log_prior + calibration.offsets),
        calibration.temperature,
        calibration.floor,
        calibration.shares,
        truth,
        weights,
        changes,
    )
    if own.unknown is not None:
        changes -= _of_unknown_parents(predictor, sample, rows, children, places, fewer)
    bits = changes / max(weights.sum(), 1e-300) / np.log(2)
    return list(zip(structure.edges, bits.tolist(), strict=True))


def _of_unknown_parents(
    predictor: Predictor, sample: Sample, rows: slice, children: np.ndarray, places: np.ndarray, fewer: Terms
) -> np.ndarray:
    """Find what the edges' changes (E,) owe to rows in which the parent that goes is not known: there, none is counted.

    children, places (E,): of the edges; fewer: the families without that parent.
    """
    terms, less = predictor.terms, fewer.families
    own = terms.families
    parents = own.members[terms.which[children], places]
    unknown = np.zeros((len(sample.codes), 1), np.bool_) if own.unknown is None else own.unknown
    found = rows_with_unknown(sample.codes, unknown, np.unique(parents), rows.start, rows.stop)
    seen = view_codes(sample.codes, found, own.recode, unknown)
    edge, row = np.nonzero(seen[parents] < 0)
    codes = seen[less.members[edge], row[:, None]]
    counts = np.arange(codes.shape[1]) < less.depths[edge, None]
    complete = ((codes >= 0) | ~counts).all(axis=1)
    edge, row = edge[complete], found[row[complete]]
    codes, sizes = np.where(counts, codes, 0)[complete], less.sizes[edge]
    cell = np.zeros(len(edge), np.int64)
    for m in range(codes.shape[1]):
        cell = cell * sizes[:, m] + codes[:, m]
    change = np.zeros(len(children))
    for first in range(0, len(edge), _PAIRS):
        part = slice(first, first + _PAIRS)
        chosen, back = np.unique(row[part], return_inverse=True)
        with_edge = terms.evidence(np.take(sample.codes, chosen, axis=1), 0, len(chosen))[back.ravel()]
        without = with_edge + fewer.table[fewer.starts[edge[part]] + cell[part]]
        truth = sample.target[row[part]]
        own_p = [
            probabilities(predictor.calibration, predictor.log_prior, one)[np.arange(len(truth)), truth]
            for one in (with_edge, without)
        ]
        with np.errstate(divide="ignore", invalid="ignore"):
            grown = np.log(own_p[0]) - np.log(own_p[1])
        change += np.bincount(edge[part], sample.weights[row[part]] * grown, len(change))
    return change


def _edges(counted: Counted, s: int) -> tuple[np.ndarray, np.ndarray]:
    """List the edges of a structure by child, then in the order taken: the children, and the places of the parents."""
    parents = counted.families.depths[counted.families.of[s]] - 1
    children = np.repeat(np.arange(len(parents)), parents)
    return children, np.arange(len(children)) - np.repeat(np.cumsum(parents) - parents, parents)


def _without(counted: Counted, which: np.ndarray, places: np.ndarray) -> Counted:
    """Take one parent each, by its place, out of some families (K,), and sum their counts over its levels."""
    one = counted.families
    kept = np.arange(one.members.shape[1] - 1) + (np.arange(one.members.shape[1] - 1) >= places[:, None])
    members = np.take_along_axis(one.members[which], kept, axis=1)
    sizes = np.take_along_axis(one.sizes[which], kept, axis=1)
    starts = np.concatenate([[0], np.cumsum(sizes.prod(axis=1))])
    less = replace(
        one,
        members=members,
        sizes=sizes,
        depths=one.depths[which] - 1,
        plain=one.plain[which],
        starts=starts,
        silent=None,
    )
    counts = np.zeros((len(counted.counts), int(starts[-1])), counted.counts.dtype)
    drop_parent(counted.counts, one.starts, one.sizes, one.depths, which, places, starts, counts)
    return Counted(less, counts)
