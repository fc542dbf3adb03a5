"""The edge ledger: the evidence on every edge that a structure draws."""

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from bnx.evaluation import Evaluation
from bnx.gains import Gains
from bnx.gating import Bounds, Question
from bnx.learners import Learner
from bnx.learning import ask_tests, rigour_of
from bnx.paired import corrected_t, edge_verdict
from bnx.recipe import Recipe
from bnx.resampling import Stability

__all__ = ["EdgeEvidence", "edge_ledger"]


@dataclass(frozen=True)
class EdgeEvidence:
    """What speaks for one edge of the structure learnt from all rows.

    ``bits``: shared given the class; ``gain``: held-out bits per row, mean over folds, with its corrected standard
    error and 95 % interval (Nadeau & Bengio 2003), None where no fold drew it; ``gain_by_fold``: of every fold of every
    repeat, None where its own structure does not join the two, in either direction; ``chosen_in``: how many do;
    ``stability``: share of random halves that do, None if none were drawn; ``gate_p``: p of the test that let it in
    given the class and ``gate_given``, None if the structure does not test or the edge was required;
    ``carried_by_blanks``: the pair is dependent, but less than half its bits is left where neither cell is blank. A
    fold whose loss is infinite with and without the edge counts as no gain.
    """

    parent: int
    child: int
    bits: float
    gain: float
    gain_se: float
    gain_interval: tuple[float, float] | None
    gain_by_fold: tuple[float | None, ...]
    chosen_in: int
    stability: float | None
    gate_p: float | None
    gate_given: tuple[int, ...]
    carried_by_blanks: bool
    verdict: str


def edge_ledger(
    evaluation: Evaluation,
    strength: Mapping[tuple[int, int], float],
    gains: Sequence[Gains],
    stable: Stability,
    learners: Sequence[Learner],
    bounds: Bounds,
    recipe: Recipe,
    folds: int,
    by_blanks: Collection[frozenset[int]],
) -> list[tuple[EdgeEvidence, ...]]:
    """Gather the evidence on every edge of every final structure.

    strength: (parent, child) -> bits shared given the class; gains: one mapping per fold of every repeat; by_blanks:
    the pairs whose dependence is carried by blank cells.
    """
    learned = evaluation.learned(())
    ledger = []
    for s, structure in enumerate(learned.structures):
        questions = [
            Question(child, parent, structure.parents[child][:place])
            for child in range(len(structure.parents))
            for place, parent in enumerate(structure.parents[child])
        ]
        gate = [q for q in questions if learners[s].tested and (q.candidate, q.child) not in bounds.required]
        answers = ask_tests(
            evaluation.engine,
            [learned.training],
            [(0, question) for question in gate],
            rigour_of(learners, len(bounds.names), recipe),
        )
        gate_p = {question: answer.p for question, answer in zip(gate, answers, strict=True)}
        rows = []
        for question in questions:
            found = [_gain(fold, s, question.candidate, question.child) for fold in gains]
            chosen = sum(gain is not None for gain in found)
            by_fold = np.array([gain if gain is not None and math.isfinite(gain) else 0.0 for gain in found])
            spread = float(by_fold.std(ddof=1)) * np.sqrt(1 / len(by_fold) + 1 / (folds - 1))
            ends = frozenset((question.candidate, question.child))
            gain = corrected_t(by_fold, folds)
            rows.append(
                EdgeEvidence(
                    parent=question.candidate,
                    child=question.child,
                    bits=strength[question.candidate, question.child],
                    gain=gain.mean,
                    gain_se=float(spread),
                    gain_interval=(gain.low, gain.high) if chosen else None,
                    gain_by_fold=tuple(found),
                    chosen_in=chosen,
                    stability=stable.get((s, ends), 0.0) if recipe.resamples else None,
                    gate_p=gate_p.get(question),
                    gate_given=question.given if question in gate_p else (),
                    carried_by_blanks=ends in by_blanks,
                    verdict=edge_verdict(by_fold, chosen, folds),
                )
            )
        ledger.append(tuple(rows))
    return ledger


def _gain(gains: Gains, s: int, parent: int, child: int) -> float | None:
    """Look up an edge of one fold, in whichever direction the fold drew it; None if it did not."""
    return gains.get((s, (parent, child)), gains.get((s, (child, parent))))
