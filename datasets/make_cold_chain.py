"""Draw the invented cold-chain table from a planted structure, and write down what was planted.

Every shipment has a class, `arrival`, which is a parent of all twelve attributes; ten strong edges and two weak ones
are planted between attributes. Two attributes are numeric: a band is drawn first and the number inside the band, and
no other attribute looks at the number, so cutting it again loses bits but invents no dependence. Blanks come
completely at random and only in attributes without strong children, for the same reason.

    python datasets/make_cold_chain.py                          the committed table, byte for byte
    python datasets/make_cold_chain.py --rows 500 --seed 7 -o other.csv
    python datasets/make_cold_chain.py --planted -o truth.json  what was planted, from the exact distribution

`draw(rows, seed)` gives the columns without touching a file, `planted()` the truth and `separated(a, b, given)` says
whether the planted structure makes two attributes independent given the class and some others.
"""

from __future__ import annotations

import argparse
import csv
import io
import itertools
import json
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from string import ascii_letters

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Codes = npt.NDArray[np.int64]

ROWS = 6000
SEED = 27  # of the first sixty tables the one whose tests lie farthest from their thresholds
TARGET = "arrival"
CLASSES = ("sound", "downgraded", "rejected")
CLASS_SHARES = (0.71, 0.21, 0.08)
IDENTIFIER = "shipment_id"
WEAK_BITS = 0.001
SEPARATION = (
    "Two attributes are separated given the class and a set of attributes exactly if they are d-separated, given that "
    "set, in the graph of edges and edges_below_detectable; the class, a parent of every attribute, is always given."
)


@dataclass(frozen=True)
class Attribute:
    """One attribute: its levels, their shares per class before any pull, and what its parents do to it.

    A parent pulls by log odds of strength x parent score x own score. `together` (a strength per class) multiplies the
    scores of both parents and the child: what no single parent can tell. `bands` are the edges of a numeric one.
    """

    name: str
    levels: tuple[str, ...]
    shares: tuple[tuple[float, ...], ...]
    pulls: tuple[tuple[str, float], ...] = ()
    together: tuple[float, float, float] = (0.0, 0.0, 0.0)
    blanks: float = 0.0
    bands: tuple[float, ...] = ()
    decimals: int = 0


# fmt: off
ATTRIBUTES = (
    Attribute("carrier", ("own fleet", "contract", "partner", "spot hire", "owner driver"),
              ((0.44, 0.32, 0.16, 0.05, 0.03), (0.21, 0.27, 0.31, 0.18, 0.03), (0.10, 0.18, 0.35, 0.34, 0.03))),
    Attribute("route", ("plain", "coast", "mountain", "island"),
              ((0.48, 0.30, 0.15, 0.07), (0.24, 0.28, 0.27, 0.21), (0.11, 0.20, 0.34, 0.35))),
    Attribute("season", ("winter", "autumn", "spring", "summer"),
              ((0.36, 0.28, 0.23, 0.13), (0.17, 0.23, 0.27, 0.33), (0.08, 0.15, 0.26, 0.51))),
    Attribute("reefer_age", ("under 3 years", "3 to 7 years", "over 7 years"),
              ((0.52, 0.35, 0.13), (0.25, 0.38, 0.37), (0.11, 0.31, 0.58))),
    Attribute("precool", ("full", "partial", "none"),
              ((0.68, 0.23, 0.09), (0.47, 0.31, 0.22), (0.31, 0.33, 0.36)),
              pulls=(("carrier", 0.23),)),
    Attribute("pack_type", ("crate", "carton", "bulk bin", "foil liner"),
              ((0.46, 0.35, 0.16, 0.03), (0.33, 0.34, 0.30, 0.03), (0.22, 0.33, 0.42, 0.03)),
              pulls=(("carrier", 0.044),), blanks=0.03),
    Attribute("dock_wait", ("under 30 min", "30 to 90 min", "over 90 min"),
              ((0.60, 0.30, 0.10), (0.43, 0.36, 0.21), (0.33, 0.37, 0.30)),
              pulls=(("route", 0.3),)),
    Attribute("door_alarm", ("none", "one", "several"),
              ((0.67, 0.24, 0.09), (0.61, 0.27, 0.12), (0.56, 0.29, 0.15)),
              pulls=(("dock_wait", 0.7), ("pack_type", 0.052)), blanks=0.02),
    Attribute("power_cut", ("none", "short", "long"),
              ((0.64, 0.26, 0.10), (0.50, 0.32, 0.18), (0.40, 0.34, 0.26)),
              pulls=(("reefer_age", 0.6),)),
    Attribute("load_temp", ("on target", "slightly warm", "warm"),
              ((0.58, 0.30, 0.12), (0.52, 0.32, 0.16), (0.46, 0.32, 0.22)),
              pulls=(("season", 0.4), ("precool", 0.3)), together=(-0.35, 0.3, 0.5)),
    Attribute("transit_days", ("short", "usual", "long", "very long"),
              ((0.34, 0.36, 0.21, 0.09), (0.32, 0.35, 0.22, 0.11), (0.30, 0.34, 0.24, 0.12)),
              pulls=(("route", 0.55), ("season", 0.22)), together=(-0.4, 0.35, 0.6),
              bands=(0.8, 2.1, 3.6, 5.6, 9.1), decimals=1),
    Attribute("setpoint_dev", ("below", "close", "above", "far above"),
              ((0.24, 0.42, 0.24, 0.10), (0.23, 0.40, 0.26, 0.11), (0.22, 0.38, 0.27, 0.13)),
              pulls=(("power_cut", 0.25), ("reefer_age", 0.2)), together=(-0.3, 0.3, 0.5),
              blanks=0.025, bands=(-1.6, -0.4, 0.5, 1.6, 4.2), decimals=2),
)
# fmt: on
BY_NAME = {attribute.name: attribute for attribute in ATTRIBUTES}
COLUMNS = (
    "route", "season", "carrier", "reefer_age", "precool", "pack_type",
    "door_alarm", "dock_wait", "power_cut", "setpoint_dev", "transit_days", "load_temp",
)  # fmt: skip


# --------------------------------------------------------------------------- the exact distribution


def scores(attribute: Attribute) -> Floats:
    """Give the levels equally spaced scores of mean 0 and standard deviation 1."""
    steps = np.arange(len(attribute.levels), dtype=np.float64)
    return np.asarray((steps - steps.mean()) / steps.std())


def table(attribute: Attribute) -> Floats:
    """Return P(level | class, parents), shape (classes, levels of each parent ..., levels)."""
    own = scores(attribute)
    axes = len(attribute.pulls)
    log_odds = np.log(np.array(attribute.shares)).reshape(-1, *([1] * axes), len(own))
    product = own
    for place, (parent, strength) in enumerate(attribute.pulls):
        score = scores(BY_NAME[parent]).reshape(-1, *([1] * (axes - place)))
        log_odds = log_odds + strength * score * own
        product = score * product
    if any(attribute.together):
        log_odds = log_odds + np.array(attribute.together).reshape(-1, *([1] * (axes + 1))) * product
    weights = np.exp(log_odds)
    return np.asarray(weights / weights.sum(axis=-1, keepdims=True))


def parents_of(name: str) -> tuple[str, ...]:
    """Name the planted parents of an attribute besides the class, in the order in which they count."""
    return tuple(parent for parent, _ in BY_NAME[name].pulls)


def ancestry(names: Iterable[str]) -> set[str]:
    """Return the attributes named, their parents, the parents of those, and so on."""
    found: set[str] = set()
    waiting = list(names)
    while waiting:
        name = waiting.pop()
        if name not in found:
            found.add(name)
            waiting.extend(parents_of(name))
    return found


def joint(names: Iterable[str]) -> Floats:
    """Return the exact P(class, names ...), all other attributes summed out."""
    wanted = list(names)
    letter = dict(zip((TARGET, *BY_NAME), ascii_letters, strict=False))
    operands, terms = [np.array(CLASS_SHARES)], [letter[TARGET]]
    for name in (each for each in BY_NAME if each in ancestry(wanted)):
        operands.append(table(BY_NAME[name]))
        terms.append("".join(letter[each] for each in (TARGET, *parents_of(name), name)))
    kept = "".join(letter[each] for each in (TARGET, *wanted))
    return np.asarray(np.einsum(f"{','.join(terms)}->{kept}", *operands, optimize="greedy"))


def bits_with_class(name: str) -> float:
    """Return the bits that an attribute shares with the class."""
    p = joint([name])
    independent = p.sum(axis=1, keepdims=True) * p.sum(axis=0, keepdims=True)
    return float((p * np.log2(p / independent)).sum())


def bits(a: str, b: str, given: Iterable[str] = ()) -> float:
    """Return the bits that two attributes share given the class and the attributes `given`."""
    p = joint([*given, a, b])
    context = p.sum(axis=(-2, -1), keepdims=True)
    independent = p.sum(axis=-1, keepdims=True) * p.sum(axis=-2, keepdims=True) / context
    return float((p * np.log2(p / independent)).sum())


# --------------------------------------------------------------------------- what was planted


def edges() -> Iterator[tuple[str, str]]:
    """Give every planted parent and child, weak ones included, class edges left out."""
    for attribute in ATTRIBUTES:
        for parent in parents_of(attribute.name):
            yield parent, attribute.name


def separated(a: str, b: str, given: Iterable[str] = ()) -> bool:
    """Say whether the planted structure makes two attributes independent given the class and `given`.

    Raises:
        ValueError: `given` holds one of the two attributes.

    Source: the moral graph of the ancestral set, Lauritzen, Dawid, Larsen & Leimer 1990, Networks 20.
    """
    taken = set(given) - {TARGET}
    if a == b or {a, b} & taken:
        raise ValueError(f"{a} and {b} must differ from each other and from what is given: {sorted(taken)}")
    near: dict[str, set[str]] = {name: set() for name in ancestry([a, b, *taken])}
    for child in near:
        for one, other in itertools.combinations((child, *parents_of(child)), 2):
            near[one].add(other)
            near[other].add(one)
    reached, waiting = {a}, [a]
    while waiting:
        fresh = near[waiting.pop()] - taken - reached
        reached |= fresh
        waiting.extend(fresh)
    return b not in reached


def as_planted(parent: str, child: str) -> dict[str, object]:
    """Return one planted edge with the exact bits it carries."""
    before = parents_of(child)[: parents_of(child).index(parent)]
    seen = (1 - BY_NAME[parent].blanks) * (1 - BY_NAME[child].blanks)
    return {
        "parent": parent,
        "child": child,
        "bits": round(bits(parent, child), 6),
        "parents_before": list(before),
        "bits_given_parents_before": round(bits(parent, child, before), 6),
        "bits_with_blanks": round(bits(parent, child) * seen, 6),
    }


def planted() -> dict[str, object]:
    """Return what was planted, every figure from the exact distribution and rounded to 6 decimals.

    `bits` is without blanks; blanks come at random, so as a level of their own they leave `bits_with_blanks`. What a
    numeric attribute carries is meant for its bands: cutting it elsewhere can only lose bits.
    """
    pairs = list(itertools.combinations(COLUMNS, 2))
    dependent = [(a, b) for a, b in pairs if not separated(a, b)]
    indirect = [(a, b) for a, b in dependent if a not in parents_of(b) and b not in parents_of(a)]
    return {
        "format": "cold-chain-planted/1",
        "class": TARGET,
        "class_shares": dict(zip(CLASSES, CLASS_SHARES, strict=True)),
        "identifier": IDENTIFIER,
        "class_is_parent_of": list(COLUMNS),
        "bits_with_class": {name: round(bits_with_class(name), 6) for name in COLUMNS},
        "blank_share": {each.name: each.blanks for each in ATTRIBUTES if each.blanks},
        "bands": {each.name: list(each.bands) for each in ATTRIBUTES if each.bands},
        "edges": [as_planted(*edge) for edge in edges() if bits(*edge) >= WEAK_BITS],
        "edges_below_detectable": [as_planted(*edge) for edge in edges() if bits(*edge) < WEAK_BITS],
        "separated_given_class": [[a, b] for a, b in pairs if separated(a, b)],
        "dependent_without_edge": [{"a": a, "b": b, "bits": round(bits(a, b), 6)} for a, b in indirect],
        "separation": SEPARATION,
    }


# --------------------------------------------------------------------------- the table


def _pick(shares: Floats, uniform: Floats) -> Codes:
    """Turn one uniform number a row into a level, by the row's own shares (rows, levels)."""
    upto = np.cumsum(shares, axis=1)[:, :-1]
    return np.asarray((uniform[:, None] >= upto).sum(axis=1))


def _written(attribute: Attribute, codes: Codes, inside: Floats) -> list[str]:
    """Write levels as text: their names, or a number inside their band."""
    if not attribute.bands:
        return [attribute.levels[code] for code in codes]
    edge = np.array(attribute.bands)
    step = 10.0**-attribute.decimals
    spots = np.round((edge[1:] - edge[:-1]) / step).astype(np.int64)
    ticks = np.round(edge[:-1] / step).astype(np.int64)[codes] + np.floor(inside * spots[codes]).astype(np.int64)
    return [f"{tick * step:.{attribute.decimals}f}" for tick in ticks]


def draw(rows: int = ROWS, seed: int = SEED) -> dict[str, list[str]]:
    """Draw a table: column name to its text cells, blank cells empty; identifier first, class last.

    Raises:
        ValueError: `rows` or `seed` is negative.
    """
    if rows < 0 or seed < 0:
        raise ValueError(f"rows {rows} and seed {seed} must not be negative")
    rng = np.random.default_rng(seed)
    target = _pick(np.tile(np.array(CLASS_SHARES), (rows, 1)), rng.random(rows))
    codes: dict[str, Codes] = {}
    cells: dict[str, list[str]] = {}
    for attribute in ATTRIBUTES:
        context = (target, *(codes[parent] for parent in parents_of(attribute.name)))
        codes[attribute.name] = _pick(table(attribute)[context], rng.random(rows))
        text = _written(attribute, codes[attribute.name], rng.random(rows))
        blank = rng.random(rows) < attribute.blanks
        cells[attribute.name] = ["" if gone else cell for gone, cell in zip(blank, text, strict=True)]
    width = max(6, len(str(rows)))
    columns = {IDENTIFIER: [f"S-{row:0{width}d}" for row in range(1, rows + 1)]}
    columns |= {name: cells[name] for name in COLUMNS}
    columns[TARGET] = [CLASSES[code] for code in target]
    return columns


def as_csv(columns: dict[str, list[str]]) -> str:
    """Write columns as comma-separated text with a header."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(zip(*columns.values(), strict=True))
    return out.getvalue()


def as_json(truth: dict[str, object]) -> str:
    """Write the planted truth as indented text."""
    return json.dumps(truth, indent=2) + "\n"


def main() -> None:
    """Write the table, or with `--planted` the truth."""
    options = argparse.ArgumentParser(description="Draw the cold-chain table from its planted structure.")
    options.add_argument("--rows", type=int, default=ROWS, help="shipments to draw")
    options.add_argument("--seed", type=int, default=SEED, help="another seed draws another table")
    options.add_argument("--planted", action="store_true", help="write what was planted instead of a table")
    options.add_argument("-o", dest="out", type=Path, help="file to write")
    asked = options.parse_args()
    if asked.rows < 0 or asked.seed < 0:
        options.error(f"--rows {asked.rows} and --seed {asked.seed} must not be negative")
    if asked.out is None and (asked.rows, asked.seed) != (ROWS, SEED):
        options.error("another table needs a file of its own: name it with -o")
    text = as_json(planted()) if asked.planted else as_csv(draw(asked.rows, asked.seed))
    default = Path(__file__).parent / ("cold_chain_planted.json" if asked.planted else "cold_chain.csv")
    (asked.out or default).write_text(text, encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main()
