"""The hot loops: arrays in, arrays out, nothing of bnx.

Every loop releases the interpreter lock, so callers may run several on threads; none reassociates float sums.
"""

from bnx.kernels.counting import count_cells, number_cells
from bnx.kernels.ranking import rank_sums, sort_whole
from bnx.kernels.scoring import add_terms, calibrated_loss, smoothed_tables, tempered_losses

__all__ = [
    "add_terms",
    "calibrated_loss",
    "count_cells",
    "number_cells",
    "rank_sums",
    "smoothed_tables",
    "sort_whole",
    "tempered_losses",
]
