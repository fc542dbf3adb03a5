"""From fine levels to those a model uses, learnt from the counts of its training rows: cut points, pooled levels."""

import numpy as np

from bnx.discretising import frequency_cuts, mdl_cuts, parse_bins, width_cuts
from bnx.domains import Coarsening, Domain, interval_names
from bnx.errors import SettingError
from bnx.levelling import spare_name

__all__ = ["coarsen", "needs_coarsening"]


def needs_coarsening(domain: Domain, max_levels: int) -> bool:
    """Tell whether training rows must choose the levels: a numeric column, or one with too many levels."""
    return domain.numeric or _regular(domain) > max_levels


def coarsen(domain: Domain, counts: np.ndarray, bins: str, max_levels: int) -> Coarsening:
    """Choose coarser levels from the training rows.

    ``counts`` (levels of ``domain``, C) int64 training rows per fine level and class; ``bins`` is ``mdl``,
    ``frequency:K``, ``width:K`` or ``mdl+frequency:K`` and rules numeric columns (the last is ``mdl``, and
    ``frequency:K`` where that makes no cut). A text column keeps its ``max_levels`` most frequent levels (ties: in
    order of the domain) and pools the others. Every fine level gets a coarse one, also without training rows; blank
    stays apart, and so do cells not observed.

    Raises:
        SettingError: ``bins`` does not name one way to cut.
    """
    return _cut(domain, counts, bins) if domain.numeric else _pool(domain, counts, max_levels)


def _regular(domain: Domain) -> int:
    """Count the levels that are neither pooled nor blank."""
    return len(domain) - domain.pooled - domain.blank


def _cut(domain: Domain, counts: np.ndarray, bins: str) -> Coarsening:
    size = _regular(domain)
    positions = _positions(np.array(domain.cuts), counts[:size], bins)
    cuts = tuple(domain.cuts[position] for position in positions)
    codes = np.searchsorted(positions, np.arange(size), side="left")
    names = interval_names(cuts)
    if domain.blank:
        codes = np.append(codes, len(names))
        names = (*names, domain.levels[-1])
    if domain.veiled:
        codes = np.append(codes, len(names))
    coarse = Domain(domain.name, names, numeric=True, cuts=cuts, blank=domain.blank, veiled=domain.veiled)
    return Coarsening(coarse, codes.astype(np.uint16))


def _positions(cuts: np.ndarray, counts: np.ndarray, bins: str) -> np.ndarray:
    """Choose after which fine bins to cut."""
    kind, k = parse_bins(bins)
    if kind in {"mdl", "mdl+frequency"}:
        found = mdl_cuts(counts)
        return found if len(found) or kind == "mdl" else frequency_cuts(counts.sum(axis=1), k)
    if kind == "frequency":
        return frequency_cuts(counts.sum(axis=1), k)
    if kind == "width":
        return width_cuts(cuts, counts.sum(axis=1), k)
    raise SettingError(
        f"--bins: {bins!r} cannot be used here; give one way to cut: mdl, frequency:K, width:K or mdl+frequency:K"
    )


def _pool(domain: Domain, counts: np.ndarray, max_levels: int) -> Coarsening:
    size = _regular(domain)
    if size <= max_levels:
        return Coarsening(domain, np.arange(domain.codes, dtype=np.uint16))
    frequent = np.argsort(-counts[:size].sum(axis=1), kind="stable")[:max_levels]
    kept = np.sort(frequent)
    names = [domain.levels[k] for k in kept]
    codes = np.full(domain.codes, len(names), dtype=np.uint16)
    codes[kept] = np.arange(len(names))
    pooled = domain.levels[size] if domain.pooled else spare_name("(other)", domain.levels)
    blank = (domain.levels[-1],) if domain.blank else ()
    if domain.blank or domain.veiled:
        codes[-1] = len(names) + 1
    coarse = Domain(domain.name, (*names, pooled, *blank), pooled=True, blank=domain.blank, veiled=domain.veiled)
    return Coarsening(coarse, codes)
