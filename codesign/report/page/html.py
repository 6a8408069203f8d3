"""Markup built from Python: whatever is not markup already is escaped, so that no name can become an element.

`Html` marks text that is safe to put into a page as it is; only this module makes it, and `trusted` for what other
modules of the package have built. Plain ``str`` handed to `element` is always words.
"""

from __future__ import annotations

import base64
import hashlib
import json
import unicodedata
from collections.abc import Container, Iterable, Sequence
from html import escape
from typing import Any

from codesign.report.output import plain

#: Elements without an end tag.
VOID = frozenset({"br", "hr", "input", "link", "meta", "col"})
#: Files up to this size are carried inside the page as links that save them. [byte]
LARGEST_DOWNLOAD = 200_000


class Html(str):
    """Markup."""

    __slots__ = ()


#: Tables up to so many rows are not broken over printed pages.
SHORT_TABLE = 8

Content = str | int | float | None | Iterable["Content"]


def trusted(markup: str) -> Html:
    """Take markup that the package itself has built, with all names in it escaped."""
    return Html(markup)


def words(value: object) -> Html:
    """Escape words on one line; control and direction characters are left out."""
    return value if isinstance(value, Html) else Html(escape(plain(str(value)), quote=True))


def name(value: object) -> Html:
    """Escape a name that somebody typed, set apart so that its writing direction does not disturb its surroundings."""
    return element("bdi", plain(str(value)))


def lines(text: str) -> Html:
    """Escape text of several lines; control and direction characters are shown by their code in brackets."""
    return Html(escape("".join(_visible(c) for c in text.replace("\r\n", "\n")), quote=True))


def _visible(character: str) -> str:
    if character in "\n\t" or unicodedata.category(character) not in ("Cc", "Cf", "Cs", "Zl", "Zp"):
        return character
    return f"[U+{ord(character):04X}]"


def joined(content: Content) -> Html:
    """Put pieces one after another; None is nothing, what is not markup is escaped."""
    if content is None:
        return Html("")
    if isinstance(content, str | int | float):
        return _inline(content)
    return Html("".join(joined(piece) for piece in content))


def _inline(value: str | int | float) -> Html:
    """Words with the spaces around them kept."""
    if isinstance(value, Html):
        return value
    text = str(value)
    head, tail = " " * text[:1].isspace(), " " * (text[-1:].isspace() and bool(text.strip()))
    return Html(f"{head}{words(text)}{tail}")


def element(tag: str, *content: Content, **attributes: object) -> Html:
    """Return an element.

    Parameters
    ----------
    tag : str
    *content : str, Html, number, None or iterables of those
        Plain text is escaped.
    **attributes
        ``class_`` is class, underscores are hyphens, True is an attribute without a value; None and False are left
        out.
    """
    said = "".join(_attribute(key, value) for key, value in attributes.items())
    if tag in VOID:
        return Html(f"<{tag}{said}>")
    return Html(f"<{tag}{said}>{joined(content)}</{tag}>")


def _attribute(key: str, value: object) -> str:
    if value is None or value is False:
        return ""
    label = key.rstrip("_").replace("_", "-")
    return f" {label}" if value is True else f' {label}="{words(value)}"'


def listed(items: Iterable[Content], **attributes: object) -> Html:
    """Return a bulleted list."""
    return element("ul", (element("li", item) for item in items), **attributes)


def paragraph(*content: Content, **attributes: object) -> Html:
    """Return a paragraph."""
    return element("p", *content, **attributes)


def table(
    caption: str,
    header: Sequence[Content],
    rows: Iterable[Sequence[Content]],
    *,
    numbers: Container[int] = (),
    class_: str | None = None,
    wide: bool = False,
) -> Html:
    """Return a table whose first column names the rows.

    Parameters
    ----------
    caption : str
    header : sequence of content
    rows : iterable of sequences of content
    numbers : container of int
        Columns set flush right.
    class_ : str, optional
    wide : bool
        Whether it scrolls on its own where the page is too narrow; others have to fit.
    """
    head = [_head(cell, _column(k, numbers)) for k, cell in enumerate(header)]
    labels = [None if isinstance(cell, Html) else str(cell) for cell in header]
    body = [_row(row, numbers, labels) for row in rows]
    kinds = " ".join(filter(None, (class_, "whole" if len(body) <= SHORT_TABLE else None))) or None
    whole = _table(caption, head, (element("tbody", body, role="rowgroup"),), kinds)
    if not wide:
        return whole
    # A region that scrolls has to be reachable by keyboard, and named.
    return element("div", whole, class_="scroller", role="region", aria_label=caption, tabindex="0")


def grouped_table(
    caption: str,
    header: Sequence[str],
    groups: Iterable[tuple[str, Sequence[Sequence[Content]]]],
    *,
    class_: str | None = None,
) -> Html:
    """Return a table whose rows stand in groups with a title each; groups without rows are left out."""
    bodies = (
        element("tbody", _title(title, len(header)), (_row(row, ()) for row in rows), role="rowgroup")
        for title, rows in groups
        if rows
    )
    return _table(caption, [_head(cell) for cell in header], bodies, class_)


# Roles are said again because narrow pages lay rows out as blocks, which would make browsers forget what they are.


def _table(caption: str, head: Sequence[Html], bodies: Iterable[Html], class_: str | None) -> Html:
    heads = element("thead", element("tr", head, role="row"), role="rowgroup")
    return element("table", element("caption", caption), heads, bodies, class_=class_, role="table")


def _head(cell: Content, class_: str | None = None) -> Html:
    return element("th", cell, scope="col", role="columnheader", class_=class_)


def _title(title: str, columns: int) -> Html:
    head = element("th", title, colspan=columns, scope="rowgroup", role="rowheader")
    return element("tr", head, class_="group", role="row")


def _row(row: Sequence[Content], numbers: Container[int], labels: Sequence[str | None] | None = None) -> Html:
    first, *rest = row
    cells = (
        element("td", cell, role="cell", class_=_column(k, numbers), data_label=labels[k] if labels else None)
        for k, cell in enumerate(rest, start=1)
    )
    return element("tr", element("th", first, scope="row", role="rowheader"), cells, role="row")


def _column(index: int, numbers: Container[int]) -> str | None:
    return "number" if index in numbers else None


def settings(pairs: Iterable[tuple[Content, Content]], **attributes: object) -> Html:
    """Return names with their values."""
    return element("dl", (element("div", element("dt", k), element("dd", v)) for k, v in pairs), **attributes)


def bar(share: float, kind: str = "") -> Html:
    """Return a small bar filled to a share, for the eye only: the number stands beside it."""
    filled = min(max(share, 0.0), 1.0) if share == share else 0.0
    return element(
        "svg",
        element("rect", class_="track", width="100", height="8"),
        element("rect", class_=f"fill {kind}".strip(), width=f"{100 * filled:.1f}", height="8"),
        class_="bar",
        viewBox="0 0 100 8",
        preserveAspectRatio="none",
        aria_hidden="true",
    )


#: Head of a column of bars, for screen readers only.
BAR_HEADER = element("span", "as a bar", class_="for-bar hidden")


def data_block(identifier: str, value: Any) -> Html:
    """Return data for scripts; nothing in it can end the block."""
    return Html(f'<script type="application/json" id="{words(identifier)}">{json_inside(value)}</script>')


def json_inside(value: Any) -> str:
    """Return JSON text without the characters that mean something to HTML."""
    text = json.dumps(value, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


def download(label: Content, content: str, file: str, kind: str = "text/plain") -> Html | None:
    """Return a link that saves a text carried inside the page, None when it is too large for that."""
    data = content.encode("utf-8", "replace")
    if len(data) > LARGEST_DOWNLOAD:
        return None
    address = f"data:{kind};charset=utf-8;base64,{base64.b64encode(data).decode('ascii')}"
    return element("a", label, href=address, download=plain(file), class_="button")


def css_string(text: str) -> str:
    """Return a text as a string of a style sheet, every character by its code: nothing in it can end the string."""
    return '"' + "".join(f"\\{ord(c):06x}" for c in plain(text)) + '"'


def content_hash(text: str) -> str:
    """Return what a content security policy calls an inline script or style of this text."""
    digest = hashlib.sha256(text.encode("utf-8")).digest()
    return f"'sha256-{base64.b64encode(digest).decode('ascii')}'"
