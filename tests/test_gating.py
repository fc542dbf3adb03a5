"""Tested structures: what they ask, what they take, and how seldom they draw an edge where there is none."""

from collections.abc import Sequence

import numpy as np
import pytest
from builders import coded, coded_frame, finished, learnt, structure_of
from opentables import led7_draw
from scipy.stats import binom
from statsmodels.stats.multitest import multipletests

from bnx.dependence import Dependence
from bnx.gating import Answer, Bounds, Gate, Question, fixed_family_steps, learn_together
from bnx.learners import learner

TESTED = ("tan-tested", "kdb1-tested", "kdb2-tested", "kdb3-tested")


def names(n: int) -> tuple[str, ...]:
    return tuple(f"a{i}" for i in range(n))


def test_the_dialogue_of_kdb_tested() -> None:
    """Three attributes in the order 0, 1, 2: depth by depth, given what was taken; a refused child asks no more."""
    strength = np.array([[0, 0.1, 0.2], [0.1, 0, 0.3], [0.2, 0.3, 0]])
    dependence = Dependence(np.array([0.3, 0.2, 0.1]), strength)
    learning = learner("kdb2-tested").learn(dependence, Gate(0.05, np.ones((3, 3))), Bounds(names(3)))
    assert next(learning) == [Question(1, 0, ()), Question(2, 1, ()), Question(2, 0, ())]
    asked = learning.send([Answer(0.9, 0.5), Answer(0.001, 0.1), Answer(0.0005, 0.2)])
    assert asked == [Question(2, 1, (0,))]
    with pytest.raises(StopIteration) as stopped:
        learning.send([Answer(0.005, 0.05)])
    assert stopped.value.value.parents == ((), (), (0, 1))


def test_depths_share_the_level_equally_and_the_family_is_every_pair() -> None:
    """With K = 2 and 3 attributes each depth has .025, the first step of Holm .025 / 3."""
    strength = np.ones((3, 3)) - np.eye(3)
    relevance = [0.3, 0.2, 0.1]
    for p, taken in ((0.025 / 3, True), (0.025 / 3 * 1.0001, False)):
        found = structure_of("kdb2-tested", relevance, strength, answers={(1, 0, ()): Answer(p, 0.1)})
        assert (found.parents[1] == (0,)) is taken


def test_holm_steps_let_the_second_edge_in_at_a_wider_threshold() -> None:
    strength = np.ones((3, 3)) - np.eye(3)
    first, second = {(1, 0, ()): Answer(1e-9, 0.1)}, {(2, 0, ()): Answer(0.05 / 2, 0.1)}
    assert structure_of("kdb1-tested", [3, 2, 1], strength, answers=second).edges == ()
    assert structure_of("kdb1-tested", [3, 2, 1], strength, answers=first | second).edges == ((0, 1), (0, 2))


def test_only_the_eight_strongest_earlier_attributes_are_asked_about() -> None:
    n = 12
    strength = np.tile(np.arange(n) / 100, (n, 1))
    strength = np.minimum(strength, strength.T)
    learning = learner("kdb1-tested").learn(
        Dependence(np.arange(n, 0, -1.0), strength), Gate(0.05, np.ones((n, n))), Bounds(names(n))
    )
    last = [question.candidate for question in next(learning) if question.child == n - 1]
    assert last == [10, 9, 8, 7, 6, 5, 4, 3]


def test_required_parents_are_given_in_every_question() -> None:
    strength = np.ones((3, 3)) - np.eye(3)
    bounds = Bounds(names(3), ((0, 2),))
    found = structure_of("kdb2-tested", [3, 2, 1], strength, bounds, answers={(2, 1, (0,)): Answer(1e-9, 0.1)})
    assert found.parents == ((), (), (0, 1))
    kept = structure_of("kdb2-tested", [3, 2, 1], strength, bounds)
    assert kept.parents == ((), (), (0,))


def test_tan_tested_keeps_the_pairs_that_pass_and_no_others() -> None:
    strength = np.array([[0, 0.4, 0.3, 0.0], [0.4, 0, 0.2, 0.0], [0.3, 0.2, 0, 0.1], [0.0, 0.0, 0.1, 0]])
    p = np.ones((4, 4))
    p[0, 1] = p[1, 0] = p[0, 2] = p[2, 0] = 1e-6
    found = structure_of("tan-tested", [0.4, 0.3, 0.2, 0.1], strength, p=p)
    assert found.parents == ((), (0,), (0,), ())
    p[0, 1] = p[1, 0] = np.nan
    assert structure_of("tan-tested", [0.4, 0.3, 0.2, 0.1], strength, p=p).parents == ((), (), (0,), ())


def test_steps_in_a_fixed_family_are_holms_with_ones_for_what_was_not_tested() -> None:
    """Holm 1979, as statsmodels computes it on the family filled up with p = 1."""
    random = np.random.default_rng(3)
    for _ in range(25):
        tested, rest = int(random.integers(0, 12)), int(random.integers(0, 30))
        p = random.random(tested) ** 6
        expected = np.zeros(0, bool)
        if tested + rest:
            expected = multipletests(np.concatenate([p, np.ones(rest)]), 0.05, "holm")[0][:tested]
        assert np.array_equal(fixed_family_steps(p, 0.05, tested + rest), expected)


def test_learners_side_by_side_get_their_own_answers() -> None:
    strength = np.ones((4, 4)) - np.eye(4)
    dependence = Dependence(np.array([4.0, 3, 2, 1]), strength)
    gate, bounds = Gate(0.05, np.ones((4, 4))), Bounds(names(4))
    scripts: list[dict[tuple[int, int, tuple[int, ...]], Answer]] = [
        {(1, 0, ()): Answer(1e-9, 0.1)},
        {(3, 2, ()): Answer(1e-9, 0.3), (3, 0, (2,)): Answer(1e-9, 0.2)},
        {},
    ]

    def ask(questions: Sequence[tuple[int, Question]]) -> list[Answer]:
        return [scripts[k].get((q.child, q.candidate, q.given), Answer(1.0, 0.0)) for k, q in questions]

    members = [learner(name) for name in ("kdb1-tested", "kdb3-tested", "kdb2")]
    together = learn_together([member.learn(dependence, gate, bounds) for member in members], ask)
    alone = [finished(m.learn(dependence, gate, bounds), s) for m, s in zip(members, scripts, strict=True)]
    assert together == alone
    assert [structure.edges for structure in together[:2]] == [((0, 1),), ((2, 3), (0, 3))]


def edges_drawn(tables: Sequence[object]) -> dict[str, int]:
    """Count the tables in which each tested structure draws any edge."""
    found = dict.fromkeys(TESTED, 0)
    for table in tables:
        for structure in learnt(table, TESTED).structures:
            found[structure.name] += bool(structure.edges)
    return found


def independent(seed: int) -> object:
    """Draw 400 rows of 12 attributes that depend on the class alone, two to four levels each."""
    random = np.random.default_rng([41, seed])
    target = random.integers(0, 2, 400)
    codes = []
    for size in (2, 3, 4) * 4:
        shares = random.dirichlet(np.full(size, 3.0), 2)
        codes.append((random.random(400)[:, None] > np.cumsum(shares, axis=1)[target][:, :-1]).sum(axis=1))
    return coded(np.array(codes), target, (2, 3, 4) * 4, 2)


def test_independent_attributes_get_an_edge_at_the_promised_rate() -> None:
    """200 tables: at most .05 + 3 standard errors of them may show any edge."""
    ceiling = 200 * (0.05 + 3 * np.sqrt(0.05 * 0.95 / 200))
    found = edges_drawn([independent(seed) for seed in range(200)])
    assert max(found.values()) <= ceiling, found


def test_seven_segments_get_an_edge_in_few_of_150_draws() -> None:
    """LED-7 (Breiman et al. 1984): given the digit nothing depends. One test in a hundred would fail by chance."""
    found = edges_drawn([coded_frame(led7_draw(2000, seed), "digit") for seed in range(150)])
    assert max(found.values()) <= binom.ppf(0.99, 150, 0.05), found


@pytest.mark.tables
def test_seven_segments_get_an_edge_in_at_most_64_of_1000_draws() -> None:
    """.05 + 2 standard errors of 1,000 draws; LED-7 by Breiman et al. 1984."""
    found = edges_drawn([coded_frame(led7_draw(2000, seed), "digit") for seed in range(1000)])
    assert max(found.values()) <= 64, found
