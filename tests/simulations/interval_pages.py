"""The parts of the page on the bounds of the bits and on power."""

from collections.abc import Callable, Iterable

import numpy as np
from simulations.intervals import (
    Coverage,
    Design,
    Power,
    beyond,
    coverage,
    covered_designs,
    found,
    found_designs,
    negligible_designs,
)
from simulations.layout import table

__all__ = ["bounds", "negligible", "power"]

_TABLES = 2000
_AGAIN = 20_000

Group = tuple[tuple[int, int], int, float]


def grouped(designs: Iterable[Design]) -> list[tuple[Group, list[Coverage]]]:
    """Measure designs, by levels, rows and bits."""
    groups: dict[Group, list[Coverage]] = {}
    for design in designs:
        one = coverage(design, _TABLES)
        if one is not None:
            groups.setdefault((design.levels, design.rows, design.bits), []).append(one)
    return sorted(groups.items())


def again(one: Coverage) -> Coverage:
    """Measure a design with new tables, so that having been chosen does not count against it."""
    measured = coverage(one.design, _AGAIN, seed=2)
    assert measured is not None
    return measured


def average(covered: list[Coverage], share: Callable[[Coverage], float]) -> str:
    """Write the mean over designs."""
    return f"{np.mean([share(one) for one in covered]):.4f}"


def bounds() -> list[str]:
    """Print how often the intervals and the upper bound miss."""
    designs = [*covered_designs((0.002, 0.005, 0.03, 0.1, 0.3), (500, 5000)), *beyond((0.005, 0.1), (500, 5000))]
    header = ("levels", "rows", "bits", "designs", "interval, mean", "least", "most", "upper bound, mean", "most")
    return [
        "## Bounds of the bits: how often they miss",
        "",
        "Designs plant exactly so many bits, in all classes or in one, in one cell or over many, with even margins or "
        "such in which the most common level has 2 or 4 times the share of the rarest; one, two, three or five "
        f"classes. {_TABLES:,} tables each; those that meet Cochran's rule count. *Mean*: over the designs of a line. "
        f"*Least* and *most*: the designs that seemed to miss least and most, drawn again, {_AGAIN:,} new tables "
        "(standard error .0015). Limits: the two-sided 95 % interval misses in .02 to .08, the one-sided 95 % bound in "
        "at most .06.",
        "",
        *table(header, (_bounds_row(group, covered) for group, covered in grouped(designs))),
    ]


def _bounds_row(group: Group, covered: list[Coverage]) -> list[str]:
    ordered = sorted(covered, key=lambda one: one.covered)
    highest = max(covered, key=lambda one: 1 - one.upper)
    return [
        *_situation(group),
        str(len(covered)),
        average(covered, lambda one: 1 - one.covered),
        f"{1 - again(ordered[-1]).covered:.4f}",
        f"{1 - again(ordered[0]).covered:.4f}",
        average(covered, lambda one: 1 - one.upper),
        f"{1 - again(highest).upper:.4f}",
    ]


def negligible() -> list[str]:
    """Print how often more than what is negligible is called negligible."""
    rows = (
        [
            *_situation(group)[:2],
            str(len(covered)),
            average(covered, lambda one: one.negligible),
            f"{again(max(covered, key=lambda one: one.negligible)).negligible:.4f}",
        ]
        for group, covered in grouped(negligible_designs((500, 1500, 5000, 15_000, 50_000)))
    )
    return [
        "## Wrongly called negligible",
        "",
        f".0051 bit planted, where .005 is the limit; {_TABLES:,} tables a design. *Most*: the design that seemed "
        f"worst, drawn again, {_AGAIN:,} new tables. Limit: at most .05 (standard error .0015).",
        "",
        *table(("levels", "rows", "designs", "negligible, mean", "most"), rows),
    ]


def power() -> list[str]:
    """Print how often what is called detectable is detected."""
    header = ("levels", "rows", "at p <=", "dependence", "designs", "X2, least", "most", "G, least", "most")
    groups: dict[tuple[tuple[int, int], int, float, bool], list[Power]] = {}
    for at in (0.05, 1e-4):
        for design in found_designs((5000, 50_000)):
            one = found(design, at, _TABLES)
            if one is not None:
                groups.setdefault((design.levels, design.rows, at, "rare" in design.shape), []).append(one)
    rows = (
        [
            *_situation((levels, number, at)),
            "in one rare cell" if rare else "over many cells",
            str(len(each)),
            *(f"{of(one.x2 for one in each):.3f}" for of in (min, max)),
            *(f"{of(one.g for one in each):.3f}" for of in (min, max)),
        ]
        for (levels, number, at, rare), each in sorted(groups.items())
    )
    return [
        "## Detectable bits: the share detected",
        "",
        f"Exactly `detectable_bits` planted, which stand for power .80; {_TABLES:,} tables a design. X2 sees more than "
        "that in a cell that is rare and too full, less in one that is rare and too empty.",
        "",
        *table(header, rows),
    ]


def _situation(group: Group) -> list[str]:
    (down, across), rows, number = group
    return [f"{down} x {across}", f"{rows:,}", f"{number:g}"]
