"""The requirements on probabilities, measured anew and asserted: ``pytest -m quality tests/quality -s``.

``test_quality_harness.py`` tests the code behind them, on small tables, in the default run.
"""

from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import pytest
from quality.report import NAMES, measure, stored
from quality.requirements import Requirement, requirements
from tablestore import TableUnavailable

pytestmark = [pytest.mark.quality, pytest.mark.tables, pytest.mark.timeout(14_400)]

MET = (
    "log loss to CategoricalNB, geometric mean",
    "log loss to logistic regression, geometric mean",
    "log loss to gradient boosting, geometric mean",
    "log loss with the mix to that of the structure picked alone, geometric mean",
    "log loss with the mix to that of the structure picked alone, any table",
    "tables worse than naive by more than 2 paired standard errors + .005",
    "tables worse than naive in mean",
    "tables worse than naive: above 1.05 times its loss + .02",
    "log loss on tic_tac_toe",
    "log loss on monk2",
    "calibration error at most half of naive's, or 1.25 times what perfect calibration would show",
    "calibration error at most half of CategoricalNB's, or 1.25 times what perfect calibration would show",
    "calibration slope on tables with at least 50 errors",
    "probabilities of 0 or 1, in any structure, so an infinite loss",
)


@cache
def judged() -> dict[str, Requirement]:
    with TemporaryDirectory() as folder:
        for name in NAMES:
            try:
                measure(name, Path(folder))
            except TableUnavailable as reason:
                pytest.skip(str(reason))
        return {one.text: one for one in requirements(stored(Path(folder)))}


@pytest.mark.parametrize("text", MET)
def test_what_is_required(text: str) -> None:
    print(f"\n{judged()[text].row()}", end="")
    assert judged()[text].met, judged()[text].row()
