import importlib.util
import os
import re
import shutil
import subprocess
import sys
import time
from xml.etree import ElementTree as ET

import pytest
from test_dot import HOSTILE, arrows_of, picture

from bnx.drawing import find_engine, render
from bnx.errors import EngineError, SettingError
from bnx.formats.dot import dot_source
from bnx.palette import PALETTES
from bnx.picture import Arrow, Chip, Picture
from bnx.svg import themed

SVG = "{http://www.w3.org/2000/svg}"


@pytest.fixture(autouse=True)
def no_engine_named(monkeypatch):
    monkeypatch.delenv("BNX_DOT", raising=False)


def drawn(given, **settings):
    return ET.fromstring(render(dot_source(given, **settings), "svg"))


def by_id(root, name):
    return next(one for one in root.iter() if one.get("id") == name)


def program(folder, name, body):
    path = folder / name
    path.write_text(f"#!{sys.executable}\n{body}\n")
    path.chmod(0o755)
    return path


def test_every_arrow_chip_and_part_has_its_id_and_its_words():
    given = picture(60, arrows_of(100, ["gains", "undecided", "loses"]))
    root = drawn(given, everything=True)
    for arrow in given.arrows:
        group = by_id(root, f"e{arrow.parent}-{arrow.child}")
        title = group.findtext(f"{SVG}title")
        assert title == f"attr_{arrow.parent} to attr_{arrow.child}: 0.100 bits given arrival; {arrow.verdict}"
        assert group.get("class").split()[-1] == arrow.verdict
    for place in range(60):
        assert by_id(root, f"n{place}").findtext(f"{SVG}title").startswith(f"attr_{place}: 3 levels")
    assert {"frame", "class", "socket", "cable"} <= {one.get("id") for one in root.iter()}


def test_every_attribute_is_drawn_once_with_its_name():
    for given in (picture(3, [Arrow(0, 1, 0.1, "gains")]), picture(1), picture(12), picture(31), picture(17)):
        texts = [one.text for one in drawn(given).iter(f"{SVG}text")]
        assert sorted(text for text in texts if text.startswith("attr_")) == sorted(chip.name for chip in given.chips)


def test_hostile_names_come_back_whole():
    chips = tuple(Chip(name, 2, 0.1) for name in HOSTILE)
    root = drawn(Picture("<b>\\N", "]]> & \\", chips, (Arrow(0, 1, 0.1, "gains"),), 'sub "\\T"'))
    for place, name in enumerate(HOSTILE):
        group = by_id(root, f"n{place}")
        assert group.findtext(f"{SVG}title") == f"{name}: 2 levels, 0.100 bits shared with ]]> & \\"
        assert group.findtext(f"{SVG}text").rstrip("…") == name[: len(group.findtext(f"{SVG}text").rstrip("…"))]
    texts = [one.text for one in root.iter(f"{SVG}text")]
    assert {"<b>\\N", 'sub "\\T"', "]]> & \\"} <= set(texts)
    assert root.get("aria-label") == "<b>\\N"
    assert by_id(root, "e0-1").findtext(f"{SVG}title").startswith(f"{HOSTILE[0]} to {HOSTILE[1]}: 0.100 bits")
    assert not list(root.iter(f"{SVG}script"))


def test_control_characters_do_not_break_the_svg():
    root = drawn(Picture("a\x00b", "c\ud800", (Chip("tab\there\n", 2, 0.1), Chip("", 2, 0.0)), ()))
    assert by_id(root, "n0").findtext(f"{SVG}text") == "tab\ufffdhere\ufffd"
    assert by_id(root, "n1") is not None


@pytest.mark.parametrize("form", ["svg", "png", "pdf"])
def test_same_dot_same_bytes(form):
    dot = dot_source(picture(20, arrows_of(30, ["gains", "loses"])))
    assert render(dot, form) == render(dot, form)


def test_forms_are_what_they_say():
    dot = dot_source(picture())
    assert render(dot, "svg").startswith(b'<?xml version="1.0" encoding="UTF-8"?>\n<svg ')
    assert render(dot, "png").startswith(b"\x89PNG")
    assert render(dot, "pdf").startswith(b"%PDF")
    with pytest.raises(SettingError, match="drawn as 'gif'; known: svg, png, pdf"):
        render(dot, "gif")


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_one_svg_serves_both_themes(theme):
    verdicts = ["gains", "undecided", "loses", "not judged"]
    root = drawn(picture(12, arrows_of(8, verdicts)), theme=theme)
    known = {colour.lower(): token for token, colour in PALETTES[theme].items()}
    for one in root.iter():
        for part in ("fill", "stroke"):
            colour = one.get(part)
            if colour and colour.startswith("#"):
                assert f"bnx-{part}-{known[colour.lower()]}" in one.get("class").split()
    style = root.findtext(f"{SVG}style")
    assert root.get("class") == f"bnx-picture bnx-{theme}"
    for palette in PALETTES.values():
        assert ";".join(f"--bnx-{token}:{colour}" for token, colour in palette.items()) in style
    assert "@media (prefers-color-scheme:dark){.bnx-light{" in style
    assert '[data-theme="dark"] .bnx-picture{' in style
    assert '[data-theme="light"] .bnx-picture{' in style


def test_themes_are_laid_out_alike():
    given = picture(12, arrows_of(8, ["gains", "loses"]))
    light, dark = (render(dot_source(given, theme=theme), "svg").decode() for theme in ("light", "dark"))
    assert re.findall(r' d="[^"]+"', light) == re.findall(r' d="[^"]+"', dark)


def test_arrows_have_a_wide_band_for_the_pointer():
    group = by_id(drawn(picture(3, [Arrow(0, 1, 0.0, "gains")])), "e0-1")
    band, line = group.findall(f"{SVG}path")
    assert (band.get("class"), band.get("stroke-width"), band.get("d")) == ("bnx-reach", "16", line.get("d"))


def test_layout_does_not_need_fonts(monkeypatch, tmp_path):
    """Only the height of letters in their own line may differ; nothing moves sideways and no shape moves at all."""
    dot = dot_source(picture(12, arrows_of(8, ["gains", "loses"])))
    here = render(dot, "svg").decode()
    settings = tmp_path / "none.conf"
    settings.write_text(f'<?xml version="1.0"?><fontconfig><dir>{tmp_path}</dir></fontconfig>')
    monkeypatch.setenv("FONTCONFIG_FILE", str(settings))
    bare = render(dot, "svg").decode()
    for pattern in (r' d="[^"]+"', r'points="[^"]+"', r'<text[^>]* x="[^"]+"', r"<svg[^>]+>"):
        assert re.findall(pattern, here) == re.findall(pattern, bare)


def test_nothing_reaches_the_terminal(capfd, monkeypatch):
    monkeypatch.setenv("FONTCONFIG_FILE", os.devnull)
    for form in ("svg", "png", "pdf"):
        render(dot_source(picture()), form)
    assert capfd.readouterr() == ("", "")


def test_seven_pictures_take_well_under_two_seconds():
    dots = [dot_source(picture(12 + more, arrows_of(15, ["gains", "loses"]))) for more in range(7)]
    start = time.perf_counter()
    for dot in dots:
        render(dot, "svg")
    assert time.perf_counter() - start < 6, "three times what the owner of a picture should wait, for a busy machine"


def test_named_program_comes_first(monkeypatch, tmp_path):
    mine = program(tmp_path, "mydot", "import sys; sys.stdout.write(' '.join(sys.argv[1:]) + sys.stdin.read())")
    monkeypatch.setenv("BNX_DOT", str(mine))
    assert find_engine().command == (str(mine),)
    assert render("digraph {}", "pdf") == b"-Tpdfdigraph {}"


def test_pip_engine_comes_before_dot_on_the_path(monkeypatch, tmp_path):
    program(tmp_path, "dot", "print('unused')")
    monkeypatch.setenv("PATH", str(tmp_path))
    assert find_engine().name == "pygraphviz"
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None)
    assert find_engine().command == (str(tmp_path / "dot"),)


def test_no_engine_is_one_clear_sentence(monkeypatch, tmp_path):
    monkeypatch.setenv("PATH", str(tmp_path))
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None)
    with pytest.raises(EngineError) as caught:
        render("digraph {}", "svg")
    assert str(caught.value) == (
        "no drawing engine is here; pip install pygraphviz, or set BNX_DOT to the path of a dot program"
    )


def test_wrong_program_is_named(monkeypatch):
    monkeypatch.setenv("BNX_DOT", "/nowhere/dot")
    with pytest.raises(EngineError, match="BNX_DOT is '/nowhere/dot', which is no program; give the path of dot"):
        find_engine()


@pytest.mark.parametrize(
    ("body", "words"),
    [
        ("import sys; sys.exit('out of ink')", "failed: out of ink"),
        ("import os, signal; os.kill(os.getpid(), signal.SIGSEGV)", "failed: exit code -11"),
        ("", "failed: exit code 0"),
        ("print('<svg><g></svg>')", "wrote an SVG that cannot be read"),
    ],
)
def test_a_failing_engine_is_a_sentence(monkeypatch, tmp_path, body, words):
    monkeypatch.setenv("BNX_DOT", str(program(tmp_path, "dot", body)))
    with pytest.raises(EngineError, match=words):
        render("digraph {}", "svg")


def test_an_engine_that_hangs_is_stopped(monkeypatch, tmp_path):
    monkeypatch.setenv("BNX_DOT", str(program(tmp_path, "dot", "import time; time.sleep(60)")))
    monkeypatch.setattr("bnx.drawing.TIME_LIMIT", 0.2)
    with pytest.raises(EngineError, match=r"took over 0\.2 seconds; draw fewer arrows"):
        render("digraph {}", "svg")


def test_broken_dot_is_a_sentence():
    with pytest.raises(EngineError, match="the drawing engine pygraphviz failed: "):
        render("digraph {", "svg")


def test_files_beside_the_user_are_not_imported(monkeypatch, tmp_path):
    (tmp_path / "pygraphviz.py").write_text("raise SystemExit('wrong one')")
    monkeypatch.chdir(tmp_path)
    assert render(dot_source(picture()), "png")


@pytest.mark.skipif(shutil.which("dot") is None, reason="no dot program on this machine")
def test_dot_program_draws_the_same_parts(monkeypatch):
    given = dot_source(picture(12, arrows_of(8, ["gains", "loses"])))
    ours = ET.fromstring(render(given, "svg"))
    monkeypatch.setenv("BNX_DOT", "dot")
    theirs = ET.fromstring(render(given, "svg"))
    assert sorted(filter(None, (one.get("id") for one in ours.iter()))) == sorted(
        filter(None, (one.get("id") for one in theirs.iter()))
    )


def test_drawing_imports_no_engine_itself():
    code = "import sys, bnx.drawing; raise SystemExit('pygraphviz' in sys.modules or 'numpy' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


def test_an_unknown_colour_keeps_its_shape():
    out = themed(b'<svg xmlns="http://www.w3.org/2000/svg"><g><path fill="#123456"/></g></svg>')
    assert b'<path fill="#123456" />' in out
