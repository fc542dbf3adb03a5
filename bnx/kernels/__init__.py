"""The hot loops: arrays in, arrays out, nothing of bnx.

Every loop releases the interpreter lock, so callers may run several on threads; none reassociates float sums.
"""

from bnx.kernels.batches import count_families, take_margins, take_training
from bnx.kernels.counting import count_cells, number_cells
from bnx.kernels.posterior import calibrated_loss, calibration_sums, posteriors, slope_sums
from bnx.kernels.ranking import add_to_histograms, pack_scores, rank_sums, sort_whole
from bnx.kernels.removing import changed_losses
from bnx.kernels.scoring import add_terms, tempered_losses
from bnx.kernels.smoothing import drop_parent, ratio_tables, smoothed_tables
from bnx.kernels.tallying import tally

__all__ = [
    "add_terms",
    "add_to_histograms",
    "calibrated_loss",
    "calibration_sums",
    "changed_losses",
    "count_cells",
    "count_families",
    "drop_parent",
    "number_cells",
    "pack_scores",
    "posteriors",
    "rank_sums",
    "ratio_tables",
    "slope_sums",
    "smoothed_tables",
    "sort_whole",
    "take_margins",
    "take_training",
    "tally",
    "tempered_losses",
]
