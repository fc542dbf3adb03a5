"""The main job: one table in; structures learnt, tested, cross-validated on the same folds, and one recommended."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from hashlib import sha256
from pathlib import PurePath
from typing import Any

import numpy as np

from bnx.before_after import Reliability, reliability_of
from bnx.choosing import Choice
from bnx.classifier import Classifier
from bnx.coding import Coded
from bnx.dealing import deal
from bnx.dependence import Pairs, measure, relevance_of
from bnx.domains import Domain
from bnx.engines import LocalEngine, start_local
from bnx.engines.local import Progress
from bnx.errors import SettingError
from bnx.evaluation import Evaluation, evaluate
from bnx.families import PairRequests
from bnx.folds import sub_blocks
from bnx.gains import edge_gains
from bnx.gating import Bounds
from bnx.held_out import checked_holdout, score_held_out
from bnx.independence import Statistics
from bnx.judging import Against, Recommendation, against, inner_picks, mixed_picks, recommend
from bnx.learners import Learner, learner
from bnx.learning import Learned, make_bounds
from bnx.learning_curve import LearningCurve, measure_curve
from bnx.ledger import EdgeEvidence, edge_ledger
from bnx.level_counts import LevelCounts, count_levels
from bnx.losses import Scores
from bnx.matrix_memory import matrix_notes
from bnx.metric_differences import differences
from bnx.mix_judging import JudgedMix, judge_mix
from bnx.pair_judging import JudgedPairs, judge_pairs
from bnx.paired import Difference
from bnx.rating import StructureScore, score
from bnx.reading import Source
from bnx.recipe import Recipe
from bnx.refining import visit_families
from bnx.resampling import stability
from bnx.run_notes import run_notes
from bnx.storing import MEMORY, Store
from bnx.structure import Structure
from bnx.tables import LeftOut, Lines
from bnx.trainings import Training
from bnx.weight_of_evidence import Records, records_of_disagreement
from bnx.wide_judging import MOST_JUDGED, judge_wide
from bnx.wide_learning import takes_wide_road
from bnx.yardstick import Yardstick, measure_yardsticks, yardstick_notes
from bnx.yardstick_models import check_installed

__all__ = ["Comparison", "compare"]


@dataclass(frozen=True)
class Comparison:
    """Everything that one run found out; per structure in the order asked for.

    ``relevance`` (n,): bits each attribute shares with the class; ``levels``: its records by level and class, None
    where they are too many to keep. ``pairs`` and ``judged``: all pairs, on all rows.
    ``mix``: of the structures, None where nothing is mixed; ``held_out``: scores on a table that took no part, of the
    structures and last of the mix, empty without one; ``yardsticks``: models that are no structures;
    ``curve``: log loss by training rows, None if not asked for. ``weights``: of rows, in plain values.
    """

    recipe: Recipe
    source: str
    sha256: str
    rows: int
    folds: int
    classifiers: tuple[Classifier, ...]
    relevance: np.ndarray
    levels: tuple[LevelCounts | None, ...]
    pairs: Pairs
    judged: JudgedPairs
    results: tuple[StructureScore, ...]
    against: tuple[Against | None, ...]
    edges: tuple[tuple[EdgeEvidence, ...], ...]
    recommendation: Recommendation
    mix: JudgedMix | None
    held_out: tuple[Scores, ...]
    yardsticks: tuple[Yardstick, ...]
    curve: LearningCurve | None
    left_out: tuple[LeftOut, ...]
    warnings: tuple[str, ...]
    evaluations: tuple[Evaluation, ...]
    lines: Lines
    weights: dict[str, Any] | None

    @property
    def structures(self) -> tuple[Structure, ...]:
        """The structures learnt from all rows."""
        return self.evaluations[0].learned(()).structures

    @property
    def domains(self) -> tuple[Domain, ...]:
        """The attributes as all rows see them."""
        return self.evaluations[0].learned(()).training.view.domains

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the attributes."""
        return tuple(domain.name for domain in self.domains)

    def by_metric(self, score: StructureScore) -> dict[str, Difference | None] | None:
        """Compare scores with the baseline's by every metric; None for the baseline itself."""
        baseline = self.results[self.recipe.structures.index(self.recipe.baseline)]
        return None if score is baseline else differences(score, baseline, self.folds)

    @cached_property
    def reliability(self) -> dict[str, Reliability]:
        """Reliability of naive and the recommended structure, by name, and of the mix if it is offered."""
        names = self.recipe.structures
        taken = [s for s, name in enumerate(names) if name == "naive" or s == self.recommendation.recommended]
        pooled = {names[s]: (s, self.results[s].pooled) for s in taken}
        if self.mix and self.mix.offered:
            pooled["mix"] = (len(names), self.mix.score.pooled)
        tempered = self.recipe.temperature
        return {name: reliability_of(self.evaluations, s, own, tempered) for name, (s, own) in pooled.items()}

    @cached_property
    def records(self) -> Records | None:
        """Records on which naive and the recommended structure disagree most; None where none are asked for."""
        if not self.recipe.records:
            return None
        losses = [result.pooled.log_loss for result in self.results]
        recommended = self.recommendation.recommended
        first, names = self.evaluations[0], self.recipe.structures
        return records_of_disagreement(first, names, losses, recommended, self.recipe.records)


def compare(
    source: Source,
    recipe: Recipe,
    jobs: int,
    progress: Progress,
    holdout: Source | None = None,
    store: Store = MEMORY,
    warn: Callable[[str], None] = lambda _: None,
) -> Comparison:
    """Run the main job on one table.

    progress: called with (stage, done, of how many) while it runs; store: keeps what has a value per row; warn: called
    with a sentence that is worth knowing before the long part begins, and is among the warnings too.

    Raises:
        DataError, SettingError, StructureError: the table or a setting cannot be used.
    """
    check_installed(recipe.yardstick)
    progress("reading", 0, 0)
    coded = recipe.code(source, jobs, store)
    recipe, notes_on_structures = recipe.for_table(len(coded.table.target), len(coded.table.schema.attributes))
    holdout = checked_holdout(holdout, coded, recipe, store) if holdout else None
    bounds = make_bounds(recipe, coded.table.schema.names)
    learners = [learner(name) for name in recipe.structures]
    early = _forewarned(matrix_notes(coded.table.schema, learners, bounds, recipe), warn)
    evaluations, folds = _evaluations(coded, recipe, learners, bounds, jobs, progress, store)
    gains = [fold for one in evaluations for fold in edge_gains(one)]
    first, learned = evaluations[0], evaluations[0].learned(())
    progress("stability", 0, 0)
    stable = stability(_under("stability", first.engine), learned, folds, learners, bounds, recipe)
    results, recommendation, mix, yardsticks = _scores(evaluations, recipe, folds)
    pairs, judged = _tested(first.engine, learned, learners, bounds, recipe)
    classifiers = tuple(_classifier(first, s, coded) for s in range(len(learners)))
    progress("scoring", 0, 0)
    held_out, not_scored = score_held_out(classifiers, mix, holdout, recipe, coded) if holdout else ((), [])
    told, by_blanks = _told(first), judged.by_blanks(pairs.left, pairs.right)
    edges = edge_ledger(told, _strengths(learned, pairs), gains, stable, learners, bounds, recipe, folds, by_blanks)
    notes = run_notes(evaluations, coded, recipe, learners, results) + yardstick_notes(yardsticks)
    progress("reading", 0, 0)
    return Comparison(
        recipe=recipe,
        source=PurePath(source.name).name,
        sha256=source.sha256(),
        rows=len(coded.table.target),
        folds=folds,
        classifiers=classifiers,
        relevance=relevance_of(first.engine, learned.training),
        levels=count_levels(first.engine, learned.training, coded.table.schema, coded.extents),
        pairs=pairs,
        judged=judged,
        results=tuple(results),
        against=tuple(against(results, recipe.structures.index(recipe.baseline), folds)),
        edges=tuple(edges),
        recommendation=recommendation,
        mix=mix,
        held_out=held_out,
        yardsticks=yardsticks,
        curve=measure_curve(evaluations, coded, results, recommendation, bounds, recipe, folds),
        left_out=coded.left_out,
        warnings=(*early, *notes, *notes_on_structures, *judged.notes, *not_scored, *coded.warnings),
        evaluations=tuple(evaluations),
        lines=coded.table.lines,
        weights=None if coded.weighing is None else coded.weighing.to_dict(),
    )


def _forewarned(notes: list[str], warn: Callable[[str], None]) -> list[str]:
    """Tell notes at once, and give them back."""
    for note in notes:
        warn(note)
    return notes


def _tested(
    engine: LocalEngine, learned: Learned, learners: Sequence[Learner], bounds: Bounds, recipe: Recipe
) -> tuple[Pairs, JudgedPairs]:
    """Test all pairs on all rows, and judge them; in very wide tables the strongest, and those that are drawn."""
    engine.progress("judging pairs", 0, 0)
    training = learned.training
    if takes_wide_road(engine, [training], learners, bounds, recipe):
        drawn = [edge for structure in learned.structures for edge in structure.edges]
        return judge_wide(engine, training, drawn, MOST_JUDGED, recipe)
    pairs = measure(engine, [training], marginal_of_first=True)[0][1]
    return pairs, _judged(engine, training, pairs, recipe)


def _judged(engine: LocalEngine, training: Training, pairs: Pairs, recipe: Recipe) -> JudgedPairs:
    """Test and judge all pairs on all rows."""
    domains = training.view.domains
    engine.progress("judging pairs", 0, 0)
    visit = visit_families(engine, [training], PairRequests(0, pairs.left, pairs.right), "judging pairs")
    ends = [(domains[i], domains[j]) for i, j in zip(pairs.left, pairs.right, strict=True)]
    return judge_pairs(visit, Statistics.of(pairs.statistics), Statistics.of(pairs.marginal), ends, recipe)


def _under(stage: str, engine: LocalEngine) -> LocalEngine:
    """Let an engine tell of everything it does as one stage."""
    return replace(engine, progress=lambda *_: engine.progress(stage, 0, 0))


def _told(evaluation: Evaluation) -> Evaluation:
    """Let the tests of the ledger be told as one stage, which begins here."""
    evaluation.engine.progress("edge ledger", 0, 0)
    return replace(evaluation, engine=_under("edge ledger", evaluation.engine))


def _strengths(learned: Learned, pairs: Pairs) -> Mapping[tuple[int, int], float]:
    """Look up the bits of every pair that a structure joins."""
    return pairs.strengths(edge for structure in learned.structures for edge in structure.edges)


def _evaluations(
    coded: Coded,
    recipe: Recipe,
    learners: Sequence[Learner],
    bounds: Bounds,
    jobs: int,
    progress: Progress,
    store: Store,
) -> tuple[list[Evaluation], int]:
    """Evaluate every repeat; give the evaluations and the number of folds. A single repeat sorts the table in place."""
    evaluations: list[Evaluation] = []
    dealt: list[bytes] = []
    folds = recipe.folds
    for repeat in range(recipe.repeats):
        progress("dealing folds", 0, 0)
        blocks, folds = deal(coded, recipe, repeat, jobs, store)
        digest = sha256(blocks.data).digest() if recipe.repeats > 1 else b""
        if digest in dealt:
            raise SettingError(
                f"--repeats {recipe.repeats}: repeat {repeat + 1} deals the folds just as an earlier one did and would "
                f"be no new evidence; give --repeats {len(dealt)} or fewer"
            )
        dealt.append(digest)
        number = folds * sub_blocks(folds)
        progress("sorting rows", 0, 0)
        engine = start_local(coded.table, blocks, number, jobs, progress, store, in_place=recipe.repeats == 1)
        evaluations.append(evaluate(engine, coded.table.schema, folds, learners, bounds, recipe))
    return evaluations, folds


def _classifier(evaluation: Evaluation, s: int, coded: Coded) -> Classifier:
    """Build the classifier of one structure from all rows."""
    choice: Choice = evaluation.choices[()]
    learned = choice.trial.learned[()]
    structure, domains = learned.structures[s], learned.training.view.domains
    counted = choice.trial.counts[()]
    kept, own = structure.kept()
    return Classifier(
        tuple(domains[child] for child in kept),
        coded.table.schema.target,
        own,
        tuple(counted.table(s, child) for child in kept),
        learned.training.class_mass,
        choice.smoothings[s],
        choice.calibrations[s],
        dropped=tuple(domains[child].name for child in structure.dropped),
    )


def _scores(
    evaluations: Sequence[Evaluation], recipe: Recipe, folds: int
) -> tuple[list[StructureScore], Recommendation, JudgedMix | None, tuple[Yardstick, ...]]:
    """Score every structure, recommend one by what is picked inside every outer fold, and score what stands beside."""
    picks, with_mix = inner_picks(evaluations), mixed_picks(evaluations)
    results, (honest, mixed) = score(evaluations, (picks, with_mix))
    mix = judge_mix(evaluations, results, picks, (with_mix, mixed), recipe.structures.index(recipe.baseline), folds)
    results = results[: len(recipe.structures)]
    recommendation = recommend(evaluations, results, picks, honest, recipe.structures, folds)
    return results, recommendation, mix, measure_yardsticks(evaluations, results, picks, recipe, folds)
