"""Wide tables: a vocabulary of 10,000 words, and pictures of digits as one attribute a pixel."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
from child import learn_compiled
from counting import plane_words
from make_wide import NOTES, WORDS, make_wide, write_wide
from opentables import load
from setting import Setting
from sklearn.datasets import load_digits
from timing import Figures

__all__ = ["STEPS", "bitmaps"]

SIDE = 20  # pixels of a picture, either way
THREE = ("--structures", "naive,tan,tan-tested")


def vocabulary(setting: Setting) -> Figures:
    """Learn three structures from 20,000 notes and 10,000 words."""
    rows, words = setting.rows(NOTES), max(20, round(WORDS * setting.scale))
    path = setting.folder / f"words{rows}x{words}.parquet"
    if not path.exists():
        write_wide(make_wide(rows, words), path)
    return {**_size(rows, words), **_learnt(setting, path, "arrival", *THREE)}


def bitmap(setting: Setting) -> Figures:
    """Learn from 1,797 pictures of digits, 20 x 20 pixels, black or white, with the default settings."""
    return _pictures(setting, "bitmaps", bitmaps, "digit")


def digits(setting: Setting) -> Figures:
    """Learn from 5,000 pictures of digits, 28 x 28 pixels, black or white, with the default settings."""
    return _pictures(setting, "mnist5k_binary", lambda: load("mnist5k_binary"), "digit")


def bitmaps() -> pd.DataFrame:
    """Enlarge scikit-learn's pictures of 8 x 8 pixels by lines between pixels, and cut the greys at half."""
    found = load_digits()
    grey = found.images / found.images.max()
    at = (np.arange(SIDE) + 0.5) * grey.shape[1] / SIDE - 0.5
    weights = np.maximum(0.0, 1.0 - np.abs(np.clip(at, 0, grey.shape[1] - 1)[:, None] - np.arange(grey.shape[1])))
    larger = np.einsum("ai,bj,nij->nab", weights, weights, grey)
    cells = np.where(larger.reshape(len(larger), -1) >= 0.5, "1", "0")
    names = [f"r{row:02d}c{column:02d}" for row in range(SIDE) for column in range(SIDE)]
    return pd.DataFrame(cells, columns=names).assign(digit=found.target.astype(str))


def _pictures(setting: Setting, name: str, make: Callable[[], pd.DataFrame], target: str) -> Figures:
    """Write a table of pictures and learn from it; on a small scale, from every so many-th pixel."""
    frame = make()
    pixels = frame.columns.drop(target)[:: min(19, max(1, round(1 / setting.scale)))]
    frame = frame[[*pixels, target]]
    path = setting.folder / f"{name}{len(pixels)}.parquet"
    frame.to_parquet(path, index=False)
    return {**_size(len(frame), len(pixels)), **_learnt(setting, path, target)}


def _size(rows: int, attributes: int) -> Figures:
    """Tell how large a table of binary attributes is."""
    words = plane_words(np.full(attributes, 2), rows)
    return {"rows": rows, "attributes": attributes, "code_bytes": rows * (attributes + 1), "plane_words": words}


def _learnt(setting: Setting, path: Path, target: str, *options: str) -> Figures:
    found = learn_compiled(path, setting.folder / "results", "--timings", *options, target=target)
    return {"options": " ".join(options), **found.figures()}


STEPS = {"vocabulary": vocabulary, "bitmap": bitmap, "digits": digits}
