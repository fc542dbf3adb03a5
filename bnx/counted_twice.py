"""Which dependences make naive Bayes count evidence twice, worst first, and which of them a structure models."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from bnx.text import fixed

__all__ = ["CountedTwice", "PairLine", "bits_twice", "counted_twice", "drawn_pairs"]

_SHOWN = 3
_LEAST = 0.0005  # bits that are not printed as 0.000


@dataclass(frozen=True)
class PairLine:
    """A dependent pair: bits of evidence counted twice in an average record, and bits shared given the class.

    ``fate``: ``modelled``, ``left out`` of the structure's edges, or ``dropped`` with an attribute; ``bar``: 0 to 100.
    """

    a: str
    b: str
    twice: str
    bits: str
    fate: str
    bar: float


@dataclass(frozen=True)
class CountedTwice:
    """The worst pairs, how many dependent ones are modelled or gone with a dropped attribute, the worst left out."""

    worst: tuple[PairLine, ...]
    modelled: int
    dropped: int
    left: PairLine | None


def drawn_pairs(entry: Mapping[str, Any]) -> frozenset[frozenset[str]]:
    """List the pairs that a structure joins."""
    return frozenset(frozenset((edge["parent"], edge["child"])) for edge in entry["edges"])


def bits_twice(pair: Mapping[str, Any]) -> float | None:
    """Give the bits of evidence that naive counts twice because of a pair of the document, if it is dependent.

    None otherwise: of a pair that was not found to depend the figure is what chance makes of it.
    """
    bits: float | None = pair["double_counted_bits"] if pair["verdict"] == "dependent" else None
    return bits


def counted_twice(document: Mapping[str, Any], chosen: Mapping[str, Any]) -> CountedTwice:
    """Rank the dependent pairs by what naive counts twice because of them; chosen: the structure recommended.

    A pair whose dependence speaks for no class, so that nothing is counted twice on average, is none of the worst.
    """
    dependent = [pair for pair in document["pairs"] if pair["verdict"] == "dependent"]
    ranked = sorted(dependent, key=lambda pair: (-_twice(pair), -pair["bits"]))
    drawn, dropped = drawn_pairs(chosen), frozenset((chosen["chosen"] or {}).get("dropped", ()))
    most = max((_twice(pair) for pair in ranked), default=0.0) or 1.0
    lines = [_line(pair, drawn, dropped, most) for pair in ranked]
    harmful = [line for line, pair in zip(lines, ranked, strict=True) if _twice(pair) >= _LEAST]
    fates = [line.fate for line in lines]
    return CountedTwice(
        worst=tuple(harmful[:_SHOWN]),
        modelled=fates.count("modelled"),
        dropped=fates.count("dropped"),
        left=next((line for line in harmful if line.fate == "left out"), None),
    )


def _twice(pair: Mapping[str, Any]) -> float:
    return bits_twice(pair) or 0.0


def _line(pair: Mapping[str, Any], drawn: frozenset[frozenset[str]], dropped: frozenset[str], most: float) -> PairLine:
    ends = frozenset((pair["a"], pair["b"]))
    fate = "modelled" if ends in drawn else "dropped" if ends & dropped else "left out"
    bar = round(100 * max(0.0, _twice(pair)) / most, 1)
    return PairLine(pair["a"], pair["b"], fixed(_twice(pair)), fixed(pair["bits"]), fate, bar)
