"""Structures over very many binary attributes, learnt without a matrix of pairs."""

from collections.abc import Sequence

import numpy as np

from bnx.dependence import relevance_of
from bnx.engines import LocalEngine
from bnx.gating import Bounds
from bnx.kernels.forests import directed
from bnx.learners import Learner
from bnx.recipe import Recipe
from bnx.refining import Rigour
from bnx.structure import Structure
from bnx.trainings import Training
from bnx.wide import grow_forests
from bnx.wide_forests import Asked, Edges, Grown

__all__ = ["MOST_IN_MATRIX", "TESTS", "TREES", "learn_wide", "takes_wide_road"]

MOST_IN_MATRIX = 2_000_000  # pairs; more are gone through one by one where that is possible: 2,001 attributes

TREES = {"naive", "tan", "tan-tested"}
TESTS = {"auto"}


def takes_wide_road(
    engine: LocalEngine, trainings: Sequence[Training], learners: Sequence[Learner], bounds: Bounds, recipe: Recipe
) -> bool:
    """Tell whether the trees of so many pairs can be grown without a matrix: binary attributes, no required edges."""
    attributes = len(engine.margins)
    return (
        attributes * (attributes - 1) // 2 > MOST_IN_MATRIX
        and bool((engine.sizes == 2).all())
        and not trainings[0].view.veiled
        and all(bool(training.view.plain.all()) for training in trainings)
        and {member.name for member in learners} <= TREES
        and recipe.test in TESTS
        and not bounds.required
    )


def learn_wide(
    engine: LocalEngine,
    trainings: Sequence[Training],
    learners: Sequence[Learner],
    bounds: Bounds,
    recipe: Recipe,
    rigour: Rigour,
    known: Sequence[Structure] = (),
) -> list[tuple[Structure, ...]]:
    """Learn naive, tan and tan-tested in every training set, in the order of the learners; known: see `learning`."""
    nothing = Structure("naive", ((),) * len(bounds.names))
    if all(member.name == "naive" for member in learners):
        return [(nothing,) * len(learners) for _ in trainings]
    forbidden = frozenset((min(pair), max(pair)) for pair in bounds.forbidden)
    tested = any(member.tested for member in learners)
    seeds = np.array([sorted(edge) for one in known for edge in one.edges], np.int64).reshape(-1, 2)
    asked = Asked(recipe.alpha, rigour, tested, forbidden)
    grown = grow_forests(engine, trainings, asked, Edges.of(*seeds.T) if len(seeds) else None)

    def structures(number: int) -> tuple[Structure, ...]:
        order = np.argsort(-relevance_of(engine, trainings[number]), kind="stable")
        return tuple(_structure(member.name, grown[number], order) for member in learners)

    return engine.map(structures, range(len(trainings)))


def _structure(name: str, grown: Grown, order: np.ndarray) -> Structure:
    """Direct the trees of one structure away from their most relevant attributes."""
    edges = {"naive": Edges.none(), "tan": grown.forest, "tan-tested": grown.sure}[name]
    parents = directed(edges.left, edges.right, order)
    return Structure(name, tuple(() if parent < 0 else (parent,) for parent in parents.tolist()))
