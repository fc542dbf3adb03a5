"""How often the bounds of the bits cover the planted truth, how often "negligible" is wrong, and what is detected."""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from functools import cache
from itertools import product
from zlib import crc32

import numpy as np
from scipy.optimize import brentq
from simulated import drawn, exact_bits, measured

from bnx.independence import p_values
from bnx.intervals import bits_interval, bits_upper, detectable_bits

__all__ = [
    "Coverage",
    "Design",
    "Power",
    "Summary",
    "beyond",
    "coverage",
    "covered_designs",
    "found",
    "found_designs",
    "negligible_designs",
    "shares_of",
    "summaries",
    "unrelated_designs",
]

SHAPES = ("rare cells", "common cells", "rare with common", "rare cells apart", "diagonal", "monotone")
TWO_LEVELS = ("rare cells", "rare cells apart")  # what is left of the shapes if there are but two levels
NEGLIGIBLE = 0.005
_LEAST_MET = 0.5
_STRONGEST = 14.0  # log odds ratio; beyond it a shape holds no more bits


@dataclass(frozen=True)
class Design:
    """Tables of ``rows`` records with exactly ``bits`` planted.

    Both attributes have the same level shares in all classes, from the rarest to ``skew`` times as common. The shape
    says which cells hold more records than independence would give them, in all classes or in the first one only.
    """

    levels: tuple[int, int]
    skew: float
    shape: str
    first_class_only: bool
    bits: float
    rows: int
    classes: tuple[float, ...] = (0.5, 0.5)

    def __str__(self) -> str:
        """Name it in one line."""
        size = "x".join(str(number) for number in (*self.levels, len(self.classes)))
        where = "one class" if self.first_class_only else "all classes"
        shares = "" if len(set(self.classes)) == 1 else f", classes {max(self.classes) / min(self.classes):g}:1"
        return f"{size}, margins 1:{self.skew:g}{shares}, {self.shape}, {where}, {self.bits:g} bit, {self.rows} rows"


@dataclass(frozen=True)
class Coverage:
    """Shares of the tables that met Cochran's rule (``tables``, of which ``met`` is the share among all drawn).

    ``below`` and ``above``: the truth lies below or above the two-sided interval; ``upper``: it lies within the
    one-sided bound; ``negligible``: that bound lies below .005 bit. ``emptiest`` is the smallest true expected count.
    """

    design: Design
    tables: int
    met: float
    below: float
    above: float
    upper: float
    negligible: float
    emptiest: float

    @property
    def covered(self) -> float:
        """Share of two-sided intervals that hold the truth."""
        return 1.0 - self.below - self.above

    def __str__(self) -> str:
        """Write one line of a table."""
        shares = (self.covered, self.below, self.above, self.upper, self.negligible)
        return f"{self.design}: " + " ".join(f"{share:.3f}" for share in shares)


@dataclass(frozen=True)
class Summary:
    """The least and most favourable of several designs of one size, number of records and planted bits.

    ``edge`` counts designs with a cell in which less than one record is expected: the shape can hold hardly more bits,
    the interval ends where the tables end, and covers more often. They are left out of ``most_covered``.
    """

    levels: tuple[int, int]
    rows: int
    bits: float
    designs: int
    edge: int
    least_covered: float
    most_covered: float
    least_upper: float
    most_negligible: float

    def __str__(self) -> str:
        """Write one line of a table."""
        size = "x".join(str(number) for number in self.levels)
        shares = (self.least_covered, self.most_covered, self.least_upper, self.most_negligible)
        return f"{size} {self.rows} {self.bits:g} {self.designs} {self.edge} " + " ".join(
            f"{one:.3f}" for one in shares
        )


@dataclass(frozen=True)
class Power:
    """Share rejected by X2 and by G at a threshold where exactly the detectable bits are planted."""

    design: Design
    at: float
    tables: int
    x2: float
    g: float

    def __str__(self) -> str:
        """Write one line of a table."""
        return f"{self.design}, at {self.at:g}: {self.x2:.3f} {self.g:.3f}"


def covered_designs(bits: tuple[float, ...], rows: tuple[int, ...]) -> Iterator[Design]:
    """List every size, margin and shape."""
    for levels, skew, shape, only, planted, records in product(
        (2, 3, 6), (1.0, 2.0, 4.0), SHAPES, (False, True), bits, rows
    ):
        alike = skew == 1 and shape in ("common cells", "rare with common")
        if not alike and (levels > 2 or shape in TWO_LEVELS):
            yield Design((levels, levels), skew, shape, only, planted, records)


def unrelated_designs(rows: tuple[int, ...]) -> Iterator[Design]:
    """List every size and margin of independent attributes."""
    for levels, skew, records in product((2, 3, 6), (1.0, 2.0, 4.0), rows):
        yield Design((levels, levels), skew, "diagonal", False, 0.0, records)


def beyond(bits: tuple[float, ...], rows: tuple[int, ...]) -> Iterator[Design]:
    """List designs with one class, five classes, classes 4:1, and unlike numbers of levels."""
    for classes, levels in (
        ((1.0,), (3, 3)),
        ((0.2,) * 5, (3, 3)),
        ((0.8, 0.2), (2, 2)),
        ((0.8, 0.2), (4, 4)),
        ((0.5, 0.5), (2, 6)),
        ((0.4, 0.3, 0.3), (3, 5)),
    ):
        for skew, shape, only, planted, records in product(
            (1.0, 4.0), ("rare cells", "diagonal"), (False, True), bits, rows
        ):
            yield Design(levels, skew, shape, only, planted, records, classes)


def negligible_designs(rows: tuple[int, ...]) -> Iterator[Design]:
    """List designs that hold just more than what is called negligible."""
    yield from covered_designs((0.0051,), rows)
    yield from beyond((0.0051,), rows)


def found_designs(rows: tuple[int, ...]) -> Iterator[Design]:
    """List designs for the power; their bits are put in by ``found``."""
    for levels, skew, shape, records in product((2, 3, 6), (1.0, 2.0, 4.0), SHAPES, rows):
        if shape in ("rare cells", "rare cells apart") or (levels > 2 and shape in ("diagonal", "monotone")):
            yield Design((levels, levels), skew, shape, False, 0.0, records)


@cache
def coverage(design: Design, tables: int, seed: int = 1) -> Coverage | None:
    """Draw tables and bound their bits.

    None if the shape cannot hold the bits, or Cochran's rule holds in less than half of the tables.
    """
    shares = shares_of(replace(design, rows=0))
    if shares is None or not _expects_enough(design, shares):
        return None
    stats = measured(drawn(shares, design.rows, tables, seed=crc32(str(design).encode()) + seed))
    met = float(stats.cochran.mean())
    if met < _LEAST_MET:
        return None
    stats = stats.take(stats.cochran)
    (low, high), upper = bits_interval(stats), bits_upper(stats)
    covers = (np.mean(low > design.bits), np.mean(high < design.bits), np.mean(upper >= design.bits))
    wrong = np.mean(upper < NEGLIGIBLE)
    emptiest = design.rows * shares.min()
    return Coverage(design, stats.rows.size, met, *(float(share) for share in (*covers, wrong, emptiest)))


def summaries(designs: Iterable[Design], tables: int) -> list[Summary]:
    """Measure designs and give the least and most favourable of each size, number of records and planted bits."""
    groups: dict[tuple[tuple[int, int], int, float], list[Coverage]] = {}
    for design in designs:
        one = coverage(design, tables)
        if one is not None:
            groups.setdefault((design.levels, design.rows, design.bits), []).append(one)
    return [_summary(*group, measures) for group, measures in sorted(groups.items())]


def _summary(levels: tuple[int, int], rows: int, bits: float, found: list[Coverage]) -> Summary:
    inner = [one.covered for one in found if one.emptiest >= 1.0]
    return Summary(
        levels,
        rows,
        bits,
        len(found),
        len(found) - len(inner),
        min(one.covered for one in found),
        max(inner, default=float("nan")),
        min(one.upper for one in found),
        max(one.negligible for one in found),
    )


def found(design: Design, at: float, tables: int, seed: int = 1) -> Power | None:
    """Plant the detectable bits and test; None if the design cannot hold them or its margins break Cochran's rule."""
    df = (design.levels[0] - 1) * (design.levels[1] - 1) * len(design.classes)
    bits = float(detectable_bits(at, np.array([df]), np.array([design.rows]))[0])
    design = replace(design, bits=bits)
    shares = shares_of(replace(design, rows=0))
    if shares is None or not _expects_enough(design, shares):
        return None
    stats = measured(drawn(shares, design.rows, tables, seed=crc32(str(design).encode()) + seed))
    stats = stats.take(stats.cochran)
    x2, g = (float(np.mean(p_values(stats, test).p <= at)) for test in ("chi2", "g"))
    return Power(design, at, stats.rows.size, x2, g)


@cache
def shares_of(design: Design) -> np.ndarray | None:
    """Find cell shares (S, h, w) that hold the planted bits to 1e-10; None if the shape cannot hold so many."""
    strength = 0.0
    if design.bits > 0:
        ends = np.linspace(1.0, _STRONGEST, 14)
        enough = next((end for end in ends if exact_bits(_tilted(design, end)) > design.bits), None)
        if enough is None:
            return None
        strength = brentq(lambda at: exact_bits(_tilted(design, at)) - design.bits, 0.0, enough, xtol=1e-14, rtol=1e-14)
    shares = _tilted(design, strength)
    assert abs(exact_bits(shares) - design.bits) < 1e-10
    return shares


def _tilted(design: Design, strength: float) -> np.ndarray:
    """Multiply the independent shares by exp(strength x pattern), and restore the margins, (S, h, w)."""
    down, across = (_margin(size, design.skew) for size in design.levels)
    independent = np.outer(down, across)
    tilted = _with_margins(independent * np.exp(strength * _pattern(design.shape, *design.levels)), down, across)
    plain = [tilted, *((independent if design.first_class_only else tilted) for _ in design.classes[1:])]
    return np.array(design.classes)[:, None, None] * np.stack(plain)


def _margin(size: int, skew: float) -> np.ndarray:
    weights = skew ** (np.arange(size) / (size - 1))
    return np.asarray(weights / weights.sum())


def _pattern(shape: str, height: int, width: int) -> np.ndarray:
    pattern = np.zeros((height, width))
    if shape == "diagonal":
        np.fill_diagonal(pattern, 1.0)
    elif shape == "monotone":
        pattern = np.outer(np.linspace(-1, 1, height), np.linspace(-1, 1, width))
    else:
        place, value = {
            "rare cells": ((0, 0), 1.0),
            "common cells": ((-1, -1), 1.0),
            "rare with common": ((0, -1), 1.0),
            "rare cells apart": ((0, 0), -1.0),
        }[shape]
        pattern[place] = value
    return pattern


def _with_margins(shares: np.ndarray, down: np.ndarray, across: np.ndarray) -> np.ndarray:
    """Scale rows and columns in turn. Source: Deming & Stephan 1940."""
    rows = np.ones(down.size)
    for _ in range(5000):
        before, rows = rows, down / (shares @ (across / (rows @ shares)))
        if np.abs(rows / before - 1.0).max() < 1e-15:
            break
    return np.asarray(rows[:, None] * shares * (across / (rows @ shares)))


def _expects_enough(design: Design, shares: np.ndarray) -> bool:
    """Apply Cochran's rule to the expected counts of independent attributes."""
    expected = design.rows * shares.sum(2, keepdims=True) * shares.sum(1, keepdims=True)
    expected = expected / shares.sum((1, 2), keepdims=True)
    return bool(expected.min() >= 1.0 and np.mean(expected < 5.0) <= 0.2)
