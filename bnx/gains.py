"""The held-out gain of every edge: the loss without it minus the loss with it, in folds that did not learn it."""

from collections.abc import Mapping

import numpy as np

from bnx.choosing import mean_loss
from bnx.evaluation import Evaluation
from bnx.families import for_each_family
from bnx.parameters import log_tables
from bnx.scoring import Members, family_terms, terms_of

__all__ = ["Gains", "edge_gains"]

Edge = tuple[int, int]
Gains = Mapping[tuple[int, Edge], float]  # (structure, (parent, child)) -> bits per row


def edge_gains(evaluation: Evaluation) -> list[Gains]:
    """Judge every edge of every fold's own structures on the rows that the fold held out; one mapping per fold."""
    folds = range(len(evaluation.fold_rows))
    learned = [evaluation.learned((fold,)) for fold in folds]
    requests = [
        (fold, _without(structure.parents[child], parent, child))
        for fold in folds
        for structure in learned[fold].structures
        for parent, child in structure.edges
    ]
    trainings = [one.training for one in learned]
    reduced = for_each_family(evaluation.engine, trainings, requests, lambda counts, sizes: counts, "counting families")
    work = [(fold, s) for fold in folds for s in range(len(learned[0].structures))]
    found = evaluation.engine.map(lambda item: _gains(evaluation, *item, reduced), work, "judging edges")
    return [
        {
            (s, edge): gain
            for (other, s), gains in zip(work, found, strict=True)
            if other == fold
            for edge, gain in gains
        }
        for fold in folds
    ]


def _without(parents: tuple[int, ...], parent: int, child: int) -> Members:
    return (*(other for other in parents if other != parent), child)


def _gains(
    evaluation: Evaluation, fold: int, s: int, reduced: Mapping[tuple[int, Members], np.ndarray]
) -> list[tuple[Edge, float]]:
    """Take the edges out of one structure, one at a time."""
    choice, sample = evaluation.choices[(fold,)], evaluation.sample
    learned = choice.trial.learned[(fold,)]
    structure, view = learned.structures[s], learned.training.view
    rows = sample.rows(fold)
    truth, weights = sample.target[rows], sample.weights[rows]
    if not structure.edges or not len(truth):
        return [(edge, 0.0) for edge in structure.edges]
    counts = choice.trial.counts[(fold,)]
    terms = terms_of(view, [structure], [(choice.smoothings[s],)], counts)
    whole = terms.empty(len(truth))
    terms.add(sample.codes, rows.start, rows.stop, whole)
    prior, calibration = learned.training.log_prior, choice.calibrations[s]
    before = mean_loss(whole[0], prior, calibration, truth, weights)
    gains = []
    for parent, child in structure.edges:
        full = (*structure.parents[child], child)
        less = _without(structure.parents[child], parent, child)
        tables = [
            sign * log_tables(table, view.sizes_of(members), [choice.smoothings[s]])
            for members, table, sign in ((full, counts[full], -1.0), (less, reduced[(fold, less)], 1.0))
        ]
        changed = whole.copy()
        change = family_terms(view, (full, less), tables, ((0,), (0,)), (0,))
        change.add(sample.codes, rows.start, rows.stop, changed)
        gains.append(((parent, child), mean_loss(changed[0], prior, calibration, truth, weights) - before))
    return gains
