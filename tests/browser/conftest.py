"""A browser, and the pages that tests look at: the demo's, and one whose names and levels are hostile."""

import json
import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from commandline import call
from hostile_table import TARGET, learnt, write_hostile
from large_tables import write_large
from pages import Made, Opened, chromium_path, launched, opened
from playwright.sync_api import Browser, sync_playwright

from bnx.report import report_html

DEMO = Path(__file__).parents[2] / "datasets" / "cold_chain.csv"


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    program = chromium_path()
    if program is None:
        if os.environ.get("BNX_BROWSER") == "required":
            pytest.fail("no Chromium is here, but BNX_BROWSER says that it is required")
        pytest.skip("no Chromium is here: install Debian's package chromium, or name the program in BNX_CHROMIUM")
    with sync_playwright() as driver:
        one = launched(driver, program)
        yield one
        one.close()


def page_made(folder: Path, document: dict[str, Any], pictures: dict[str, str]) -> Made:
    path = folder / "report.html"
    path.write_text(report_html(document, pictures), encoding="utf-8")
    return Made(path, document)


@pytest.fixture(scope="session")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Made:
    folder = tmp_path_factory.mktemp("demo") / "results"
    done = call("learn", str(DEMO), "--class", "arrival", "-o", str(folder), "--quiet")
    assert done.code == 0, done.err
    return Made(folder / "report.html", json.loads((folder / "comparison.json").read_text(encoding="utf-8")))


@pytest.fixture(scope="session")
def hostile(tmp_path_factory: pytest.TempPathFactory) -> Made:
    folder = tmp_path_factory.mktemp("hostile")
    write_hostile(folder / "table.csv")
    return page_made(folder, *learnt(folder / "table.csv", TARGET))


@pytest.fixture(scope="session")
def wide(tmp_path_factory: pytest.TempPathFactory) -> Made:
    """60 attributes x 10 classes."""
    folder = tmp_path_factory.mktemp("wide")
    write_large(folder / "table.csv", attributes=60, classes=10, rows=1500)
    return page_made(folder, *learnt(folder / "table.csv", "outcome"))


@pytest.fixture(scope="session")
def very_wide(tmp_path_factory: pytest.TempPathFactory) -> Made:
    """400 attributes, 79,800 pairs."""
    folder = tmp_path_factory.mktemp("very_wide")
    write_large(folder / "table.csv", attributes=400, classes=2, rows=600)
    return page_made(folder, *learnt(folder / "table.csv", "outcome", ("naive", "tan")))


@pytest.fixture
def found(browser: Browser, demo: Made) -> Iterator[Opened]:
    """Open the demo's page, which must have been quiet when a test is done with it."""
    with opened(browser, demo.path, height=1200) as one:
        yield one
        one.assert_quiet()
