"""Counts of many families in one call."""

import numpy as np

from bnx.kernels.compiling import kernel
from bnx.kernels.counting import number_cells

__all__ = ["count_families", "take_margins", "take_training"]

_ROWS = 2048  # rows whose cell numbers are computed at a time


@kernel
def count_families(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    which: np.ndarray,
    out_starts: np.ndarray,
    starts: np.ndarray,
    slots: np.ndarray,
    out: np.ndarray,
) -> None:
    """Count the joint levels of some families, the child fastest, in the groups of rows that have a slot.

    codes, recode, plain, members, sizes, depths, which as in ``add_terms``; starts (S + 1,): first row of each segment,
    of which number s belongs to group ``s % G``; slots (G,): row of ``out`` that a group adds to, negative to skip it;
    out (slots, cells) int32: wanted family k from ``out_starts[k]`` on.
    """
    cells = np.empty(_ROWS, np.int32)
    for k in range(which.size):
        f = which[k]
        own = depths[f]
        for s in range(starts.size - 1):
            slot = slots[s % slots.size]
            if slot < 0:
                continue
            into = out[slot, out_starts[k] :]
            for low in range(starts[s], starts[s + 1], _ROWS):
                rows = min(_ROWS, starts[s + 1] - low)
                number_cells(codes, recode, plain[f], members[f, :own], sizes[f, :own], low, rows, cells)
                for row in range(rows):
                    into[cells[row]] += 1


@kernel
def take_training(
    total: np.ndarray,
    parts: np.ndarray,
    away: np.ndarray,
    froms: np.ndarray,
    tos: np.ndarray,
    lengths: np.ndarray,
    out: np.ndarray,
) -> None:
    """Write the counts of families in a training set: those of all rows less those of the parts that it lacks.

    total (C, cells); parts (P, C, cells); away (K,): the parts to subtract; families begin at ``froms`` in these, at
    ``tos`` in out (C, cells), and have ``lengths`` cells; all int32.
    """
    for k in range(froms.size):
        for c in range(out.shape[0]):
            for cell in range(lengths[k]):
                count = total[c, froms[k] + cell]
                for part in away:
                    count -= parts[part, c, froms[k] + cell]
                out[c, tos[k] + cell] = count


@kernel
def take_margins(
    margins: np.ndarray,
    offsets: np.ndarray,
    recode: np.ndarray,
    attributes: np.ndarray,
    tos: np.ndarray,
    out: np.ndarray,
) -> None:
    """Add the levels of single attributes (K,) to out (C, cells) int32, each from ``tos[k]`` on.

    margins (C, D): of attribute i from ``offsets[i]`` to ``offsets[i + 1]``; recode (n, R): the code that each stored
    code stands for.
    """
    for k in range(attributes.size):
        i = attributes[k]
        for c in range(out.shape[0]):
            for level in range(offsets[i + 1] - offsets[i]):
                out[c, tos[k] + recode[i, level]] += margins[c, offsets[i] + level]
