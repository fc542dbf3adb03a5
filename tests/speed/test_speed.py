"""The requirements on speed, measured anew and asserted: ``pytest -m speed tests/speed -s``; what the code behind them
does is tested in the default run, on small tables.
"""

from pathlib import Path

import pytest
from report import PARTS
from setting import Setting

pytestmark = [pytest.mark.speed, pytest.mark.timeout(7200)]

RUNS = 3


@pytest.mark.parametrize(("part", "steps"), [("pairs", ("counting", "limit")), ("command", ("default", "naive"))])
def test_requirements(part: str, steps: tuple[str, ...], tmp_path: Path) -> None:
    figures = {step: PARTS[part].steps[step](Setting(tmp_path, runs=RUNS)) for step in steps}
    claims = PARTS[part].claims(figures)
    for claim in claims:
        print(f"\n{claim.row()}", end="")
    assert claims
    assert [claim.row() for claim in claims if not claim.holds] == []
