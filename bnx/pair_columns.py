"""The columns of the page's ledger of pairs: what each is called, what it says, and what it is sorted by."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from bnx.counted_twice import bits_twice
from bnx.printed import PairRow
from bnx.verdicts import OUTCOMES

__all__ = ["PAIR_COLUMNS", "VERDICT_ORDER", "PairColumn", "column_text", "column_value"]

VERDICT_ORDER = ("dependent", "detected, but negligible", "negligible", "not enough data")
"""Verdicts as the page lists them."""

_SIZES = ("smallest first", "largest first")
_ALPHABET = ("A to Z", "Z to A")


@dataclass(frozen=True)
class PairColumn:
    """One column: ``told`` explains it, ``brief`` ones are shown at first.

    ``orders``: its two directions in words, up and down, empty where it is not sorted by; ``falls``: down comes first.
    """

    key: str
    label: str
    told: str
    numeric: bool
    brief: bool
    orders: tuple[str, ...]
    falls: bool


def _figure(key: str, label: str, told: str, brief: bool = False, falls: bool = True) -> PairColumn:
    return PairColumn(key, label, told, True, brief, _SIZES, falls)


PAIR_COLUMNS = (
    PairColumn("pair", "pair", "The two attributes; press one to see its tables.", False, True, _ALPHABET, False),
    PairColumn(
        "verdict",
        "verdict",
        "See the four verdicts above.",
        False,
        True,
        ("dependent first", "not enough data first"),
        False,
    ),
    _figure("bits", "bits given the class", "What the two share within a class, as counted.", brief=True),
    PairColumn(
        "interval",
        "95 % interval, less chance",
        "Of those bits, less what chance alone would show.",
        True,
        True,
        (),
        False,
    ),
    _figure("at_most", "at most, bits", "Bound from above (95 %); “negligible” goes by it."),
    _figure("marginal", "bits without the class", "What the two share when the class is not known, as counted."),
    _figure(
        "double_counted",
        "counted twice, bits",
        "Evidence about the class that naive counts twice because of this pair, in an average record; below 0 it "
        "counts too little. Told of dependent pairs only.",
        brief=True,
    ),
    PairColumn(
        "outcome",
        "what the class explains",
        "Explained: only the test without the class rejects, and what could remain is negligible. Remains: both "
        "reject. Strengthened: both, with more bits given the class. Appears only given the class: only the test "
        "given the class rejects.",
        False,
        True,
        ("explained first", "not enough data first"),
        False,
    ),
    _figure("cramers_v", "Cramér’s V", "Strength of the dependence given the class, from 0 to 1."),
    _figure("statistic", "statistic", "Of the test given the class."),
    _figure("df", "df", "Degrees of freedom of the test."),
    _figure(
        "adjusted_p", "adjusted p", "Of the test given the class, adjusted as said above.", brief=True, falls=False
    ),
    PairColumn("method", "method", "Statistic, and how its p was found.", False, False, _ALPHABET, False),
    PairColumn(
        "carried",
        "sample carries it",
        "Whether the records expected in the cells are enough for the tail of chi-square.",
        False,
        False,
        ("no first", "yes first"),
        False,
    ),
    _figure("min_expected", "smallest expected", "Records expected in the emptiest cell.", falls=False),
    _figure(
        "detectable",
        "detectable bits",
        "The smallest dependence that this sample would find with 80 % power: weaker ones can go unseen.",
        brief=True,
        falls=False,
    ),
    PairColumn(
        "joined",
        "in structures",
        "How many of the structures compared join the two; framed where the recommended one does.",
        True,
        True,
        ("fewest first", "most first"),
        True,
    ),
)
"""All columns in their order."""


def column_text(row: PairRow, key: str) -> str:
    """Look up what is printed of a pair in any column but ``pair`` and ``joined``."""
    text: str = getattr(row, key)
    return text


def column_value(pair: Mapping[str, Any], row: PairRow, key: str) -> Any:
    """Give what a column other than ``joined`` is sorted by: an exact figure, None if there is none."""
    own = _VALUES.get(key)
    return own(pair, row) if own else pair[_FIGURES.get(key, key)]


_FIGURES = {
    "marginal": "marginal_bits",
    "at_most": "bits_at_most",
    "carried": "sample_carries_it",
    "detectable": "detectable_bits",
}
_VALUES: Mapping[str, Callable[[Mapping[str, Any], PairRow], Any]] = {
    "pair": lambda pair, _: (pair["a"].casefold(), pair["b"].casefold(), pair["a"], pair["b"]),
    "verdict": lambda pair, _: VERDICT_ORDER.index(pair["verdict"]),
    "outcome": lambda pair, _: OUTCOMES.index(pair["outcome"]),
    "method": lambda _, row: row.method,
    "double_counted": lambda pair, _: bits_twice(pair),
}
