"""An SVG file turned into an element that lives in a page with others: own ids, no style sheet, words for readers.

What matplotlib says in style attributes is said in attributes of SVG instead, so that pages whose policy allows no
inline styles show it too.
"""

from __future__ import annotations

import hashlib
import re
from xml.etree import ElementTree

SVG, XLINK = "{http://www.w3.org/2000/svg}", "{http://www.w3.org/1999/xlink}"
#: What matplotlib's style sheet says of every element; as properties of the root they are inherited.
INHERITED = {"stroke-linejoin": "round", "stroke-linecap": "butt"}
#: Fonts of letters kept as text: the one the figure was laid out with, else any without serifs.
FONTS = "'DejaVu Sans', sans-serif"


def inline_svg(content: bytes, title: str, description: str, prefix: str | None = None) -> str:
    """Return the root element of an SVG file, fit to stand in an HTML page beside others.

    Parameters
    ----------
    content : bytes
        SVG file.
    title, description : str
        Read by screen readers; empty ones are left out.
    prefix : str, optional
        Begins every id; by default made from the content.
    """
    root = ElementTree.fromstring(content)
    prefix = f"f{hashlib.sha256(content).hexdigest()[:10]}-" if prefix is None else prefix
    for parent in list(root.iter()):
        for child in list(parent):
            if child.tag in (f"{SVG}metadata", f"{SVG}style", f"{SVG}title", f"{SVG}desc"):
                parent.remove(child)
    for element in root.iter():
        _rename(element, prefix)
    _size(root)
    _words(root, title, description, prefix)
    return ElementTree.tostring(root, encoding="unicode")


def _rename(element: ElementTree.Element, prefix: str) -> None:
    """Tags without name space (HTML needs none), styles as attributes, ids and what refers to them with the prefix."""
    element.tag = element.tag.removeprefix(SVG)
    for declared in element.attrib.pop("style", "").split(";"):
        name, _, value = declared.partition(":")
        if value:
            element.set(name.strip(), FONTS if name.strip() == "font-family" else value.strip())
    for key, value in list(element.attrib.items()):
        if key == "id":
            element.set(key, prefix + value)
        elif key in ("href", f"{XLINK}href"):
            del element.attrib[key]
            element.set("href", f"#{prefix}{value[1:]}" if value.startswith("#") else value)
        elif "url(#" in value:
            element.set(key, re.sub(r"url\(#", f"url(#{prefix}", value))


def _size(root: ElementTree.Element) -> None:
    """Width and height in CSS pixels, so that the figure has its size in print where nothing else is said."""
    for key in ("width", "height"):
        root.set(key, f"{float(root.get(key, '0').removesuffix('pt')) * 96 / 72:.0f}")
    root.attrib.update(INHERITED)
    root.attrib.pop("version", None)


def _words(root: ElementTree.Element, title: str, description: str, prefix: str) -> None:
    root.set("xmlns", "http://www.w3.org/2000/svg")
    root.set("role", "img")
    named = []
    for place, (tag, text) in enumerate((("title", title), ("desc", description))):
        if text:
            element = ElementTree.Element(tag, {"id": f"{prefix}{tag}"})
            element.text = text
            root.insert(place, element)
            named.append(f"{prefix}{tag}")
    if named:
        root.set("aria-labelledby", " ".join(named))
