"""The coded table: every cell a small integer, one contiguous line of codes per attribute."""

from dataclasses import dataclass

import numpy as np

from bnx.domains import Schema

__all__ = ["CodedTable", "LeftOut"]


@dataclass(frozen=True)
class LeftOut:
    """A column that takes no part, and why (a phrase that can follow the name in brackets)."""

    name: str
    reason: str


@dataclass(frozen=True)
class CodedTable:
    """Rows as codes.

    ``codes`` (n, N) uint8 or uint16, C-contiguous: code of attribute i in row j under ``schema.attributes[i]``.
    ``target`` (N,) uint8: code of the class. ``rows`` (N,) int64: 0-based line of data in the source.
    Numeric columns hold up to 256 fine bins and columns with very many levels hold all of them; each training fold
    merges those into its own cut points and pooled levels (`Coarsening`).
    """

    schema: Schema
    codes: np.ndarray
    target: np.ndarray
    rows: np.ndarray
