"""Make the pictures of the page that README and docs/tour.md show: ``python tests/browser/pictures.py [FOLDER]``.

Takes the demo through the main job and photographs its report; the folder is docs/pictures unless another is named.
"""

import io
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from tempfile import TemporaryDirectory

from pages import Theme, chromium_path, launched, opened
from PIL import Image
from playwright.sync_api import Browser, Page, sync_playwright

ROOT = Path(__file__).parents[2]
MOST_BYTES = 150_000

Shot = Callable[[Page], bytes]


def top(page: Page) -> bytes:
    return page.screenshot()


def section(name: str, most: int = 1000) -> Shot:
    """Photograph a section, at most so many pixels of its height."""

    def taken(page: Page) -> bytes:
        place = page.locator(f"section#{name}")
        place.evaluate("(one) => scrollTo(0, one.getBoundingClientRect().top + scrollY - 60)")
        box = place.bounding_box()
        assert box is not None
        height = min(most, box["height"])
        return page.screenshot(clip={"x": box["x"], "y": max(0, box["y"]), "width": box["width"], "height": height})

    return taken


def pair(page: Page) -> bytes:
    """Photograph the panel of the strongest pair, opened from the ledger."""
    page.locator("#pair-table .pair-open").first.click()
    panel = page.locator("#pair-panel")
    page.mouse.move(0, 0)
    return panel.screenshot()


def beside(page: Page) -> bytes:
    """Photograph two structures side by side."""
    page.locator("#beside").select_option(label="tan")
    return section("structures", 760)(page)


PICTURES: dict[str, tuple[int, int, Theme, Shot]] = {
    "answer": (1280, 900, "light", top),
    "answer-dark": (1280, 900, "dark", top),
    "structures": (1280, 1100, "light", section("structures")),
    "side-by-side": (1280, 1100, "light", beside),
    "pair": (1280, 1000, "light", pair),
    "pairs": (1280, 1100, "light", section("pairs")),
    "pairs-dark": (1280, 1100, "dark", section("pairs")),
    "scores": (1280, 1100, "light", section("scores")),
    "phone": (420, 860, "light", top),
}


def small(picture: bytes) -> bytes:
    """Write a picture with at most 128 colours, which drawings and text do not miss."""
    out = io.BytesIO()
    Image.open(io.BytesIO(picture)).convert("RGB").quantize(128).save(out, "PNG", optimize=True)
    return out.getvalue()


def take(browser: Browser, report: Path, name: str, folder: Path) -> Path:
    """Take one of the pictures into a folder."""
    width, height, theme, shot = PICTURES[name]
    path = folder / f"page-{name}.png"
    with opened(browser, report, width=width, height=height, theme=theme) as found:
        path.write_bytes(small(shot(found.page)))
        found.assert_quiet()
    return path


def main(folder: Path) -> None:
    program = chromium_path()
    if program is None:
        sys.exit("no Chromium is here: install Debian's package chromium, or name the program in BNX_CHROMIUM")
    with TemporaryDirectory() as place, sync_playwright() as driver:
        results = Path(place) / "results"
        table = ROOT / "datasets" / "cold_chain.csv"
        command = "from bnx.cli import main; main()"
        call = [sys.executable, "-c", command, "learn", str(table), "--class", "arrival", "-o", str(results), "--quiet"]
        subprocess.run(call, check=True, stdout=subprocess.DEVNULL, cwd=ROOT)
        browser = launched(driver, program)
        for name in PICTURES:
            print(take(browser, results / "report.html", name, folder))
        browser.close()


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else ROOT / "docs" / "pictures")
