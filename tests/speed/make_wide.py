"""The wide table of the benchmarks: notes on shipments as the words in them, present or absent, and two classes.

``python tests/speed/make_wide.py TABLE.parquet [ROWS [WORDS]]`` writes it. Words occur in about 1 to 50 % of the notes.
Each note has a topic, drawn given its class, which makes words dependent within a class; a share of the words copies an
earlier word in some notes, so that a forest of dependences is planted too.
"""

import sys
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet
from make_table import BenchTable

__all__ = ["NOTES", "WORDS", "make_wide", "write_wide"]

NOTES, WORDS = 20_000, 10_000
CLASS_SHARES = (0.7, 0.3)
CLASS_LEVELS = ("sound", "rejected")
TOPICS = 20
TOUCHED = 0.1  # share of the topics that change how often a word occurs
TOPIC_PULL, CLASS_PULL = 1.2, 0.15  # on the logit
FOLLOWING, COPIED = 0.3, 0.4  # share of the words that copy another; in which share of the notes
BLOCK = 250  # words drawn at a time


def make_wide(rows: int = NOTES, words: int = WORDS, seed: int = 21) -> BenchTable:
    """Draw the table, some words at a time."""
    rng = np.random.default_rng(seed)
    target = rng.choice(2, rows, p=CLASS_SHARES).astype(np.int8)
    shares = rng.dirichlet(np.full(TOPICS, 0.5), 2)
    drawn = rng.random((rows, 1))
    topic = (drawn > np.cumsum(shares, axis=1)[target][:, :-1]).sum(axis=1)
    codes = np.empty((words, rows), np.int8)
    for first in range(0, words, BLOCK):
        block = codes[first : first + BLOCK]
        chance = _chances(rng, len(block))
        np.less(rng.random(block.shape, np.float32), chance[:, target, topic], out=block.view(bool))
        for word in range(max(first, 1), first + len(block)):
            if rng.random() < FOLLOWING:
                copied = rng.random(rows, np.float32) < COPIED
                codes[word, copied] = codes[rng.integers(word), copied]
    return BenchTable(codes, np.full(words, 2), target, 2)


def _chances(rng: np.random.Generator, words: int) -> np.ndarray:
    """Draw how likely words are by class and topic, float32 (words, 2, TOPICS)."""
    shares = 0.5 * 0.02 ** rng.random(words)
    touched = rng.random((words, 1, TOPICS)) < TOUCHED
    pull = CLASS_PULL * rng.standard_normal((words, 2, 1)) + TOPIC_PULL * touched * rng.standard_normal(touched.shape)
    logit = np.log(shares / (1.0 - shares))[:, None, None] + pull
    return (1.0 / (1.0 + np.exp(-logit))).astype(np.float32)


def write_wide(table: BenchTable, path: Path) -> None:
    """Write the table with text levels, the class last; a file that is there was written whole."""
    columns = {f"w{i:05d}": _texts(codes, ["absent", "present"]) for i, codes in enumerate(table.codes)}
    columns["arrival"] = _texts(table.target, list(CLASS_LEVELS))
    unfinished = path.with_suffix(".unfinished")
    pa.parquet.write_table(pa.table(columns), unfinished)
    unfinished.replace(path)


def _texts(codes: np.ndarray, levels: list[str]) -> pa.Array:
    return pa.DictionaryArray.from_arrays(pa.array(codes), pa.array(levels))


if __name__ == "__main__":
    write_wide(make_wide(*map(int, sys.argv[2:4])), Path(sys.argv[1]))
