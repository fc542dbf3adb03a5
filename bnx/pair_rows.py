"""The ledger of pairs on the page: its strongest rows in words, and all of it as columns that its script reads.

Every column carries the rank of its exact figures, so that the script sorts without reading a number from text.
"""

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import groupby
from typing import Any

from markupsafe import Markup

from bnx.findings import drawn_pairs
from bnx.pair_columns import PAIR_COLUMNS, VERDICT_ORDER, PairColumn, column_text, column_value
from bnx.printed import PairRow, pair_row
from bnx.report_data import json_block

__all__ = ["PAIRS_ON_PAGE", "ROWS_WITHOUT_SCRIPT", "LedgerRow", "PairLedger", "Ranked", "pair_ledger", "ranked"]

PAIRS_ON_PAGE = 10_000
"""The strongest pairs that the page holds; those that a structure joins or the triangle shows come on top."""
ROWS_WITHOUT_SCRIPT = 40
"""Rows that stand on the page without scripts, and in print."""


@dataclass(frozen=True)
class Ranked:
    """A column of P pairs: ``rank`` of each one's exact figure, equal figures alike, and what is printed by rank.

    The words come as runs, ``runs[k]`` ranks on end with ``words[k]``; where equal figures are printed differently,
    ``at`` says which word each pair has. ``blank``: the last rank is of pairs without a figure.
    """

    rank: tuple[int, ...]
    blank: bool
    words: tuple[str, ...]
    runs: tuple[int, ...]
    at: tuple[int, ...]


@dataclass(frozen=True)
class LedgerRow:
    """One row: figures as printed, how many structures join the two, which, and whether the recommended one does."""

    figures: PairRow
    joined: str
    joined_by: tuple[str, ...]
    framed: bool

    def text(self, key: str) -> str:
        """Look up what is printed in any column but ``pair``."""
        return self.joined if key == "joined" else column_text(self.figures, key)


@dataclass(frozen=True)
class PairLedger:
    """What the page shows of the pairs: first rows, verdicts with their numbers, and how many pairs there are.

    ``number``: pairs on the page, of which ``strongest`` are the strongest of the ``listed`` ones; ``block``: all of
    them, for the script; ``place``: the row of every pair.
    """

    columns: tuple[PairColumn, ...]
    rows: tuple[LedgerRow, ...]
    verdicts: tuple[tuple[str, int], ...]
    number: int
    strongest: int
    listed: int
    joined: int
    framed: int
    block: Markup
    place: Mapping[frozenset[str], int]


def ranked(values: Sequence[Any], printed: Sequence[str]) -> Ranked:
    """Rank values from small to large, None last; printed: the words of each."""
    sizes = sorted({value for value in values if value is not None})
    places = {value: rank for rank, value in enumerate(sizes)}
    rank = tuple(len(sizes) if value is None else places[value] for value in values)
    blank = len(sizes) in rank
    words_of = dict(zip(rank, printed, strict=True))
    if any(words_of[one] != words for one, words in zip(rank, printed, strict=True)):
        words, at = _numbered(printed)
        return Ranked(rank, blank, words, (), at)
    runs = [(word, len(list(same))) for word, same in groupby(words_of[one] for one in range(len(words_of)))]
    return Ranked(rank, blank, tuple(word for word, _ in runs), tuple(run for _, run in runs), ())


def _numbered(printed: Sequence[str]) -> tuple[tuple[str, ...], tuple[int, ...]]:
    """List the different words, and which one each pair has."""
    number = {word: place for place, word in enumerate(dict.fromkeys(printed))}
    return tuple(number), tuple(number[word] for word in printed)


def pair_ledger(document: Mapping[str, Any], shown: frozenset[frozenset[str]]) -> PairLedger:
    """Gather the pairs for the page; shown: those of the triangle, which the page holds however weak they are."""
    joining = _joining(document["structures"])
    listed = sorted(document["pairs"], key=lambda one: -one["bits"])
    pairs = [
        pair
        for place, pair in enumerate(listed)
        if place < PAIRS_ON_PAGE or (key := frozenset((pair["a"], pair["b"]))) in joining or key in shown
    ]
    names = [one["name"] for one in document["structures"]]
    chosen = names.index(document["recommended"]["name"])
    sets = [joining.get(frozenset((pair["a"], pair["b"])), ()) for pair in pairs]
    rows = [
        LedgerRow(
            figures=pair_row(pair),
            joined=f"{len(by)} of {len(names)}",
            joined_by=tuple(names[number] for number in by),
            framed=chosen in by,
        )
        for pair, by in zip(pairs, sets, strict=True)
    ]
    counts = Counter(pair["verdict"] for pair in pairs)
    return PairLedger(
        columns=PAIR_COLUMNS,
        rows=tuple(rows[:ROWS_WITHOUT_SCRIPT]),
        verdicts=tuple((word, counts[word]) for word in VERDICT_ORDER),
        number=len(pairs),
        strongest=min(PAIRS_ON_PAGE, len(listed)),
        listed=len(listed),
        joined=sum(bool(by) for by in sets),
        framed=sum(row.framed for row in rows),
        block=_block(document["attributes"], names, chosen, pairs, rows, sets),
        place={frozenset((pair["a"], pair["b"])): place for place, pair in enumerate(pairs)},
    )


def _joining(structures: Iterable[Mapping[str, Any]]) -> dict[frozenset[str], tuple[int, ...]]:
    """List for every pair that is joined the structures that join it, by number."""
    joining: dict[frozenset[str], tuple[int, ...]] = {}
    for number, one in enumerate(structures):
        for key in drawn_pairs(one):
            joining[key] = (*joining.get(key, ()), number)
    return joining


def _block(
    attributes: Sequence[str],
    structures: Sequence[str],
    chosen: int,
    pairs: Sequence[Mapping[str, Any]],
    rows: Sequence[LedgerRow],
    sets: Sequence[tuple[int, ...]],
) -> Markup:
    """Write all pairs by column: ends and sets of structures by number, ranks, and words."""
    number = {name: place for place, name in enumerate(attributes)}
    different = {one: place for place, one in enumerate(dict.fromkeys(sets))}
    return json_block(
        "pairs",
        {
            "names": list(attributes),
            "structures": list(structures),
            "recommended": chosen,
            "a": [number[pair["a"]] for pair in pairs],
            "b": [number[pair["b"]] for pair in pairs],
            "sets": [list(one) for one in different],
            "set": [different[one] for one in sets],
            "columns": [_written(column, pairs, rows) for column in PAIR_COLUMNS],
        },
    )


def _written(column: PairColumn, pairs: Sequence[Mapping[str, Any]], rows: Sequence[LedgerRow]) -> dict[str, Any]:
    """Write one column for the script; ``rank`` only if it is sorted by; names of pairs are known."""
    key = column.key
    written: dict[str, Any] = {
        "key": key,
        "label": column.label,
        "numeric": column.numeric,
        "brief": column.brief,
        "orders": list(column.orders),
        "falls": column.falls,
    }
    printed = ["" if key == "pair" else row.text(key) for row in rows]
    if not column.orders:
        words, at = _numbered(printed)
        return {**written, "words": words, "at": at}
    one = ranked(_values(key, pairs, rows), printed)
    spelled = {"at": one.at} if one.at else {"runs": one.runs}
    return {**written, "rank": one.rank, "blank": one.blank, "words": one.words, **spelled}


def _values(key: str, pairs: Sequence[Mapping[str, Any]], rows: Sequence[LedgerRow]) -> list[Any]:
    if key == "joined":
        return [(len(row.joined_by), row.framed) for row in rows]
    return [column_value(pair, row.figures, key) for pair, row in zip(pairs, rows, strict=True)]
