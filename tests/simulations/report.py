"""Run the simulations of the tests and write docs/tests.md: ``python tests/simulations/report.py``."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from simulations.interval_pages import bounds, negligible, power
from simulations.size_pages import far_sizes, moment_tails, monte_carlo_tails, sizes
from simulations.structure_pages import drawn_edges, effects, interaction, second_causes

__all__ = ["page"]

PAGE = Path(__file__).parents[2] / "docs" / "tests.md"
HEAD = """# How the tests behave

Written by `python tests/simulations/report.py`, which takes some minutes. Seeds are fixed: unchanged code writes the
same page. `pytest` asserts the limits named here, the costly ones with `-m simulations`. A figure after ± is a standard
error.
"""
PARTS = (
    *(sizes, far_sizes, moment_tails, monte_carlo_tails),
    *(drawn_edges, effects, second_causes, interaction),
    *(bounds, negligible, power),
)


def page() -> str:
    """Run everything and write the page."""
    return "\n".join([HEAD, *(line for part in PARTS for line in part())])


if __name__ == "__main__":
    text = page()
    PAGE.write_text(text, encoding="utf-8")
    print(text)
