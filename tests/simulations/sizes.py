"""How often the tests reject where the attributes are independent given the class."""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import product

import numpy as np
from simulations.judged_tables import auto_p, gate_p, plain_p

from bnx.independence import METHODS

__all__ = ["CELLS", "FAR_OUT", "TESTS", "Cell", "Sizes", "measure", "tables_of"]

TESTS = ("auto", "gate", "chi2", "g")


@dataclass(frozen=True)
class Cell:
    """One situation: records, levels of both attributes, classes, and whether levels and classes have skewed shares."""

    rows: int
    levels: int
    classes: int
    skewed: bool

    @property
    def number(self) -> int:
        """A number of its own, to seed with."""
        return ((self.rows * 100 + self.levels) * 100 + self.classes) * 2 + self.skewed


CELLS = tuple(
    Cell(rows, levels, classes, skewed)
    for rows, levels, classes, skewed in product((50, 100, 500, 5000), (2, 3, 6, 12), (2, 5), (False, True))
)


FAR_OUT = (
    Cell(50, 6, 2, True),
    Cell(100, 3, 2, True),
    Cell(100, 12, 2, False),
    Cell(100, 12, 2, True),
    Cell(500, 6, 5, True),
    Cell(500, 12, 2, True),
    Cell(500, 12, 5, True),
    Cell(5000, 12, 2, True),
)  # sparse, and so hard far out in the tail


@dataclass(frozen=True)
class Sizes:
    """Shares rejected at one level, of ``tables`` tables, by test (TESTS); shares of the methods that auto used."""

    cell: Cell
    alpha: float
    tables: int
    rejected: dict[str, float]
    methods: dict[str, float]

    def over(self, test: str) -> float:
        """Tell how many standard errors the share lies above the level."""
        return (self.rejected[test] - self.alpha) / float(np.sqrt(self.alpha * (1 - self.alpha) / self.tables))

    def error(self, test: str) -> float:
        """Find the standard error of a share."""
        return float(np.sqrt(self.rejected[test] * (1 - self.rejected[test]) / self.tables))


def margin(size: int, skewed: bool) -> np.ndarray:
    """Even shares, or shares in proportion to 1, 1/2, 1/3 ..."""
    weights = 1.0 / np.arange(1, size + 1) if skewed else np.ones(size)
    return np.asarray(weights / weights.sum())


def tables_of(cell: Cell, tables: int, seed: int) -> Iterator[np.ndarray]:
    """Draw tables, independent given the class, in pieces (P, classes, levels * levels); only the rows are fixed."""
    level = margin(cell.levels, cell.skewed)
    chances = np.multiply.outer(margin(cell.classes, cell.skewed), np.multiply.outer(level, level).ravel())
    random = np.random.default_rng([seed, cell.number])
    for start in range(0, tables, 2000):
        number = min(2000, tables - start)
        yield (
            random.multinomial(cell.rows, chances.ravel(), size=number).reshape(number, *chances.shape).astype(np.int32)
        )


def measure(cell: Cell, tables: int, alpha: float = 0.05, seed: int = 1) -> Sizes:
    """Test tables of one situation; p = NaN, no test, is not rejected."""
    shape = (cell.levels, cell.levels)
    rejected, used = dict.fromkeys(TESTS, 0), np.zeros(len(METHODS))
    for counts in tables_of(cell, tables, seed):
        auto, method = auto_p(counts, *shape, alpha, seed)
        plain = (plain_p(counts, *shape, test) for test in ("chi2", "g"))
        for test, p in zip(TESTS, (auto, gate_p(counts, *shape, alpha), *plain), strict=True):
            rejected[test] += int((p <= alpha).sum())
        used += np.bincount(method, minlength=len(METHODS))
    shares = {test: number / tables for test, number in rejected.items()}
    return Sizes(cell, alpha, tables, shares, dict(zip(METHODS, (used / tables).tolist(), strict=True)))
