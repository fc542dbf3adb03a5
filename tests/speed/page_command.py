"""What the page says about the whole command, and what is required of it."""

from part_command import SCIKIT
from setting import Claim, number, time_table
from timing import Figures

__all__ = ["claims", "page"]

NAIVE, IMPORTS = "bnx learn --structures naive", "importing what it imports, no more"
PARQUET, CSV, READING = "bnx learn from Parquet", "bnx learn from CSV", "pyarrow reads the CSV, no more"


def page(figures: Figures) -> list[str]:
    """Write the part's section from the steps that were measured."""
    lines = []
    if "default" in figures:
        lines += _default(figures["default"])
    if "naive" in figures:
        lines += _naive(figures["naive"])
    if "stages" in figures:
        lines += _stages(figures["stages"])
    return lines


def claims(figures: Figures) -> list[Claim]:
    """List the requirements on the whole command."""
    found = []
    if "default" in figures:
        seconds = {name: one["seconds"] for name, one in figures["default"]["times"].items()}
        allowed = 0.6 * seconds[SCIKIT] + 1.5 * seconds[READING]
        found += [
            Claim(
                "whole command from Parquet against cross-validating CategoricalNB alone",
                seconds[PARQUET] / seconds[SCIKIT],
                0.6,
                False,
            ),
            Claim(
                "whole command from CSV against 0.6 of that cross-validation + 1.5 readings by pyarrow",
                seconds[CSV] / allowed,
                1,
                False,
            ),
        ]
    if "naive" in figures:
        seconds = {name: one["seconds"] for name, one in figures["naive"]["times"].items()}
        after = seconds[NAIVE] - seconds[IMPORTS]
        found += [
            Claim("naive alone, whole command, against the same", seconds[SCIKIT] / seconds[NAIVE], 5, True),
            Claim("naive alone, after imports, against the same", seconds[SCIKIT] / after, 8, True),
        ]
    return found


def _default(step: Figures) -> list[str]:
    return [
        "## The whole command against one cross-validation",
        "",
        f"{step['rows']:,} rows, 50 attributes; as CSV {step['csv_bytes'] / 1e6:,.0f} MB.",
        "",
        *time_table(step["times"], SCIKIT),
        "",
        "`bnx learn`, two threads, starts from the file with text levels in a new process: it reads and codes, tests "
        "all pairs, learns seven structures in 56 training sets, chooses smoothing and calibration inside each, "
        "predicts and scores ten folds, learns again from 100 random halves, judges every edge, draws and writes the "
        "report. scikit-learn gets the coded integers in memory, of 8 bits, with which it is faster than with 64, and "
        "does 10 fits of one model, 10 predictions and the log loss.",
        "",
    ]


def _naive(step: Figures) -> list[str]:
    after = step["times"][NAIVE]["seconds"] - step["times"][IMPORTS]["seconds"]
    return [
        "### Naive Bayes alone",
        "",
        *time_table(step["times"], SCIKIT),
        "",
        f"After imports naive Bayes alone takes {number(after)} s.",
        "",
    ]


def _stages(step: Figures) -> list[str]:
    return [
        "### Where the time of `bnx learn` goes",
        "",
        "| stage | seconds | processor seconds |",
        "|---|---|---|",
        *(f"| {name} | {wall:.2f} | {processor:.2f} |" for name, wall, processor in step["stages"]),
        "",
        "One run of the default command from Parquet, two threads; a stage's processor seconds are those of all its "
        "threads.",
        "",
    ]
