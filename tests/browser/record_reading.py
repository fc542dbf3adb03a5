"""Records of a comparison, counted anew as the page tells of them, and records as the page shows them."""

from collections import Counter
from collections.abc import Iterator, Mapping
from typing import Any

from playwright.sync_api import Locator

CARD = """(card) => {
  const number = (one, key) => Number(one.getAttribute(key));
  const bar = (one) => one && {x: number(one, 'x'), width: number(one, 'width'),
    fill: getComputedStyle(one).fill};
  const table = card.querySelector('table');
  const ticks = [...card.querySelectorAll('thead svg text')].map((one) => [number(one, 'x'), Number(one.textContent)]);
  const cells = (row) => [...row.cells].map((one) => one.textContent.trim());
  return {
    open: card.open,
    heading: card.querySelector('summary').textContent,
    words: [...card.querySelectorAll(':scope > p')].map((one) => one.textContent),
    names: [...card.querySelectorAll('summary bdi')].map((one) => one.textContent),
    ends: [...card.querySelectorAll('thead bdi')].map((one) => one.textContent),
    ticks,
    rows: [...table.tBodies[0].rows].map((row) => ({
      name: row.querySelector('th > bdi').textContent,
      level: row.querySelector('.level').textContent,
      role: row.querySelector('.role') ? row.querySelector('.role').textContent : '',
      parents: [...row.querySelectorAll('.role bdi')].map((one) => one.textContent),
      cells: cells(row),
      zero: number(row.querySelector('.zero'), 'x1'),
      once: bar(row.querySelector('.told-once')),
      twice: bar(row.querySelector('.told-twice')),
      given: bar(row.querySelector('.told-given')),
    })),
    foot: [...table.tFoot.rows].map(cells),
  };
}"""
MATTERS = 0.05


def cards(places: Locator) -> list[dict[str, Any]]:
    """Read the records of a page."""
    return [one.evaluate(CARD) for one in places.all()]


def said(row: Mapping[str, Any], side: str, levels: list[str]) -> tuple[str, float]:
    p = row["probabilities"][side]
    return levels[p.index(max(p))], max(p)


def right(row: Mapping[str, Any], levels: list[str]) -> str:
    """Say who has a record right."""
    naive, structure = (said(row, side, levels)[0] == row["truth"] for side in ("naive", "structure"))
    if naive and structure:
        return "both"
    return "naive" if naive else "structure" if structure else "neither"


KINDS = (("twice_bits", False), ("adds_bits", False), ("adds_bits", True))
"""Of each kind of bits, whether the parents turn the attribute round, in the order of the page."""


def told_of(document: Mapping[str, Any], kind: str, turned: bool) -> dict[str, tuple[float, int]]:
    """Give attribute -> (mean bits of a kind over the records shown, records with .05 or more), by its parents only."""
    rows = document["records"]["rows"]
    sums: Counter[str] = Counter()
    records: Counter[str] = Counter()
    for row in rows:
        for one in row["attributes"]:
            if one["parents"] and turned == (one["naive_bits"] * (one["structure_bits"] or 0.0) < 0):
                sums[one["name"]] += abs(one[kind] or 0.0)
                records[one["name"]] += abs(one[kind] or 0.0) >= MATTERS
    return {name: (bits / len(rows), records[name]) for name, bits in sums.items()}


def record_counts(document: Mapping[str, Any]) -> Iterator[int]:
    """Count what the page counts: records by who is right, records in which an attribute matters, records alike."""
    rows, levels = document["records"]["rows"], document["class_levels"]
    yield from Counter(right(row, levels) for row in rows).values()
    yield from (records for kind in KINDS for _, records in told_of(document, *kind).values())
    yield from (sum(row["alike"].values()) - 1 for row in rows)


def record_means(document: Mapping[str, Any]) -> Iterator[float]:
    """Give the mean bits that the page gives of an attribute."""
    yield from (bits for kind in KINDS for bits, _ in told_of(document, *kind).values())
