"""A figure as part of the page: unique names, colours left to the page, words for those who listen.

What matplotlib writes is read and written by the standard library's XML tools; nothing of it is changed but names,
colours and the size, which is the page's.
"""

from __future__ import annotations

import re
from xml.etree import ElementTree

from realize.page.plots.style import DESIGN, FAINT, INK, LIMIT, MARK, SECOND, STORED

#: Colours of the figures, and the names under which the page knows them.
COLORS = {
    INK: "ink",
    FAINT: "faint",
    MARK: "mark",
    DESIGN: "design",
    STORED: "stored",
    SECOND: "second",
    LIMIT: "limit",
}

_REFERENCE = re.compile(r"url\(#([^)]+)\)")
_COLOR = re.compile("|".join(COLORS))


def inlined(svg: str, key: str, title: str, alternative: str) -> str:
    """Prepare one SVG document to stand in a page.

    Parameters
    ----------
    svg : str
        As :func:`realize.page.plots.style.svg_text` writes it.
    key : str
        Goes in front of every name in it.
    title, alternative : str
        What a screen reader says.
    """
    root = ElementTree.fromstring(svg)
    space = root.tag.removesuffix("svg")
    ElementTree.register_namespace("", space.strip("{}"))
    for child in root.findall(f"{space}metadata"):
        root.remove(child)
    for element in root.iter():
        _renamed(element, key)
    for name in ("width", "height", "version"):
        root.attrib.pop(name, None)
    root.set("role", "img")
    root.set("aria-labelledby", f"{key}-title {key}-words")
    for place, (tag, text) in enumerate((("title", title), ("desc", alternative))):
        words = ElementTree.Element(f"{space}{tag}", {"id": f"{key}-{'words' if place else 'title'}"})
        words.text = text
        root.insert(place, words)
    return ElementTree.tostring(root, encoding="unicode")


def _renamed(element: ElementTree.Element, key: str) -> None:
    """Names with the key in front of them, colours as variables with themselves as default."""
    for name, value in list(element.attrib.items()):
        if name == "id":
            element.set(name, f"{key}-{value}")
        elif name.endswith("}href"):
            # As SVG 2 has it, without a name space of its own.
            del element.attrib[name]
            element.set("href", f"#{key}-{value.removeprefix('#')}")
        else:
            value = _REFERENCE.sub(rf"url(#{key}-\1)", value)
            element.set(name, _COLOR.sub(lambda found: f"var(--{COLORS[found[0]]}, {found[0]})", value))
