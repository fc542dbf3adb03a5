"""Counts of all families of all training sets, from as few passes over the rows as possible."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels import count_families, take_margins, take_training
from bnx.kernels.weighing import weigh_families
from bnx.scoring import Counted, Families
from bnx.trainings import Training

__all__ = ["tabulate"]

_DENSE = 8  # families are counted by part when the cells of one, over parts and classes, are at most this many per row
_CELLS = 8_000_000  # counted at a time, over parts and classes


@dataclass(frozen=True)
class _Parts:
    """Blocks that every training set holds together or lacks together: ``of_block`` (blocks,), ``held`` (T, P) bool."""

    of_block: np.ndarray
    held: np.ndarray


@dataclass(frozen=True)
class _Shared:
    """Different families that several training sets ask for.

    ``members``, ``sizes``, ``depths``, ``cells`` as in Families; per training set, ``asked``: which of its own families
    they are, and ``number``: which of these.
    """

    members: np.ndarray
    sizes: np.ndarray
    depths: np.ndarray
    cells: np.ndarray
    asked: tuple[np.ndarray, ...]
    number: tuple[np.ndarray, ...]


def tabulate(engine: LocalEngine, trainings: Sequence[Training], families: Sequence[Families]) -> list[Counted]:
    """Count the families of each training set in its rows.

    Single attributes are known from their margins. A family of attributes that are used as stored is counted once, by
    the parts of the table that training sets are made of, and added up; any other is counted in its own training rows.
    """
    kind = np.float64 if engine.weighed else np.int32
    out = [Counted(own, np.zeros((engine.classes, int(own.starts[-1])), kind)) for own in families]
    parts = _parts(trainings)
    _fill_margins(engine, trainings, parts, out)
    most = _DENSE * int(engine.starts[-1]) // (parts.held.shape[1] * engine.classes)
    shared = _shared(families, most)
    _fill_shared(engine, parts, shared, out)

    def fill_rest(number: int) -> None:
        own = families[number]
        rest = np.flatnonzero(own.depths > 1)
        rest = rest[~np.isin(rest, shared.asked[number])]
        slots = np.where(trainings[number].mask[:, None], np.arange(engine.classes), -1).ravel()
        _count(engine, own, rest, own.starts[rest], slots, out[number].counts)

    engine.map(fill_rest, range(len(families)), "counting families")
    return out


def _parts(trainings: Sequence[Training]) -> _Parts:
    masks = np.array([training.mask for training in trainings])
    held, of_block = np.unique(masks, axis=1, return_inverse=True)
    return _Parts(of_block.ravel(), held)


def _fill_margins(engine: LocalEngine, trainings: Sequence[Training], parts: _Parts, out: Sequence[Counted]) -> None:
    """Fill in the families without parents."""
    every = engine.weighed.margins if engine.weighed else engine.margins
    flat = [margin.reshape(engine.blocks, -1) for margin in every]
    widths = np.array([one.shape[1] for one in flat]) // engine.classes
    offsets = np.concatenate([[0], np.cumsum(widths)])
    by_part = np.zeros((parts.held.shape[1], engine.classes, int(offsets[-1])), every[0].dtype)
    for i, margin in enumerate(every):
        np.add.at(by_part[:, :, offsets[i] : offsets[i + 1]], parts.of_block, margin)
    for number, (training, one) in enumerate(zip(trainings, out, strict=True)):
        alone = np.flatnonzero(one.families.depths == 1)
        margins = by_part[parts.held[number]].sum(axis=0)
        attributes, tos = one.families.members[alone, 0], one.families.starts[alone]
        take_margins(margins, offsets, training.view.recode, attributes, tos, one.counts)


def _shared(families: Sequence[Families], most_cells: int) -> _Shared:
    """Find the different families of stored attributes, of at most so many cells, over all training sets."""
    widest = max(own.members.shape[1] for own in families)
    asked, rows, sizes = [], [], []
    for own in families:
        cells = np.diff(own.starts)
        one = np.flatnonzero((own.depths > 1) & own.plain & (cells <= most_cells))
        empty = np.arange(own.members.shape[1]) >= own.depths[one, None]
        more = ((0, 0), (0, widest - own.members.shape[1]))
        rows.append(np.pad(np.where(empty, -1, own.members[one]), more, constant_values=-1))
        sizes.append(np.pad(own.sizes[one], more, constant_values=1))
        asked.append(one)
    members = np.concatenate(rows)
    first, number = _different(members)
    members, every_size = members[first], np.concatenate(sizes)[first]
    ends = np.cumsum([len(one) for one in asked])[:-1]
    depths, cells = (members >= 0).sum(axis=1), every_size.prod(axis=1)
    return _Shared(np.maximum(members, 0), every_size, depths, cells, tuple(asked), tuple(np.split(number, ends)))


def _different(rows: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Number the different rows of small whole numbers from -1 on: where each is first, and the number of every row."""
    keys, numbers = np.zeros(len(rows), np.int64), 1
    base = int(rows.max(initial=0)) + 2
    for column in rows.T:
        if numbers > 2**62 // base:
            keys, numbers = np.unique(keys, return_inverse=True)[1].ravel(), len(rows) + 1
        keys, numbers = keys * base + column + 1, numbers * base
    _, first, number = np.unique(keys, return_index=True, return_inverse=True)
    return first, number.ravel()


def _fill_shared(engine: LocalEngine, parts: _Parts, shared: _Shared, out: Sequence[Counted]) -> None:
    """Count shared families by part, a few at a time, and add them up for every training set that asks."""
    most = max(1, _CELLS // (parts.held.shape[1] * engine.classes))
    turn = (np.cumsum(shared.cells) - shared.cells) // most
    bounds = np.concatenate([[0], np.flatnonzero(np.diff(turn)) + 1, [len(turn)]]).tolist()
    for low, high in pairwise(bounds):
        if low < high:
            _fill_batch(engine, parts, shared, low, high, out)


def _fill_batch(
    engine: LocalEngine, parts: _Parts, shared: _Shared, low: int, high: int, out: Sequence[Counted]
) -> None:
    """Count the shared families ``low:high`` by part, and add them up."""
    starts = np.concatenate([[0], np.cumsum(shared.cells[low:high])])
    pieces = parts.held.shape[1]
    found = np.zeros((pieces * engine.classes, int(starts[-1])), out[0].counts.dtype)
    slots = (parts.of_block[:, None] * engine.classes + np.arange(engine.classes)).ravel()
    own = (shared.members[low:high], shared.sizes[low:high], shared.depths[low:high], np.ones(high - low, bool))
    unread, nothing = np.zeros((1, 1), np.int32), np.zeros((0, 0), np.int64)
    batch = Families(*own, starts, unread, nothing, ())
    shares = np.array_split(np.arange(high - low), min(high - low, 8 * engine.jobs))
    engine.map(lambda share: _count(engine, batch, share, starts[share], slots, found), shares, "counting families")
    by_part = found.reshape(pieces, engine.classes, -1)
    total = by_part.sum(axis=0, dtype=found.dtype)

    def take(number: int) -> None:
        here = (shared.number[number] >= low) & (shared.number[number] < high)
        asked, froms = shared.asked[number][here], shared.number[number][here] - low
        tos, lengths = out[number].families.starts[asked], starts[froms + 1] - starts[froms]
        away = np.flatnonzero(~parts.held[number])
        take_training(total, by_part, away, starts[froms], tos, lengths, out[number].counts)

    engine.map(take, range(len(out)))


def _count(
    engine: LocalEngine,
    families: Families,
    which: np.ndarray,
    out_starts: np.ndarray,
    slots: np.ndarray,
    out: np.ndarray,
) -> None:
    """Count some families by slot, rows as they weigh."""
    fixed = (families.recode, families.plain, families.members, families.sizes, families.depths)
    if engine.weighed:
        weigh_families(engine.codes, engine.weighed.of_rows, *fixed, which, out_starts, engine.starts, slots, out)
    else:
        count_families(engine.codes, *fixed, which, out_starts, engine.starts, slots, out)
