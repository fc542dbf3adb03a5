"""The part of the page that compares ways to smooth, and its picture."""

from collections.abc import Mapping
from pathlib import Path
from statistics import geometric_mean
from typing import Any

import matplotlib as mpl
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from quality.requirements import ratio
from quality.smoothing_schemes import FEW_PAIRS, ONE_STRENGTH, PROGRAM, SCHEMES

from bnx.palette import PALETTES

__all__ = ["PICTURE", "draw_ways", "means", "smoothing_page"]

Figures = dict[str, Any]
PICTURE = "pictures/smoothing.svg"
COLOURS = PALETTES["light"]
MARKS = {"naive": ("bar", "s"), "tan-tested": ("gain", "o"), "kdb2-tested": ("undecided", "D"), "kdb2": ("loss", "^")}
SOURCES = {
    "Laplace, 1": "one record in every cell",
    ONE_STRENGTH: "contexts in the order the parents were taken; .5 to 16 records, or Laplace 1 (Petitjean, Buntine, "
    "Webb & Zaidi 2018)",
    "to the marginal": ".5 to 32 records spread like the marginal (Friedman, Geiger & Goldszmidt 1997, section 5)",
    "absolute discounting": "interpolated; discount of each depth from cells of one and two records, or one of five "
    "(Ney, Essen & Kneser 1994)",
    "Kneser-Ney": "the same, general tables count contexts (Kneser & Ney 1995)",
    "Witten-Bell": "as many records as levels were seen in the context (Witten & Bell 1991)",
    "strength by evidence": "of each family and depth, a hierarchy of Dirichlet priors (MacKay & Peto 1995)",
    "strength by evidence, scaled": "the same, times .25 to 4, chosen out of fold",
    "back-off, strength by depth": "20 pairs: .5 to 32 records given the class, .5 to 128 given parents too",
    "back-off, strength by levels": "records in proportion to the levels of the child",
    FEW_PAIRS: "Laplace 1; .5, 2, 8; 2 given the class and 32 or 256 given parents too, 16 and 64 or 512",
    PROGRAM: "the same; to leave Laplace 1 takes 2 nats in all, to leave MDL cut points 5",
}


def means(figures: Mapping[str, Figures]) -> dict[str, dict[str, float]]:
    """Compare every way that all tables have with one strength, by structure: geometric means over the tables."""
    return {
        name: {
            structure: geometric_mean(
                ratio(one[name][structure]["log_loss"], one[ONE_STRENGTH][structure]["log_loss"])
                for one in figures.values()
            )
            for structure in MARKS
        }
        for name in SCHEMES
        if all(name in one for one in figures.values())
    }


def smoothing_page(figures: Mapping[str, Figures]) -> list[str]:
    """Write the comparison of all ways over the tables measured."""
    if not figures:
        return []
    rows = [
        f"| {name} | {SOURCES[name]} | {' | '.join(f'{value:.3f}' for value in own.values())} |"
        for name, own in means(figures).items()
    ]
    return [
        *("## Ways to smooth", ""),
        f"The same structures, folds, cut points to choose from and calibration on {len(figures)} tables; amounts are",
        "chosen out of fold inside every training fold. Geometric mean of (loss + .01) as a ratio to the same",
        f"structure under *{ONE_STRENGTH}*; below 1 is better. One row can decide on tables of a few hundred, so a",
        "percent or two between single figures means little; the sign over four structures means more.",
        *("", f"| way | what | {' | '.join(MARKS)} |", "|---|---|" + "--:|" * len(MARKS), *rows),
        *("", f"![Ways to smooth, as ratios to one strength]({PICTURE})", ""),
        "Where an edge does not pay, only a strength given parents of hundreds of records saves its structure from",
        "being worse than naive Bayes; one strength for all depths cannot give it without spoiling tables of single",
        "attributes. And on tables of a few hundred rows, what leads by a nat or two in a training fold tends to fall",
        "behind in the fold left out, as the hard rows are then on the other side: a choice that must lead by some",
        "nats in all loses less. Both are in `--smoothing auto`. Pairs and leads were settled on 16 of these tables,",
        "each dealt to folds five times, so the last two rows flatter themselves a little. A strength for every",
        "attribute of its own, found by descent on the inner folds, was tried and was worse.",
        *("", *_each(figures)),
    ]


def _each(figures: Mapping[str, Figures]) -> list[str]:
    """Show every table under one strength and under the program's choice."""
    head = [f"{structure}, {which}" for structure in MARKS for which in ("one", "program")]
    rows = []
    for table, one in figures.items():
        if PROGRAM not in one:
            continue
        cells = [f"{one[name][structure]['log_loss']:.4f}" for structure in MARKS for name in (ONE_STRENGTH, PROGRAM)]
        rows.append(f"| {table} | {' | '.join(cells)} |")
    return [f"| log loss | {' | '.join(head)} |", "|---|" + "--:|" * len(head), *rows]


def draw_ways(figures: Mapping[str, Figures], path: Path) -> None:
    """Draw the ratios of all ways as SVG, letters as paths, the same bytes for the same figures."""
    every = means(figures)
    with mpl.rc_context({"svg.fonttype": "path", "svg.hashsalt": "ways", "font.size": 9}):
        figure = Figure(figsize=(9.6, 4.8), facecolor=COLOURS["background"], layout="constrained")
        FigureCanvasSVG(figure)
        panel = figure.subplots()
        panel.set_facecolor(COLOURS["chip"])
        panel.axvline(1, color=COLOURS["unjudged"], linewidth=1.2, linestyle=":")
        for structure, (colour, marker) in MARKS.items():
            values = [own[structure] for own in every.values()]
            panel.plot(values, range(len(every)), marker, color=COLOURS[colour], label=structure, markersize=6)
        panel.set_yticks(range(len(every)), [name.replace(", chosen", ",\nchosen") for name in every])
        panel.invert_yaxis()
        panel.set_xlabel(f"log loss as a ratio to {ONE_STRENGTH}: left is better", color=COLOURS["text"])
        panel.tick_params(colors=COLOURS["small-text"])
        panel.grid(color=COLOURS["bar-track"], linewidth=0.8)
        for spine in panel.spines.values():
            spine.set_color(COLOURS["chip-edge"])
        figure.legend(loc="outside lower center", ncols=4, frameon=False, labelcolor=COLOURS["text"])
        figure.savefig(path, format="svg", metadata={"Date": None})
