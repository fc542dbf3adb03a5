"""What naive counts twice because of a pair: against plain loops, cases that can be worked out, and planted tables."""

from itertools import product
from math import exp, lgamma, log, log2

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from bnx import double_counting
from bnx.double_counting import double_counted_bits

SHARES = {2: np.array([0.7, 0.3]), 3: np.array([0.71, 0.21, 0.08])}  # of the classes of planted tables

Tables = arrays(np.int32, st.tuples(st.just(2), st.integers(2, 3), st.integers(1, 3), st.integers(1, 4)),
                elements=st.integers(0, 60))  # fmt: skip


def chance(expected: float) -> float:
    """Mean of log2 (n + 1/4) / (expected + 1/4) over Poisson counts n, added up."""
    terms = range(int(expected + 12 * expected**0.5 + 12))
    if expected == 0:
        return 0.0
    p = [exp(n * log(expected) - expected - lgamma(n + 1)) for n in terms]
    return sum(p[n] * log2((n + 0.25) / (expected + 0.25)) for n in terms)


def pointwise(table: np.ndarray, a: int, b: int) -> float:
    """Log ratio of observed and expected records of one cell of one class, less what chance alone would show."""
    rows = int(table.sum())
    if rows == 0:
        return 0.0
    down, across = table[a].sum() / rows, table[:, b].sum() / rows
    expected = rows * down * across
    free = (1 - down) * (1 - across) * rows / max(rows - 1, 1)
    return log2((table[a, b] + 0.25) / (expected + 0.25)) - free * chance(expected)


def in_loops(counts: np.ndarray) -> float:
    """Do the same record by record and class by class, as it is defined; counts (C, r, q)."""
    rows = counts.sum((1, 2))
    total, every = 0.0, int(rows.sum())
    if (rows > 0).sum() < 2:
        return float("nan")
    for c, a, b in product(*(range(size) for size in counts.shape)):
        if not counts[c, a, b]:
            continue
        less = counts[c].copy()
        less[a, b] -= 1
        own = pointwise(less, a, b)
        for d in range(len(counts)):
            if d != c:
                part = rows[d] / (every - rows[c])
                total += counts[c, a, b] * part * (pointwise(counts[d], a, b) - own)
    return total / every


def truth(joint: np.ndarray) -> float:
    """Enumerate a known distribution of class, a and b, (C, r, q), cells without probability left out."""
    shares = joint.sum((1, 2))
    total = 0.0
    given_class = joint / shares[:, None, None]
    with np.errstate(divide="ignore", invalid="ignore"):
        pmi = np.log2(given_class / (given_class.sum(2, keepdims=True) * given_class.sum(1, keepdims=True)))
    for c, d in product(range(len(joint)), repeat=2):
        if c != d:
            used = joint[c] > 0
            apart = pmi[d][used] - pmi[c][used]
            total += float((joint[c][used] * apart).sum()) * shares[d] / (1 - shares[c])
    return total


def planted(kind: str, classes: int, levels: int, random: np.random.Generator) -> np.ndarray:
    """Draw a distribution (C, levels, levels): independent given the class, an exact copy, or a noisy one.

    No level is very rare in a class: each has at least .3 of an equal share.
    """
    first, second = (0.3 / levels + 0.7 * random.dirichlet(np.full(levels, 2.0), size=classes) for _ in range(2))
    copy = first[:, :, None] * np.eye(levels)
    apart = first[:, :, None] * second[:, None]
    joint = {"independent": apart, "copy": copy, "noisy copy": 0.7 * copy + 0.3 * apart}[kind]
    return np.asarray(SHARES[classes][:, None, None] * joint)


def errors(kind: str, classes: int, levels: int, rows: int, seed: int = 1) -> tuple[float, float, float]:
    """Mean and standard deviation of the errors over 20 distributions of 40 tables each, and their mean true bits."""
    random = np.random.default_rng(seed)
    found, known = [], []
    for _ in range(20):
        joint = planted(kind, classes, levels, random)
        drawn = random.multinomial(rows, joint.ravel(), size=40).reshape(-1, *joint.shape)
        known.append(truth(joint))
        found.append(double_counted_bits(drawn) - known[-1])
    return float(np.mean(found)), float(np.std(found)), float(np.mean(known))


@settings(max_examples=60, deadline=None)
@given(Tables)
def test_arrays_say_what_plain_loops_say(counts: np.ndarray) -> None:
    assert double_counted_bits(counts) == pytest.approx([in_loops(table) for table in counts], abs=1e-5, nan_ok=True)


def test_large_counts_are_drawn_to_the_mean_of_poisson_counts_as_well() -> None:
    for expected in (0.0, 3e-4, 0.02, 0.7, 3.3, 12.34, 49.9, 50.1, 90.0, 140.0):
        assert double_counting._chance(np.array(expected)) == pytest.approx(chance(expected), abs=4e-6)


@pytest.mark.parametrize("classes", SHARES)
def test_of_a_copy_it_is_the_whole_weight_of_evidence(classes: int) -> None:
    shares = SHARES[classes]
    levels = np.array([[0.5, 0.3, 0.2], [0.2, 0.2, 0.6], [0.1, 0.8, 0.1]])[:classes]
    whole = sum(  # divergences between the classes (Kullback & Leibler 1951)
        shares[c] * shares[d] / (1 - shares[c]) * float((levels[c] * np.log2(levels[c] / levels[d])).sum())
        for c, d in product(range(classes), repeat=2)
        if c != d
    )
    joint = shares[:, None, None] * levels[:, :, None] * np.eye(3)
    assert truth(joint) == pytest.approx(whole, rel=1e-12)
    assert double_counted_bits(np.round(joint * 1e7).astype(np.int32)[None])[0] == pytest.approx(whole, abs=1e-4)


def test_it_is_0_where_the_class_explains_all() -> None:
    first, second = np.array([[0.5, 0.3, 0.2], [0.2, 0.2, 0.6]]), np.array([[0.9, 0.1], [0.4, 0.6]])
    joint = SHARES[2][:, None, None] * first[:, :, None] * second[:, None]
    assert double_counted_bits(np.round(joint * 1e6).astype(np.int32)[None])[0] == pytest.approx(0, abs=1e-4)


def test_it_is_0_where_a_dependence_speaks_for_no_class() -> None:
    alike = np.array([[4000, 1000], [1000, 4000]], np.int32)
    assert abs(double_counted_bits(np.stack([alike, 3 * alike])[None])[0]) < 1e-3
    assert truth(np.stack([alike, 3 * alike]) / 40_000) == pytest.approx(0, abs=1e-12)


def test_below_0_naive_counts_too_little() -> None:
    same = np.array([[900, 100], [100, 900]], np.int32)
    counts = np.stack([same, same[::-1]])
    wanted = 0.9 * log2(0.1 / 0.9) + 0.1 * log2(0.9 / 0.1)  # each attribute alone says nothing
    assert double_counted_bits(counts[None])[0] == pytest.approx(wanted, abs=0.01)


@settings(max_examples=30, deadline=None)
@given(Tables, st.randoms(use_true_random=False))
def test_names_order_and_company_do_not_matter(counts: np.ndarray, random: object) -> None:
    found = double_counted_bits(counts)
    assert double_counted_bits(counts.swapaxes(2, 3)) == pytest.approx(found, abs=1e-9, nan_ok=True)
    assert double_counted_bits(counts[:, ::-1, ::-1]) == pytest.approx(found, abs=1e-9, nan_ok=True)
    unused = np.concatenate([counts, np.zeros_like(counts[:, :1])], axis=1)
    assert double_counted_bits(unused) == pytest.approx(found, abs=1e-9, nan_ok=True)
    assert np.array_equal([double_counted_bits(one[None])[0] for one in counts], found, equal_nan=True)


def test_few_cells_at_a_time_give_the_same_bits(monkeypatch: pytest.MonkeyPatch) -> None:
    counts = np.random.default_rng(3).integers(0, 30, (57, 3, 4, 5)).astype(np.int32)
    found = double_counted_bits(counts)
    for cells in (1, 60, 61, 500):
        monkeypatch.setattr(double_counting, "_CELLS", cells)
        assert np.array_equal(double_counted_bits(counts), found)


def test_a_level_that_a_class_lacks_says_nothing_of_the_pair() -> None:
    counts = np.array([[[60, 60], [0, 0]], [[0, 0], [50, 50]]], np.int32)
    assert double_counted_bits(counts[None])[0] == pytest.approx(0, abs=0.01)


def test_without_two_classes_there_is_nothing_to_say() -> None:
    assert np.isnan(double_counted_bits(np.array([[[[3, 4], [5, 6]], [[0, 0], [0, 0]]]]))).all()
    assert np.isnan(double_counted_bits(np.zeros((1, 2, 2, 2), np.int32))).all()
    assert double_counted_bits(np.zeros((0, 2, 2, 2), np.int32)).shape == (0,)


# Bounds in bits, a little above what was measured: bias and standard deviation. Our own figures, no published source.
@pytest.mark.parametrize(
    ("kind", "rows", "bias", "spread"),
    [
        ("independent", 300, 0.015, 0.12),
        ("independent", 1000, 0.005, 0.06),
        ("independent", 5000, 0.003, 0.02),
        ("copy", 1000, 0.05, 0.08),
        ("copy", 5000, 0.015, 0.04),
        ("noisy copy", 1000, 0.015, 0.08),
        ("noisy copy", 5000, 0.005, 0.03),
    ],
)
def test_on_planted_tables_it_is_near_the_truth(kind: str, rows: int, bias: float, spread: float) -> None:
    for classes, levels in product((2, 3), (2, 3, 4)):
        mean, deviation, known = errors(kind, classes, levels, rows)
        assert abs(mean) < bias + 3 * deviation / 800**0.5
        assert deviation < spread
        assert (known == pytest.approx(0, abs=1e-9)) == (kind == "independent")
