"""What the page says about pair tables, and what is required of them."""

from setting import Claim, number, time_table
from timing import Figures

__all__ = ["claims", "page"]

BINCOUNT = "one np.bincount per pair"
GROUPBY = "pandas groupby(...).size(), small integers"


def page(figures: Figures) -> list[str]:
    """Write the part's section from the steps that were measured."""
    lines = []
    if "counting" in figures:
        lines += _counting(figures["counting"])
    if "matrix" in figures:
        lines += _matrix(figures["matrix"])
    if "testing" in figures:
        lines += _testing(figures["testing"])
    return lines


def claims(figures: Figures) -> list[Claim]:
    """List the requirements on counting."""
    found = []
    if "counting" in figures:
        times = figures["counting"]["times"]
        ours = times["bnx, two threads"]["seconds"]
        rivals = {"np.bincount": (BINCOUNT, 50), "pandas groupby (small integers)": (GROUPBY, 1000)}
        found += [
            Claim(f"pair tables, two threads, against {words} per pair", times[name]["seconds"] / ours, least, True)
            for words, (name, least) in rivals.items()
        ]
    for jobs, one in figures.get("limit", {}).get("threads", {}).items():
        words = figures["limit"]["plane_words"] / one["ours"]["least"]
        text = f"best burst of population counts against our best run, {jobs} thread{'s' if jobs != '1' else ''}"
        found.append(Claim(text, max(one["peak"].values()) / words, 3, False))
    return found


def _counting(step: Figures) -> list[str]:
    factor = number(step["pairs"] / step["sampled"])
    return [
        f"## All {step['pairs']:,} pair tables given the class",
        "",
        f"{step['rows']:,} rows, 50 attributes.",
        "",
        *time_table(step["times"], BINCOUNT),
        "",
        "Before anything is timed, the tables of every line are checked to be equal, cell by cell. The rows lie in "
        "memory as small integers for all; the bincounts reuse their work array and half of every cell number. bnx's "
        "time includes making the bit planes, and in one line also sorting the rows by class. The 40 blocks are what "
        "`bnx learn` counts: from them it gets every fold, pair of folds and random half by addition.",
        "",
        f"pandas counts {step['sampled']} pairs, spread evenly over all, and its time is multiplied by {factor}. It is "
        "given the small integers as they are, and also as categories, whose numbering is made before the clock "
        "starts; that is several times as fast, and a user has to know of it and ask for unobserved cells as well.",
        "",
    ]


def _matrix(step: Figures) -> list[str]:
    return [
        "### One-hot matrices",
        "",
        *time_table(step["times"], "one-hot product, float32, all BLAS threads"),
        "",
        "One column of ones and zeros per level, a matrix per class, multiplied by itself; as float32 exact up to 2^24 "
        f"rows. The matrices take {step['bytes'] / 1e6:,.0f} MB, the codes that bnx counts from "
        f"{step['our_bytes'] / 1e6:,.0f} MB. The tables are checked to be equal first.",
        "",
    ]


def _testing(step: Figures) -> list[str]:
    return [
        "### Testing all pairs in every class",
        "",
        *time_table(step["times"], "chi2_contingency per pair and class, from counts"),
        "",
        "`scipy.stats.chi2_contingency` tests one table a call; its statistics and degrees of freedom, summed over "
        "classes, are checked to be ours to nine digits first. bnx computes the likelihood ratio, the exact mean, "
        "variance and third moment of the statistic and the rules for small counts in the same pass.",
        "",
    ]
