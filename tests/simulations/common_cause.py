"""Two effects of one cause: dependent, and independent once the cause is given; and a second cause to be found."""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.optimize import brentq
from simulated import exact_bits, measured
from simulations.judged_tables import auto_p
from simulations.planted import bent, drawn_from

from bnx.explaining import Explanation, explanations
from bnx.independence import Statistics
from bnx.intervals import detectable_bits
from bnx.kernels.contingency import table_statistics
from bnx.refining import Visit, pooled, visit_arrays, with_chance

__all__ = ["NAMES", "Explained", "SecondCause", "effects_p", "explain", "explained_by_class", "second_cause"]

NAMES = ("first effect", "second effect", "cause", "child of first", "child of second", "plain", "many levels")
LEVELS = (3, 3, 3, 3, 3, 2, 6)
CLASS_SHARES = np.array([0.5, 0.3, 0.2])
FIRST, SECOND, CAUSE = 0, 1, 2
_CHILDREN = 1.0


class EffectsP(NamedTuple):
    """p of two effects of the class in many draws, without the class and given it, each (draws,)."""

    marginal: np.ndarray
    given: np.ndarray


def effects_p(rows: int, draws: int, seed: int) -> EffectsP:
    """Draw two effects, of three and four levels, of a class of three and test them with and without it."""
    first = np.array([[0.6, 0.3, 0.1], [0.3, 0.4, 0.3], [0.1, 0.3, 0.6]])
    second = np.array([[0.4, 0.3, 0.2, 0.1], [0.25, 0.25, 0.25, 0.25], [0.1, 0.2, 0.2, 0.5]])
    chances = CLASS_SHARES[:, None, None] * first[:, :, None] * second[:, None, :]
    drawn = np.random.default_rng([seed, 16]).multinomial(rows, chances.ravel(), size=draws).astype(np.int32)
    counts = drawn.reshape(draws, 3, 12)
    whole = counts.sum(axis=1, keepdims=True, dtype=np.int32)
    return EffectsP(auto_p(whole, 3, 4, 0.05, seed)[0], auto_p(counts, 3, 4, 0.05, seed)[0])


@dataclass(frozen=True)
class SecondCause:
    """How two effects depend on the class and on one further attribute; bits they share given the class alone.

    ``cause`` (C, levels): its shares in each class; ``first``, ``second`` (C, levels of the cause, levels).
    """

    cause: np.ndarray
    first: np.ndarray
    second: np.ndarray
    bits: float

    def draw(self, rows: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
        """Draw codes (attributes as in NAMES, rows) and classes (rows,).

        The other attributes explain nothing: each depends on the class, and two also on one of the effects.
        """
        random = np.random.default_rng([seed, rows])
        target = random.choice(len(CLASS_SHARES), rows, p=CLASS_SHARES)
        cause = drawn_from(self.cause[target], random)
        effects = [drawn_from(one[target, cause], random) for one in (self.first, self.second)]
        children = [drawn_from(_child()[target, effect], random) for effect in effects]
        others = [drawn_from(_shares(size, 77)[target], random) for size in LEVELS[5:]]
        return np.array([*effects, cause, *children, *others]), target


def _counted(stratum: np.ndarray, cell: np.ndarray, strata: int, cells: int) -> np.ndarray:
    """Count rows by stratum and cell, int32 (strata, cells)."""
    return np.bincount(stratum * cells + cell, minlength=strata * cells).reshape(strata, cells).astype(np.int32)


def _visit(counts: list[np.ndarray]) -> Visit:
    """Fetch the counts of a pair by the attribute given too."""
    return lambda chosen, use: np.array([use(counts[k], LEVELS[FIRST], LEVELS[SECOND]) for k in chosen])


def _shares(size: int, seed: int) -> np.ndarray:
    """Fix the shares of an attribute's levels in each class, (C, size)."""
    return np.random.default_rng([seed, size]).dirichlet(np.full(size, 4.0), len(CLASS_SHARES))


def _child() -> np.ndarray:
    """Fix how an attribute of three levels depends on the class and on an effect, (C, 3, 3)."""
    return bent(_shares(3, 78), 3, _CHILDREN, np.random.default_rng(79))


def _model(strength: float) -> SecondCause:
    """Let a cause of three levels bend two effects with this strength."""
    cause = _shares(3, 80)
    first, second = (bent(_shares(3, 81 + k), 3, strength, np.random.default_rng(83 + k)) for k in range(2))
    joint = np.einsum("c,cz,cza,czb->cab", CLASS_SHARES, cause, first, second)
    return SecondCause(cause, first, second, exact_bits(joint))


def second_cause(rows: int, times: float, alpha: float = 0.05) -> SecondCause:
    """Find the model whose effects share ``times`` the bits, given the class, that a test of ``rows`` would detect."""
    df = np.array([len(CLASS_SHARES) * (LEVELS[FIRST] - 1) * (LEVELS[SECOND] - 1.0)])
    wanted = times * float(detectable_bits(alpha, df, np.array([float(rows)]))[0])
    return _model(float(brentq(lambda strength: _model(strength).bits - wanted, 0.01, 5.0)))


class Explained(NamedTuple):
    """One draw: p of the two effects given the class, and the other attributes ranked, the best explanation first."""

    p: float
    ranked: tuple[Explanation, ...]


def explain(model: SecondCause, rows: int, seed: int) -> Explained:
    """Draw a table; test its effects given the class, and given the class and each other attribute."""
    codes, target = model.draw(rows, seed)
    height, width = LEVELS[FIRST], LEVELS[SECOND]
    pair = codes[FIRST] * width + codes[SECOND]
    alone = _counted(target, pair, len(CLASS_SHARES), height * width)
    counts = [
        _counted(target * LEVELS[k] + codes[k], pair, len(CLASS_SHARES) * LEVELS[k], height * width)
        for k in range(CAUSE, len(NAMES))
    ]
    rows_of = [table_statistics(one, np.zeros(1, np.int64), np.array([height]), np.array([width])) for one in counts]
    stats = Statistics.of(np.concatenate(rows_of))
    ranked = explanations(NAMES[CAUSE:], stats, _visit(counts), "auto", 0.05, 0.005, seed)
    return Explained(float(auto_p(alone[None], height, width, 0.05, seed)[0][0]), ranked)


def explained_by_class(rows: int, draws: int, even: bool, seed: int) -> np.ndarray:
    """Draw two attributes of five levels and a class of three, all independent: bits that the class explains, (draws,).

    Bits explained are those without the class less those given it, both corrected. Shares of levels and classes are
    all equal (``even``), or drawn anew for every table, all shares being equally likely.
    """
    random = np.random.default_rng([seed, rows, even])

    def margin(size: int) -> np.ndarray:
        return np.full((draws, size), 1 / size) if even else random.dirichlet(np.ones(size), draws)

    shares = np.einsum("kc,ka,kb->kcab", margin(3), margin(5), margin(5)).reshape(draws, 75)
    tables = random.multinomial(rows, shares).reshape(draws, 3, 5, 5)
    visit = visit_arrays(tables.reshape(draws, 3, 25).astype(np.int32), 5, 5)
    given = with_chance(visit, measured(tables))
    alone = with_chance(pooled(visit), measured(tables.sum(axis=1, keepdims=True)))
    return np.asarray(alone.bits_corrected - given.bits_corrected)
