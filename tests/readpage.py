"""A page read as a browser would read it: elements, texts, and the cells of tables."""

import re
from html.parser import HTMLParser

VOID = {"meta", "br", "link", "img", "input", "hr", "col"}


class Page(HTMLParser):
    """Reads a page as a browser would: elements with attributes, texts, and the cells of tables by id."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.tables: dict[str, list[list[str]]] = {}
        self.rows: list[list[str]] = []
        self.texts: list[str] = []
        self.style = ""
        self.script = ""
        self.data: list[str] = []
        self._open: list[str] = []
        self.feed(html)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        found = {key: value or "" for key, value in attrs}
        self.elements.append((tag, found))
        if tag == "table":
            self.rows = self.tables.setdefault(found.get("id", f"table {len(self.tables)}"), [])
        if tag == "tr":
            self.rows.append([])
        if tag in {"td", "th"}:
            self.rows[-1].append("")
        if tag not in VOID:
            self._open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self._open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self._open and self._open[-1] == "style":
            self.style += data
            return
        if self._open and self._open[-1] == "script":
            if self.elements[-1][1].get("type") == "application/json":
                self.data.append(data)
            else:
                self.script += data
            return
        self.texts.append(data)
        if "td" in self._open or "th" in self._open:
            self.rows[-1][-1] += data

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", "".join(self.texts))
