"""An engine's SVG made fit for every page: colours as classes for light and dark, evidence on hover, wide targets."""

from xml.etree import ElementTree as ET

from bnx.errors import EngineError
from bnx.palette import PALETTES, TOKENS

__all__ = ["themed"]

_SVG = "{http://www.w3.org/2000/svg}"
_XLINK = "{http://www.w3.org/1999/xlink}"
REACH = "16"
"""Width, in pixels, of the unseen band around an arrow that answers to the pointer."""

ET.register_namespace("", _SVG[1:-1])
ET.register_namespace("xlink", _XLINK[1:-1])


def themed(drawn: bytes) -> bytes:
    """Rework an engine's SVG.

    Every known colour becomes a class whose value follows the reader's light or dark setting, or that of an enclosing
    element with ``data-theme="light"`` or ``"dark"``; a picture drawn dark stays dark unless such an element says
    otherwise. The colours written on the shapes stay, for programs without style sheets. Tooltips become titles.

    Raises:
        EngineError: this is no SVG.
    """
    try:
        root = ET.fromstring(drawn)
    except ET.ParseError as broken:
        raise EngineError(f"the drawing engine wrote an SVG that cannot be read: {broken}") from broken
    dark = any(_token(one.get("fill"), "dark") == "background" for one in root.iter())
    root.set("role", "group")
    root.set("aria-label", root.findtext(f"{_SVG}g/{_SVG}text", ""))
    root.set("class", f"bnx-picture {'bnx-dark' if dark else 'bnx-light'}")
    for group in list(root.iter(f"{_SVG}g")):
        _retitle(group)
        if "arrow" in group.get("class", "").split():
            _widen(group)
    for one in root.iter():
        _classify(one)
    style = ET.Element(f"{_SVG}style")
    style.text = _style_sheet()
    root.insert(0, style)
    text: str = ET.tostring(root, encoding="unicode")
    return f'<?xml version="1.0" encoding="UTF-8"?>\n{text}\n'.encode()


def _token(colour: str | None, theme: str | None = None) -> str | None:
    token = TOKENS.get((colour or "").lower())
    if token is None or theme is None:
        return token
    return token if PALETTES[theme][token].lower() == (colour or "").lower() else None


def _classify(one: ET.Element) -> None:
    found = [f"bnx-{part}-{token}" for part in ("fill", "stroke") if (token := _token(one.get(part))) is not None]
    if found:
        one.set("class", " ".join([*one.get("class", "").split(), *found]))


def _retitle(group: ET.Element) -> None:
    """Take the words of the tooltip as the title and the shapes out of the link that carried them."""
    title = group.find(f"{_SVG}title")
    words = None
    for holder in list(group.findall(f"{_SVG}g")):
        link = holder.find(f"{_SVG}a")
        if link is None:
            continue
        words = words or link.get(f"{_XLINK}title")
        place = list(group).index(holder)
        group.remove(holder)
        for offset, shape in enumerate(list(link)):
            group.insert(place + offset, shape)
    if title is not None and words:
        title.text = words
    elif title is not None:
        group.remove(title)


def _widen(group: ET.Element) -> None:
    path = group.find(f"{_SVG}path")
    if path is None:
        return
    band = {
        "d": path.get("d", ""),
        "fill": "none",
        "stroke": "transparent",
        "stroke-width": REACH,
        "class": "bnx-reach",
    }
    group.insert(list(group).index(path), ET.Element(f"{_SVG}path", band))


def _style_sheet() -> str:
    light, dark = (
        ";".join(f"--bnx-{token}:{colour}" for token, colour in PALETTES[theme].items()) for theme in PALETTES
    )
    rules = [
        f".bnx-picture{{{light}}}",
        f"@media (prefers-color-scheme:dark){{.bnx-light{{{dark}}}}}",
        f".bnx-dark{{{dark}}}",
        f'[data-theme="light"] .bnx-picture{{{light}}}',
        f'[data-theme="dark"] .bnx-picture{{{dark}}}',
    ]
    parts = (
        f".bnx-{part}-{token}{{{part}:var(--bnx-{token})}}"
        for part in ("fill", "stroke")
        for token in PALETTES["light"]
    )
    return "".join([*rules, *parts, ".bnx-reach{pointer-events:stroke}"])
