"""The edge ledger: the evidence on every edge that a structure draws."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.evaluation import Evaluation
from bnx.gains import Gains
from bnx.gating import Question
from bnx.learners import Learner
from bnx.learning import ask_tests
from bnx.paired import edge_verdict
from bnx.recipe import Recipe
from bnx.resampling import Stability

__all__ = ["EdgeEvidence", "edge_ledger"]


@dataclass(frozen=True)
class EdgeEvidence:
    """What speaks for one edge of the structure learnt from all rows.

    ``bits``: shared given the class; ``gain``: held-out bits per row, mean over folds, with its standard error;
    ``chosen_in``: how many folds' own structures join the two, in either direction; ``stability``: share of random
    halves that do, None if none were drawn; ``gate_p``: p of the test that let it in given the class and
    ``gate_given``, None if the structure does not test.
    """

    parent: int
    child: int
    bits: float
    gain: float
    gain_se: float
    chosen_in: int
    stability: float | None
    gate_p: float | None
    gate_given: tuple[int, ...]
    verdict: str


def edge_ledger(
    evaluation: Evaluation,
    gains: Sequence[Gains],
    stable: Stability,
    learners: Sequence[Learner],
    recipe: Recipe,
    folds: int,
) -> list[tuple[EdgeEvidence, ...]]:
    """Gather the evidence on every edge of every final structure; gains: one mapping per fold of every repeat."""
    learned = evaluation.learned(())
    ledger = []
    for s, structure in enumerate(learned.structures):
        tested = learners[s].name.endswith("-tested")
        questions = [
            Question(child, parent, structure.parents[child][:place] if learners[s].depths > 1 else ())
            for child in range(len(structure.parents))
            for place, parent in enumerate(structure.parents[child])
        ]
        answers = ask_tests(
            evaluation.engine, [learned.training], [(0, question) for question in questions if tested], recipe.test
        )
        rows = []
        for k, question in enumerate(questions):
            by_fold = np.array([_gain(fold, s, question.candidate, question.child) for fold in gains])
            chosen = int(np.isfinite(by_fold).sum())
            by_fold = np.where(np.isnan(by_fold), 0.0, by_fold)
            spread = float(by_fold.std(ddof=1)) * np.sqrt(1 / len(by_fold) + 1 / (folds - 1))
            ends = frozenset((question.candidate, question.child))
            rows.append(
                EdgeEvidence(
                    parent=question.candidate,
                    child=question.child,
                    bits=float(learned.dependence.strength[question.candidate, question.child]),
                    gain=float(by_fold.mean()),
                    gain_se=float(spread),
                    chosen_in=chosen,
                    stability=stable.get((s, ends), 0.0) if recipe.resamples else None,
                    gate_p=answers[k].p if tested else None,
                    gate_given=question.given if tested else (),
                    verdict=edge_verdict(by_fold, chosen, folds),
                )
            )
        ledger.append(tuple(rows))
    return ledger


def _gain(gains: Gains, s: int, parent: int, child: int) -> float:
    """Look up an edge of one fold, in whichever direction the fold drew it; NaN if it did not."""
    return gains.get((s, (parent, child)), gains.get((s, (child, parent)), float("nan")))
