"""Published ways to smooth the table of a family, written down once more as plain arrays, to be compared.

Counts are (C, levels of the parents in the order taken..., levels of the child); contexts grow from (class) over
(class, first parent) to (class, all parents). Every way starts from the child's marginal with one record per level.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import product

import numpy as np
from scipy.special import gammaln

__all__ = ["FEW_PAIRS", "ONE_STRENGTH", "PROGRAM", "SCHEMES", "Way", "contexts", "marginal"]

Step = Callable[[np.ndarray, np.ndarray, int], np.ndarray]
STRENGTHS = (0.5, 1.0, 2.0, 4.0, 8.0, 16.0)
TRIED = 2.0 ** np.arange(-2, 10)  # strengths among which evidence decides


@dataclass(frozen=True)
class Way:
    """One way to smooth, every amount fixed: from counts to probabilities of the same shape."""

    name: str
    smooth: Callable[[np.ndarray], np.ndarray]


def contexts(counts: np.ndarray) -> list[np.ndarray]:
    """Sum the counts over the last parents: from the class alone to all parents."""
    depth = counts.ndim - 2
    return [counts.sum(axis=tuple(range(d + 1, depth + 1))) for d in range(depth + 1)]


def marginal(counts: np.ndarray) -> np.ndarray:
    """Share of each level of the child, one record added to each, (r,)."""
    own = counts.reshape(-1, counts.shape[-1]).sum(axis=0)
    return np.asarray((own + 1) / (own.sum() + len(own)))


def _chained(levels: Sequence[np.ndarray], start: np.ndarray, step: Step) -> np.ndarray:
    """Go from the general to the particular; ``step`` takes counts, the table before, and the depth."""
    q = step(levels[0], start[None], 0)
    for d, counts in enumerate(levels[1:], 1):
        q = step(counts, q[..., None, :], d)
    return q


def _mixed(counts: np.ndarray, before: np.ndarray, strength: np.ndarray | float) -> np.ndarray:
    """Add ``strength`` records spread like the table before."""
    rows = counts.sum(axis=-1, keepdims=True)
    whole = rows + strength
    return np.where(whole > 0, (counts + strength * before) / np.where(whole > 0, whole, 1), before)


def laplace(counts: np.ndarray, amount: float) -> np.ndarray:
    """Add records to every cell."""
    return np.asarray((counts + amount) / (counts + amount).sum(axis=-1, keepdims=True))


def back_off(counts: np.ndarray, strengths: Sequence[float]) -> np.ndarray:
    """Add records spread like the table of one parent less; strengths by depth, the last for all that follow.

    Source: Petitjean, Buntine, Webb & Zaidi 2018 (the hierarchy of contexts).
    """
    return _chained(
        contexts(counts), marginal(counts), lambda n, q, d: _mixed(n, q, strengths[min(d, len(strengths) - 1)])
    )


def to_marginal(counts: np.ndarray, strength: float) -> np.ndarray:
    """Add records spread like the child's marginal, whatever the context.

    Source: Friedman, Geiger & Goldszmidt 1997, section 5; Cestnik 1990.
    """
    return _mixed(counts, np.broadcast_to(marginal(counts), counts.shape), strength)


def witten_bell(counts: np.ndarray) -> np.ndarray:
    """Add as many records as levels were seen in the context.

    Source: Witten & Bell 1991, method C, interpolated.
    """
    return _chained(
        contexts(counts), marginal(counts), lambda n, q, _: _mixed(n, q, (n > 0).sum(axis=-1, keepdims=True))
    )


def _discounted(counts: np.ndarray, before: np.ndarray, discount: float) -> np.ndarray:
    """Take ``discount`` off every count above it, and spread what was taken like the table before."""
    rows = counts.sum(axis=-1, keepdims=True)
    taken = np.minimum(counts, discount).sum(axis=-1, keepdims=True)
    return np.where(rows > 0, (np.maximum(counts - discount, 0) + taken * before) / np.maximum(rows, 1), before)


def _own_discount(counts: np.ndarray) -> float:
    """Estimate the discount from how many cells hold one and two records, within bounds that leave something over.

    Source: Ney, Essen & Kneser 1994.
    """
    once, twice = int((counts == 1).sum()), int((counts == 2).sum())
    return min(max(once / max(once + 2 * twice, 1), 0.1), 0.95)


def absolute(counts: np.ndarray, discount: float | None) -> np.ndarray:
    """Discount every count, interpolated; without a discount given, the estimated one of each depth.

    Source: Ney, Essen & Kneser 1994.
    """

    def step(n: np.ndarray, q: np.ndarray, _: int) -> np.ndarray:
        return _discounted(n, q, _own_discount(n) if discount is None else discount)

    return _chained(contexts(counts), marginal(counts), step)


def kneser_ney(counts: np.ndarray, discount: float | None) -> np.ndarray:
    """Discount, and let more general tables count in how many contexts a level was seen.

    Source: Kneser & Ney 1995; interpolated as in Chen & Goodman 1999.
    """
    seen = [counts]
    while seen[0].ndim > 2:
        seen.insert(0, (seen[0] > 0).sum(axis=-2).astype(float))

    def step(n: np.ndarray, q: np.ndarray, _: int) -> np.ndarray:
        return _discounted(n, q, _own_discount(n) if discount is None else discount)

    return _chained(seen, marginal(counts), step)


def evidence(counts: np.ndarray, scale: float) -> np.ndarray:
    """Add the number of records that makes the counts of each depth most probable, times ``scale``.

    Source: MacKay & Peto 1995 (a hierarchy of Dirichlet priors, strengths by their evidence).
    """

    def step(n: np.ndarray, q: np.ndarray, _: int) -> np.ndarray:
        rows = n.sum(axis=-1)
        used = rows > 0
        own, prior = n[used], np.broadcast_to(q, n.shape)[used]
        logs = [
            float((gammaln(s) - gammaln(rows[used] + s)).sum() + (gammaln(own + s * prior) - gammaln(s * prior)).sum())
            for s in TRIED
        ]
        return _mixed(n, q, scale * float(TRIED[int(np.argmax(logs))]))

    return _chained(contexts(counts), marginal(counts), step)


def by_levels(counts: np.ndarray, amount: float) -> np.ndarray:
    """Add records in proportion to the child's number of levels, spread like the table of one parent less."""
    return back_off(counts, [amount * counts.shape[-1]])


def _backed(*strengths: float) -> Way:
    name = ",".join(f"{s:g}" for s in strengths)
    return Way(f"back-off {name}", lambda counts: back_off(counts, strengths))


_LAPLACE = Way("laplace 1", lambda counts: laplace(counts, 1.0))
_DISCOUNTS: tuple[float | None, ...] = (None, 0.1, 0.25, 0.5, 0.75, 0.95)

ONE_STRENGTH = "back-off, one strength"
FEW_PAIRS = "back-off, few pairs of strengths"
PROGRAM = "back-off, the program's few pairs of strengths, chosen with a lead"
_OWN = (
    _LAPLACE,
    *(_backed(s) for s in (0.5, 2.0, 8.0)),
    *(_backed(*pair) for pair in ((2.0, 32.0), (2.0, 256.0), (16.0, 64.0), (16.0, 512.0))),
)
SCHEMES: dict[str, tuple[Way, ...]] = {
    "Laplace, 1": (_LAPLACE,),
    ONE_STRENGTH: (_LAPLACE, *(_backed(s) for s in STRENGTHS)),
    "to the marginal": tuple(
        Way(f"to marginal {s:g}", lambda counts, s=s: to_marginal(counts, s)) for s in (*STRENGTHS, 32.0)
    ),
    "absolute discounting": tuple(Way(f"discount {d}", lambda counts, d=d: absolute(counts, d)) for d in _DISCOUNTS),
    "Kneser-Ney": tuple(Way(f"Kneser-Ney {d}", lambda counts, d=d: kneser_ney(counts, d)) for d in _DISCOUNTS),
    "Witten-Bell": (Way("Witten-Bell", witten_bell),),
    "strength by evidence": (Way("evidence", lambda counts: evidence(counts, 1.0)),),
    "strength by evidence, scaled": tuple(
        Way(f"evidence x {k:g}", lambda counts, k=k: evidence(counts, k)) for k in (0.25, 0.5, 1.0, 2.0, 4.0)
    ),
    "back-off, strength by depth": (
        _LAPLACE,
        *(_backed(a, b) for a, b in product((0.5, 2.0, 8.0, 32.0), (0.5, 2.0, 8.0, 32.0, 128.0))),
    ),
    "back-off, strength by levels": (
        _LAPLACE,
        *(Way(f"by levels {a:g}", lambda counts, a=a: by_levels(counts, a)) for a in (0.125, 0.25, 0.5, 1, 2, 4, 8)),
    ),
    FEW_PAIRS: _OWN,
    PROGRAM: _OWN,
}
