"""The parts of the page on drawn edges and on causes."""

import numpy as np
from simulations.common_cause import NAMES, effects_p, explain, explained_by_class, second_cause
from simulations.drawn_edges import PROCESSES, Rates, draw_many, rates
from simulations.layout import shown, table
from simulations.planted import DESIGNS

__all__ = ["drawn_edges", "effects", "interaction", "second_causes"]


def drawn_edges() -> list[str]:
    header = ("rows", "design", "structure", "edges", "false share", "any edge", "related pairs found", "joined")
    found = [
        [f"{rows:,}", design, name, *_rates(design, rates(drawn))]
        for rows in (1000, 300)
        for design in DESIGNS
        for name, drawn in draw_many(design, rows, 1000, PROCESSES).items()
    ]
    return [
        "## Drawn edges: the false share, and how many true ones are found",
        "",
        "1,000 tables a line, each with parameters of its own: 15 attributes of 2 to 6 levels, three classes with "
        "shares .6, .3, .1. *Tree of ten*: ten attributes on a random tree, five alone. *Seven with one cause*: seven "
        "share a hidden attribute of three levels, eight are alone. *Independent*: all depend on the class only. "
        "Structures are learnt from all rows at alpha .05.",
        "",
        "An edge is false if its ends are d-separated in the graph behind the table given the class and the parents "
        "that the child had already taken. *False share*: mean over tables of false / drawn edges, 0 where nothing is "
        "drawn. Limits: false share, and tables of the independent design with any edge, at most .05 + 2 standard "
        "errors. *Related pairs* are joined in the tree, or share the cause; a tree can hold 6 of the latter 21. "
        "*Joined*: share of the related attributes in the largest connected group.",
        "",
        *table(header, found),
    ]


def _rates(design: str, one: Rates) -> list[str]:
    power = ["", ""] if design == "independent" else [shown(one.found), shown(one.joined)]
    return [f"{one.edges:.2f}", shown(one.false), shown(one.any_edge), *power]


def effects() -> list[str]:
    p = effects_p(2000, 200, 1)
    given = int((p.given <= 0.05).sum())
    return [
        "## One cause, two effects",
        "",
        "The class is the cause; 2,000 rows, 200 draws. Limits: the test without the class rejects in all, the test "
        "given the class in at most 5 % + 2 standard errors (16 draws).",
        "",
        *table(
            ("test", "rejected at .05", "largest p"),
            [
                ["without the class", f"{int((p.marginal <= 0.05).sum())} of 200", f"{p.marginal.max():.2g}"],
                ["given the class", f"{given} of 200", f"{p.given.max():.2g}"],
            ],
        ),
    ]


def second_causes() -> list[str]:
    model = second_cause(2000, 3.0)
    found = [explain(model, 2000, seed) for seed in range(200)]
    rows = []
    for name in NAMES[2:]:
        places = [[each.attribute for each in one.ranked].index(name) for one in found]
        words = [one.ranked[place].words for one, place in zip(found, places, strict=True)]
        first, left = np.mean(np.array(places) == 0), np.mean([word == "leaves a dependence" for word in words])
        rows.append([name, f"{first:.3f}", f"{left:.3f}"])
    return [
        "## A second cause to be found",
        "",
        "The two effects share a second cause among the attributes, strong enough to leave three times the detectable "
        f"bits given the class ({model.bits:.4f} bit); 2,000 rows, 200 draws. The pair is rejected given the class in "
        f"{sum(one.p <= 0.05 for one in found)}. `--explain` ranks the other attributes; limit: the cause comes first "
        "in at least 92 % of the draws.",
        "",
        *table(("attribute", "ranked first", "leaves a dependence"), rows),
    ]


def interaction() -> list[str]:
    rows = []
    for even in (True, False):
        bits = explained_by_class(300, 2000, even, 1)
        rows.append(["even" if even else "drawn anew", f"{bits.mean():.4f} ± {bits.std(ddof=1) / np.sqrt(2000):.4f}"])
    return [
        "## Bits explained by the class where nothing is to be explained",
        "",
        "Two attributes of five levels and a class of three, all independent; 300 rows, 2,000 draws. Bits without the "
        "class less bits given it, both less what chance alone shows: df / (2 rows ln 2) where Cochran's rule holds, "
        "else the exact mean given the margins. Limit: mean within .01 bit of 0.",
        "",
        *table(("shares of levels and classes", "mean bits explained"), rows),
    ]
