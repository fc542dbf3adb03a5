"""The pictures of the page: each one shown is there and small, none is forgotten, and the script takes them."""

import re
from pathlib import Path

import pytest
from pages import Made
from pictures import MOST_BYTES, PICTURES, ROOT, take
from PIL import Image
from playwright.sync_api import Browser

FOLDER = ROOT / "docs" / "pictures"
SHOWN = re.compile(r"\]\((?:docs/)?pictures/([^)]+)\)")


def test_every_picture_shown_is_there_and_every_picture_is_shown() -> None:
    tour = (ROOT / "docs" / "tour.md").read_text(encoding="utf-8")
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    assert all((FOLDER / one).is_file() for one in SHOWN.findall(tour + readme))
    made = {f"page-{name}.png" for name in PICTURES}
    assert {one for one in SHOWN.findall(tour + readme) if one.startswith("page-")} == made
    assert {one.name for one in FOLDER.glob("page-*")} == made
    assert not re.search(r"!\[\s*\]", tour), "every picture says in words what it shows"


@pytest.mark.parametrize("name", PICTURES)
def test_the_script_takes_a_picture_of_the_size_that_is_shown(
    browser: Browser, demo: Made, name: str, tmp_path: Path
) -> None:
    """Widths are the same and heights close: fonts differ from machine to machine."""
    with Image.open(take(browser, demo.path, name, tmp_path)) as made, Image.open(FOLDER / f"page-{name}.png") as shown:
        assert made.width == shown.width
        assert abs(made.height - shown.height) <= 0.1 * shown.height
        assert len(made.convert("RGB").getcolors(1 << 20) or ()) > 20, "not a blank page"
    assert (FOLDER / f"page-{name}.png").stat().st_size < MOST_BYTES
