"""Pages opened in a real browser from disk, offline, with all that it says and asks for written down."""

import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

from playwright.sync_api import Browser, Page, Playwright

FLAGS = (
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)
Theme = Literal["light", "dark"]
HIGHEST = 60_000  # pixels of a window; Chromium stands still for ten seconds above 65,535


def chromium_path() -> str | None:
    """Find the browser: named by ``BNX_CHROMIUM``, or on the PATH."""
    return os.environ.get("BNX_CHROMIUM") or shutil.which("chromium") or shutil.which("chromium-browser")


def launched(driver: Playwright, program: str) -> Browser:
    return driver.chromium.launch(executable_path=program, headless=True, args=list(FLAGS))


@dataclass(frozen=True)
class Made:
    """A page on disk and the comparison document it shows."""

    path: Path
    document: dict[str, Any]


@dataclass
class Opened:
    """A page and what happened on it: what it wrote to the console, its errors, requests and dialogs."""

    page: Page
    console: list[str] = field(default_factory=list)
    errors: list[str] = field(default_factory=list)
    requests: list[str] = field(default_factory=list)
    dialogs: list[str] = field(default_factory=list)

    def assert_quiet(self) -> None:
        """Nothing was said, nothing failed, and nothing but the file itself was asked for."""
        assert self.console == []
        assert self.errors == []
        assert self.dialogs == []
        assert {one.split("#")[0] for one in self.requests} == {self.page.url.split("#")[0]}


@contextmanager
def opened(
    browser: Browser,
    path: Path,
    width: int = 1280,
    height: int = 900,
    theme: Theme = "light",
    scripts: bool = True,
    trusted: bool = False,
) -> Iterator[Opened]:
    """Open a file; trusted: let the test add a script of its own, which the page's policy forbids."""
    context = browser.new_context(
        viewport={"width": width, "height": height},
        color_scheme=theme,
        offline=True,
        java_script_enabled=scripts,
        bypass_csp=trusted,
        reduced_motion="reduce",
    )
    context.set_default_timeout(10_000)
    page = context.new_page()
    found = Opened(page)
    page.on("console", lambda said: found.console.append(said.text))
    page.on("pageerror", lambda error: found.errors.append(str(error)))
    page.on("request", lambda asked: found.requests.append(asked.url))
    page.on("dialog", lambda dialog: (found.dialogs.append(dialog.message), dialog.dismiss()))
    try:
        page.goto(path.as_uri(), wait_until="load")
        yield found
    finally:
        context.close()


def unfolded(page: Page) -> None:
    """Open all that is folded away, and make the window as high as the page, so that all of it is drawn."""
    page.evaluate("document.querySelectorAll('details').forEach((one) => { one.open = true; })")
    size = page.viewport_size
    assert size is not None
    height = page.evaluate("document.scrollingElement.scrollHeight")
    page.set_viewport_size({"width": size["width"], "height": min(height, HIGHEST)})


def rgb(colour: str) -> str:
    """Write a colour of a palette as a browser does."""
    red, green, blue = (int(colour[place : place + 2], 16) for place in (1, 3, 5))
    return f"rgb({red}, {green}, {blue})"
