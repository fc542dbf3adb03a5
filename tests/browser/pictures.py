"""Make the pictures of the page that docs/tour.md shows: ``python tests/browser/pictures.py [FOLDER [REPORT]]``.

Takes the demo through the main job and photographs its report, or the report named; the folder is docs/pictures unless
another is named. A section that is higher than the part shown is cut below it.
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
MOST_BYTES = 80_000
MARGIN = 40.0

Shot = Callable[[Page], bytes]


def top(page: Page) -> bytes:
    return page.screenshot()


def part(selector: str, most: int = 1000) -> Shot:
    """Photograph a part of the page from its top, at most so many pixels of its height, with a margin on its left."""

    def taken(page: Page) -> bytes:
        place = page.locator(selector)
        place.evaluate("(one) => scrollTo(0, one.getBoundingClientRect().top + scrollY - 60)")
        box = place.bounding_box()
        assert box is not None
        left, top = max(0.0, box["x"] - MARGIN), max(0.0, box["y"])
        width = min(box["width"] + box["x"] - left + MARGIN, page.evaluate("innerWidth") - left)
        return page.screenshot(clip={"x": left, "y": top, "width": width, "height": min(most, box["height"])})

    return taken


def pair(page: Page) -> bytes:
    """Photograph the panel of the strongest pair, opened from the ledger."""
    page.locator("#pair-table .pair-open").first.click()
    panel = page.locator("#pair-panel")
    page.mouse.move(0, 0)
    return panel.screenshot()


def beside(page: Page) -> bytes:
    """Photograph two structures side by side."""
    page.locator("#beside").select_option(label="heldout")
    return part(".drawings:visible", 560)(page)


def attributes(page: Page) -> bytes:
    """Photograph the attributes with the first one and the first numeric one open."""
    every = page.locator("details.attribute")
    every.evaluate_all("(all) => all.forEach((one, place) => { one.open = place === 0; })")
    every.filter(has=page.locator("svg.spread")).first.locator("summary").click()
    page.mouse.move(0, 0)
    return part("#attributes", 1000)(page)


PICTURES: dict[str, tuple[int, int, Theme, Shot]] = {
    "answer": (1280, 900, "light", top),
    "answer-dark": (1280, 900, "dark", top),
    "structures": (1280, 1200, "light", part("#structures", 1110)),
    "side-by-side": (1280, 1100, "light", beside),
    "pair": (1280, 1000, "light", pair),
    "pairs": (1280, 1100, "light", part("#pairs", 970)),
    "pairs-dark": (1280, 1100, "dark", part("#pairs", 970)),
    "scores": (1280, 1100, "light", part("#scores", 840)),
    "attributes": (1280, 1100, "light", attributes),
    "records": (1280, 1100, "light", part("#records", 900)),
    "phone": (420, 860, "light", top),
}


def small(picture: bytes) -> bytes:
    """Write a picture with at most 64 colours, which drawings and text do not miss."""
    out = io.BytesIO()
    Image.open(io.BytesIO(picture)).convert("RGB").quantize(64, Image.Quantize.MAXCOVERAGE, kmeans=2).save(
        out, "PNG", optimize=True
    )
    return out.getvalue()


def take(browser: Browser, report: Path, name: str, folder: Path) -> Path:
    """Take one of the pictures into a folder."""
    width, height, theme, shot = PICTURES[name]
    path = folder / f"page-{name}.png"
    with opened(browser, report, width=width, height=height, theme=theme) as found:
        path.write_bytes(small(shot(found.page)))
        found.assert_quiet()
    return path


def demo_report(folder: Path) -> Path:
    """Take the demo through the main job; give its report."""
    command = "from bnx.cli import main; main()"
    table = ROOT / "datasets" / "cold_chain.csv"
    call = [sys.executable, "-c", command, "learn", str(table), "--class", "arrival", "-o", str(folder), "--quiet"]
    subprocess.run(call, check=True, stdout=subprocess.DEVNULL, cwd=ROOT)
    return folder / "report.html"


def main(folder: Path, report: Path | None) -> None:
    program = chromium_path()
    if program is None:
        sys.exit("no Chromium is here: install Debian's package chromium, or name the program in BNX_CHROMIUM")
    with TemporaryDirectory() as place, sync_playwright() as driver:
        shown = report or demo_report(Path(place) / "results")
        browser = launched(driver, program)
        for name in PICTURES:
            path = take(browser, shown, name, folder)
            print(f"{path} {path.stat().st_size:,} bytes")
        browser.close()


if __name__ == "__main__":
    named = [Path(one) for one in sys.argv[1:]]
    main(named[0] if named else ROOT / "docs" / "pictures", named[1] if len(named) > 1 else None)
