"""The colours of every picture and page: one token a meaning, one hex a token, in light and in dark."""

from types import MappingProxyType
from typing import Literal

__all__ = ["PALETTES", "TOKENS", "Theme"]

Theme = Literal["light", "dark"]

_LIGHT = {
    "background": "#FBFAF7",
    "frame": "#F1EEF5",
    "frame-edge": "#8468A3",
    "class": "#5B3F7A",
    "class-text": "#FDFCFE",
    "cable": "#6F5190",
    "chip": "#FFFFFF",
    "chip-edge": "#B9C0C8",
    "bar": "#7A5C99",
    "bar-track": "#E5E0EC",
    "gain": "#0A66A8",
    "undecided": "#7B838C",
    "loss": "#C4520A",
    "loss-text": "#B84A00",
    "unjudged": "#47515C",
    "fan": "#A3A9B0",
    "text": "#22272E",
    "small-text": "#5F6771",
}

_DARK = {
    "background": "#14181D",
    "frame": "#222030",
    "frame-edge": "#8D74AB",
    "class": "#CDB7E6",
    "class-text": "#191320",
    "cable": "#A98CC8",
    "chip": "#2A323B",
    "chip-edge": "#68727D",
    "bar": "#B396D4",
    "bar-track": "#352F3F",
    "gain": "#5BB4F0",
    "undecided": "#8C959F",
    "loss": "#FF9A4D",
    "loss-text": "#FFA766",
    "unjudged": "#BCC4CD",
    "fan": "#666F79",
    "text": "#E8ECF0",
    "small-text": "#A4ACB6",
}

PALETTES = MappingProxyType({"light": MappingProxyType(_LIGHT), "dark": MappingProxyType(_DARK)})
"""Theme -> token -> hex."""

TOKENS = MappingProxyType({colour.lower(): token for palette in PALETTES.values() for token, colour in palette.items()})
"""Hex in lower case, of either theme -> token."""
