"""Which fold, and which block of rows inside the fold, each row belongs to; the same on every machine."""

from heapq import heapreplace
from itertools import pairwise

import numpy as np

from bnx.errors import DataError, SettingError

__all__ = ["STRETCH_ROWS", "assign_blocks", "assign_given", "assign_grouped", "halves", "keyed_hash", "sub_blocks"]

STRETCH_ROWS = 2**16  # lines of the source that are dealt together

_MASK = 2**64 - 1
_WEYL = 0x9E3779B97F4A7C15
_BLOCKS_WANTED = 40
_CLASSES = 2**16  # more than any table has, so that the strata of a part are those of the whole
_ROW_ORDER, _OFFSETS, _GROUP_ORDER, _HALVES = range(4)


def sub_blocks(folds: int) -> int:
    """Count the blocks S of rows per fold: even, and at least 40 over all folds."""
    return 2 * -(-_BLOCKS_WANTED // (2 * folds))


def keyed_hash(seed: int, numbers: np.ndarray) -> np.ndarray:
    """Hash ``numbers`` (any shape, not negative) to uint64 under a key; distinct numbers get distinct hashes.

    Source: Steele, Lea & Flood 2014 (SplitMix), its finaliser with the constants of Stafford's variant 13.
    """
    return _mixed(np.asarray(numbers).astype(np.uint64) * np.uint64(_WEYL) + np.uint64(_key(seed)))


def assign_blocks(
    target: np.ndarray, rows: np.ndarray, seed: int, folds: int, repeat: int, block_rows: int = STRETCH_ROWS
) -> np.ndarray:
    """Give each row its block number fold * S + sub-block, uint16 (N,), without a pass over all rows.

    ``target`` (N,) class codes, ``rows`` (N,) 0-based rows of the source. Within each stretch of ``block_rows`` rows of
    the source, rows of one class are ordered by a keyed hash of their number and dealt to the blocks in turn, from a
    start drawn per stretch and class: class counts of folds differ by at most 1 in every stretch.

    Raises:
        SettingError: fewer than 2 folds, or too many.
    """
    _check_folds(folds)
    place = _dealt(rows // block_rows * _CLASSES + target, rows, _key(seed, repeat), folds * sub_blocks(folds))
    return np.asarray((place % folds) * sub_blocks(folds) + place // folds, dtype=np.uint16)


def assign_given(fold_codes: np.ndarray, target: np.ndarray, rows: np.ndarray, seed: int) -> np.ndarray:
    """Give each row its block number, uint16 (N,), in folds that are given: ``fold_codes`` (N,) from 0 up.

    Rows of one fold and class are dealt to the sub-blocks in the order of a keyed hash.

    Raises:
        DataError: fewer than 2 folds hold rows, or a fold in between holds none.
        SettingError: too many folds.
    """
    sizes = np.bincount(fold_codes)
    if len(sizes) < 2:
        raise DataError(f"the given folds have {len(sizes)} distinct value(s); at least 2 are needed")
    if (sizes == 0).any():
        raise DataError(f"fold {int(np.argmin(sizes))} of the given 0 to {len(sizes) - 1} has no rows; each needs some")
    _check_folds(len(sizes))
    wanted = sub_blocks(len(sizes))
    fold = fold_codes.astype(np.int64)
    return np.asarray(fold * wanted + _dealt(fold * _CLASSES + target, rows, _key(seed), wanted), dtype=np.uint16)


def assign_grouped(groups: np.ndarray, target: np.ndarray, seed: int, folds: int, repeat: int = 0) -> np.ndarray:
    """Give each row its block number, uint16 (N,), rows of one group together in one fold and one sub-block.

    ``groups`` (N,) int codes, ``target`` (N,) class codes. Groups go, big ones first and in keyed order among those of
    like size, to the fold where their classes are rarest so far; inside a fold likewise to the sub-blocks.

    Raises:
        DataError: there are fewer groups than folds.
        SettingError: fewer than 2 folds, or too many.
    """
    _check_folds(folds)
    names, of_row = np.unique(groups, return_inverse=True)
    if len(names) < folds:
        raise DataError(
            f"{folds} folds need as many groups, but the rows form {len(names)}; give fewer --folds or another --group"
        )
    counts = _class_counts(of_row, target, len(names))
    order = _big_first(counts, keyed_hash(_key(seed, repeat, _GROUP_ORDER), np.arange(len(names))))
    fold = np.empty(len(names), dtype=np.int64)
    fold[order] = _balanced(counts[order], folds)
    sub_block = np.empty(len(names), dtype=np.int64)
    for number in range(folds):
        members = order[fold[order] == number]
        sub_block[members] = _balanced(counts[members], sub_blocks(folds))
    return np.asarray((fold * sub_blocks(folds) + sub_block)[of_row], dtype=np.uint16)


def halves(folds: int, blocks: int, resamples: int, seed: int) -> np.ndarray:
    """Draw random halves of the rows: bool (resamples, folds * blocks), half of the ``blocks`` of every fold each time.

    Raises:
        SettingError: ``blocks`` is odd.
    """
    if blocks % 2:
        raise SettingError(f"{blocks} blocks per fold cannot be halved; an even number is needed")
    numbers = np.arange(resamples * folds * blocks).reshape(resamples, folds, blocks)
    order = np.argsort(keyed_hash(_key(seed, _HALVES), numbers), axis=2)
    chosen = np.zeros(numbers.shape, dtype=np.bool_)
    np.put_along_axis(chosen, order[:, :, : blocks // 2], True, axis=2)
    return chosen.reshape(resamples, folds * blocks)


def _check_folds(folds: int) -> None:
    """Refuse a number of folds whose blocks cannot be numbered in 16 bits, or that leaves nothing to compare."""
    if not 2 <= folds < 2**15:
        raise SettingError(f"{folds} folds cannot be used; give from 2 to {2**15 - 1}")


def _mixed(numbers: np.ndarray) -> np.ndarray:
    """Mix the bits of uint64 numbers, one to one."""
    first = (numbers ^ (numbers >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    second = (first ^ (first >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return np.asarray(second ^ (second >> np.uint64(31)))


def _key(*parts: int) -> int:
    """Make one 64-bit key of several integers, in order."""
    key = 0
    for part in parts:
        key = int(_mixed(np.array([(key + (part + 1) * _WEYL) & _MASK], dtype=np.uint64))[0])
    return key


def _dealt(stratum: np.ndarray, rows: np.ndarray, key: int, places: int) -> np.ndarray:
    """Deal the rows of each stratum (N,) in keyed order, one place after the other from a keyed start; places (N,)."""
    strata, of_row = _numbered(stratum)
    order = np.argsort(keyed_hash(_key(key, _ROW_ORDER), rows))  # no two are the same
    order = order[np.argsort(of_row[order].astype(np.min_scalar_type(len(strata))), kind="stable")]
    sizes = np.bincount(of_row, minlength=len(strata))
    rank = np.arange(len(rows)) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    start = keyed_hash(_key(key, _OFFSETS), strata) % np.uint64(places)
    place = np.empty(len(rows), dtype=np.int64)
    place[order] = (rank + np.repeat(start.astype(np.int64), sizes)) % places
    return place


def _numbered(stratum: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """List the different strata in order, and number each row's; strata that lie near one another are not sorted."""
    low, high = (int(stratum.min()), int(stratum.max())) if len(stratum) else (0, 0)
    if high - low >= _CLASSES:
        return np.unique(stratum, return_inverse=True)
    near = stratum - low
    used = np.flatnonzero(np.bincount(near))
    number = np.zeros(high - low + 1, np.int64)
    number[used] = np.arange(len(used))
    return used + low, number[near]


def _class_counts(of_row: np.ndarray, target: np.ndarray, groups: int) -> np.ndarray:
    """Count the rows per group and class, int64 (groups, C)."""
    classes = int(target.max(initial=0)) + 1
    cell = of_row.astype(np.int64) * classes + target
    return np.bincount(cell, minlength=groups * classes).reshape(groups, classes)


def _big_first(counts: np.ndarray, hashes: np.ndarray) -> np.ndarray:
    """Order groups by rows, sizes within a factor 2 counting as like; there, groups of equal counts stand together.

    Otherwise keyed order: ``hashes`` (groups,) decide, and the least hash of a set of equal groups stands for the set.
    """
    _, kind = np.unique(counts, axis=0, return_inverse=True)
    first = np.full(len(counts), _MASK, dtype=np.uint64)
    np.minimum.at(first, kind.ravel(), hashes)
    return np.lexsort((hashes, first[kind.ravel()], -np.frexp(counts.sum(axis=1).astype(np.float64))[1]))


def _balanced(counts: np.ndarray, bins: int) -> np.ndarray:
    """Put each group, a row of ``counts`` (groups, C), where its classes are rarest; ties: fewest rows, then first."""
    loads = np.zeros((bins, counts.shape[1]), dtype=np.int64)
    weighted = counts / np.maximum(counts.sum(axis=0), 1)
    starts = np.flatnonzero(np.append(True, (counts[1:] != counts[:-1]).any(axis=1)))
    chosen: list[int] = []
    for start, end in pairwise([*starts.tolist(), len(counts)]):
        crowding = (loads * weighted[start]).sum(axis=1)
        waiting = sorted(zip(crowding.tolist(), loads.sum(axis=1).tolist(), range(bins), strict=True))
        step = (float((counts[start] * weighted[start]).sum()), int(counts[start].sum()))
        run = _least_crowded(waiting, step, end - start)
        loads += np.bincount(run, minlength=bins)[:, None] * counts[start]
        chosen += run
    return np.array(chosen)


def _least_crowded(waiting: list[tuple[float, int, int]], step: tuple[float, int], groups: int) -> list[int]:
    """Place equal groups one by one in the first bin of a heap of (crowding, rows, bin); each adds ``step``."""
    run = []
    for _ in range(groups):
        crowding, rows, place = waiting[0]
        run.append(place)
        heapreplace(waiting, (crowding + step[0], rows + step[1], place))
    return run
