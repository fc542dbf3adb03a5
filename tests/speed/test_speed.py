"""The requirements on speed, measured anew and asserted: ``pytest -m speed tests/speed -s``.

Some limits are absolute and meant for two processors: skipped where there are fewer, or too little memory or disk.
``test_benchmarks.py`` tests the code behind them, on small tables, in the default run.
"""

import shutil
from pathlib import Path

import pytest
from report import PARTS
from setting import Setting
from timing import memory, processors

pytestmark = [pytest.mark.speed, pytest.mark.timeout(7200)]

RUNS = 3
GB = 10**9


def assert_claims(part: str, steps: tuple[str, ...], folder: Path) -> None:
    figures = {step: PARTS[part].steps[step](Setting(folder, runs=RUNS)) for step in steps}
    claims = PARTS[part].claims(figures)
    for claim in claims:
        print(f"\n{claim.row()}", end="")
    assert claims
    assert [claim.row() for claim in claims if not claim.holds] == []


def needs(folder: Path, memory_gb: float, disk_gb: float) -> None:
    if processors() < 2 or memory() < memory_gb * GB or shutil.disk_usage(folder).free < disk_gb * GB:
        pytest.skip(f"needs 2 processors, {memory_gb} GB of memory and {disk_gb} GB of disk")


@pytest.mark.parametrize("step", ["counting", "limit"])
def test_pair_tables(step: str, tmp_path: Path) -> None:
    needs(tmp_path, 4, 1)
    assert_claims("pairs", (step,), tmp_path)


@pytest.mark.parametrize("step", ["default", "naive"])
def test_whole_command(step: str, tmp_path: Path) -> None:
    needs(tmp_path, 4, 2)
    assert_claims("command", (step,), tmp_path)


def test_wide_table(tmp_path: Path) -> None:
    needs(tmp_path, 6, 1)
    assert_claims("wide", ("vocabulary",), tmp_path)


@pytest.mark.tables
def test_pictures(tmp_path: Path) -> None:
    needs(tmp_path, 6, 1)
    assert_claims("wide", ("bitmap", "digits"), tmp_path)


def test_tall_table(tmp_path: Path) -> None:
    needs(tmp_path, 6, 20)
    assert_claims("tall", ("tenth", "whole"), tmp_path)
