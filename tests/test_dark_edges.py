"""Edges of chips, fields and frames stand out from their ground in the dark.

Source: WCAG 2.2, success criterion 1.4.11 (3 to 1 for what shows where a control is) and its relative luminance.
"""

import pytest

from bnx.palette import PALETTES

DARK = PALETTES["dark"]


def light(colour: str) -> float:
    parts = [int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)]
    red, green, blue = (one / 12.92 if one <= 0.04045 else ((one + 0.055) / 1.055) ** 2.4 for one in parts)
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def contrast(one: str, other: str) -> float:
    low, high = sorted((light(DARK[one]), light(DARK[other])))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("edge", ["chip-edge", "frame-edge", "cable"])
@pytest.mark.parametrize("ground", ["background", "frame"])
def test_edges_stand_out_in_the_dark(edge: str, ground: str) -> None:
    assert contrast(edge, ground) >= 3


@pytest.mark.parametrize(("one", "other"), [("frame", "background"), ("chip", "frame")])
def test_grounds_are_told_apart_in_the_dark(one: str, other: str) -> None:
    assert contrast(one, other) >= 1.1
