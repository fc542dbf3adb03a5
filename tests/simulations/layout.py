"""Pieces of the page: tables, shares with their errors."""

from collections.abc import Iterable, Sequence

from simulations.drawn_edges import Share

__all__ = ["shown", "table"]


def table(header: Sequence[str], rows: Iterable[Sequence[str]]) -> list[str]:
    """Lay out a table."""
    lines = [header, ["---"] * len(header), *rows]
    return [*(f"| {' | '.join(line)} |" for line in lines), ""]


def shown(one: Share) -> str:
    """Write a mean and its standard error."""
    return f"{one.mean:.4f} ± {one.error:.4f}"
