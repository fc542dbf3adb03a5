import html
import itertools
import math
import re
from xml.etree import ElementTree as ET

import graphviz
import pytest

from bnx.dot_text import clean, cut, quote
from bnx.errors import StructureError
from bnx.formats.dot import dot_source, pen_width
from bnx.layers import layers, parents_first, rows
from bnx.palette import PALETTES, TOKENS
from bnx.picture import Arrow, Chip, Picture, showing

HOSTILE = (
    "<script>alert(1)</script>",
    "quote \" and ' here",
    "]]> --> &amp; & &#65;",
    "\u05de\u05d8\u05e2\u05df \u05e7\u05d9\u05e8\u05d5\u05e8",
    "x" * 300,
    "back\\slash\\N\\l\\",
    "{record|<p>}",
    "-> ; // # [a=b]",
    "温度逸脱の記録と冷蔵車の年数",
)


def picture(count=6, arrows=(), **more):
    chips = tuple(Chip(f"attr_{place}", 3, 0.01 * place) for place in range(count))
    return Picture(more.pop("title", "kdb2"), more.pop("target", "arrival"), chips, tuple(arrows), **more)


def arrows_of(count, verdicts):
    pairs = itertools.islice(((a, b) for b in range(1, 60) for a in range(b)), count)
    return [Arrow(a, b, 0.1, verdict) for (a, b), verdict in zip(pairs, itertools.cycle(verdicts), strict=False)]


def edge_lines(dot, kind="arrow"):
    return [line for line in dot.splitlines() if re.match(r"\s*\w+ -> \w+ \[id=", line) and f'class="{kind}' in line]


def test_pen_width_is_linear_in_bits_up_to_nine():
    assert [pen_width(bits) for bits in (0.0, 0.1, 0.3)] == pytest.approx([0.8, 3.4, 8.6])
    assert pen_width(0.4) == pen_width(2.0) == 9.0
    assert pen_width(-0.01) == 0.8


@pytest.mark.parametrize(
    ("verdict", "dash", "token"),
    [
        ("gains", "solid", "gain"),
        ("undecided", "dashed", "undecided"),
        ("loses", "dotted", "loss"),
        ("not judged", "solid", "unjudged"),
    ],
)
@pytest.mark.parametrize("theme", ["light", "dark"])
def test_verdict_sets_dash_and_colour(verdict, dash, token, theme):
    (line,) = edge_lines(dot_source(picture(3, [Arrow(0, 1, 0.1, verdict)]), theme=theme))
    assert f"style={dash}," in line
    assert f'color="{PALETTES[theme][token]}", penwidth=3.40' in line


def test_legend_names_only_verdicts_that_are_drawn():
    dot = dot_source(picture(4, [Arrow(0, 1, 0.1, "gains"), Arrow(1, 2, 0.1, "undecided")]))
    assert "blue solid: gains" in dot
    assert "grey dashed: undecided" in dot
    assert "orange dotted" not in dot


def test_forty_arrows_are_all_drawn_and_forty_one_only_where_they_gain():
    assert len(edge_lines(dot_source(picture(60, arrows_of(40, ["gains", "undecided"]))))) == 40
    many = picture(60, arrows_of(41, ["gains", "undecided"]))
    thin = dot_source(many)
    assert len(edge_lines(thin)) == 21
    assert "21 of 41 arrows drawn; left out: those that are not a clear gain" in thin
    full = dot_source(many, everything=True)
    assert len(edge_lines(full)) == 41
    assert "left out" not in full


def test_numbers_stop_above_sixty_drawn_arrows():
    assert all("label=<" in line for line in edge_lines(dot_source(picture(60, arrows_of(60, ["gains"])))))
    assert not any("label=<" in line for line in edge_lines(dot_source(picture(60, arrows_of(61, ["gains"])))))


def test_least_bits_leaves_weak_arrows_out_and_says_so():
    given = picture(4, [Arrow(0, 1, 0.01, "gains"), Arrow(1, 2, 0.02, "gains"), Arrow(2, 3, 0.3, "loses")])
    dot = dot_source(given, least_bits=0.02)
    assert [re.search(r'id="([^"]+)"', line)[1] for line in edge_lines(dot)] == ["e1-2", "e2-3"]
    assert "2 of 3 arrows drawn; left out: those under 0.02 bits" in dot


def test_both_reasons_for_leaving_out_are_said():
    given = picture(60, [*arrows_of(41, ["gains", "loses"]), Arrow(58, 59, 0.001, "gains")])
    assert showing(given, least_bits=0.01).left_out == (
        "21 of 42 arrows drawn; left out: those under 0.01 bits and those that are not a clear gain"
    )


def test_least_gain_leaves_out_what_gains_less_and_what_nobody_judged():
    given = picture(
        5,
        [
            Arrow(0, 1, 0.2, "gains", 0.03, (0.028, 0.032)),
            Arrow(1, 2, 0.2, "loses", -0.01, (-0.012, -0.008)),
            Arrow(2, 3, 0.2),
            Arrow(3, 4, 0.001, "gains", 0.02, (0.018, 0.022)),
        ],
    )
    assert [arrow.parent for arrow in showing(given, least_gain=-0.01).arrows] == [0, 1, 3]
    assert showing(given, least_gain=-0.01).left_out == (
        "3 of 4 arrows drawn; left out: those not judged on held-out rows"
    )
    found = showing(given, 0.01, least_gain=0.0)
    assert [arrow.parent for arrow in found.arrows] == [0]
    assert found.left_out == (
        "1 of 4 arrows drawn; left out: those under 0.01 bits, those that gain less than 0 bits on held-out rows and"
        " those not judged on held-out rows"
    )
    assert len(edge_lines(dot_source(given, least_gain=0.03))) == 1
    assert len(edge_lines(dot_source(given))) == 4


def test_fifteen_attributes_without_arrows_are_a_fan_and_sixteen_a_grid():
    fan, grid = dot_source(picture(15)), dot_source(picture(16))
    assert len(edge_lines(fan, "fan")) == 15
    assert all(PALETTES["light"]["fan"] in line for line in edge_lines(fan, "fan"))
    assert "cluster_frame" not in fan
    assert not edge_lines(grid, "fan")
    assert "cluster_frame" in grid


def test_arrows_that_are_all_left_out_do_not_look_like_a_fan():
    assert "cluster_frame" in dot_source(picture(6, [Arrow(0, 1, 0.01, "gains")]), least_bits=0.1)


def test_no_arrow_joins_the_class_to_an_attribute_in_the_frame():
    dot = dot_source(picture(6, [Arrow(0, 1, 0.1, "gains")]))
    assert re.findall(r"class -> (\w+)", dot) == ["socket"]
    assert "parent of all 6 attributes in the frame" in dot


def test_roots_hang_on_the_socket_and_lone_attributes_wrap_into_rows():
    dot = dot_source(picture(34, [Arrow(0, 2, 0.1, "gains"), Arrow(1, 2, 0.1, "gains")]))
    assert re.findall(r"socket -> (\w+) \[style=invis, weight=2\]", dot) == ["n1", "n0"]
    ranks = [re.findall(r"n\d+", line) for line in dot.splitlines() if "rank=same" in line]
    # 31 attributes without arrows: six rows of five, and one alone that hangs below the first of the sixth.
    assert sorted(len(rank) for rank in ranks) == [1, 2, 5, 5, 5, 5, 5, 5]


def test_a_lone_attribute_on_its_own_row_stays_visible():
    dot = dot_source(picture(3, [Arrow(0, 1, 0.1, "gains")]))
    assert not re.search(r"^\s*(\{ rank=same; )?n2 \[style=invis", dot, re.MULTILINE)
    assert re.search(r'n2 \[id="n2"', dot)


@pytest.mark.parametrize("name", HOSTILE)
def test_text_cannot_break_out_of_dot(name):
    target, title = f"class {name}", f"title {name}"
    given = Picture(title, target, (Chip(name, 2, 0.1), Chip("b", 2, 0.1)), (Arrow(0, 1, 0.1, "gains"),), name)
    dot = dot_source(given)
    strings = re.findall(r'"(?:[^"\\]|\\.)*"', re.sub(r"<<TABLE.*?</TABLE>>", "", dot, flags=re.DOTALL))
    outside = re.sub(r'"(?:[^"\\]|\\.)*"', "", re.sub(r"<<?TABLE.*</TABLE>>?", "", dot))
    assert not re.search(r"script|alert|record|a=b", outside)
    unescaped = [html.unescape(text[1:-1].replace('\\"', '"').replace("\\" * 4, "\\")) for text in strings]
    assert f"{name}: 2 levels, 0.100 bits shared with {target}" in unescaped
    for table in re.findall(r"<(<TABLE.*</TABLE>)>", dot):
        ET.fromstring(table)


@pytest.mark.parametrize("text", ["a\\b", "\\N", 'say "so"', "tail\\", "\\\\", "a\\l", "two words"])
def test_quoting_agrees_with_a_second_library(text):
    """Source: the function escape and the DOT writer of the Python package graphviz."""
    theirs = graphviz.Digraph()
    theirs.node("n", label=graphviz.escape(text))
    assert f"[label={quote(text)}]" in theirs.source


def test_control_characters_are_replaced():
    assert clean("a\x00b\tc\nd\u202ee\ud800f\uffffg") == "a\ufffdb\ufffdc\ufffdd\ufffde\ufffdf\ufffdg"
    dot_source(picture(2, title="\ud800 \x07")).encode()


def test_long_names_are_cut_on_the_chip_and_whole_in_the_tooltip():
    assert cut("a" * 22) == "a" * 22
    assert cut("a" * 23) == "a" * 21 + "…"
    assert cut("温" * 12) == "温" * 10 + "…"
    dot = dot_source(Picture("naive", "arrival", (Chip("y" * 300, 2, 0.1),)))
    assert dot.count("y" * 300) == 1
    assert f">{'y' * 21}…<" in dot


def test_tiny_bits_are_not_shown_as_nothing():
    dot = dot_source(picture(3, [Arrow(0, 1, 0.004, "gains")]))
    assert "&lt;0.01" in edge_lines(dot)[0]


def test_evidence_is_in_the_tooltip():
    dot = dot_source(picture(3, [Arrow(0, 1, 0.1214, "gains", 0.0213, (0.0092, 0.0334))]))
    assert (
        "attr_0 to attr_1: 0.121 bits given arrival, held-out gain +0.021 bits per row [+0.009, +0.033]; gains" in dot
    )


def test_bars_share_one_scale():
    dot = dot_source(Picture("naive", "arrival", (Chip("a", 2, 0.4), Chip("b", 2, 0.1), Chip("c", 2, 0.0))))
    bars = re.findall(rf'WIDTH="(\d+)" HEIGHT="5" BGCOLOR="{PALETTES["light"]["bar"]}"', dot)
    assert [int(bar) for bar in bars] == [62, round(62 / 4)]


def test_same_picture_same_text():
    given = picture(60, arrows_of(100, ["gains", "loses"]))
    assert dot_source(given, everything=True) == dot_source(given, everything=True)


def test_no_engine_specific_tricks():
    dot = dot_source(picture(20, arrows_of(30, ["gains"])))
    assert "ortho" not in dot
    assert "lhead" not in dot


def test_every_token_has_a_hex_of_its_own():
    assert PALETTES["light"].keys() == PALETTES["dark"].keys()
    assert len(TOKENS) == len(PALETTES["light"]) + len(PALETTES["dark"])


def test_palette_keeps_the_agreed_colours():
    light, dark = PALETTES["light"], PALETTES["dark"]
    tokens = ("background", "frame", "gain", "undecided", "loss", "class")
    assert [light[token] for token in tokens] == ["#FBFAF7", "#F1EEF5", "#0A66A8", "#7B838C", "#C4520A", "#5B3F7A"]
    assert [dark[token] for token in tokens] == ["#14181D", "#222030", "#5BB4F0", "#8C959F", "#FF9A4D", "#CDB7E6"]
    assert [light[token] for token in ("loss-text", "bar", "small-text")] == ["#B84A00", "#7A5C99", "#5F6771"]


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_text_can_be_read(theme):
    """Text reaches 4.5 to 1, arrows 3 to 1. Source: W3C, WCAG 2.1, criteria 1.4.3 and 1.4.11 (from memory)."""
    colours = PALETTES[theme]
    for token in ("text", "small-text", "gain", "loss-text", "unjudged"):
        assert contrast(colours[token], colours["frame"]) >= 4.5, token
        assert contrast(colours[token], colours["background"]) >= 4.5, token
    assert contrast(colours["class-text"], colours["class"]) >= 4.5
    assert contrast(colours["small-text"], colours["chip"]) >= 4.5
    for token in ("gain", "undecided", "loss", "unjudged", "frame-edge"):
        assert contrast(colours[token], colours["frame"]) >= 3, token


def contrast(one, other):
    bright, dim = sorted((luminance(one), luminance(other)), reverse=True)
    return (bright + 0.05) / (dim + 0.05)


def luminance(colour):
    parts = [int(colour[start : start + 2], 16) / 255 for start in (1, 3, 5)]
    linear = [part / 12.92 if part <= 0.03928 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_layers_put_children_below_parents_and_keep_the_capacity():
    parents = {child: [0] for child in range(1, 12)} | {12: [3, 11]}
    found = layers(parents, parents_first(parents, range(13)), 4)
    depth = {one: layer for layer, members in enumerate(found) for one in members}
    assert sorted(depth) == list(range(13))
    assert all(depth[parent] < depth[child] for child in parents for parent in parents[child])
    assert max(len(members) for members in found) == 4


def test_rows_hold_everyone_in_order_and_stay_even():
    for count in range(1, 130):
        grid = rows(range(count))
        assert [one for row in grid for one in row] == list(range(count))
        assert len({len(row) for row in grid[:-1]}) <= 1
        assert len(grid[0]) <= math.ceil(math.sqrt(count)) + 1
    assert rows([]) == []


def test_arrows_in_a_circle_are_refused():
    with pytest.raises(StructureError, match=r"cycle through attributes \[0, 1\]"):
        dot_source(picture(3, [Arrow(0, 1, 0.1), Arrow(1, 0, 0.1)]))


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: picture(0), "'kdb2' has no attributes; at least one is needed"),
        (lambda: picture(2, [Arrow(0, 2, 0.1)]), "arrow 0 to 2 of 'kdb2' must join two different ones of 2 attributes"),
        (lambda: picture(2, [Arrow(1, 1, 0.1)]), "arrow 1 to 1"),
        (lambda: picture(2, [Arrow(0, 1, 0.1), Arrow(0, 1, 0.2)]), "once"),
        (lambda: Arrow(0, 1, math.nan), "arrow 0 to 1 carries nan bits; a finite number is needed"),
        (lambda: Arrow(0, 1, 0.1, "wins"), "verdict 'wins'; known: gains, undecided, loses, not judged"),
        (lambda: Chip("a", 2, math.inf), "attribute 'a' shares inf bits"),
    ],
)
def test_what_cannot_be_drawn_is_refused(make, words):
    with pytest.raises(StructureError, match=re.escape(words)):
        make()


def test_where_none_of_many_is_a_clear_gain_the_strongest_are_drawn():
    found = showing(picture(60, arrows_of(45, ["undecided", "loses"])))
    assert len(found.arrows) == 40
    assert found.left_out == "40 of 45 arrows drawn; left out: weaker ones"


def test_the_plug_carries_its_caption_inside():
    dot = dot_source(picture(6, [Arrow(0, 1, 0.1, "gains")]))
    plug = next(line for line in dot.splitlines() if line.strip().startswith("class ["))
    assert "parent of all 6 attributes in the frame" in plug
    assert "label=" not in next(line for line in dot.splitlines() if 'id="cable"' in line)
