"""A problem whose every free text is hostile, and checks that such text stays plain text wherever it is shown.

Ids of parts and surfaces cannot be hostile: the schema allows lowercase letters, digits and hyphens only. What can be:
title, notes, provenance, descriptions, tags, names of camera channels, names of files and of the columns in them, the
catalogue's name, and whatever is typed on the command line.

For other tests::

    problem = hostile_problem(tmp_path)              # resolved, solves in a second
    path = write_hostile(tmp_path)                   # the same as a file, for the command line
    for name, text in STRINGS.items(): ...           # one kind of trouble at a time: hostile_problem(tmp_path, text)
    assert_plain(output)                             # terminal text: no control, no direction characters
    assert_inert(html)                               # a page: the texts are words in it, never mark-up or script
    assert_no_formula(csv_text)                      # a table: a spreadsheet shows text, computes nothing
"""

from __future__ import annotations

import csv
import io
import unicodedata
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

from catalog_files import toml_value
from small_problems import small_table, write_curves

from codesign import build_problem
from codesign.catalog import Catalog
from codesign.problem import Problem

#: A word in every string: where it turns up in a page tells whether a text got out of its place.
MARK = "zmarkz"

#: One kind of trouble each.
STRINGS = {
    "markup": f'<script>alert("{MARK}")</script><img src=x onerror=alert("{MARK}")>',
    "closing": f"</script></style></title></textarea>--><svg/onload={MARK}><!--",
    "attribute": f"\" onmouseover=\"{MARK}\" ' onfocus='{MARK}' autofocus x=`{MARK}`",
    "entities": f"&lt;b&gt;{MARK}&amp;#60; &nbsp; &#x3c;script&#x3e;",
    "mathtext": f"$\\frac{{1}}{{{MARK}}}$ $open \\undefined ^_ % {{0}} {{title!r}} %s %(name)s ${{HOME}}",
    "terminal": f"\x1b[31m{MARK}\x1b[0m\x1b]0;{MARK}\x07\x08\x08\x00\x7f\x9b2J",
    "lines": f"{MARK} one\ntwo\r\nthree\rfour\u2028five\u2029six\x85seven\teight\x0bnine\x0cten",
    "direction": f"{MARK} \u202etxt.exe\u202c \u2066in\u2069 \u2067out\u2069 \u200f\u200e\u061c\ufeff\u200b",
    "right to left": f"\u05e9\u05dc\u05d5\u05dd {MARK} \u0645\u0631\u062d\u0628\u0627 (1) 123",
    "wide": f"\u5149\u5b66\u691c\u67fb {MARK} \U0001f4a1\U0001f4a1 e\u0301\u0302\u0303",
    "formula": f'=HYPERLINK("http://example.invalid/{MARK}","{MARK}")',
    "plus": f"+1+{MARK}",
    "minus": f"-1-{MARK}|calc",
    "at": f"@SUM({MARK})",
    "toml": f"{MARK}\"\"\"\n[limits]\nrig_heat_w = 1\n# ''' \\u0041 \\",
    "url": f"javascript:alert('{MARK}')",
    "long": f"{MARK}{'W' * 500}",
}
#: All at once; the formula start has to be the first character to be one.
ALL = " ".join([STRINGS["formula"], *(text for name, text in STRINGS.items() if name not in ("formula", "long"))])


def hostile_table(text: str = ALL) -> dict[str, Any]:
    """Return a problem table with ``text`` in every place that takes free text; curves as `write_hostile_curves`."""
    table = small_table()
    table |= {"title": text, "notes": text, "required_cnr": 3.0}
    for kind in ("led", "filter", "camera", "surface"):
        for part in table[kind]:
            part |= {"source": text, "description": text, "price": 5.0, "invented": True}
            if kind in ("led", "surface"):
                part["tags"] = [text]
            if kind == "surface":
                part["curve"] = f"{file_name(text)}-{part['curve']}"
    camera = table["camera"][0]
    camera["channels"] = [{**camera["channels"][0], "name": channel_name(text)}]
    table["led"][0]["pulse"] = [{"max_width_us": 100.0, "max_duty": 0.1, "max_current_ma": 400.0}]
    return table


def hostile_problem(folder: Path, text: str = ALL) -> Problem:
    """Build the problem, with its curves in ``folder``."""
    write_hostile_curves(folder, text)
    return build_problem(
        hostile_table(text), folder=folder, where=f"{file_name(text)}.toml", catalog=Catalog(name=text, source=text)
    )


def write_hostile(folder: Path, text: str = ALL) -> Path:
    """Write the problem as a file of a hostile name; returns its path."""
    write_hostile_curves(folder, text)
    table = hostile_table(text)
    parts = {kind: table.pop(kind) for kind in ("led", "filter", "camera", "surface")}
    lines = [f"{key} = {toml_value(value)}" for key, value in table.items()]
    lines += [
        f"[[{kind}]]\n" + "\n".join(f"{key} = {toml_value(value)}" for key, value in part.items())
        for kind, listed in parts.items()
        for part in listed
    ]
    path = folder / f"{file_name(text)}.toml"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def write_hostile_curves(folder: Path, text: str = ALL) -> None:
    """Write the curve files of `hostile_table`: hostile file names, hostile column names."""
    write_curves(folder)
    for part in small_table()["surface"]:
        header, *rows = (folder / part["curve"]).read_text(encoding="utf-8").splitlines()
        names = [f"{_one_line(text)} {k}" for k in range(len(header.split(",")) - 1)]
        out = io.StringIO()
        csv.writer(out, lineterminator="").writerow(["wavelength_nm", *names])
        path = folder / f"{file_name(text)}-{part['curve']}"
        path.write_text("\n".join([out.getvalue(), *rows]), encoding="utf-8")


def channel_name(text: str) -> str:
    """Return the text as far as a camera channel may be called so: plus signs join channels that are read together."""
    return text.replace("+", "")


def file_name(text: str) -> str:
    """Return the text as far as a file may be called so."""
    return text.replace("/", ":").replace("\x00", "")[:60]


def _one_line(text: str) -> str:
    return " ".join(text.replace("\x00", "").split())


def assert_plain(text: str, width: int | None = None) -> None:
    """Assert that terminal text has no control or direction characters, nor lines wider than ``width``."""
    bad = sorted({f"U+{ord(c):04X}" for c in text if c != "\n" and unicodedata.category(c) in ("Cc", "Cf", "Zl", "Zp")})
    assert not bad, f"control or direction characters {bad} in {text!r}"
    if width is not None:
        wide = [line for line in text.splitlines() if len(line) > width]
        assert not wide, f"wider than {width}: {wide[0]!r}"


def assert_no_formula(text: str) -> None:
    """Assert that no cell of a CSV text is one that a spreadsheet would compute or run."""
    for row in csv.reader(io.StringIO(text)):
        for cell in row:
            number = _is_number(cell)
            assert number or not cell.lstrip().startswith(("=", "+", "-", "@", "\t", "\r")), f"cell {cell!r}"


def _is_number(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return False
    return True


class _Page(HTMLParser):
    """Collects where the mark turns up other than as words."""

    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[str] = []
        self.words: list[str] = []
        self.escaped: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        names = [tag, *(name for name, _ in attrs)]
        handlers = [name for name, value in attrs if name.startswith("on") and MARK in (value or "")]
        links = [f"{name}={v}" for name, v in attrs if name in ("href", "src") and MARK in (v or "").split("#")[0]]
        self.escaped += [name for name in names if MARK in name] + handlers + links
        if tag in ("script", "style"):
            self.open.append(tag)
            self.kind = dict(attrs).get("type") or ""

    def handle_endtag(self, tag: str) -> None:
        if self.open and self.open[-1] == tag:
            self.open.pop()

    def handle_data(self, data: str) -> None:
        if self.open and MARK in data and "json" not in self.kind:
            self.escaped.append(f"{self.open[-1]}: {data[:200]}")
        self.words.append(data)

    def handle_comment(self, data: str) -> None:
        if MARK in data:
            self.escaped.append(f"comment: {data[:200]}")


def assert_inert(html: str, *, shown: bool = True) -> None:
    """Assert that a page holds the hostile texts as words only, never as elements, attributes, links, scripts.

    Data for scripts may hold them inside ``<script type="application/json">``. ``shown``: that they are there at all.
    """
    page = _Page()
    page.feed(html)
    page.close()
    assert not page.escaped, f"hostile text became {page.escaped[:3]}"
    assert "onerror=alert" not in "".join(part for part in html.split(">") if part.lstrip().startswith("<img"))
    if shown:
        assert any(MARK in words for words in page.words), "the hostile texts are not on the page at all"
