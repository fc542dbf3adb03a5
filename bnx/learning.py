"""Learn every structure in every training set."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby
from operator import itemgetter

import numpy as np

from bnx.dependence import Dependence, measure, relevance_of, sets_at_a_time
from bnx.engines import LocalEngine
from bnx.errors import DataError
from bnx.families import PairRequests, family_statistics
from bnx.gating import Answer, Bounds, Gate, Question, learn_together
from bnx.heldout import MOST_ROWS, MOST_ROWS_FOR_PAIRS, RowJudge, inner_rows
from bnx.independence import Statistics
from bnx.learners import Heldout, Learner
from bnx.recipe import Recipe
from bnx.refining import Rigour, gated, visit_families
from bnx.structure import Structure
from bnx.text import nearest
from bnx.trainings import Training
from bnx.wide_learning import learn_wide, takes_wide_road

__all__ = ["Learned", "ask_tests", "learn", "make_bounds", "rigour_of"]


@dataclass(frozen=True)
class Learned:
    """What was learnt in one training set: ``structures`` in the order of the learners."""

    training: Training
    structures: tuple[Structure, ...]


def make_bounds(recipe: Recipe, names: Sequence[str]) -> Bounds:
    """Turn the required and forbidden pairs of names into attribute numbers.

    Raises:
        DataError: a name is not an attribute. StructureError: the bounds contradict each other.
    """
    from_names = {name: number for number, name in enumerate(names)}

    def numbers(option: str, pairs: Sequence[str]) -> tuple[tuple[int, int], ...]:
        found = []
        for pair in pairs:
            ends = _ends(pair, names)
            for end in ends:
                if end not in from_names:
                    raise DataError(
                        f"--{option} {pair}: {end!r} is not an attribute in use; {nearest(end, list(names))}"
                    )
            if ends[0] == ends[1]:
                raise DataError(f"--{option} {pair}: the two ends are the same attribute; name two")
            found.append((from_names[ends[0]], from_names[ends[1]]))
        return tuple(dict.fromkeys(found))

    return Bounds(tuple(names), numbers("require", recipe.require), numbers("forbid", recipe.forbid))


def _ends(pair: str, names: Sequence[str]) -> tuple[str, str]:
    """Split PARENT:CHILD at the colon that leaves two known names, else at the first."""
    places = [place for place, character in enumerate(pair) if character == ":"]
    splits = [(pair[:place], pair[place + 1 :]) for place in places]
    return next((split for split in splits if set(split) <= set(names)), splits[0])


def learn(
    engine: LocalEngine, trainings: Sequence[Training], learners: Sequence[Learner], bounds: Bounds, recipe: Recipe
) -> list[Learned]:
    """Learn every structure in each training set.

    Pairs are measured if some structure looks at them, and tested if some structure tests; as many training sets at a
    time as a fixed amount of memory takes.
    """
    if takes_wide_road(engine, trainings, learners, bounds, recipe):
        rigour = rigour_of(learners, len(bounds.names), recipe)
        found = learn_wide(engine, trainings, learners, bounds, recipe, rigour)
        return [Learned(training, structures) for training, structures in zip(trainings, found, strict=True)]
    step = sets_at_a_time(len(bounds.names)) if any(member.looks_at_pairs for member in learners) else len(trainings)
    return [
        learned
        for start in range(0, len(trainings), step)
        for learned in _learn(engine, trainings[start : start + step], learners, bounds, recipe)
    ]


def _learn(
    engine: LocalEngine, trainings: Sequence[Training], learners: Sequence[Learner], bounds: Bounds, recipe: Recipe
) -> list[Learned]:
    """Learn in training sets that are measured together."""
    rigour = rigour_of(learners, len(bounds.names), recipe)
    seen = _look(engine, trainings, learners, recipe, rigour)
    from_pairs = [member for member in learners if not isinstance(member, Heldout)]
    learnings = [member.learn(one.dependence, one.gate, bounds) for one in seen for member in from_pairs]

    def ask(questions: Sequence[tuple[int, Question]]) -> list[Answer]:
        further = [(number // len(from_pairs), question) for number, question in questions if question.given]
        tested = iter(ask_tests(engine, trainings, further, rigour))
        answers: list[Answer] = []
        for number, asked in groupby(questions, key=itemgetter(0)):
            own = [question for _, question in asked]
            known = iter(seen[number // len(from_pairs)].answers([one for one in own if not one.given]))
            answers += [next(tested if question.given else known) for question in own]
        return answers

    engine.progress("choosing edges", 0, 0)
    structures = iter(learn_together(learnings, ask))
    climbed = iter(_climb(engine, trainings, learners, seen, bounds))
    return [
        Learned(training, tuple(next(climbed if isinstance(member, Heldout) else structures) for member in learners))
        for training in trainings
    ]


def _climb(
    engine: LocalEngine,
    trainings: Sequence[Training],
    learners: Sequence[Learner],
    seen: Sequence["_Seen"],
    bounds: Bounds,
) -> list[Structure]:
    """Learn the structures whose parents are judged on rows, training set by training set."""
    work = [(k, member) for k in range(len(trainings)) for member in learners if isinstance(member, Heldout)]

    start = [bounds.parents(child) for child in range(len(bounds.names))]

    def climb(item: tuple[int, Heldout]) -> Structure:
        number, member = item
        training = trainings[number]
        judge = rough = RowJudge(inner_rows(engine, training, MOST_ROWS), start)
        if training.class_counts.sum() > MOST_ROWS_FOR_PAIRS:
            rough = RowJudge(inner_rows(engine, training, MOST_ROWS_FOR_PAIRS), start)
        return member.climb(judge, rough, seen[number].dependence.strength, bounds)

    return engine.map(climb, work, "judging parents") if work else []


@dataclass(frozen=True)
class _Seen:
    """What learners see of one training set; ``bits`` (n, n): as strength, less what chance alone gives."""

    dependence: Dependence
    gate: Gate
    bits: np.ndarray

    def answers(self, questions: Sequence[Question]) -> list[Answer]:
        """Answer questions that only take the class as given, from what was measured of all pairs."""
        if not questions:
            return []
        child, candidate = np.array([question[:2] for question in questions]).T
        p = self.gate.p[child, candidate]
        p = np.where(np.isnan(p), 1.0, p).tolist()
        return [Answer(*answer) for answer in zip(p, self.bits[child, candidate].tolist(), strict=True)]


def _look(
    engine: LocalEngine, trainings: Sequence[Training], learners: Sequence[Learner], recipe: Recipe, rigour: Rigour
) -> list[_Seen]:
    """Measure and test what the learners look at."""
    attributes = len(engine.margins)
    nothing = np.zeros((attributes, attributes))
    untested = Gate(recipe.alpha, np.broadcast_to(np.nan, nothing.shape))
    if not any(member.looks_at_pairs for member in learners):
        return [_Seen(Dependence(relevance_of(engine, one), nothing), untested, nothing) for one in trainings]
    seen = []
    tested = any(member.tested for member in learners)
    for number, (dependence, pairs) in enumerate(measure(engine, trainings)):
        if not tested:
            seen.append(_Seen(dependence, untested, nothing))
            continue
        statistics = Statistics.of(pairs.statistics)
        visit = visit_families(engine, trainings, PairRequests(number, pairs.left, pairs.right))
        p = gated(visit, statistics, rigour).p
        gate = Gate(recipe.alpha, pairs.matrix(p, attributes))
        seen.append(_Seen(dependence, gate, pairs.matrix(statistics.bits_corrected, attributes)))
    return seen


def rigour_of(learners: Sequence[Learner], attributes: int, recipe: Recipe) -> Rigour:
    """Say how gates test: which p-values by moments an exact test could move over a threshold of these structures.

    The strictest threshold is alpha / depths / pairs, the mildest alpha x edges of a tree / pairs = 2 alpha /
    attributes.
    """
    depths = [member.depths for member in learners if member.tested]
    if not depths or attributes < 2:
        return Rigour(recipe.test, 1.0, 0.0, recipe.seed)
    strictest = recipe.alpha / max(depths) / (attributes * (attributes - 1) / 2)
    return Rigour(recipe.test, strictest / 1000, min(1.0, 5 * recipe.alpha * 2 / attributes), recipe.seed)


def ask_tests(
    engine: LocalEngine,
    trainings: Sequence[Training],
    questions: Sequence[tuple[int, Question]],
    rigour: Rigour,
) -> list[Answer]:
    """Answer (number of the training set, question) pairs by conditional-independence tests."""
    if not questions:
        return []
    requests = [(number, (*question.given, question.candidate, question.child)) for number, question in questions]
    rows = family_statistics(engine, trainings, requests, "testing parents")
    different = {request: place for place, request in enumerate(rows)}
    statistics = Statistics.of(np.array(list(rows.values())))
    p = gated(visit_families(engine, trainings, list(rows)), statistics, rigour).p
    p = np.where(np.isnan(p), 1.0, p)
    bits = statistics.bits_corrected
    return [Answer(float(p[different[request]]), float(bits[different[request]])) for request in requests]
