"""Tables, evidence and losses of many families at once, against one family at a time in numpy."""

import numpy as np
import pytest
from builders import coded, started

from bnx.calibrating import Calibration, probabilities
from bnx.choosing import mean_loss
from bnx.gains import _edges, _without
from bnx.kernels import changed_losses
from bnx.kernels.exponentials import logarithms, total_of
from bnx.parameters import CANDIDATES, log_tables
from bnx.scoring import Counted, families_of, padded, terms_of
from bnx.structure import Structure
from bnx.tabulating import tabulate
from bnx.trainings import Training
from bnx.views import View

SIZES = np.array([2, 3, 1, 4, 6, 2])
STRUCTURE = Structure("one", ((), (0,), (1,), (1, 0), (3, 2, 0), ()))


def counted(classes: int, rows: int = 2500) -> tuple[Counted, np.ndarray, np.ndarray]:
    """Count a structure's families in random rows; one attribute is seen in fewer levels than are stored."""
    random = np.random.default_rng(classes)
    stored = SIZES + np.array([0, 0, 0, 1, 0, 0])
    codes = np.array([random.integers(0, size, rows) for size in stored])
    recode = np.tile(np.arange(6, dtype=np.int32), (6, 1))
    recode[3, 4] = 0
    view = View((), recode, stored == SIZES, SIZES)
    engine = started(coded(codes, random.integers(0, classes, rows), stored, classes), jobs=2)
    training = Training((), np.ones(1, bool), view, engine.class_counts[0])
    one = tabulate(engine, [training], [families_of([STRUCTURE], view)])[0]
    return one, engine.codes, engine.target


def evidence_by_hand(one: Counted, codes: np.ndarray, smoothings: tuple, leave: tuple[int, int] | None = None):
    """Look every row's terms up, family by family: (rows, V, C - 1)."""
    classes, seen = len(one.counts), np.take_along_axis(one.families.recode, codes, axis=1)
    total = np.zeros((codes.shape[1], len(smoothings), classes))
    for child, parents in enumerate(STRUCTURE.parents):
        table, members = one.table(0, child), (*parents, child)
        if leave and leave[0] == child:
            place = parents.index(leave[1])
            table, members = table.sum(axis=1 + place), (*members[:place], *members[place + 1 :])
        logs = log_tables(table.reshape(classes, -1).astype(np.int32), table.shape[1:], smoothings)
        cell = np.ravel_multi_index(tuple(seen[list(members)]), table.shape[1:])
        total += logs[cell].reshape(-1, len(smoothings), classes)
    return total[:, :, 1:] - total[:, :, :1]


@pytest.mark.parametrize(("classes", "options"), [(2, 1), (3, 1), (4, 1), (5, 1), (2, 7), (3, 7), (11, 7)])
def test_evidence_is_the_sum_of_log_table_terms_against_the_first_class(classes: int, options: int) -> None:
    """At every width that evidence is kept in: 1, 2, 4, 8 and more columns."""
    one, codes, _ = counted(classes)
    smoothings = CANDIDATES[-options:]
    terms = terms_of(one, np.arange(len(one.families.depths)), smoothings).of(0)
    columns = options * (classes - 1)
    assert terms.table.shape[1] == padded(columns) >= columns
    found = terms.evidence(codes, 0, codes.shape[1])
    expected = evidence_by_hand(one, codes, smoothings)
    assert np.abs(found[:, :columns] - expected.reshape(len(found), -1)).max() < 1e-12
    part = terms.evidence(codes, 1000, 2100)
    assert np.array_equal(part, found[1000:2100])


@pytest.mark.parametrize("classes", [2, 3, 6])
def test_losses_without_an_edge_are_those_of_evidence_summed_up_again(classes: int) -> None:
    one, codes, truth = counted(classes)
    random = np.random.default_rng(8)
    weights = random.random(len(truth)) + 0.5
    smoothing = (CANDIDATES[3],)
    prior = np.log(random.dirichlet(np.full(classes, 3.0)))
    calibration = Calibration(0.8, random.normal(size=classes) / 5, 0.003, np.full(classes, 1 / classes))
    children, places = _edges(one, 0)
    edges = [(child, STRUCTURE.parents[child][place]) for child, place in zip(children, places, strict=True)]
    assert [(parent, child) for child, parent in edges] == list(STRUCTURE.edges)
    less = _without(one, one.families.of[0][children], places)
    fewer, terms = terms_of(less, np.arange(len(children)), smoothing), terms_of(one, one.families.of[0], smoothing)
    own, other = one.families, less.families
    found = np.zeros(len(edges))
    changed_losses(
        codes,
        own.recode,
        (own.plain, own.members, own.sizes, own.depths, terms.which[children], terms.starts[children], terms.table),
        (other.plain, other.members, other.sizes, other.depths, fewer.starts, fewer.table),
        700,
        terms.evidence(codes, 700, 2000),
        (prior + calibration.offsets)[None],
        calibration.temperature,
        calibration.floor,
        calibration.shares,
        truth[700:2000],
        weights[700:2000],
        found,
    )

    def loss(leave: tuple[int, int] | None) -> float:
        evidence = np.ascontiguousarray(evidence_by_hand(one, codes[:, 700:2000], smoothing, leave)[:, 0])
        p = probabilities(calibration, prior, evidence)
        own_p = p[np.arange(1300), truth[700:2000]]
        bits = float(-(weights[700:2000] * np.log2(own_p)).sum() / weights[700:2000].sum())
        assert mean_loss(evidence, prior, calibration, truth[700:2000], weights[700:2000]) == pytest.approx(bits)
        return bits

    whole = loss(None)
    in_bits = found / weights[700:2000].sum() / np.log(2)
    assert in_bits == pytest.approx([loss(edge) - whole for edge in edges], abs=1e-11)
    assert np.abs(in_bits).max() > 1e-4


def test_probabilities_of_hopeless_classes_are_those_of_numpy() -> None:
    """Evidence far below what the fast exponential takes, rows on both sides of a block's end, a class left out."""
    random = np.random.default_rng(1)
    for rows in (1, 255, 256, 257, 1000):
        evidence = random.normal(size=(rows, 2)) * random.choice([1, 400], (rows, 1))
        prior = np.array([np.log(0.4), -np.inf, np.log(0.6)])
        calibration = Calibration(1.3, np.array([0.1, 0.0, -0.1]), 0.0, np.full(3, 1 / 3))
        power = prior + calibration.offsets + 1.3 * np.hstack([np.zeros((rows, 1)), evidence])
        weight = np.exp(power - power.max(axis=1, keepdims=True))
        expected = weight / weight.sum(axis=1, keepdims=True)
        found = probabilities(calibration, prior, evidence)
        assert np.abs(found - expected).max() < 1e-14
        assert (found[:, 1] == 0).all()
        assert ((found == 0) == (expected == 0)).all()


def test_logarithms_are_those_of_numpy() -> None:
    random = np.random.default_rng(3)
    x = np.concatenate([np.exp(random.uniform(-700, 700, 100_000)), 1 + random.normal(size=100_000) * 1e-7, [1.0]])
    found = x.copy()
    logarithms(found, np.empty(2 * len(x)))
    expected = np.log(x)
    assert (np.abs(found - expected) <= 4e-16 * np.maximum(np.abs(expected), 1e-300) + 4e-16 * np.abs(expected)).all()
    assert found[-1] == 0


@pytest.mark.parametrize("rows", [0, 1, 7, 8, 9, 1000])
def test_sums_are_sums(rows: int) -> None:
    x = np.random.default_rng(rows).normal(size=rows)
    assert total_of(x) == pytest.approx(x.sum(), abs=1e-12)
