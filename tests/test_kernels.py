"""Every loop equals a few plain lines of numpy, at the sizes where words and blocks begin and end."""

import numpy as np
import pytest
from builders import coded, started, stored_view

from bnx.counts import PairLayout
from bnx.kernels import calibrated_loss, count_cells, number_cells, tempered_losses

ROWS = (0, 1, 63, 64, 65, 1000)
SIZES = np.arange(1, 14)


def rows_of(number: int, seed: int, sizes: np.ndarray = SIZES) -> np.ndarray:
    """Draw codes that reach every level's end now and then, (n, N)."""
    random = np.random.default_rng(seed)
    return np.array([random.integers(0, size, number) for size in sizes]).reshape(len(sizes), number)


def joint(codes: np.ndarray, members: list[int], sizes: np.ndarray, chosen: np.ndarray) -> np.ndarray:
    """Count joint levels of the chosen rows one row at a time."""
    cells = np.zeros(tuple(sizes[members]), np.int64)
    for row in np.flatnonzero(chosen):
        cells[tuple(codes[members, row])] += 1
    return cells.ravel()


@pytest.mark.parametrize("kind", [np.uint8, np.uint16])
@pytest.mark.parametrize("number", ROWS)
def test_pair_counts_equal_counting_row_by_row(number: int, kind: type) -> None:
    codes = rows_of(number, seed=number)
    random = np.random.default_rng(number + 1)
    target, blocks = random.integers(0, 3, number), random.integers(0, 4, number)
    engine = started(coded(codes, target, SIZES, 3, kind), blocks, 4)
    left, right = np.triu_indices(len(SIZES), 1)
    layout = PairLayout.of(SIZES, left, right)
    found = engine.pair_counts(layout).counts
    assert found.shape == (4, 3, layout.offsets[-1])
    for pair, (i, j) in enumerate(zip(left, right, strict=True)):
        cells = found[:, :, layout.offsets[pair] : layout.offsets[pair + 1]]
        for block in range(4):
            for c in range(3):
                chosen = (blocks == block) & (target == c)
                assert np.array_equal(cells[block, c], joint(codes, [i, j], SIZES, chosen))


@pytest.mark.parametrize("number", [64 * 256 - 1, 64 * 256, 64 * 256 + 1, 40_000])
def test_planes_longer_than_one_stretch_of_words_are_counted_whole(number: int) -> None:
    sizes = np.array([2, 5, 9])
    codes = rows_of(number, 3, sizes)
    engine = started(coded(codes, np.zeros(number, int), sizes, 1))
    found = engine.pair_counts(PairLayout.of(sizes, np.array([0, 0, 1]), np.array([1, 2, 2]))).counts
    expected = [
        np.bincount(codes[i] * sizes[j] + codes[j], minlength=sizes[i] * sizes[j]) for i, j in ((0, 1), (0, 2), (1, 2))
    ]
    assert np.array_equal(found.ravel(), np.concatenate(expected))


@pytest.mark.parametrize("kind", [np.uint8, np.uint16])
@pytest.mark.parametrize("number", ROWS)
def test_family_counts_equal_counting_row_by_row(number: int, kind: type) -> None:
    codes = rows_of(number, seed=5)
    random = np.random.default_rng(6)
    target, blocks = random.integers(0, 2, number), random.integers(0, 3, number)
    table = coded(codes, target, SIZES, 2, kind)
    engine = started(table, blocks, 3)
    view = stored_view(table.schema.attributes)
    for members in ([4], [7, 2], [1, 12, 0], [3, 5, 2, 6]):
        found = engine.family_counts(members, view).counts
        mask = np.array([True, False, True])
        training = engine.training_counts(members, view, mask)
        for c in range(2):
            for block in range(3):
                assert np.array_equal(found[block, c], joint(codes, members, SIZES, (blocks == block) & (target == c)))
            assert np.array_equal(training[c], joint(codes, members, SIZES, (blocks != 1) & (target == c)))


@pytest.mark.parametrize("number", [0, 1, 2047, 2048, 2049, 5000])
def test_cells_of_recoded_rows_are_mixed_radix_numbers(number: int) -> None:
    sizes = np.array([6, 4])
    codes = rows_of(number, 9, sizes).astype(np.uint8)
    recode = np.array([[0, 0, 1, 1, 2, 2], [1, 0, 1, 0, 0, 0]], dtype=np.int32)
    coarse = np.array([3, 2])
    cells = np.empty(number, np.int64)
    number_cells(codes, recode, False, np.array([1, 0]), coarse[[1, 0]], 0, number, cells)
    expected = recode[1][codes[1]] * 3 + recode[0][codes[0]]
    assert np.array_equal(cells, expected)
    out = np.zeros((1, 6), np.int32)
    count_cells(codes, recode, False, np.array([1, 0]), coarse[[1, 0]], np.array([0, number]), np.array([0]), out)
    assert np.array_equal(out[0], np.bincount(expected, minlength=6))


@pytest.mark.parametrize("jobs", [1, 2, 3, 7])
def test_threads_change_nothing(jobs: int) -> None:
    codes, target = rows_of(777, 11), np.random.default_rng(12).integers(0, 3, 777)
    table = coded(codes, target, SIZES, 3)
    blocks = np.arange(777) % 5
    left, right = np.triu_indices(len(SIZES), 1)
    layout = PairLayout.of(SIZES, left, right)
    one, many = started(table, blocks, 5), started(table, blocks, 5, jobs)
    assert np.array_equal(one.order, many.order)
    assert np.array_equal(one.codes, many.codes)
    assert np.array_equal(one.pair_counts(layout).counts, many.pair_counts(layout).counts)
    assert all(np.array_equal(a, b) for a, b in zip(one.margins, many.margins, strict=True))


def softmax(logs: np.ndarray) -> np.ndarray:
    """Turn log weights into shares, row by row."""
    weights = np.exp(logs - logs.max(axis=1, keepdims=True))
    return weights / weights.sum(axis=1, keepdims=True)


def test_tempered_losses_equal_numpy_and_skip_rows_of_a_class_left_out() -> None:
    random = np.random.default_rng(2)
    evidence = random.normal(size=(50, 6)) * 5
    prior = np.log(np.array([0.3, 0.0, 0.7]), where=[True, False, True], out=np.full(3, -np.inf))
    truth, weights = random.integers(0, 3, 50), random.random(50)
    temperatures = (1.0, 0.75, 0.5)
    out = np.zeros((2, 3))
    relative = np.hstack([evidence[:, 3 * v + 1 : 3 * v + 3] - evidence[:, 3 * v : 3 * v + 1] for v in range(2)])
    tempered_losses(relative, prior, truth, weights, out)
    kept = truth != 1
    for v in range(2):
        for k, t in enumerate(temperatures):
            p = softmax(prior + t * evidence[:, 3 * v : 3 * v + 3])
            expected = -(weights * np.log(p[np.arange(50), truth], where=kept, out=np.zeros(50)))[kept].sum()
            assert out[v, k] == pytest.approx(expected, rel=1e-12)


def test_calibrated_loss_equals_numpy() -> None:
    random = np.random.default_rng(4)
    evidence = random.normal(size=(40, 3)) * 9
    bias = np.log([0.2, 0.3, 0.5]) + np.array([0.1, -0.2, 0.3])
    truth, weights, shares = random.integers(0, 3, 40), random.random(40), np.array([0.25, 0.25, 0.5])
    p = 0.98 * softmax(bias + 0.7 * evidence) + 0.02 * shares
    expected = -(weights * np.log(p[np.arange(40), truth])).sum()
    relative = evidence[:, 1:] - evidence[:, :1]
    found = calibrated_loss(relative, bias[None], 0.7, 0.02, shares, truth, weights)
    assert found == pytest.approx(expected, rel=1e-12)
