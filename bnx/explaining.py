"""Which further attribute explains a dependence: taken as given too, what does it leave of the bits?"""

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from bnx.independence import METHODS, Statistics
from bnx.intervals import bits_upper, detectable_bits
from bnx.multiplicity import adjusted, threshold
from bnx.refining import Visit, reported, with_chance

__all__ = ["EXPLANATIONS", "Explanation", "explanations"]

EXPLANATIONS = ("leaves nothing that matters", "may leave nothing", "leaves a dependence")

_NOTHING, _PERHAPS, _LEAVES = range(3)


@dataclass(frozen=True)
class Explanation:
    """A pair tested with one more attribute given.

    ``bits_corrected``: what is left of the bits, less what chance alone would show; ``bits_upper``: its one-sided upper
    bound, at a level of alpha over the number of attributes tried; ``adjusted_p``: of independence given this attribute
    too, by Holm's steps over those tried; ``detectable_bits``: what that test would have found with power .80.
    """

    attribute: str
    words: str
    bits: float
    bits_corrected: float
    bits_upper: float
    p_value: float
    adjusted_p: float
    method: str
    detectable_bits: float
    strata: int
    strata_informative: int

    def to_dict(self) -> dict[str, Any]:
        """Give the fields by name."""
        return asdict(self)


def explanations(
    names: Sequence[str], stats: Statistics, visit: Visit, test: str, alpha: float, negligible: float, seed: int
) -> tuple[Explanation, ...]:
    """Rank further attributes by how much of a dependence they explain, the best first.

    Among those that may leave nothing, what could remain counts: an attribute that scatters the records over so many
    strata that nothing can be seen does not come before one that leaves few bits in a sharp test.

    *leaves nothing that matters*: independence is not rejected and even the upper bound of what is left is negligible;
    *may leave nothing*: not rejected, but this sample could miss what matters; *leaves a dependence*: rejected. Both
    errors are held down for all attributes tried together: Holm's steps for the rejections, alpha over their number for
    the bounds.

    Args:
        names: of the attributes tried, (m,).
        stats: of the pair given all that was given and each of these.
        visit: fetches the counts of each.
        test: as for pairs.
        alpha: level.
        negligible: bits that do not matter.
        seed: of random tables.
    """
    stats = with_chance(visit, stats)
    tested = reported(visit, stats, test, "holm", alpha, seed).tested
    corrected = adjusted(tested.p, "holm")
    upper = bits_upper(stats, 1.0 - alpha / max(1, len(names)))
    detectable = detectable_bits(threshold(tested.p, "holm", alpha), np.where(stats.varies, stats.df, 0.0), stats.rows)
    words = np.select([corrected <= alpha, upper < negligible], [_LEAVES, _NOTHING], _PERHAPS)
    could_remain = np.maximum(0.0, stats.bits_corrected) + np.nan_to_num(detectable, nan=np.inf)
    order = np.lexsort((np.where(words == _LEAVES, stats.bits_corrected, could_remain), words))
    return tuple(
        Explanation(
            names[k],
            EXPLANATIONS[words[k]],
            float(stats.bits[k]),
            float(stats.bits_corrected[k]),
            float(upper[k]),
            float(tested.p[k]),
            float(corrected[k]),
            METHODS[tested.method[k]],
            float(detectable[k]),
            int(stats.strata[k]),
            int(stats.informative[k]),
        )
        for k in order.tolist()
    )
