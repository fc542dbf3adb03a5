"""Parents chosen by held-out class log loss: the search, what it must not see, and whole runs."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import replace
from itertools import permutations, product

import numpy as np
import pandas as pd
import pytest
from builders import coded, compared, recipe_of, started, whole
from interacting import drawn
from opentables import TABLES, load
from published import monk1

from bnx.comparison import Comparison
from bnx.engines import LocalEngine
from bnx.errors import SettingError, StructureError
from bnx.folds import halves
from bnx.gating import Bounds
from bnx.heldout import MOST_ROWS, RowJudge, inner_rows
from bnx.learners import Heldout, learner
from bnx.learning import learn
from bnx.recipe import DEFAULT_STRUCTURES, Recipe
from bnx.resampling import stability
from bnx.structure import Structure
from bnx.tables import CodedTable
from bnx.trainings import make_trainings, mask_without

Parents = tuple[int, ...]
NATS = np.log(2)


class Scripted:
    """A judge of which is written by hand what edges save together (nats); the error is that of so many records."""

    def __init__(self, attributes: int, saved: dict[frozenset[tuple[int, int]], float], error: float = 0.0) -> None:
        self.parents: list[Parents] = [()] * attributes
        self.saved, self.error, self.before = saved, error, 0.0

    def _saved(self, parents: Sequence[Parents]) -> float:
        edges = {(parent, child) for child, own in enumerate(parents) for parent in own}
        return sum(nats for some, nats in self.saved.items() if some <= edges)

    def savings(self, child: int, choices: Sequence[Parents], least: float) -> np.ndarray:
        now = self._saved(self.parents)
        others = ([own if k != child else choice for k, own in enumerate(self.parents)] for choice in choices)
        return np.array([self._saved(other) - now for other in others])

    def together(self) -> float:
        return self._saved(self.parents)

    def misfits(self, families: Sequence[Parents]) -> np.ndarray:
        return np.ones(len(families))

    def path(self) -> tuple[float, float]:
        return self.together() - self.before, self.error * np.sqrt(sum(map(len, self.parents)))

    def take(self, child: int, parents: Parents) -> None:
        self.parents[child] = parents


def climbed(
    saved: dict[tuple[tuple[int, int], ...], float], attributes: int = 5, error: float = 0.0, **bounds: object
) -> tuple[Parents, ...]:
    judge = Scripted(attributes, {frozenset(edges): nats for edges, nats in saved.items()}, error)
    limits = Bounds(tuple(f"a{i}" for i in range(attributes)), **bounds)  # type: ignore[arg-type]  # of two kinds
    for child in range(attributes):
        judge.take(child, limits.parents(child))
    judge.before = judge.together()
    return Heldout().climb(judge, np.ones((attributes, attributes)), limits).parents


def test_only_moves_that_save_more_than_a_nat_are_made() -> None:
    assert climbed({((0, 1),): 1.5, ((2, 3),): 0.9}) == ((), (0,), (), (), ())


def test_of_all_structures_on_the_way_the_one_that_saves_by_three_errors_most_is_kept() -> None:
    saves = {((0, 1),): 9.0, ((2, 3),): 2.0, ((0, 4),): 1.5}
    assert climbed(saves, error=2.0) == ((), (0,), (), (), ())  # 9 - 3 x 2, and less with more edges
    assert climbed(saves, error=0.5) == ((), (0,), (), (2,), (0,))
    assert climbed(saves, error=3.1) == ((),) * 5
    many = {((0, child),): 3.0 for child in range(1, 5)}
    assert climbed(many, error=1.2) == ((), (0,), (0,), (0,), (0,))  # none alone, all together


def test_two_parents_enter_at_once_where_neither_is_worth_anything_alone() -> None:
    assert climbed({((0, 2), (1, 2)): 5.0})[2] == (0, 1)
    assert climbed({((0, 3), (1, 3), (2, 3)): 5.0})[3] == ()  # three at once are not looked for


def test_a_parent_that_a_better_one_makes_useless_is_swapped_or_dropped() -> None:
    swap = {((0, 1),): 3.0, ((2, 1),): 2.5, ((0, 1), (3, 4)): -2.9, ((3, 4),): 4.0}
    assert climbed(swap)[1] == (2,)
    drop = {((0, 1),): 3.0, ((0, 1), (2, 1)): -2.0, ((2, 1),): 5.1, ((0, 1), (2, 1), (3, 1)): -3.0, ((3, 1),): 2.0}
    assert climbed(drop)[1] == (2, 3)


def test_there_are_at_most_three_parents_and_no_cycles() -> None:
    every = {((a, b),): 2.0 + a + b / 10 for a, b in permutations(range(5), 2)}
    found = climbed(every)
    assert max(map(len, found)) == 3
    Structure("heldout", found)  # it refuses a cycle


def test_required_edges_stay_and_forbidden_ones_stay_out() -> None:
    saved = {((0, 1),): -5.0, ((2, 3),): 9.0, ((3, 2),): 8.0, ((1, 4),): 4.0, ((1, 0),): 6.0}
    assert climbed(saved, required=((0, 1),), forbidden=((3, 2),)) == ((), (0,), (), (), (1,))
    with pytest.raises(StructureError, match="heldout gives an attribute at most 3 parents"):
        climbed({}, required=((0, 4), (1, 4), (2, 4), (3, 4)))


def test_only_the_twelve_strongest_of_many_candidates_are_tried() -> None:
    judge = Scripted(20, {frozenset([(parent, 0)]): 2.0 for parent in (7, 8)})
    strength = np.zeros((20, 20))
    strength[0, [*range(8, 20)]] = strength[[*range(8, 20)], 0] = 1.0
    found = Heldout().climb(judge, strength, Bounds(tuple(f"a{i}" for i in range(20))))
    assert found.parents[0] == (8,)


def table_of(rows: int = 400, seed: int = 3) -> CodedTable:
    codes, target = drawn(rows, 3, seed)
    return coded(codes, target)


def engine_of(table: CodedTable, folds: int = 5, parts: int = 4, jobs: int = 1) -> LocalEngine:
    blocks = folds * parts
    return started(table, np.random.default_rng(9).integers(0, blocks, len(table.target)), blocks, jobs)


def learnt_without(engine: LocalEngine, table: CodedTable, held: Sequence[Parents]) -> list[Structure]:
    masks = {one: mask_without(one, 5, 4) for one in held}
    trainings = make_trainings(engine, table.schema, masks, "mdl", 50)
    bounds = Bounds(table.schema.names)
    return [one.structures[0] for one in learn(engine, trainings, [learner("heldout")], bounds, recipe_of("class"))]


def test_no_single_move_is_left_that_would_save_more_than_a_nat() -> None:
    table = table_of()
    engine = engine_of(table)
    found = learnt_without(engine, table, [()])[0].parents
    assert any(found)
    judge = RowJudge(inner_rows(engine, whole(engine, table), MOST_ROWS), found)
    for child, size in product(range(4), range(4)):
        for parents in permutations([one for one in range(4) if one != child], size):
            if len(set(parents) ^ set(found[child])) == 1:
                other = [own if k != child else parents for k, own in enumerate(found)]
                try:
                    Structure("other", tuple(other))
                except StructureError:
                    continue
                if parents[:-1] == found[child] or len(parents) < len(found[child]):
                    assert judge.savings(child, [parents], 1.0)[0] <= 1


def test_the_classes_of_held_out_rows_change_nothing() -> None:
    table, rng = table_of(), np.random.default_rng(5)
    engine = engine_of(table)
    blocks = np.empty(len(table.target), np.int64)
    blocks[:] = np.random.default_rng(9).integers(0, 20, len(table.target))
    seen = learnt_without(engine, table, [(0,), (0, 1)])
    other = table.target.copy()
    first, second = np.flatnonzero(blocks < 4), np.flatnonzero((blocks >= 4) & (blocks < 8))
    other[first] = rng.permutation(other[first])
    shuffled = coded(*drawn(400, 3, 3)[:1], other)
    assert learnt_without(engine_of(shuffled), shuffled, [(0,)]) == seen[:1]
    other[second] = rng.permutation(other[second])
    shuffled = coded(*drawn(400, 3, 3)[:1], other)
    assert learnt_without(engine_of(shuffled), shuffled, [(0, 1)]) == seen[1:]
    assert learnt_without(engine_of(shuffled), shuffled, [()]) != learnt_without(engine, table, [()])


def test_threads_change_nothing() -> None:
    table = table_of()
    held = [(), *((fold,) for fold in range(5))]
    assert learnt_without(engine_of(table), table, held) == learnt_without(engine_of(table, jobs=2), table, held)


def test_monk_2_is_learnt_though_no_pair_says_anything() -> None:
    """MONK-2 (Thrun et al. 1991): exactly two of six attributes have their first level; naive Bayes scores .64 nats."""
    found = compared(load("monk2"), "class", structures=DEFAULT_STRUCTURES)
    assert found.recommendation.honest.log_loss * NATS < 0.58
    assert found.results[DEFAULT_STRUCTURES.index("tan-tested")].pooled.log_loss * NATS > 0.62


@pytest.mark.tables
def test_three_in_a_row_are_found() -> None:
    table = TABLES["tic_tac_toe"]
    found = compared(load("tic_tac_toe"), table.target, structures=DEFAULT_STRUCTURES)
    assert found.recommendation.honest.log_loss * NATS < 0.12


def small(attributes: int) -> Comparison:
    rng = np.random.default_rng(2)
    frame = pd.DataFrame(rng.integers(0, 2, (60, attributes)).astype(str), columns=[f"a{i}" for i in range(attributes)])
    return compared(
        frame.assign(kind=rng.permutation(["x", "y"] * 30)), "kind", folds=3, structures=(), baseline="naive"
    )


def test_it_is_compared_by_default_unless_the_table_is_large() -> None:
    assert small(4).recipe.structures == DEFAULT_STRUCTURES
    wide = small(61)
    assert wide.recipe.structures == tuple(name for name in DEFAULT_STRUCTURES if name != "heldout")
    assert wide.warnings[0].startswith("heldout is not compared on tables of more than 50,000 rows or 60 attributes")
    named = Recipe("class", structures=("naive", "heldout"))
    assert named.for_table(10**6, 500) == (named, [])
    assert Recipe("class").for_table(50_001, 3)[0].structures == wide.recipe.structures
    with pytest.raises(SettingError, match="--baseline heldout is not among the structures"):
        Recipe("class", baseline="heldout").for_table(50_001, 3)


def test_rows_by_rule_are_those_of_the_publication() -> None:
    """The table that the target is set on: 432 rows, 142 of the class (Thrun et al. 1991)."""
    rows, _ = monk1()
    assert ((rows == 0).sum(axis=1) == 2).sum() == 142


def test_its_stability_is_the_share_of_the_first_25_halves() -> None:
    table = table_of()
    engine = engine_of(table)
    bounds, names = Bounds(table.schema.names), ("heldout", "tan")
    recipe = recipe_of("class", structures=names, resamples=30)
    learners = [learner(name) for name in names]
    training = make_trainings(engine, table.schema, {(): np.ones(20, bool)}, "mdl", 50)[0]
    learned = learn(engine, [training], learners, bounds, recipe)[0]
    found = stability(engine, learned, 5, learners, bounds, recipe)
    masks = halves(5, 4, 30, recipe.seed)
    for s, (name, number) in enumerate(zip(names, (25, 30), strict=True)):
        some = [replace(training, mask=one, class_counts=engine.class_counts[one].sum(axis=0)) for one in masks]
        learnt = learn(engine, some[:number], [learner(name)], bounds, recipe)
        seen = Counter(frozenset(edge) for half in learnt for edge in half.structures[0].edges)
        assert {ends: share for (k, ends), share in found.items() if k == s} == {
            ends: times / number for ends, times in seen.items()
        }


def test_blanks_that_are_not_observed_do_not_hide_an_interaction() -> None:
    """The class says whether two attributes agree; a fifth of all cells is blank."""
    rng = np.random.default_rng(8)
    cells = rng.integers(0, 2, (4, 900))
    kind = np.where(cells[0] == cells[1], "same", "other")
    blank = rng.random(cells.shape) < 0.2
    columns = {f"a{i}": np.where(blank[i], "", cells[i].astype(str)) for i in range(4)}
    frame = pd.DataFrame(columns).assign(kind=kind)
    found = compared(frame, "kind", structures=("naive", "heldout"), missing="sum-out", folds=4)
    assert frozenset((0, 1)) in {frozenset(edge) for edge in found.structures[1].edges}
    assert found.results[1].pooled.log_loss < found.results[0].pooled.log_loss - 0.3
