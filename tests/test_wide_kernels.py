"""The kernels that sort, rank, exponentiate and pack, against numpy and plain loops."""

import numpy as np
import pytest

from bnx.kernels import pack_planes, rank_sums, sort_whole
from bnx.kernels.exponentials import exponentials


def test_exponentials_are_those_of_numpy() -> None:
    x = np.concatenate([np.linspace(-708, 700, 200_001), [0.0, -1e-300, 1e-300]])
    found = x.copy()
    exponentials(found, np.empty((3, len(x))))
    assert np.abs(found / np.exp(x) - 1).max() < 1e-15
    assert found[-3] == 1.0


def test_exponentials_of_what_is_too_low_add_nothing_to_one() -> None:
    x = np.array([-np.inf, -1e6, -709.0])
    exponentials(x, np.empty((3, 3)))
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
    area = rank_sums(packed, (packed >> 1).view(np.float64), sums, hits)
    differences = np.sign(score[right][:, None] - score[~right])
    assert area == (differences + 1).sum()
    assert hits.sum() == right.sum()
    assert sums.sum() == pytest.approx(score.sum())


@pytest.mark.parametrize(("kind", "levels"), [(np.uint8, 256), (np.uint16, 300)])
@pytest.mark.parametrize("rows", [1, 63, 64, 65, 200])
def test_every_word_of_a_plane_is_written(kind: type, levels: int, rows: int) -> None:
    codes = np.random.default_rng(rows).integers(0, levels, (2, rows)).astype(kind)
    starts = np.array([0, rows // 3, rows])
    words = np.concatenate([[0], np.cumsum((np.diff(starts) + 63) // 64)])
    sizes, ends = np.array([levels, levels]), np.arange(3) * (levels - 1)
    planes = np.full((ends[-1] + 4, words[-1]), 12345, np.uint64)
    pack_planes(codes, starts, words, sizes, ends, 0, 2, planes)
    for i in range(2):
        for level in range(levels - 1):
            for g in range(2):
                bits = np.zeros((words[g + 1] - words[g]) * 64, np.uint8)
                bits[: starts[g + 1] - starts[g]] = codes[i, starts[g] : starts[g + 1]] == level
                wanted = np.packbits(bits, bitorder="little").view("<u8")
                assert (planes[ends[i] + level, words[g] : words[g + 1]] == wanted).all()
