"""A drawn structure made fit to stand beside others inside one page."""

import re
from dataclasses import dataclass
from xml.etree import ElementTree as ET

from bnx.errors import FormatError

__all__ = ["Embedded", "embed"]

_REFERENCE = re.compile(r"url\(#([^)]*)\)")
_XLINK = "{http://www.w3.org/1999/xlink}href"
_SCALE = 1.15
_FORBIDDEN = frozenset({"script", "foreignObject", "iframe", "object", "embed", "image", "animate", "set"})


@dataclass(frozen=True)
class Embedded:
    """An SVG element as markup for a page, and the style rules taken out of it."""

    markup: str
    styles: tuple[str, ...]


def embed(svg: str, prefix: str) -> Embedded:
    """Prefix every id, take the style sheet out, and drop whatever could run or load.

    Every picture comes out at one scale, its height left to its view box.

    Raises:
        FormatError: this is no SVG.
    """
    try:
        root = ET.fromstring(svg.encode())
    except ET.ParseError as broken:
        raise FormatError(f"the picture for {prefix} is no SVG ({broken}); draw it with bnx draw") from broken
    styles: list[str] = []
    _clean(root, styles)
    for one in root.iter():
        _rewrite(one, prefix)
    box = root.get("viewBox", "").split()
    root.attrib.pop("height", None)
    if len(box) == 4:
        root.set("width", f"{_SCALE * float(box[2]):.0f}")
    markup = ET.tostring(root, encoding="unicode", short_empty_elements=False)
    return Embedded(markup, tuple(styles))


def _local(name: str) -> str:
    return name.rpartition("}")[2]


def _clean(parent: ET.Element, styles: list[str]) -> None:
    for child in list(parent):
        kind = _local(child.tag) if isinstance(child.tag, str) else ""
        if kind == "style":
            styles += [child.text] if child.text and "<" not in child.text else []
        if kind in {"", "style"} or kind in _FORBIDDEN:
            parent.remove(child)
        else:
            _clean(child, styles)


def _rewrite(one: ET.Element, prefix: str) -> None:
    """Give an element its page name: no namespaces, ids and references with the prefix."""
    one.tag = _local(one.tag)
    attributes = dict(one.attrib)
    one.attrib.clear()
    for key, value in attributes.items():
        name = _local(key)
        if name.startswith("on") or name == "style" or key == "{http://www.w3.org/XML/1998/namespace}space":
            continue
        if name == "href":
            if value.startswith("#"):
                one.set("href", f"#{prefix}-{value[1:]}")
        elif name == "id":
            one.set("id", f"{prefix}-{value}")
        elif name in {"aria-labelledby", "aria-describedby", "aria-controls"}:
            one.set(name, " ".join(f"{prefix}-{part}" for part in value.split()))
        else:
            one.set(name, _REFERENCE.sub(rf"url(#{prefix}-\1)", value))
