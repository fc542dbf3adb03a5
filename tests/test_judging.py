"""Differences to the baseline, the best and the recommended structure, and the honest score, from their definitions."""

from collections import Counter
from dataclasses import replace
from functools import cache

import numpy as np
import pandas as pd
import pytest
from builders import coded_frame, compared, folds_of, learnt, predicted
from scipy.stats import chi2, chi2_contingency
from scipy.stats import t as student

from bnx.comparison import Comparison
from bnx.folds import halves
from bnx.judging import pick, reason_for
from bnx.paired import Chances
from bnx.structure import Structure
from bnx.tables import Lines


def worse_by(differences: np.ndarray, folds: int, region: float) -> float:
    """Corani & Benavoli 2015: P(mean difference > region), correlation 1 / folds."""
    scale = np.sqrt(differences.var(ddof=1) * (1 / len(differences) + 1 / (folds - 1)))
    return float(student.sf(region, len(differences) - 1, loc=differences.mean(), scale=scale))


def by_the_rule(losses: np.ndarray, means: np.ndarray, structures: tuple[Structure, ...]) -> tuple[int, int]:
    """Find the best, and the one with fewest edges that is not more likely than not worse by the region.

    Structures that are the same but for their name count once, under the first name.
    """
    best = int(np.argmin(means))
    region = min(0.01, 0.05 * means[best])
    able: dict[object, tuple[int, float, int]] = {}
    for s, own in enumerate(losses):
        differences = own - losses[best]
        certain = np.ptp(differences) < 1e-14
        worse = float(differences.mean() > region) if certain else worse_by(differences, losses.shape[1], region)
        if s == best or worse < 0.5:
            able.setdefault(structures[s].parents, (len(structures[s].edges), means[s], s))
    return best, min(able.values())[2]


@cache
def with_dependence(rows: int, seed: int, share: float) -> Comparison:
    """Run four structures on a table with one dependence, as strong as the share of rows that follow it."""
    random = np.random.default_rng(seed)
    target = random.integers(0, 2, rows)
    first = random.integers(0, 2, rows)
    columns = {"first": first, "second": np.where(random.random(rows) < share, first ^ target, 1 - first ^ target)}
    columns |= {f"noise{i}": (random.random(rows) < 0.35 + 0.3 * target).astype(int) for i in range(4)}
    frame = pd.DataFrame({name: [f"v{level}" for level in column] for name, column in columns.items()})
    frame["kind"] = np.array(["no", "yes"])[target]
    return compared(frame, "kind", folds=5, structures=("naive", "tan", "tan-tested", "kdb2"))


def with_real_dependence() -> Comparison:
    return with_dependence(500, 5, 0.9)


RUNS = [(500, 5, 0.9), (300, 4, 0.56), (300, 0, 0.62), (300, 1, 0.56)]


@pytest.mark.parametrize("run", RUNS)
def test_best_and_recommended_follow_the_rule(run: tuple[int, int, float]) -> None:
    found = with_dependence(*run)
    losses = np.array([result.fold_losses for result in found.results])
    means = np.array([result.pooled.log_loss for result in found.results])
    best, recommended = by_the_rule(losses, means, found.structures)
    assert (found.recommendation.best, found.recommendation.recommended) == (best, recommended)


def test_a_strong_dependence_is_recommended_as_the_smallest_structure_that_holds_it() -> None:
    found = with_real_dependence()
    assert found.recipe.structures[found.recommendation.recommended] == "tan-tested"


def test_the_rule_on_losses_of_every_kind() -> None:
    """Chances of being worse on both sides of one half, on both sides of .9, and no variance at all."""
    random = np.random.default_rng(13)
    structures = [Structure(f"s{k}", ((), *(((0,),) * k), *(((),) * (4 - k)))) for k in range(5)]
    picked = set()
    for _ in range(300):
        order = random.permutation(5).tolist()
        own = tuple(structures[k] for k in order)
        spread = random.choice([0.0, 0.003, 0.02])
        losses = 0.5 + random.random((5, 1)) * 0.04 + spread * random.normal(size=(5, 6))
        means = losses.mean(axis=1)
        best, chosen, chances = pick(losses, own, means.tolist(), 6)
        assert (best, chosen) == by_the_rule(losses, means, own)
        picked.add(best == chosen)
        assert sum(chances) == pytest.approx(1)
    assert picked == {True, False}


def test_structures_that_are_the_same_stand_under_their_first_name() -> None:
    twins = tuple(Structure(name, ((), (0,))) for name in ("first", "second"))
    losses = np.array([[0.501, 0.502, 0.5], [0.5, 0.5, 0.5]])
    assert pick(losses, twins, losses.mean(axis=1).tolist(), 3)[:2] == (1, 0)


def reason(edges: tuple[int, ...], best: int, chosen: int, worse: float = 0.0) -> str:
    """Ask why, of structures with so many edges named s0, s1, ..., each .125 bits worse than the one before."""
    structures = [Structure(f"s{k}", ((), *(((0,),) * own), *(((),) * (4 - own)))) for k, own in enumerate(edges)]
    names, means = [one.name for one in structures], [0.5 + 0.125 * k for k in range(len(edges))]
    return reason_for(names, structures, means, best, chosen, Chances(0.0, 1.0 - worse, worse))


def test_the_reason_is_said_in_plain_words() -> None:
    assert reason((2,), 0, 0) == "It is the only structure compared."
    assert reason((0, 2), 0, 0) == "It has the lowest log loss and no edges: no dependence pays here."
    assert reason((2, 0), 0, 0) == (
        "It has the lowest log loss, and each structure with fewer edges is probably worse by an amount that matters "
        "(more than 0.01 bits)."
    )
    assert reason((1, 1, 2), 0, 0) == (
        "It has the lowest log loss, and none has fewer edges. s1 learnt the same edges from all rows."
    )
    assert reason((2, 2, 0), 0, 1) == (
        "From all rows it learnt the same edges as s0, which has the lowest log loss; each structure with fewer edges "
        "is probably worse by an amount that matters (more than 0.01 bits)."
    )
    assert reason((0, 0), 0, 1) == (
        "From all rows it learnt the same edges as s0, which has the lowest log loss: none, so no dependence pays here."
    )
    assert reason((3, 1), 0, 1, worse=0.3249) == (
        "It has the fewest edges of all that are probably as good as s0, which has the lowest log loss: it is behind "
        "by 0.1250 bits, and the chance that it is worse by an amount that matters (more than 0.01 bits) is 32 %."
    )


@pytest.mark.parametrize("run", RUNS)
def test_the_honest_score_makes_the_same_choice_inside_every_outer_fold(run: tuple[int, int, float]) -> None:
    found = with_dependence(*run)
    one = found.evaluations[0]
    fold_of, truth = folds_of(one), np.empty(found.rows, np.int64)
    truth[one.engine.order] = one.engine.target
    by_structure = [predicted(found, s) for s in range(len(found.structures))]
    total, right = 0.0, 0
    for fold in range(5):
        inner = one.choices[(fold,)].losses
        picked = by_the_rule(inner, inner.mean(axis=1), one.learned((fold,)).structures)[1]
        assert found.recommendation.picks[fold] == picked
        p, own = by_structure[picked][fold_of == fold], truth[fold_of == fold]
        total -= np.log2(p[np.arange(len(own)), own]).sum()
        right += int((p.argmax(axis=1) == own).sum())
    assert found.recommendation.honest.log_loss == pytest.approx(total / found.rows, abs=1e-12)
    assert found.recommendation.honest.accuracy == right / found.rows


def test_folds_do_not_always_pick_what_all_rows_do() -> None:
    picks = [with_dependence(*run).recommendation for run in RUNS]
    assert sum(set(advice.picks) != {advice.recommended} for advice in picks) >= 2


def test_differences_to_naive_follow_the_formula_in_scikit_learns_documentation() -> None:
    """Nadeau & Bengio 2003: variance x (1 / m + test rows / training rows), m - 1 degrees of freedom; then Holm."""
    found = with_real_dependence()
    raw = []
    for s in (1, 2, 3):
        differences = found.results[s].fold_losses - found.results[0].fold_losses
        scale = np.sqrt(np.var(differences, ddof=1) * (1 / 5 + 100 / 400))
        raw.append(2 * student.sf(abs(differences.mean() / scale), 4))
        judged = found.against[s]
        assert judged is not None
        reach = student.ppf(0.975, 4) * scale
        assert judged.difference.mean == pytest.approx(differences.mean(), abs=1e-12)
        assert (judged.difference.low, judged.difference.high) == pytest.approx(
            (differences.mean() - reach, differences.mean() + reach), abs=1e-12
        )
        assert judged.difference.p_value == pytest.approx(raw[-1], rel=1e-9)
        region = min(0.01, 0.05 * min(result.pooled.log_loss for result in found.results))
        assert judged.region == pytest.approx(region, rel=1e-12)
        assert judged.chances.worse == pytest.approx(worse_by(differences, 5, region), abs=1e-12)
    adjusted = np.empty(3)
    order = np.argsort(raw)
    adjusted[order] = np.minimum(1, np.maximum.accumulate(np.sort(raw) * np.array([3, 2, 1])))
    found_p = [found.against[s].adjusted_p for s in (1, 2, 3)]  # type: ignore[union-attr]
    assert found_p == pytest.approx(adjusted.tolist(), rel=1e-9)


def test_means_over_rows_are_means_of_folds_weighted_by_rows() -> None:
    found = with_real_dependence()
    for result in found.results:
        rows = np.array([fold.rows for fold in result.by_fold])
        assert rows.sum() == 500
        assert result.pooled.log_loss == pytest.approx((result.fold_losses * rows).sum() / 500, rel=1e-12)


# --------------------------------------------------------------------------- the edge ledger


@cache
def with_a_ledger() -> tuple[pd.DataFrame, Comparison]:
    """Run tested structures with random halves on a table whose edges are of every strength."""
    random = np.random.default_rng(19)
    target = random.integers(0, 2, 600)
    columns = [random.integers(0, 3, 600)]
    for noise in (0.1, 0.6, 0.75, 0.8, 1.0):
        columns.append(np.where(random.random(600) < noise, random.integers(0, 3, 600), columns[-1]))
    columns[2] = np.where(random.random(600) < 0.25, columns[0], columns[2])
    frame = pd.DataFrame({f"x{i}": [f"v{level}" for level in column] for i, column in enumerate(columns)})
    frame["kind"] = np.array(["no", "yes"])[target]
    names = ("naive", "tan", "tan-tested", "kdb2-tested")
    return frame, compared(frame, "kind", folds=5, structures=names, resamples=30, test="chi2")


def test_stability_is_the_share_of_random_halves_that_learn_the_edge() -> None:
    """Every half is cut out as a table of its own and learnt from anew (Meinshausen & Buhlmann 2010)."""
    frame, found = with_a_ledger()
    engine = found.evaluations[0].engine
    table = coded_frame(frame, "kind")
    block_of_row = np.empty(600, np.int64)
    block_of_row[engine.order] = np.repeat(np.arange(engine.blocks), engine.class_counts.sum(axis=1))
    seen: Counter[tuple[int, frozenset[int]]] = Counter()
    for mask in halves(5, engine.blocks // 5, 30, found.recipe.seed):
        rows = mask[block_of_row]
        assert 250 <= rows.sum() <= 350
        half = replace(table, codes=table.codes[:, rows].copy(), target=table.target[rows], lines=Lines.marked(rows))
        for s, structure in enumerate(learnt(half, found.recipe.structures, test="chi2").structures):
            seen.update((s, frozenset(edge)) for edge in structure.edges)
    shares = []
    for s, edges in enumerate(found.edges):
        for edge in edges:
            assert edge.stability == seen[(s, frozenset((edge.parent, edge.child)))] / 30
            shares.append(edge.stability)
    assert min(shares) < 1 == max(shares)


def test_the_p_of_a_gate_is_the_chi_square_tail_given_the_class_and_the_parents_before() -> None:
    """Scipy's chi2_contingency, summed over the strata of class and parents taken before."""
    frame, found = with_a_ledger()
    assert [edge.gate_p for edge in found.edges[1]] == [None] * len(found.edges[1])
    depths = set()
    for s in (2, 3):
        parents = found.structures[s].parents
        for edge in found.edges[s]:
            before = parents[edge.child][: parents[edge.child].index(edge.parent)]
            assert edge.gate_given == before
            depths.add(len(before))
            strata = frame.groupby(["kind", *(found.names[parent] for parent in before)])
            x2, df = 0.0, 0
            for _, rows in strata:
                cells = pd.crosstab(rows[found.names[edge.parent]], rows[found.names[edge.child]]).to_numpy()
                if min(cells.shape) > 1:
                    result = chi2_contingency(cells, correction=False)
                    x2, df = x2 + result.statistic, df + result.dof
            assert edge.gate_p == pytest.approx(chi2.sf(x2, df), rel=1e-9)
    assert depths == {0, 1}


def test_an_edge_counts_as_chosen_in_whichever_direction_a_fold_drew_it() -> None:
    _, found = with_a_ledger()
    one = found.evaluations[0]
    for s, edges in enumerate(found.edges):
        for edge in edges:
            ends = {edge.parent, edge.child}
            drawn = [any(set(e) == ends for e in one.learned((fold,)).structures[s].edges) for fold in range(5)]
            assert edge.chosen_in == sum(drawn)
