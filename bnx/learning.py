"""Learn every structure in every training set."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.dependence import Dependence, Pairs, measure
from bnx.engines import LocalEngine
from bnx.errors import DataError
from bnx.families import Request, for_each_family
from bnx.gating import Answer, Bounds, Gate, Question, learn_together
from bnx.independence import Statistics
from bnx.kernels.contingency import one_table
from bnx.learners import Learner
from bnx.recipe import Recipe
from bnx.refining import Rigour, gated, visit_families
from bnx.structure import Structure
from bnx.text import nearest
from bnx.trainings import Training

__all__ = ["Learned", "ask_tests", "learn", "make_bounds", "rigour_of", "test_statistics"]


@dataclass(frozen=True)
class Learned:
    """What was learnt in one training set: ``structures`` in the order of the learners."""

    training: Training
    dependence: Dependence
    pairs: Pairs
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
    learners: Sequence[Learner],
    bounds: Bounds,
    recipe: Recipe,
    marginal_of_first: bool = False,
) -> list[Learned]:
    """Measure all pairs and learn every structure in each training set.

    marginal_of_first: also measure the pairs without the class in the first training set.
    """
    engine.progress("measuring pairs", 0, 0)
    measured = measure(engine, trainings, marginal_of_first)
    attributes = len(bounds.names)
    rigour = rigour_of(learners, attributes, recipe)
    learnings, known = [], []
    for number, (dependence, pairs) in enumerate(measured):
        statistics = Statistics.of(pairs.statistics)
        tested = gated(visit_families(engine, trainings, pairs.requests(number)), statistics, rigour)
        gate = Gate(recipe.alpha, pairs.matrix(tested.p, attributes))
        p = np.where(np.isnan(gate.p), 1.0, gate.p)
        known.append((p.tolist(), pairs.matrix(statistics.bits_corrected, attributes).tolist()))
        learnings += [member.learn(dependence, gate, bounds) for member in learners]

    def ask(questions: Sequence[tuple[int, Question]]) -> list[Answer]:
        numbered = [(number // len(learners), question) for number, question in questions]
        tested = iter(ask_tests(engine, trainings, [one for one in numbered if one[1].given], rigour))
        return [next(tested) if question.given else _answer(*known[number], question) for number, question in numbered]

    engine.progress("choosing edges", 0, 0)
    structures = learn_together(learnings, ask)
    return [
        Learned(training, dependence, pairs, tuple(structures[k * len(learners) : (k + 1) * len(learners)]))
        for k, (training, (dependence, pairs)) in enumerate(zip(trainings, measured, strict=True))
    ]


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


def _answer(p: list[list[float]], bits: list[list[float]], question: Question) -> Answer:
    """Answer a question that only takes the class as given, from what was measured of all pairs."""
    return Answer(p[question.child][question.candidate], bits[question.child][question.candidate])


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
    rows = test_statistics(engine, trainings, requests)
    different = {request: place for place, request in enumerate(rows)}
    statistics = Statistics.of(np.array(list(rows.values())))
    p = gated(visit_families(engine, trainings, list(rows)), statistics, rigour).p
    p = np.where(np.isnan(p), 1.0, p)
    bits = statistics.bits_corrected
    return [Answer(float(p[different[request]]), float(bits[different[request]])) for request in requests]


def test_statistics(
    engine: LocalEngine, trainings: Sequence[Training], requests: Sequence[Request]
) -> dict[Request, np.ndarray]:
    """Compute the statistics (COLUMNS,) of the last two members given the class and the members before them."""

    def use(counts: np.ndarray, sizes: tuple[int, ...]) -> np.ndarray:
        return one_table(counts.reshape(-1, sizes[-2] * sizes[-1]), sizes[-2], sizes[-1])

    return for_each_family(engine, trainings, requests, use, "testing parents")
