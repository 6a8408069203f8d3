"""The outline of an HTML page: ids, links, headings, tables, styles and scripts, for tests."""

from __future__ import annotations

import base64
from html.parser import HTMLParser
from urllib.parse import unquote

VOID = {"meta", "image", "br", "hr", "input", "link", "col", "img", "path", "rect", "use", "line", "circle", "polyline"}


class Outline(HTMLParser):
    """Reads a page; fails where elements are not closed in the order in which they were opened."""

    def __init__(self, html: str) -> None:
        super().__init__(convert_charrefs=True)
        self.stack: list[str] = []
        self.attributes: list[tuple[str, str, str]] = []
        self.ids: list[str] = []
        self.headings: list[tuple[int, str]] = []
        self.tables: list[dict] = []
        self.inline: dict[str, list[str]] = {"style": [], "script": []}
        self.policy = ""
        self.words = ""
        self._script_type = ""
        self.feed(html)
        self.close()
        assert not self.stack, f"not closed: {self.stack}"

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        found = dict(attrs)
        self.attributes += [(tag, key, value or "") for key, value in attrs]
        if "id" in found:
            self.ids.append(found["id"] or "")
        if tag == "meta" and found.get("http-equiv") == "Content-Security-Policy":
            self.policy = found["content"] or ""
        if tag in ("h1", "h2", "h3"):
            self.headings.append((int(tag[1]), ""))
        if tag == "table":
            self.tables.append({"caption": False, "unscoped": 0})
        if tag == "caption":
            self.tables[-1]["caption"] = True
        if tag == "th" and "scope" not in found:
            self.tables[-1]["unscoped"] += 1
        if tag in self.inline:
            self._script_type = found.get("type") or ""
            if not self._script_type:
                self.inline[tag].append("")
        if tag not in VOID:
            self.stack.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self.stack.pop()

    def handle_endtag(self, tag: str) -> None:
        if tag in VOID:
            return
        assert self.stack, f"</{tag}> closes nothing"
        assert self.stack[-1] == tag, f"</{tag}> inside <{self.stack[-1]}>"
        self.stack.pop()

    def handle_data(self, data: str) -> None:
        inside = self.stack[-1] if self.stack else ""
        if inside in self.inline:
            if not self._script_type:
                self.inline[inside][-1] += data
            return
        self.words += data
        heading = next((tag for tag in reversed(self.stack) if tag in ("h1", "h2", "h3")), None)
        if heading is not None:
            level, text = self.headings[-1]
            self.headings[-1] = (level, text + data)

    def values(self, key: str) -> list[str]:
        """Values of one attribute, of all elements."""
        return [value for _, name, value in self.attributes if name == key]


def carried(href: str) -> str:
    """The text of a file that a link carries."""
    head, _, data = href.partition(",")
    assert head.startswith("data:"), href[:40]
    return base64.b64decode(data).decode("utf-8") if head.endswith(";base64") else unquote(data)
