"""What is said of an edge, of an attribute and of a pair: sentences with places for figures printed elsewhere.

A place is a name in braces. The page's scripts fill the places with the figures of one edge, attribute or pair, so that
a sentence stands on the page once, however many edges there are.
"""

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any

from bnx.counted_twice import bits_twice

__all__ = ["CHIP_SENTENCES", "EDGE_CLAUSES", "PAIR_SENTENCES", "WHAT_IF", "pair_sentences", "what_if"]

EDGE_CLAUSES = MappingProxyType(
    {
        "bits": "{bits} bits given {class}",
        "gain": "held-out gain {gain} bits per record {interval}",
        "chosen": "chosen in {chosen} folds",
        "stability": "joined again in {stability} of the random halves",
        "gate": "gate p {gate}",
        "given": "tested given {given} as well",
        "blanks": "carried by blank cells",
        "verdict": "verdict: {verdict}",
    }
)
"""Clauses on an edge, by the figure without which the clause is left out."""

CHIP_SENTENCES = MappingProxyType(
    {
        "shared": "{bits} bits shared with {class}",
        "levels": "{levels}",
        "parents": "parents besides {class}: {parents}",
        "children": "children: {children}",
    }
)
"""Clauses on an attribute, by what they tell."""

_UNSEEN = "on records it did not learn from"
_ITS_GAIN = "(held-out gain of this edge alone {gain}, 95 % interval {interval})"
_OPEN = "Whether it helps cannot be told"
WHAT_IF = MappingProxyType(
    {
        "lose": f"Without it {{structure}} would lose {{amount}} bits per record {_UNSEEN} {_ITS_GAIN}.",
        "gain": f"Without it {{structure}} would even be {{amount}} bits per record better {_UNSEEN} {_ITS_GAIN}.",
        "may lose": f"{_OPEN}: without it {{structure}} would lose {{amount}} bits per record {_UNSEEN}, but that"
        f" can be chance {_ITS_GAIN}.",
        "may gain": f"{_OPEN}: without it {{structure}} would be {{amount}} bits per record better {_UNSEEN}, but"
        f" that can be chance {_ITS_GAIN}.",
        "same": f"No difference was found {_UNSEEN}; the interval says what is not ruled out {_ITS_GAIN}.",
        "rare": f"{_OPEN}: only {{chosen}} folds learnt it.",
        "never": f"{_OPEN}: no fold learnt it, so its held-out gain was never measured.",
    }
)
"""What would change if one edge were left out, by what its held-out gain says."""

_NOT_INDEPENDENT = "Do not take the two as independent."
PAIR_SENTENCES = MappingProxyType(
    {
        "dependent": "Dependent: given {class} the two share {corrected} bits in an average record, less what chance"
        " alone would show, and the test rejects independence (adjusted p {p}).",
        "detected, but negligible": "Dependent, but so little that it is negligible: given {class} they share at most"
        " {upper} bits (95 % bound, less what chance alone would show), below {negligible}.",
        "negligible": "Negligible: the test found no dependence given {class}, and they share at most {upper} bits (95"
        " % bound, less what chance alone would show), below {negligible}. For practical purposes independent.",
        "blunt": "Not tested well enough: no dependence was found given {class}, but one of less than {detectable} bits"
        f" would be missed in more than 1 of 5 such samples. {_NOT_INDEPENDENT}",
        "missed": "Not settled: no dependence was found given {class}, and one of {detectable} bits would be found in 4"
        f" of 5 such samples; but that it is {{negligible}} bits or more is not ruled out. {_NOT_INDEPENDENT}",
        "thin": "Not settled: the test found no dependence given {class} (adjusted p {p}), but the records are spread"
        f" too thinly over the cells for any bound on what the two may share. {_NOT_INDEPENDENT}",
        "untested": "Not tested: with so few records no outcome could have rejected independence given {class}."
        f" {_NOT_INDEPENDENT}",
        "bounded": "They may share up to {upper} bits (95 % bound).",
        "twice": "Taken alone, this pair makes the evidence of naive for the true {class} {twice} bits too strong in an"
        " average record: so much is counted twice.",
        "too little": "Taken alone, this pair makes the evidence of naive for the true {class} {less} bits too weak in"
        " an average record.",
        "harmless": "What naive counts twice because of this pair is next to nothing on average ({twice} bits); in"
        " single records it can be more, either way.",
    }
)
"""What a pair's verdict means, where *not enough data* has four reasons, and what naive makes of the pair."""


def what_if(edge: Mapping[str, Any], tries: int, amount: str) -> str:
    """Say which sentence of WHAT_IF an edge of the document calls for.

    tries: folds x repeats; amount: the size of its gain as printed, which may be all noughts.
    """
    if 2 * edge["chosen_in"] < tries:
        return "rare" if edge["chosen_in"] else "never"
    if edge["verdict"] in ("gains", "loses"):
        return "lose" if edge["verdict"] == "gains" else "gain"
    if not amount.strip("0."):
        return "same"
    return "may lose" if edge["gain"] > 0 else "may gain"


def pair_sentences(pair: Mapping[str, Any], negligible: float) -> tuple[str, ...]:
    """Say which of PAIR_SENTENCES a pair of the document calls for, in their order.

    negligible: bits below which a dependence does not matter, and what is counted twice neither.
    """
    told = [pair["verdict"]]
    if pair["verdict"] == "not enough data":
        told = [_why_not_told(pair, negligible)]
        told += ["bounded"] if pair["bits_at_most"] is not None else []
    twice = bits_twice(pair)
    if twice is not None:
        told.append("harmless" if abs(twice) < negligible else "twice" if twice > 0 else "too little")
    return tuple(told)


def _why_not_told(pair: Mapping[str, Any], negligible: float) -> str:
    """Say why the data do not suffice for a verdict: no test, no bounds, a blunt test, or chance."""
    if pair["method"] == "none" or pair["detectable_bits"] is None:
        return "untested"
    if pair["bits_at_most"] is None:
        return "thin"
    return "blunt" if pair["detectable_bits"] >= negligible else "missed"
