"""Out-of-fold figures against a second library and few-line oracles that learn everything again in every fold."""

from functools import cache

import networkx as nx
import numpy as np
import pandas as pd
import pytest
from builders import RowsAndLevels, classifier_from, compared, folds_of, predicted, rows_and_levels
from opentables import TABLES, load
from sklearn.naive_bayes import CategoricalNB

from bnx.choosing import Choice
from bnx.comparison import Comparison
from bnx.documents import predictions_table
from bnx.structure import Structure


@pytest.mark.parametrize(
    "name", ["digits_binary", *(pytest.param(name, marks=pytest.mark.tables) for name in ("car3", "mushroom"))]
)
def test_naive_bayes_out_of_fold_equals_scikit_learn(name: str) -> None:
    frame, target = load(name), TABLES[name].target
    keep = tuple(column for column in frame if column != target)
    found = compared(frame, target, smoothing="laplace:1", temperature=False, keep=keep)
    predictions = predictions_table(found).to_pandas()
    codes, truth, levels = rows_and_levels(frame, target)
    classes = sorted(frame[target].unique())
    assert predictions["row"].tolist() == list(range(len(frame)))
    assert predictions["truth"].tolist() == frame[target].tolist()
    p = predictions[[f"p:{level}" for level in classes]].to_numpy()
    fold = predictions["fold"].to_numpy()
    assert len(np.unique(fold)) == 10
    for held in range(10):
        rival = CategoricalNB(alpha=1, min_categories=levels).fit(codes[fold != held], truth[fold != held])
        held_codes = codes[fold == held]
        new = unseen(codes[fold != held], held_codes)
        expected = rival.predict_proba(held_codes)
        assert np.abs(p[fold == held] - expected)[~new.any(axis=1)].max() < 1e-10
        for row in np.flatnonzero(new.any(axis=1)):
            seen = np.flatnonzero(~new[row])
            terms = [rival.feature_log_prob_[i][:, held_codes[row, i]] for i in seen]
            logs = rival.class_log_prior_ + np.sum(terms, axis=0)
            assert p[fold == held][row] == pytest.approx(np.exp(logs - np.logaddexp.reduce(logs)), abs=1e-10)


def unseen(train: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Mark the cells of rows that hold a level which no training row has: they are summed out."""
    columns = zip(train.T, rows.T, strict=True)
    return np.column_stack([~np.isin(new, known) for known, new in columns])


@cache
def nothing_depends() -> tuple[pd.DataFrame, Comparison]:
    """Draw 400 rows of 20 attributes that depend on the class alone, and run naive and tan on them."""
    random = np.random.default_rng(17)
    target = random.integers(0, 2, 400)
    columns = {}
    for i in range(20):
        size = 2 + i % 3
        shares = random.dirichlet(np.full(size, 4.0), 2)
        levels = (random.random(400)[:, None] > np.cumsum(shares, axis=1)[target][:, :-1]).sum(axis=1)
        columns[f"x{i:02d}"] = [f"v{level}" for level in levels]
    frame = pd.DataFrame(columns).assign(kind=np.array(["no", "yes"])[target])
    return frame, compared(frame, "kind", structures=("naive", "tan"), smoothing="laplace:1", temperature=False)


def shared_bits(a: np.ndarray, b: np.ndarray, strata: np.ndarray) -> float:
    """Find the bits that two columns share within strata, from joint frequencies."""
    total = 0.0
    for s in np.unique(strata):
        cells = np.histogram2d(a[strata == s], b[strata == s], bins=(np.arange(a.max() + 2), np.arange(b.max() + 2)))[0]
        p = cells / cells.sum()
        independent = p.sum(1, keepdims=True) * p.sum(0, keepdims=True)
        used = p > 0
        total += float((p[used] * np.log2(p[used] / independent[used])).sum()) * cells.sum()
    return total / len(strata)


def tan_parents(codes: np.ndarray, truth: np.ndarray) -> list[tuple[int, ...]]:
    """Learn TAN with networkx (Friedman, Geiger & Goldszmidt 1997)."""
    n = codes.shape[1]
    graph = nx.Graph()
    for i in range(n):
        for j in range(i):
            graph.add_edge(i, j, weight=shared_bits(codes[:, i], codes[:, j], truth))
    relevance = [shared_bits(codes[:, i], truth, np.zeros(len(truth), int)) for i in range(n)]
    tree = nx.maximum_spanning_tree(graph)
    parents: list[tuple[int, ...]] = [()] * n
    for parent, child in nx.bfs_edges(tree, int(np.argmax(relevance))):
        parents[child] = (parent,)
    return parents


def posterior(
    parents: list[tuple[int, ...]], train: RowsAndLevels, codes: np.ndarray, amount: float = 1.0
) -> np.ndarray:
    """Predict with tables of (N + amount) / (N of the context + amount x levels)."""
    rows, truth, levels = train
    classes = np.unique(truth)
    logs = np.log(np.array([(truth == c).mean() for c in classes]))[None].repeat(len(codes), axis=0)
    for child, own in enumerate(parents):
        for k, c in enumerate(classes):
            of_class = rows[truth == c]
            for row, record in enumerate(codes):
                context = np.ones(len(of_class), bool)
                for parent in own:
                    context &= of_class[:, parent] == record[parent]
                hits = (of_class[context, child] == record[child]).sum()
                logs[row, k] += np.log((hits + amount) / (context.sum() + amount * levels[child]))
    weights = np.exp(logs - logs.max(axis=1, keepdims=True))
    return np.asarray(weights / weights.sum(axis=1, keepdims=True))


def mean_bits(p: np.ndarray, truth: np.ndarray) -> float:
    return float(-np.log2(p[np.arange(len(truth)), truth]).mean())


def test_tan_is_learnt_again_inside_every_training_fold() -> None:
    """Learnt on all rows and then cross-validated it would look much better: the test must tell the two apart."""
    frame, found = nothing_depends()
    codes, truth, levels = rows_and_levels(frame, "kind")
    fold = folds_of(found.evaluations[0])
    honest, peeping = np.empty((400, 2)), np.empty((400, 2))
    everywhere = tan_parents(codes, truth)
    for held in range(10):
        train = (codes[fold != held], truth[fold != held], levels)
        honest[fold == held] = posterior(tan_parents(*train[:2]), train, codes[fold == held])
        peeping[fold == held] = posterior(everywhere, train, codes[fold == held])
    assert found.results[1].pooled.log_loss == pytest.approx(mean_bits(honest, truth), abs=1e-10)
    assert np.abs(predicted(found, 1) - honest).max() < 1e-10
    assert mean_bits(peeping, truth) < mean_bits(honest, truth) - 0.01
    assert frozenset(found.structures[1].edges) == {(p, c) for c, own in enumerate(everywhere) for p in own}


def test_edges_gain_nothing_where_nothing_depends() -> None:
    _, found = nothing_depends()
    gains = [edge.gain for edge in found.edges[1]]
    assert len(gains) == 19
    assert np.mean(gains) <= 0
    assert all(edge.verdict != "gains" for edge in found.edges[1])
    assert found.results[1].pooled.log_loss > found.results[0].pooled.log_loss


def test_the_gain_of_an_edge_follows_its_definition() -> None:
    """Mean over folds of held-out loss without the parent minus with it; a fold without the edge counts 0."""
    frame, found = nothing_depends()
    codes, truth, levels = rows_and_levels(frame, "kind")
    fold = folds_of(found.evaluations[0])
    for edge in sorted(found.edges[1], key=lambda edge: -edge.chosen_in)[:2]:
        gains, chosen = [], 0
        for held in range(10):
            train = (codes[fold != held], truth[fold != held], levels)
            parents = tan_parents(*train[:2])
            ends = [(p, c) for c, own in enumerate(parents) for p in own if {p, c} == {edge.parent, edge.child}]
            chosen += len(ends)
            if not ends:
                gains.append(0.0)
                continue
            less = list(parents)
            less[ends[0][1]] = ()
            rows, right = codes[fold == held], truth[fold == held]
            gains.append(
                mean_bits(posterior(less, train, rows), right) - mean_bits(posterior(parents, train, rows), right)
            )
        assert chosen == edge.chosen_in >= 1
        assert edge.gain == pytest.approx(np.mean(gains), abs=1e-10)
        error = np.std(gains, ddof=1) * np.sqrt(1 / 10 + 1 / 9)
        assert edge.gain_se == pytest.approx(error, abs=1e-10)
        # Student's t of 9 degrees of freedom, two-sided 5 %: 2.262, common table (from memory)
        assert edge.gain_interval == pytest.approx((edge.gain - 2.2622 * error, edge.gain + 2.2622 * error), rel=1e-4)


def held_out_bits(
    parents: tuple[tuple[int, ...], ...],
    choice: Choice,
    s: int,
    train: RowsAndLevels,
    held: tuple[np.ndarray, np.ndarray],
) -> float:
    """Count tables by plain loops, smooth and calibrate as was chosen for structure s, and judge held-out rows."""
    model = classifier_from(
        train[0].T,
        train[1],
        Structure("one", parents),
        choice.smoothings[s],
        choice.calibrations[s],
        sizes=train[2],
        classes=int(train[1].max()) + 1,
    )
    return mean_bits(model.probabilities(held[0].T), held[1])


def test_gains_of_calibrated_structures_with_several_parents() -> None:
    """Take the parent away, fill the family's table again from the training rows, keep everything else."""
    random = np.random.default_rng(6)
    target = random.choice(3, 360, p=[0.5, 0.3, 0.2])
    columns = [(target + random.integers(0, 3, 360)) % 3]
    for _ in range(4):
        columns.append((columns[-1] + target * random.integers(0, 2, 360) + (random.random(360) < 0.3)) % 3)
    frame = pd.DataFrame({f"x{i}": [f"v{level}" for level in column] for i, column in enumerate(columns)})
    frame["kind"] = np.array(["p", "q", "r"])[target]
    found = compared(frame, "kind", folds=4, structures=("naive", "tan", "kdb2"))
    codes, truth, levels = rows_and_levels(frame, "kind")
    one, fold = found.evaluations[0], folds_of(found.evaluations[0])
    wanted: dict[tuple[int, frozenset[int]], list[float]] = {}
    for held in range(4):
        choice, learned = one.choices[(held,)], one.learned((held,))
        parts = (codes[fold != held], truth[fold != held], levels), (codes[fold == held], truth[fold == held])
        for s in (1, 2):
            parents = learned.structures[s].parents
            whole = held_out_bits(parents, choice, s, *parts)
            for parent, child in learned.structures[s].edges:
                less = tuple(tuple(p for p in own if (p, c) != (parent, child)) for c, own in enumerate(parents))
                wanted.setdefault((s, frozenset((parent, child))), []).append(
                    held_out_bits(less, choice, s, *parts) - whole
                )
    assert {choice.smoothings[2].kind for choice in one.choices.values()} == {"backoff"}
    assert max(choice.calibrations[2].temperature for choice in one.choices.values()) != 1
    for s in (1, 2):
        for edge in found.edges[s]:
            gains = wanted.get((s, frozenset((edge.parent, edge.child))), [])
            assert edge.chosen_in == len(gains)
            assert edge.gain == pytest.approx(sum(gains) / 4, abs=1e-10)
