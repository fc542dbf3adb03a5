"""Learn every structure in every training set."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import groupby
from operator import itemgetter

import numpy as np

from bnx.dependence import Dependence, measure, relevance_of, sets_at_a_time
from bnx.engines import LocalEngine
from bnx.errors import DataError
from bnx.families import family_statistics
from bnx.gating import Answer, Bounds, Gate, Question, learn_together
from bnx.heldout import MOST_ROWS, RowJudge, inner_rows
from bnx.independence import Statistics
from bnx.learners import Heldout, KdbTrimmed, Learner, Single
from bnx.leaving_out import LeftOut, leave_out
from bnx.recipe import Recipe
from bnx.refining import Rigour, gated, in_doubt, visit_families
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
    engine: LocalEngine,
    trainings: Sequence[Training],
    learners: Sequence[Single],
    bounds: Bounds,
    recipe: Recipe,
    known: Sequence[Structure] = (),
) -> list[Learned]:
    """Learn every structure in each training set.

    Pairs are measured if some structure looks at them, and tested if some structure tests; as many training sets at a
    time as a fixed amount of memory takes.

    known: structures of similar rows, where the search in very wide tables begins; they change no answer.
    """
    if takes_wide_road(engine, trainings, learners, bounds, recipe):
        rigour = rigour_of(learners, len(bounds.names), recipe)
        found = learn_wide(engine, trainings, learners, bounds, recipe, rigour, known)
        return [Learned(training, structures) for training, structures in zip(trainings, found, strict=True)]
    step = sets_at_a_time(len(bounds.names)) if any(member.looks_at_pairs for member in learners) else len(trainings)
    return [
        learned
        for start in range(0, len(trainings), step)
        for learned in _learn(engine, trainings[start : start + step], learners, bounds, recipe)
    ]


def _learn(
    engine: LocalEngine, trainings: Sequence[Training], learners: Sequence[Single], bounds: Bounds, recipe: Recipe
) -> list[Learned]:
    """Learn in training sets that are measured together."""
    rigour = rigour_of(learners, len(bounds.names), recipe)
    seen = _look(engine, trainings, learners, recipe, rigour)
    from_pairs = [member for member in learners if not isinstance(member, Heldout | KdbTrimmed)]
    learnings = [member.learn(one.dependence, one.gate, bounds) for one in seen for member in from_pairs]

    def ask(questions: Sequence[tuple[int, Question]]) -> list[Answer]:
        further = [(number // len(from_pairs), question) for number, question in questions if question.given]
        tested = iter(ask_tests(engine, trainings, further, rigour))
        answers: list[Answer] = []
        exact = _exact(engine, trainings, seen, [(n // len(from_pairs), one) for n, one in questions], rigour)
        for number, asked in groupby(questions, key=itemgetter(0)):
            own = [question for _, question in asked]
            one = number // len(from_pairs)
            known = iter(seen[one].answers([question for question in own if not question.given], exact[one]))
            answers += [next(tested if question.given else known) for question in own]
        return answers

    engine.progress("choosing edges", 0, 0)
    structures = iter(learn_together(learnings, ask))
    climbed = iter(_climb(engine, trainings, learners, seen, bounds))
    trimmed = iter(_trim(engine, trainings, learners, seen, bounds))

    def found(member: Single) -> Structure:
        return next(
            climbed if isinstance(member, Heldout) else trimmed if isinstance(member, KdbTrimmed) else structures
        )

    return [Learned(training, tuple(found(member) for member in learners)) for training in trainings]


def _trim(
    engine: LocalEngine,
    trainings: Sequence[Training],
    learners: Sequence[Single],
    seen: Sequence["_Seen"],
    bounds: Bounds,
) -> list[Structure]:
    """Learn the structures whose parents and attributes are judged by leaving rows out."""
    members = [member for member in learners if isinstance(member, KdbTrimmed)]
    if not members:
        return []
    member = members[0]
    widest = [member.widest(one.dependence, bounds) for one in seen]

    def trim(number: int, judge: LeftOut) -> Structure:
        return member.trim(judge, *widest[number], bounds)

    return leave_out(engine, trainings, [structure for structure, _ in widest], trim)


def _climb(
    engine: LocalEngine,
    trainings: Sequence[Training],
    learners: Sequence[Single],
    seen: Sequence["_Seen"],
    bounds: Bounds,
) -> list[Structure]:
    """Learn the structures whose parents are judged on rows, training set by training set."""
    work = [(k, member) for k in range(len(trainings)) for member in learners if isinstance(member, Heldout)]
    start = [bounds.parents(child) for child in range(len(bounds.names))]

    def climb(item: tuple[int, Heldout]) -> Structure:
        number, member = item
        judge = RowJudge(inner_rows(engine, trainings[number], MOST_ROWS), start)
        return member.climb(judge, seen[number].dependence.strength, bounds)

    return engine.map(climb, work, "judging parents") if work else []


@dataclass(frozen=True)
class _Seen:
    """What learners see of one training set; ``bits`` (n, n): as strength, less what chance alone gives.

    ``statistics`` (P, COLUMNS): of all pairs, if some p is doubtful.
    """

    dependence: Dependence
    gate: Gate
    bits: np.ndarray
    statistics: np.ndarray

    def doubts(self, i: int, j: int) -> bool:
        """Tell whether the p of a pair is doubtful."""
        return self.gate.doubtful is not None and bool(self.gate.doubtful[i, j])

    def statistics_of(self, i: int, j: int) -> np.ndarray:
        """Look up the statistics (COLUMNS,) of a pair, i < j."""
        row: np.ndarray = self.statistics[i * len(self.bits) - i * (i + 1) // 2 + j - i - 1]
        return row

    def answers(self, questions: Sequence[Question], exact: Mapping[tuple[int, int], float]) -> list[Answer]:
        """Answer questions that only take the class as given, from what was measured of all pairs.

        exact: p of (lower, higher attribute) to be taken instead.
        """
        if not questions:
            return []
        child, candidate = np.array([question[:2] for question in questions]).T
        p = self.gate.p[child, candidate]
        if exact:
            ends = zip(np.minimum(child, candidate).tolist(), np.maximum(child, candidate).tolist(), strict=True)
            p = np.array([exact.get(pair, one) for pair, one in zip(ends, p.tolist(), strict=True)])
        p = np.where(np.isnan(p), 1.0, p).tolist()
        return [Answer(*answer) for answer in zip(p, self.bits[child, candidate].tolist(), strict=True)]


def _exact(
    engine: LocalEngine,
    trainings: Sequence[Training],
    seen: Sequence[_Seen],
    questions: Sequence[tuple[int, Question]],
    rigour: Rigour,
) -> list[dict[tuple[int, int], float]]:
    """Make doubtful p-values exact that are asked for without anything given: by attributes, for every training set."""
    asked = {(number, (min(q[:2]), max(q[:2]))): None for number, q in questions if not q.given}
    requests = [(number, ends) for number, ends in asked if seen[number].doubts(*ends)]
    found: list[dict[tuple[int, int], float]] = [{} for _ in seen]
    if requests:
        statistics = Statistics.of(np.array([seen[number].statistics_of(*ends) for number, ends in requests]))
        p = gated(visit_families(engine, trainings, requests, "making tests exact"), statistics, rigour).p
        for (number, ends), one in zip(requests, p.tolist(), strict=True):
            found[number][ends] = one
    return found


def _look(
    engine: LocalEngine, trainings: Sequence[Training], learners: Sequence[Single], recipe: Recipe, rigour: Rigour
) -> list[_Seen]:
    """Measure and test what the learners look at."""
    attributes = len(engine.margins)
    nothing = np.zeros((attributes, attributes))
    untested = Gate(recipe.alpha, np.broadcast_to(np.nan, nothing.shape))
    if not any(member.looks_at_pairs for member in learners):
        return [_Seen(Dependence(relevance_of(engine, one), nothing), untested, nothing, nothing) for one in trainings]
    seen = []
    tested = any(member.tested for member in learners)
    for dependence, pairs in measure(engine, trainings):
        if not tested:
            seen.append(_Seen(dependence, untested, nothing, nothing))
            continue
        statistics = Statistics.of(pairs.statistics)
        found, doubtful = in_doubt(statistics, rigour)
        p, doubts = (pairs.matrix(one, attributes) for one in (found.p, doubtful))
        gate = Gate(recipe.alpha, p, doubts > 0 if doubtful.any() else None)
        seen.append(_Seen(dependence, gate, pairs.matrix(statistics.bits_corrected, attributes), pairs.statistics))
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
