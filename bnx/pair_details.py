"""One pair looked at closely: every stratum, every class, odds ratios, trends, and whether the classes agree."""

from collections.abc import Sequence
from dataclasses import asdict, dataclass, replace
from typing import Any

import numpy as np

from bnx.domains import Domain
from bnx.effects import (
    BinaryAssociation,
    YuleQ,
    binary_association,
    binary_part,
    expected_and_residuals,
    stratum_v,
    yule_q,
)
from bnx.homogeneity import Homogeneity, homogeneity
from bnx.independence import METHODS, Statistics
from bnx.intervals import detectable_bits
from bnx.kernels.contingency import one_table
from bnx.multiplicity import adjusted, threshold
from bnx.ordered import OrderedTest, generalised_cmh
from bnx.refining import reported, visit_arrays, with_chance

__all__ = ["ClassPart", "Pair", "PairDetail", "Stratum", "compare_classes", "look_closely"]


_MOST_CELLS = 400  # of a covariance matrix


@dataclass(frozen=True)
class Pair:
    """What is to be looked at: two attributes, what is given (the class first), and scores of ordered levels."""

    a: Domain
    b: Domain
    given: tuple[Domain, ...]
    a_scores: np.ndarray | None
    b_scores: np.ndarray | None

    def in_order(self, counts: np.ndarray) -> tuple["Pair", np.ndarray]:
        """Lay out ordered levels in their order, what has no place in it last; counts (S, levels of a, levels of b)."""
        (a, a_scores, first), (b, b_scores, second) = _placed(self.a, self.a_scores), _placed(self.b, self.b_scores)
        return Pair(a, b, self.given, a_scores, b_scores), np.ascontiguousarray(counts[:, first][:, :, second])


def _placed(domain: Domain, scores: np.ndarray | None) -> tuple[Domain, np.ndarray | None, np.ndarray]:
    """Sort levels by their scores, if they have any; also give the order."""
    if scores is None:
        return domain, None, np.arange(len(domain))
    order = np.argsort(scores, kind="stable")
    return replace(domain, levels=tuple(domain.levels[k] for k in order)), scores[order], order


@dataclass(frozen=True)
class Stratum:
    """A stratum that holds records: the level of every given attribute, the class first; arrays (levels, levels).

    ``expected`` and ``residuals`` (adjusted) are NaN where they are not defined.
    """

    of: tuple[str, ...]
    observed: np.ndarray
    expected: np.ndarray
    residuals: np.ndarray
    cramers_v: float
    yule: YuleQ | None

    @property
    def rows(self) -> int:
        """Records of the stratum."""
        return int(self.observed.sum())


@dataclass(frozen=True)
class ClassPart:
    """The dependence within one class, over its strata; ``adjusted_p`` by Holm's steps over the classes;
    ``detectable_bits`` with power .80 at the p that these come to.
    """

    level: str
    rows: int
    bits: float
    bits_corrected: float
    x2: float
    df: int
    p_value: float
    adjusted_p: float
    method: str
    cramers_v: float
    detectable_bits: float


@dataclass(frozen=True)
class PairDetail:
    """All that is known of one pair; ``same`` tests one pattern in all classes, ``only_in`` names the one class
    whose own test rejects while the patterns differ, empty if there is none.
    """

    pair: Pair
    strata: tuple[Stratum, ...]
    classes: tuple[ClassPart, ...]
    same: Homogeneity
    same_adjusted_p: float
    differs: bool
    only_in: str
    binary: BinaryAssociation | None
    trend: OrderedTest | None

    @property
    def pooled_odds(self) -> float:
        """Odds ratio of a binary pair over all records, whatever is given; NaN where it is 0 / 0 or there is none."""
        table = binary_part(np.sum([stratum.observed for stratum in self.strata], axis=0)[None])
        if table is None:
            return np.nan
        (a, b), (c, d) = table[0].tolist()
        return a * d / (b * c) if b * c else np.inf if a * d else np.nan

    def to_dict(self, with_strata: bool) -> dict[str, Any]:
        """Give everything as plain values."""
        return {
            "classes": [asdict(part) for part in self.classes],
            "same_in_every_class": asdict(self.same),
            "same_in_every_class_adjusted_p": self.same_adjusted_p,
            "differs_between_classes": self.differs,
            "only_in": self.only_in or None,
            "odds": None
            if self.binary is None
            else {
                **asdict(self.binary),
                "yule_q": asdict(self.binary.yule_q),
                "odds_ratio_given_nothing": self.pooled_odds,
            },
            "trend": None if self.trend is None else asdict(self.trend),
            **({"strata_tables": [self._table(stratum) for stratum in self.strata]} if with_strata else {}),
        }

    def _table(self, stratum: Stratum) -> dict[str, Any]:
        return {
            "of": dict(zip([domain.name for domain in self.pair.given], stratum.of, strict=True)),
            "rows": stratum.rows,
            "a_levels": list(self.pair.a.levels),
            "b_levels": list(self.pair.b.levels),
            "observed": stratum.observed.tolist(),
            "expected": stratum.expected.tolist(),
            "residuals": stratum.residuals.tolist(),
            "cramers_v": stratum.cramers_v,
            "yule_q": None if stratum.yule is None else asdict(stratum.yule),
        }


def look_closely(pair: Pair, counts: np.ndarray, numbers: np.ndarray, test: str, alpha: float, seed: int) -> PairDetail:
    """Look at one pair.

    counts: records, int32 (S, levels of a, levels of b), of the strata that hold any; numbers (S,): which of all
    combinations of given levels each is, the class outermost.

    Whether the classes differ is left open: `compare_classes` judges it for all pairs looked at.
    """
    groups = numbers // int(np.prod([len(domain) for domain in pair.given[1:]], dtype=np.int64))
    parts = _class_parts(
        pair.given[0].levels, [counts[groups == c] for c in range(len(pair.given[0]))], test, alpha, seed
    )
    same = homogeneity(counts, groups, seed=seed)
    table = binary_part(counts)
    return PairDetail(
        pair,
        _strata(pair.given, counts, numbers),
        parts,
        same,
        np.nan,
        False,
        "",
        None if table is None else binary_association(table),
        _trend(counts, pair.a_scores, pair.b_scores),
    )


def compare_classes(details: Sequence[PairDetail], adjust: str, alpha: float) -> list[PairDetail]:
    """Judge, for all pairs looked at, whether their classes share one pattern, p adjusted for their number.

    A dependence shows in one class only if the patterns differ and that class's own test alone rejects, by Holm's steps
    over the classes.
    """
    corrected = adjusted(np.array([detail.same.p for detail in details]), adjust).tolist()
    judged = []
    for detail, p in zip(details, corrected, strict=True):
        rejecting = [part.level for part in detail.classes if part.adjusted_p <= alpha]
        only_in = rejecting[0] if p <= alpha and len(rejecting) == 1 else ""
        judged.append(replace(detail, same_adjusted_p=p, differs=p <= alpha, only_in=only_in))
    return judged


def _strata(given: Sequence[Domain], counts: np.ndarray, numbers: np.ndarray) -> tuple[Stratum, ...]:
    """Describe the strata."""
    expected, residuals = expected_and_residuals(counts)
    strength, tables = stratum_v(counts), binary_part(counts)
    levels = np.unravel_index(numbers, [len(domain) for domain in given])
    return tuple(
        Stratum(
            tuple(domain.levels[level[s]] for domain, level in zip(given, levels, strict=True)),
            counts[s],
            expected[s],
            residuals[s],
            float(strength[s]),
            None if tables is None else yule_q(tables[s]),
        )
        for s in range(len(counts))
    )


def _class_parts(
    levels: Sequence[str], counts: Sequence[np.ndarray], test: str, alpha: float, seed: int
) -> tuple[ClassPart, ...]:
    """Test the dependence within every class; counts: of each, (its strata, levels of a, levels of b)."""
    height, width = counts[0].shape[1:]
    flat = [part.reshape(len(part), height * width) for part in counts]
    stats = Statistics.of(np.array([one_table(part, height, width) for part in flat]))
    visit = visit_arrays(flat, height, width)
    stats = with_chance(visit, stats)
    tested = reported(visit, stats, test, "holm", alpha, seed).tested
    corrected = adjusted(tested.p, "holm")
    at = threshold(tested.p, "holm", alpha)
    detectable = detectable_bits(at, np.where(stats.varies, stats.df, 0.0), stats.rows)
    return tuple(
        ClassPart(
            level,
            int(stats.rows[c]),
            float(stats.bits[c]),
            float(stats.bits_corrected[c]),
            float(stats.x2[c]),
            int(stats.df[c]),
            float(tested.p[c]),
            float(corrected[c]),
            METHODS[tested.method[c]],
            float(stats.cramers_v[c]),
            float(detectable[c]),
        )
        for c, level in enumerate(levels)
    )


def _trend(counts: np.ndarray, a_scores: np.ndarray | None, b_scores: np.ndarray | None) -> OrderedTest | None:
    """Test for a trend over the levels that have a place in an order, or for one pattern if neither has an order.

    None where that takes the covariance of more cells than is sensible.
    """
    if a_scores is None and b_scores is None and (counts.shape[1] - 1) * (counts.shape[2] - 1) > _MOST_CELLS:
        return None
    for axis, scores in ((1, a_scores), (2, b_scores)):
        if scores is not None:
            counts = np.compress(~np.isnan(scores), counts, axis=axis)
    first, second = (None if scores is None else scores[~np.isnan(scores)] for scores in (a_scores, b_scores))
    return generalised_cmh(counts, first, second)
