import os
import re
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree as ET

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx.embedding import embed
from bnx.errors import DataError, SettingError
from bnx.lettering import raster_bytes
from bnx.marks import Told, svg_bytes
from bnx.palette import PALETTES
from bnx.residual_panels import chance_sentence, readable
from bnx.residual_picture import PairPanels, Panel, check_picture, picture_page, residual_picture

SVG = "{http://www.w3.org/2000/svg}"
HOSTILE = (
    "$x_1$ ^ \\frac{1}{0",
    "<script>alert(1)</script> & &amp;",
    "\"double\" 'single'",
    "שלום עולם مرحبا",
    "two\nlines\tand \x00 \x1b[31m \u202e",
    "very long level name " * 15,
    "冷链运输 🚚",
    "",
)


def panel(title, observed):
    """Expected counts and adjusted residuals by their definition (Haberman 1973)."""
    observed = np.asarray(observed)
    rows, columns, total = observed.sum(1, keepdims=True), observed.sum(0, keepdims=True), max(1, observed.sum())
    expected = np.where((rows > 0) & (columns > 0), rows * columns / total, np.nan)
    with np.errstate(invalid="ignore", divide="ignore"):
        residuals = (observed - expected) / np.sqrt(expected * (1 - rows / total) * (1 - columns / total))
    residuals[~np.isfinite(residuals)] = np.nan
    return Panel(title, f"0.0312 bits, p 2e-05, {observed.sum():,} rows", observed, expected, residuals)


def pair(rows=4, columns=3, strata=3, records=400, seed=1, **changes):
    random = np.random.default_rng(seed)
    panels = []
    for number in range(strata):
        shares = random.dirichlet(np.full(rows * columns, 1.5))
        panels.append(panel(f"arrival = kind {number}", random.multinomial(records, shares).reshape(rows, columns)))
    names = tuple(f"crew {k}" for k in range(rows)), tuple(f"plant {k}" for k in range(columns))
    return replace(PairPanels("crew", "plant", *names, "dependent: 0.112 bits", tuple(panels)), **changes)


def hostile_pair(names=HOSTILE):
    made = pair(len(names), len(names), 3, 600)
    panels = tuple(replace(one, title=f"arrival = {name}") for one, name in zip(made.panels, HOSTILE[:3], strict=True))
    return replace(made, a=HOSTILE[0], b=HOSTILE[1], a_levels=names, b_levels=names, headline=HOSTILE[4], panels=panels)


def degenerate_pair():
    nothing = Panel("arrival = none", "0 rows", np.zeros((2, 2), int), np.full((2, 2), np.nan), np.full((2, 2), np.nan))
    one_row = panel("arrival = one", [[7, 2], [0, 0]])
    return PairPanels("a", "b", ("u", "v"), ("x", "y"), "not enough data", (nothing, one_row))


def drawn(pairs, theme="light", caption="cold_chain.csv"):
    return ET.fromstring(svg_bytes(picture_page(pairs, caption), theme))


def groups(root, kind):
    return [one for one in root.iter(f"{SVG}g") if one.get("class") == f"bnx-{kind}"]


def lines(element):
    return [one.text for one in element.findall(f"{SVG}text")]


def told_sentences(pairs):
    return " ".join(one.text or "" for one in drawn(pairs).iter(f"{SVG}text"))


def flat(marks):
    for mark in marks:
        if isinstance(mark, Told):
            yield from flat(mark.marks)
        else:
            yield mark


@pytest.mark.parametrize("form", ["svg", "png", "pdf"])
@pytest.mark.parametrize("theme", ["light", "dark"])
def test_the_same_input_gives_the_same_bytes_in_the_form_asked_for(tmp_path, form, theme):
    first, second = tmp_path / f"one.{form}", tmp_path / f"two.{form.upper()}"
    for path in (first, second):
        residual_picture([pair(), degenerate_pair()], "cold_chain.csv", path, theme)
    assert first.read_bytes() == second.read_bytes()
    assert first.read_bytes().startswith({"svg": b"<?xml", "png": b"\x89PNG", "pdf": b"%PDF"}[form])
    assert b"Date" not in first.read_bytes()
    assert sorted(one.name for one in tmp_path.iterdir()) == sorted([first.name, second.name])


def test_another_process_with_another_matplotlibrc_gives_the_same_png(tmp_path):
    (tmp_path / "matplotlibrc").write_text("font.size: 30\ntext.usetex: True\nfigure.dpi: 10\nsavefig.dpi: 20\n")
    here, there = tmp_path / "here.png", tmp_path / "there.png"
    residual_picture([degenerate_pair()], "$a$", here)
    code = (
        "import test_residual_picture as t, pathlib, sys;"
        "t.residual_picture([t.degenerate_pair()], '$a$', pathlib.Path(sys.argv[1]))"
    )
    environment = {**os.environ, "MATPLOTLIBRC": str(tmp_path), "PYTHONPATH": str(Path(__file__).parent)}
    subprocess.run([sys.executable, "-c", code, there], check=True, env=environment)
    assert here.read_bytes() == there.read_bytes()


def test_a_pair_without_strata_is_drawn():
    assert "No residual is defined" in told_sentences([pair(strata=0)])


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_hostile_names_are_words_and_nothing_else(theme, tmp_path):
    residual_picture([hostile_pair()], HOSTILE[0], tmp_path / "f.svg", theme)
    root = ET.parse(tmp_path / "f.svg").getroot()
    assert {one.tag.removeprefix(SVG) for one in root.iter()} == {
        "svg", "style", "g", "title", "rect", "polygon", "text",
    }  # fmt: skip
    titles = [one.findtext(f"{SVG}title") for one in groups(root, "level")]
    assert titles.count("very long level name " * 15) == 6
    assert titles.count("\"double\" 'single'") == 6
    written = {text for one in groups(root, "level") for text in lines(one)}
    assert {"$x_1$ ^ \\frac{1}{0", "\"double\" 'single'", "(empty)"} <= written
    for form in ("png", "pdf"):  # warnings are errors here: missing signs must not warn
        assert raster_bytes(picture_page([hostile_pair()], HOSTILE[4]), form, theme)


@settings(max_examples=25, deadline=None)
@given(st.lists(st.text(max_size=40), min_size=3, max_size=3))
def test_any_name_gives_an_svg_that_can_be_read_and_embedded(names):
    made = hostile_pair(tuple(names))
    text = svg_bytes(picture_page([made], names[0]), "light").decode()
    found = groups(ET.fromstring(text), "cell")
    assert len(found) == 27
    assert "<title>" in embed(text, "p1").markup


def test_every_colour_is_a_token_so_that_one_svg_serves_both_themes():
    for theme in ("light", "dark"):
        root = drawn([pair(records=4000), degenerate_pair()], theme)
        known = {colour.lower() for colour in PALETTES[theme].values()}
        for one in root.iter():
            for part in ("fill", "stroke"):
                colour = one.get(part)
                if colour not in (None, "none"):
                    assert colour.lower() in known
                    assert f"bnx-{part}-" in one.get("class")
        assert root.get("class") == f"bnx-picture bnx-{theme}"
        assert root.get("aria-label") == "Residuals of 2 pairs: cold_chain.csv"


def test_strata_are_limited_aloud_the_largest_first():
    made = pair(strata=60, records=90)
    shown, said = readable(made)
    order = sorted(made.panels, key=lambda one: -one.x2)
    assert [one.title for one in shown.panels] == [one.title for one in order[:12]]
    sentence = (
        "12 of 60 strata shown: those with the largest X2, the largest first; "
        f"in each of the others X2 is at most {order[12].x2:.1f}."
    )
    assert said == (sentence,)
    root = drawn([made])
    assert [lines(one) for one in groups(root, "stratum")] == [[one.title] for one in order[:12]]
    assert sentence in told_sentences([made])
    assert len(groups(root, "cell")) == 12 * 12


def test_up_to_twelve_strata_keep_their_order():
    made = pair(strata=12)
    shown, said = readable(made)
    assert [one.title for one in shown.panels] == [one.title for one in made.panels]
    assert said == ()


def test_levels_are_limited_aloud_to_those_with_the_largest_residuals():
    made = pair(50, 31, 2, 5000)
    sums = sum(np.nansum(one.residuals**2, axis=1) for one in made.panels)
    wanted = sorted(sorted(range(50), key=lambda k: -sums[k])[:20])
    shown, said = readable(made)
    assert shown.a_levels == tuple(f"crew {k}" for k in wanted)
    assert shown.panels[0].observed.shape == (20, 20)
    column = int(shown.b_levels[3].removeprefix("plant "))
    assert np.array_equal(shown.panels[1].observed[:, 3], made.panels[1].observed[wanted, column])
    assert said == (
        "20 of 50 levels of crew shown: those with the largest residuals.",
        "20 of 31 levels of plant shown: those with the largest residuals.",
    )
    assert said[0] in told_sentences([made])


def test_pairs_are_limited_aloud_and_the_first_is_always_drawn():
    many = [pair(seed=seed) for seed in range(40)]
    root = drawn(many)
    shown = len(groups(root, "pair"))
    assert 5 < shown < 40
    assert f"{shown} of 40 pairs shown: the first in the order given; name the others to see them." in told_sentences(
        many
    )
    assert "pairs shown" not in told_sentences(many[:2])
    assert len(groups(drawn([pair(50, 50, 60, 9000)] * 2), "pair")) >= 1
    assert float(root.get("viewBox").split()[3]) < 6000


def test_chance_counts_all_cells_also_those_not_shown():
    made = pair(strata=60, records=300)
    residuals = np.stack([one.residuals for one in made.panels])
    defined = int(np.isfinite(residuals).sum())
    beyond = int((np.abs(residuals) > 2).sum())
    # P(|Z| > 2) = 0.0455003 (standard normal table)
    assert chance_sentence(made) == (
        f"Beyond ±2 lie {beyond} of {defined} cells in 60 strata; "
        f"chance alone would put about {0.0455003 * defined:.0f} there."
    )
    single = panel("arrival = one", [[10, 0], [0, 10]])
    assert chance_sentence(replace(made, panels=(single,))) == (
        "Beyond ±2 lie 4 of 4 cells; chance alone would put about 0.2 there."
    )


@pytest.mark.parametrize("name", ["f.gif", "f", "f.svg.gz", ".svg"])
def test_an_unknown_ending_is_refused(tmp_path, name):
    path = tmp_path / name
    sentence = re.escape(f"--plot {path}: the ending says nothing that can be drawn; use .svg, .png or .pdf")
    with pytest.raises(SettingError, match=f"^{sentence}$"):
        residual_picture([pair()], "", path)
    assert list(tmp_path.iterdir()) == []


def test_a_place_that_cannot_be_written_is_refused_with_nothing_left(tmp_path):
    with pytest.raises(DataError, match=r"there is no folder .*nowhere; make it, or give another --plot$"):
        residual_picture([pair()], "", tmp_path / "nowhere" / "f.svg")
    (tmp_path / "folder.svg").mkdir()
    with pytest.raises(SettingError, match="is a folder"):
        check_picture(tmp_path / "folder.svg")
    assert [one.name for one in tmp_path.rglob("*")] == ["folder.svg"]


def test_a_file_is_replaced_only_when_told(tmp_path):
    path = tmp_path / "f.svg"
    path.write_text("mine")
    with pytest.raises(SettingError, match="exists already"):
        residual_picture([pair()], "", path)
    assert path.read_text() == "mine"
    residual_picture([pair()], "", path, overwrite=True)
    assert path.read_text().startswith("<?xml")


def test_no_pair_and_an_unknown_theme_are_refused(tmp_path):
    with pytest.raises(DataError, match="there is no pair to draw"):
        residual_picture([], "", tmp_path / "f.svg")
    with pytest.raises(SettingError, match="--theme: 'blue' cannot be used; give light or dark"):
        residual_picture([pair()], "", tmp_path / "f.svg", theme="blue")
