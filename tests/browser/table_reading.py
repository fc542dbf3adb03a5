"""Tables of the page as plain values, and the entries of a comparison by name."""

from collections.abc import Mapping
from typing import Any

from playwright.sync_api import Locator

TABLE = """(table) => ({
  heads: [...table.tHead.rows[0].cells].map((one) => one.textContent.trim()),
  rows: [...table.tBodies[0].rows].filter((row) => !row.matches('.gap')).map((row) => ({
    data: {...row.dataset},
    names: [...row.querySelectorAll('bdi')].map((one) => one.textContent),
    cells: [...row.cells].map((one) => one.textContent.trim()),
  })),
})"""


def table_of(place: Locator) -> dict[str, Any]:
    """Read a table: its heads, and of each row its data attributes, its names and its cells."""
    found: dict[str, Any] = place.evaluate(TABLE)
    return found


def by_heads(table: Mapping[str, Any], row: Mapping[str, Any]) -> dict[str, str]:
    return dict(zip(table["heads"], row["cells"], strict=False))


def structure(document: Mapping[str, Any], name: str) -> dict[str, Any]:
    """Find the entry of a structure, or of the mix."""
    entries = [*document["structures"], {"name": "mix", **(document["mix"] or {})}]
    return next(one for one in entries if one["name"] == name)


def pair_of(document: Mapping[str, Any], names: list[str], part: str = "pairs") -> dict[str, Any]:
    """Find a pair by its two attributes in either order; what is counted twice is told of dependent pairs only."""
    found = next(one for one in document[part] if {one["a"], one["b"]} == set(names))
    return found if part != "pairs" else {**found, "double_counted_bits": bits_twice(found)}


def bits_twice(pair: Mapping[str, Any]) -> float | None:
    return pair["double_counted_bits"] if pair["verdict"] == "dependent" else None
