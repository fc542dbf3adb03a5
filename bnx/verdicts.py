"""Verdicts on pairs tested as one family: adjusted p, what could have been detected, and what it all says."""

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, fields
from typing import Any

import numpy as np

from bnx.independence import METHODS, Statistics, Tested
from bnx.intervals import bits_interval, bits_upper, detectable_bits
from bnx.multiplicity import adjusted, threshold
from bnx.plain import finite

__all__ = [
    "OUTCOMES",
    "PAIR_KEYS",
    "VERDICTS",
    "Judgement",
    "TestResult",
    "judge",
    "judged_by",
    "outcomes",
    "pairs_csv",
    "results",
]

VERDICTS = ("negligible", "detected, but negligible", "dependent", "not enough data")

OUTCOMES = ("explained", "remains", "strengthened", "appears only given the class", "not enough data")

_NEGLIGIBLE, _DETECTED_NEGLIGIBLE, _DEPENDENT, _UNKNOWN = range(4)
_EXPLAINED, _REMAINS, _STRENGTHENED, _APPEARS, _UNTOLD = range(5)


@dataclass(frozen=True)
class Judgement:
    """What the tests of P pairs say, judged as one family; arrays (P,).

    ``method`` indexes METHODS, ``verdict`` indexes VERDICTS, ``at`` is the p-value the family was judged by,
    ``low`` and ``high`` bound the bits at 95 %, ``upper`` from above alone. NaN where there is nothing to say.
    """

    statistic: np.ndarray
    p: np.ndarray
    method: np.ndarray
    carried: np.ndarray
    adjusted: np.ndarray
    at: float
    rejected: np.ndarray
    low: np.ndarray
    high: np.ndarray
    upper: np.ndarray
    detectable: np.ndarray
    verdict: np.ndarray

    def take(self, chosen: np.ndarray) -> "Judgement":
        """Keep the chosen pairs."""
        parts = (getattr(self, field.name) for field in fields(self))
        return Judgement(*(part[chosen] if isinstance(part, np.ndarray) else part for part in parts))


def judge(
    stats: Statistics, tested: Tested, *, adjust: str = "bh", alpha: float = 0.05, negligible: float = 0.005
) -> Judgement:
    """Judge P tested pairs as one family and give each a verdict; ``negligible`` in bits.

    Raises:
        SettingError: the adjustment is not known.
    """
    return judged_by(stats, tested, adjusted(tested.p, adjust), threshold(tested.p, adjust, alpha), alpha, negligible)


def judged_by(
    stats: Statistics, tested: Tested, corrected: np.ndarray, at: float, alpha: float, negligible: float
) -> Judgement:
    """Give P tested pairs verdicts, whatever family they are from: adjusted p (P,), and the p it was judged by."""
    rejected = corrected <= alpha
    low, high = bits_interval(stats)
    upper = bits_upper(stats)
    small = upper < negligible
    verdict = np.select(
        [small & ~rejected, small & rejected, rejected], [_NEGLIGIBLE, _DETECTED_NEGLIGIBLE, _DEPENDENT], _UNKNOWN
    )
    detectable = detectable_bits(at, np.where(stats.varies, stats.df, 0.0), stats.rows)
    return Judgement(*tested, corrected, at, rejected, low, high, upper, detectable, verdict.astype(np.int8))


def outcomes(stats: Statistics, given: Judgement, marginal: Statistics, without: Judgement) -> np.ndarray:
    """Say what the class explains of each of P pairs, as index into OUTCOMES, (P,).

    *explained*: only the test without the class rejects, and what could remain is negligible; *remains*: both tests
    reject; *strengthened*: both, and even the lower bound given the class lies above the bits without it; *appears only
    given the class*: only the test given the class rejects; else *not enough data*.
    """
    small = (given.verdict == _NEGLIGIBLE) | (given.verdict == _DETECTED_NEGLIGIBLE)
    both = given.rejected & without.rejected
    stronger = both & (given.low > marginal.bits_corrected)
    explained = without.rejected & ~given.rejected & small
    return np.select(
        [explained, stronger, both, given.rejected], [_EXPLAINED, _STRENGTHENED, _REMAINS, _APPEARS], _UNTOLD
    ).astype(np.int8)


@dataclass(frozen=True)
class TestResult:
    """One pair, tested: bits per record, statistics, p-values and the verdict; NaN where there is nothing to say."""

    __test__ = False  # pytest would collect the class by its name

    a: str
    b: str
    bits: float
    bits_corrected: float
    bits_low: float
    bits_high: float
    bits_at_most: float
    marginal_bits: float
    marginal_bits_corrected: float
    marginal_p_value: float
    marginal_adjusted_p: float
    explained_bits: float
    bits_without_blanks: float
    double_counted_bits: float
    outcome: str
    x2: float
    g: float
    statistic: float
    df: int
    p_value: float
    adjusted_p: float
    method: str
    sample_carries_it: bool
    strata: int
    strata_informative: int
    min_expected: float
    share_expected_below_5: float
    cramers_v: float
    detectable_bits: float
    detectable_at: float
    verdict: str

    def to_dict(self) -> dict[str, str | float | int | bool | None]:
        """Give the fields by name, None for NaN."""
        plain: dict[str, str | float | int | bool | None] = finite(vars(self))
        return plain


PAIR_KEYS = tuple(field.name for field in fields(TestResult))


def pairs_csv(pairs: Iterable[Mapping[str, Any]], *more: str) -> str:
    """Write pairs, as mappings with all PAIR_KEYS and ``more``, as CSV with a header."""
    text = io.StringIO()
    writer = csv.DictWriter(text, (*PAIR_KEYS, *more), lineterminator="\n")
    writer.writeheader()
    writer.writerows(pairs)
    return text.getvalue()


def results(
    names: Sequence[tuple[str, str]],
    stats: Statistics,
    judgement: Judgement,
    marginal: Statistics,
    without: Judgement,
    outcome: np.ndarray,
    without_blanks: np.ndarray,
    double_counted: np.ndarray,
) -> list[TestResult]:
    """Write P judged pairs as one result each; ``without``: judged without the class."""
    method, verdict, explained = (np.array(words, dtype=object) for words in (METHODS, VERDICTS, OUTCOMES))
    at = np.full(stats.rows.shape, judgement.at)
    shared = (stats.bits, stats.bits_corrected, judgement.low, judgement.high, judgement.upper)
    whole = (marginal.bits, marginal.bits_corrected, without.p, without.adjusted)
    apart = (marginal.bits_corrected - stats.bits_corrected, without_blanks, double_counted, explained[outcome])
    tested = (stats.x2, stats.g, judgement.statistic, stats.df.astype(np.int64), judgement.p, judgement.adjusted)
    strata = (stats.strata.astype(np.int64), stats.informative.astype(np.int64))
    trust = (method[judgement.method], judgement.carried, *strata, stats.min_expected, stats.share_below_5)
    effect = (stats.cramers_v, judgement.detectable, at, verdict[judgement.verdict])
    columns = [column.tolist() for column in (*shared, *whole, *apart, *tested, *trust, *effect)]
    return [TestResult(*pair, *row) for pair, *row in zip(names, *columns, strict=True)]
