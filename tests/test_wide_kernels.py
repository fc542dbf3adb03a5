"""The kernels that sort, rank, exponentiate and pack, against numpy and plain loops."""

import numpy as np
import pytest
from builders import coded, started

from bnx.counts import PairLayout
from bnx.kernels import rank_sums, sort_whole
from bnx.kernels.exponentials import exponentials
from bnx.kernels.planes import pack_planes


def test_exponentials_are_those_of_numpy() -> None:
    x = np.concatenate([np.linspace(-708, 700, 200_001), [0.0, -1e-300, 1e-300]])
    found = x.copy()
    exponentials(found, np.empty(3 * len(x)))
    assert np.abs(found / np.exp(x) - 1).max() < 1e-15
    assert found[-3] == 1.0


def test_exponentials_of_what_is_too_low_add_nothing_to_one() -> None:
    x = np.array([-np.inf, -1e6, -709.0])
    exponentials(x, np.empty(9))
    assert (1.0 + x == 1.0).all()


@pytest.mark.parametrize("rows", [0, 1, 2, 1000])
@pytest.mark.parametrize("top", [2, 2**11, 2**40, 2**62])
def test_whole_numbers_are_sorted(rows: int, top: int) -> None:
    numbers = np.random.default_rng(rows).integers(0, top, rows)
    assert (sort_whole(numbers.copy()) == np.sort(numbers)).all()


def test_the_area_counts_pairs_and_halves_of_ties() -> None:
    rng = np.random.default_rng(3)
    score, right = rng.integers(0, 9, 300) / 8, rng.random(300) < 0.4
    packed = np.sort((score.view(np.int64) << 1) | right)
    sums, hits = np.zeros(4), np.zeros(4)
    area = rank_sums(packed, sums, hits)
    differences = np.sign(score[right][:, None] - score[~right])
    assert area == (differences + 1).sum()
    assert hits.sum() == right.sum()
    assert sums.sum() == pytest.approx(score.sum())


@pytest.mark.parametrize(("kind", "levels"), [(np.uint8, 256), (np.uint16, 300)])
@pytest.mark.parametrize("rows", [1, 63, 64, 65, 200])
def test_every_word_of_a_plane_is_written(kind: type, levels: int, rows: int) -> None:
    before = 7
    codes = np.random.default_rng(rows).integers(0, levels, before + rows).astype(kind)
    planes = np.full(((rows + 63) // 64, levels - 1), 12345, np.uint64)
    pack_planes(codes, before, rows, levels, planes)
    for level in range(levels - 1):
        bits = np.zeros(planes.shape[0] * 64, np.uint8)
        bits[:rows] = codes[before:] == level
        assert (planes[:, level] == np.packbits(bits, bitorder="little").view("<u8")).all()


@pytest.mark.parametrize("levels", [(32, 31), (31, 3), (40, 2), (60, 60)])
def test_pairs_with_many_cells_are_counted_like_any_other(levels: tuple[int, int]) -> None:
    rng = np.random.default_rng(8)
    codes = np.array([rng.integers(0, size, 500) for size in levels], dtype=np.uint8)
    target = np.sort(rng.integers(0, 2, 500))
    engine = started(coded(codes, target, levels))
    pair = np.array([0]), np.array([1])
    counts = engine.pair_counts(PairLayout.of(np.array(levels), *pair)).counts[0]
    for c in range(2):
        expected = np.zeros(levels, int)
        np.add.at(expected, tuple(codes[:, target == c]), 1)
        assert (counts[c].reshape(levels) == expected).all()
