"""How large the benchmarks run, how often, and what they claim."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

from timing import Figures

__all__ = ["Claim", "Part", "Setting"]


@dataclass(frozen=True)
class Setting:
    """How to run: ``scale`` times the full number of rows, ``runs`` rounds, tables kept in ``folder``."""

    folder: Path
    scale: float = 1.0
    runs: int = 5

    def rows(self, full: int) -> int:
        """Scale a number of rows."""
        return max(200, round(full * self.scale))


@dataclass(frozen=True)
class Claim:
    """A requirement: ``measured`` must be at least (or at most) ``bound``, both in ``unit``."""

    text: str
    measured: float
    bound: float
    at_least: bool
    unit: str = "times"

    @property
    def holds(self) -> bool:
        """Tell whether the requirement is met."""
        return self.measured >= self.bound if self.at_least else self.measured <= self.bound

    def row(self) -> str:
        """Give the claim as a row of a table."""
        sign = "at least" if self.at_least else "at most"
        return (
            f"| {self.text} | {sign} {number(self.bound)} {self.unit} | {number(self.measured)} {self.unit} | "
            f"{'met' if self.holds else '**missed**'} |"
        )


@dataclass(frozen=True)
class Part:
    """A part of the benchmarks.

    ``steps``: name -> what measures it, everything that is compared inside one step; ``page`` and ``claims`` read the
    figures of the steps that were measured, by name.
    """

    steps: Mapping[str, Callable[[Setting], Figures]]
    page: Callable[[Figures], list[str]]
    claims: Callable[[Figures], list[Claim]]


def number(value: float) -> str:
    """Write three digits that count, without an exponent."""
    if abs(value) >= 100:
        return f"{value:,.0f}"
    return f"{value:.3g}"


def time_table(times: Mapping[str, Figures], against: str, heading: str = "what") -> list[str]:
    """Lay out seconds with least and most in brackets, processor seconds and how many times as fast as ``against``."""
    reference = times[against]["seconds"]
    rows = [
        f"| {name} | {number(one['seconds'])} [{number(one['least'])}, {number(one['most'])}] | {one['runs']} | "
        f"{number(one['processor'])} | {number(reference / one['seconds'])} |"
        for name, one in times.items()
    ]
    return [f"| {heading} | seconds | runs | processor seconds | times as fast |", "|---|---|---|---|---|", *rows]


def claim_table(claims: list[Claim]) -> list[str]:
    """Lay out requirements, one a row."""
    return ["| requirement | bound | measured | |", "|---|---|---|---|", *(claim.row() for claim in claims)]
