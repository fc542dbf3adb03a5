"""Which cells of families, and which rows, hold what was not observed or never seen in training."""

import numpy as np

__all__ = ["levels_unknown", "masked_cells", "rows_with_unknown", "view_codes"]


def levels_unknown(unknown: np.ndarray, recode: np.ndarray) -> np.ndarray:
    """Mark the codes of a view, (n, R) bool, that unknown (n, R) stored codes stand for; recode (n, at least R)."""
    out = np.zeros(unknown.shape, np.bool_)
    attribute, code = np.nonzero(unknown)
    out[attribute, recode[attribute, code]] = True
    return out


def masked_cells(
    members: np.ndarray, sizes: np.ndarray, depths: np.ndarray, veiled: np.ndarray, levels: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Mark, in the tables of K families side by side, the cells in which a member is not observed, or is unknown.

    members, sizes (K, M), of which the first ``depths`` (K,) count; veiled (n,) bool: attributes whose last code is
    that of cells not observed; levels (n, R) bool: codes that are unknown for any reason. Two of (cells,) bool.
    """
    cells = sizes.prod(axis=1)
    family = np.repeat(np.arange(len(cells)), cells)
    rest = np.arange(len(family)) - np.repeat(np.cumsum(cells) - cells, cells)
    blank, unknown = np.zeros(len(family), np.bool_), np.zeros(len(family), np.bool_)
    for m in reversed(range(members.shape[1])):
        size, attribute = sizes[family, m], members[family, m]
        code = rest % size
        rest //= size
        counts = m < depths[family]
        blank |= counts & veiled[attribute] & (code == size - 1)
        unknown |= counts & levels[attribute, np.minimum(code, levels.shape[1] - 1)]
    return blank, unknown


def rows_with_unknown(
    codes: np.ndarray, unknown: np.ndarray, attributes: np.ndarray, first: int, last: int
) -> np.ndarray:
    """Find the rows of ``first:last`` in which one of some attributes is unknown, by stored codes: unknown (n, R)."""
    found = np.zeros(last - first, np.bool_)
    for i in attributes.tolist():
        found |= unknown[i][codes[i, first:last]]
    return np.flatnonzero(found) + first


def view_codes(codes: np.ndarray, rows: np.ndarray, recode: np.ndarray, unknown: np.ndarray) -> np.ndarray:
    """Give the codes of a view of some rows, (n, rows), -1 for what is unknown."""
    stored, each = np.take(codes, rows, axis=1), np.arange(len(codes))[:, None]
    return np.where(unknown[each, stored], -1, recode[each, stored])
