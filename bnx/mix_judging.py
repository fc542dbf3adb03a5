"""Whether the mix of structures is worth offering beside the recommended one."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.evaluation import Evaluation
from bnx.judging import Against, against
from bnx.losses import Scores
from bnx.paired import Difference, corrected_t
from bnx.picking import LIKELY, chances_of
from bnx.rating import StructureScore

__all__ = ["JudgedMix", "judge_mix"]


@dataclass(frozen=True)
class JudgedMix:
    """The mix of structures, judged.

    ``members``: weights from all rows, by number of the structure, largest first, with the ``sharpness`` of what they
    give; ``score``: everything fitted anew in every outer fold; ``against``: the baseline; ``apart``: its log losses
    less those of the structure picked inside each outer fold, bits, and the chance that it is ``better``; ``picks``,
    ``honest``: what is taken inside each outer fold where the mix may be, and how that scores on rows that it never
    saw.
    """

    members: dict[int, float]
    sharpness: float
    score: StructureScore
    against: Against | None
    apart: Difference | None
    better: float
    offered: bool
    picks: tuple[int, ...]
    honest: Scores


def judge_mix(
    evaluations: Sequence[Evaluation],
    results: Sequence[StructureScore],
    picks: Sequence[int],
    mixed: tuple[Sequence[int], Scores],
    baseline: int,
    folds: int,
) -> JudgedMix | None:
    """Judge the mix, None where there is none.

    results: of every structure and, last, of the mix; picks: of structures, by fold; mixed: picks where the mix may be
    taken, and their scores. It is offered if all rows mix several structures, and folds say that its honest score is
    more likely than not better than that of the recommended structure.

    Source: Corani & Benavoli 2015; Nadeau & Bengio 2003.
    """
    found = evaluations[0].choices[()].mix
    if found is None or len(results) == evaluations[0].structures:
        return None
    score, members = results[-1], dict(sorted(found.members.items(), key=lambda one: -one[1]))
    single = np.array([results[pick].by_fold[k].scores.log_loss for k, pick in enumerate(picks)])
    better = chances_of(score.fold_losses, single, folds, 0.0).better
    differences = score.fold_losses - single
    return JudgedMix(
        members,
        found.sharpness,
        score,
        against(results, baseline, folds)[-1],
        corrected_t(differences, folds) if np.isfinite(differences).all() else None,
        better,
        len(members) > 1 and better > LIKELY,
        tuple(mixed[0]),
        mixed[1],
    )
