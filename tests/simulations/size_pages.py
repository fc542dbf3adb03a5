"""The parts of the page on sizes and tails."""

from simulations.layout import table
from simulations.moments import LEVELS, WAYS, FarOut, far_out, sparse_tables
from simulations.monte_carlo import tails
from simulations.sizes import CELLS, FAR_OUT, TESTS, Cell, Sizes, measure

__all__ = ["far_sizes", "moment_tails", "monte_carlo_tails", "sizes"]


def sizes() -> list[str]:
    found = [measure(cell, 2000) for cell in CELLS]
    over = [one.over("auto") for one in found]
    large = min(one.rejected["auto"] for one in found if one.cell.rows >= 200)
    header = ("rows", "levels", "classes", "shares", "auto", "gate", "chi2", "g", "what auto used")
    return [
        "## Size: how often independent attributes are rejected at .05",
        "",
        "2,000 tables a line. Two attributes with as many levels, independent given the class; only the rows are "
        "fixed. Shares of levels and classes are even, or skewed as 1, 1/2, 1/3 ... `auto` is what `bnx test` reports, "
        "`gate` what admits edges, `chi2` and `g` are the chi-square tails of X2 and G. A pair that is not tested is "
        "not rejected. Limits for `auto`: nowhere above .05 + 4 standard errors (.0695), above .05 + 3 (.0646) on at "
        "most 2 of the 64 lines, at least .03 from 200 rows on.",
        "",
        *table(header, (_size_row(one) for one in found)),
        f"`auto`: {sum(one > 4 for one in over)} lines above .05 + 4 standard errors, {sum(one > 3 for one in over)} "
        f"above .05 + 3; least share from 200 rows on {large:.4f}. "
        + " ".join(
            f"`{test}`: {sum(one.over(test) > 4 for one in found)} above .05 + 4, most "
            f"{max(one.rejected[test] for one in found):.4f}."
            for test in TESTS[1:]
        ),
        "",
    ]


def _size_row(one: Sizes) -> list[str]:
    used = ", ".join(f"{method} {100 * share:.0f} %" for method, share in one.methods.items() if share >= 0.005)
    others = (f"{one.rejected[test]:.4f}" for test in TESTS[1:])
    return [*_situation(one.cell), f"{one.rejected['auto']:.4f} ± {one.error('auto'):.4f}", *others, used]


def _situation(cell: Cell) -> list[str]:
    return [f"{cell.rows:,}", str(cell.levels), str(cell.classes), "skewed" if cell.skewed else "even"]


def far_sizes() -> list[str]:
    header = ("rows", "levels", "classes", "shares", "level", *TESTS)
    found = [measure(cell, 20_000, alpha) for cell in FAR_OUT for alpha in (0.01, 0.001)]
    rows = (
        [
            *_situation(one.cell),
            f"{one.alpha:g}",
            *(f"{one.rejected[test]:.5f} ± {one.error(test):.5f}" for test in TESTS),
        ]
        for one in found
    )
    return [
        "## The same far out in the tail",
        "",
        "20,000 tables a line, in situations that are sparse. Gates work at such levels: .05 over 105 pairs is .0005. "
        "No limit but for `gate` and `auto` at .001: at most .001 + 4 standard errors (.0019).",
        "",
        *table(header, rows),
    ]


def moment_tails() -> list[str]:
    """Print how far the tails by moments are off, given the margins."""
    found = [far_out(name, one, 1_000_000, 1) for name, one in sparse_tables(1).items()]
    header = ("margins of one table", "p by", *(f"at {level:g}" for level in LEVELS))
    rows = [[one.name if way == WAYS[0] else "", way, *_ratios(one, way)] for one in found for way in WAYS]
    return [
        "## Tails by moments, given the margins",
        "",
        "1,000,000 random tables with the margins of one sparse table; a figure is the share of them with a p at most "
        "the level, divided by the level: above 1, p is too small. Where few "
        "tables are possible, p moves in jumps, and shares far below 1 are no fault of the method. Chi-square is the "
        "plain tail, which auto does not use here.",
        "",
        *table(header, rows),
    ]


def _ratios(one: FarOut, way: str) -> list[str]:
    return [f"{one.ratio(way, k):.2f} ± {one.error(way, k):.2f}" for k in range(len(LEVELS))]


def monte_carlo_tails() -> list[str]:
    found = tails(5, 25, 1)
    rows = (
        [
            "{} x {} x {}".format(*one.shape),
            str(one.df),
            f"{one.smallest:.0f}",
            f"{one.chi2:.5f}",
            f"{one.monte_carlo:.5f} ± {one.error:.5f}",
        ]
        for one in found
    )
    return [
        "## The Monte Carlo tail where the chi-square tail is right",
        "",
        "Every expected count is above 20. 25 seeds a table, put together. Limit: within 4 standard errors + .005.",
        "",
        *table(("strata x rows x columns", "df", "smallest expected", "chi-square p", "Monte Carlo p"), rows),
    ]
