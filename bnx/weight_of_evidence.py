"""What each attribute of one record says for one class against another, out of fold: by naive, and by its parents."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.disagreement import Contrast, Differ, Pick, alike_by_class, contrast_of, picked
from bnx.evaluation import Evaluation, Predictor
from bnx.structure import Structure

__all__ = ["MOST_LISTED", "Line", "Records", "Rest", "Side", "Told", "records_of_disagreement", "split"]

MOST_LISTED = 12
"""Attributes listed per record, those with most bits of evidence on either side."""

_BITS = 1 / np.log(2)


@dataclass(frozen=True)
class Line:
    """One attribute of a record, bits for one class against another.

    ``level``: as the fold's training rows see it, None if it was not observed; ``left_out``: of the structure.
    ``structure``: given the parents; ``twice``: what naive counts that the parents told already; ``adds``: what is told
    beyond that, or the other way round, so that structure = naive - twice + adds. The three are None where a cell of
    the family was not observed, and summed out together with others.
    """

    attribute: int
    level: str | None
    parents: tuple[int, ...]
    left_out: bool
    naive: float
    structure: float | None
    twice: float | None
    adds: float | None

    @property
    def is_turned(self) -> bool:
        """Tell whether the attribute speaks for the other class as soon as its parents are given."""
        return bool(self.parents and np.sign(self.naive) * np.sign(self.structure or 0.0) < 0)


@dataclass(frozen=True)
class Rest:
    """Sums over the attributes that are not listed."""

    attributes: int
    naive: float
    structure: float
    twice: float
    adds: float


@dataclass(frozen=True)
class Side:
    """What one structure says of a record: ``probabilities`` (C,) as given out.

    ``log_odds``: bits before calibration, which are prior, attributes and ``summed_out``, the families with a cell not
    observed. Calibration multiplies all but the prior by ``temperature``, adds ``offset`` bits, and then ``floor``
    gives way to class shares.
    """

    probabilities: np.ndarray
    log_odds: float
    summed_out: float
    temperature: float
    offset: float
    floor: float


@dataclass(frozen=True)
class Told:
    """One record: what is said of it, for the class ``chosen`` against the class ``other`` (codes).

    ``alike`` (C,): records of the table with the same levels, by class, this one among them.
    """

    pick: Pick
    truth: int
    alike: np.ndarray
    chosen: int
    other: int
    prior: float
    lines: tuple[Line, ...]
    rest: Rest
    naive: Side
    structure: Side


@dataclass(frozen=True)
class Records:
    """The records on which naive and a structure disagree most; no ``differ`` and none told where none is compared."""

    asked: int
    contrast: Contrast
    differ: Differ | None
    told: tuple[Told, ...]


@dataclass(frozen=True)
class _Evidence:
    """One record under one structure, nats for each class against the first.

    ``terms`` (n, C): by attribute; ``summed_out`` (C,): families with a cell not observed, which are ``hidden`` (n,)
    bool; ``unknown`` (n,) bool: the attributes that are.
    """

    terms: np.ndarray
    summed_out: np.ndarray
    hidden: np.ndarray
    unknown: np.ndarray
    probabilities: np.ndarray


def records_of_disagreement(
    evaluation: Evaluation, names: Sequence[str], losses: Sequence[float], recommended: int, number: int
) -> Records:
    """Find at most ``number`` records on which naive and what it is compared with disagree most, and say why.

    names, losses (mean log losses): of the structures compared; recommended: by its number.
    """
    contrast = contrast_of(names, evaluation.learned(()).structures, losses, recommended)
    if contrast.other is None:
        return Records(number, contrast, None, ())
    picks, differ = picked(evaluation, contrast.naive, contrast.other, number)
    both, by_fold = (contrast.naive, contrast.other), sorted({one.fold for one in picks})

    def tell(fold: int) -> dict[int, Told]:
        naive, other = (evaluation.predictor(fold, s) for s in both)
        structure = evaluation.learned((fold,)).structures[both[1]]
        return {one.row: _told(evaluation, one, naive, other, structure) for one in picks if one.fold == fold}

    told = {row: one for found in evaluation.engine.map(tell, by_fold) for row, one in found.items()}
    return Records(number, contrast, differ, tuple(told[one.row] for one in picks))


def split(naive: float, structure: float) -> tuple[float, float]:
    """Split what the parents change of an attribute's evidence (bits) into ``twice`` and ``adds``.

    Where less of it is left given the parents, the rest was told by them already. Where more is left, the attribute
    adds that; where it then speaks for the other class, nothing was told twice: the parents turn it round.
    """
    if np.sign(naive) * np.sign(structure) < 0:
        return 0.0, structure - naive
    left = min(naive, structure, key=abs)
    return naive - left, structure - left


def _told(evaluation: Evaluation, pick: Pick, naive: Predictor, other: Predictor, structure: Structure) -> Told:
    """Tell of one record.

    Source: Good 1950 (weight of evidence).
    """
    by_naive, by_other = (_evidence(one, pick.place) for one in (naive, other))
    p, q = by_naive.probabilities, by_other.probabilities
    chosen, against = int(p.argmax()), int(q.argmax())
    if chosen == against:
        mean = p + q
        mean[chosen] = -1.0
        against = int(mean.argmax())
    apart = [(one.terms[:, chosen] - one.terms[:, against]) * _BITS for one in (by_naive, by_other)]
    prior = float(naive.log_prior[chosen] - naive.log_prior[against]) * _BITS
    sides = [
        _side(predictor, one, bits, (chosen, against), prior)
        for predictor, one, bits in zip((naive, other), (by_naive, by_other), apart, strict=True)
    ]
    lines = _lines(evaluation, pick, by_other, structure, apart)
    lines.sort(key=lambda one: (-max(abs(one.naive), abs(one.structure or 0.0)), one.attribute))
    listed, others = lines[:MOST_LISTED], lines[MOST_LISTED:]
    listed.sort(key=lambda one: (-abs(one.naive - (one.structure or 0.0)), one.attribute))
    sums = (sum(getattr(one, part) or 0.0 for one in others) for part in ("naive", "structure", "twice", "adds"))
    return Told(
        pick,
        int(evaluation.engine.target[pick.place]),
        alike_by_class(evaluation, pick.levels),
        chosen,
        against,
        prior,
        tuple(listed),
        Rest(len(others), *sums),
        *sides,
    )


def _evidence(predictor: Predictor, place: int) -> _Evidence:
    """Look up what every family says of the engine's row ``place``."""
    terms = predictor.terms
    own, codes = terms.families, predictor.codes[:, place].astype(np.int64)
    members, sizes, depths = own.members[terms.which], own.sizes[terms.which], own.depths[terms.which]
    every = np.arange(len(codes))
    levels = own.recode[every, codes]
    unknown = np.zeros(len(codes), np.bool_) if own.unknown is None else own.unknown[every, codes]
    cells, hidden = np.zeros(len(codes), np.int64), np.zeros(len(codes), np.bool_)
    for m in range(members.shape[1]):
        counts = m < depths
        cells = np.where(counts, cells * sizes[:, m] + levels[members[:, m]], cells)
        hidden |= counts & unknown[members[:, m]]
    against = terms.table[terms.starts + cells, : len(predictor.log_prior) - 1]
    whole = terms.evidence(predictor.codes, place, place + 1)[0, : against.shape[1]]
    summed = whole - against.sum(axis=0) if hidden.any() else np.zeros(against.shape[1])
    first = np.zeros((len(codes), 1))
    p = predictor.probabilities(place, place + 1)[0]
    return _Evidence(np.hstack([first, against]), np.append(0.0, summed), hidden, unknown, p)


def _side(predictor: Predictor, evidence: _Evidence, bits: np.ndarray, ends: tuple[int, int], prior: float) -> Side:
    chosen, against = ends
    calibration = predictor.calibration
    summed = float(evidence.summed_out[chosen] - evidence.summed_out[against]) * _BITS
    offset = float(calibration.offsets[chosen] - calibration.offsets[against]) * _BITS
    log_odds = prior + float(bits.sum()) + summed
    return Side(evidence.probabilities, log_odds, summed, calibration.temperature, offset, calibration.floor)


def _lines(
    evaluation: Evaluation, pick: Pick, other: _Evidence, structure: Structure, apart: Sequence[np.ndarray]
) -> list[Line]:
    """List every attribute; apart: bits by naive and by the structure, (n,) each."""
    view = evaluation.learned((pick.fold,)).training.view
    codes = evaluation.engine.codes[:, pick.place].tolist()
    dropped, naive, given = set(structure.dropped), apart[0].tolist(), apart[1].tolist()
    lines = []
    for i, domain in enumerate(view.domains):
        code = int(view.recode[i, codes[i]])
        level = domain.levels[code] if code < len(domain.levels) else None
        parents = tuple(int(one) for one in structure.parents[i])
        if other.hidden[i]:
            lines.append(Line(i, level, parents, False, naive[i], None, None, None))
            continue
        twice, adds = split(naive[i], given[i]) if parents else (0.0, given[i] - naive[i])
        lines.append(Line(i, level, parents, i in dropped, naive[i], given[i], twice, adds))
    return lines
