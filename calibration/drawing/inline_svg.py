"""Turns a matplotlib figure into SVG that may stand inside a page: no style, no script, colours by class.

A strict content policy drops `style` attributes and `<style>` elements, and a theme can only recolour what
has a class; so both are rewritten here. The same figure gives the same bytes twice.
"""

from __future__ import annotations

import re
from hashlib import sha256
from io import BytesIO
from typing import TYPE_CHECKING, Any
from xml.etree import ElementTree as ET

from django.utils.safestring import SafeString

if TYPE_CHECKING:
    from matplotlib.figure import Figure

#: Colour to draw with in matplotlib → role of the stylesheet. The values are what the picture shows outside a page.
ROLES = {
    "#131b2a": "ink",
    "#525a69": "faint",
    "#d9d5c7": "hair",
    "#dcd8ca": "band",
    "#8d8a7f": "rule",
    "#fcfbf7": "paper",
    "#b8290d": "outside",
    "#b97d0c": "near",
    "#0a5566": "action",
}
COLOURS = {role: value for value, role in ROLES.items()}

#: What matplotlib needs to be told so that text stays text and two runs give the same bytes.
SETTINGS: dict[Any, Any] = {
    "svg.fonttype": "none",
    "svg.hashsalt": "foundleft",
    "axes.unicode_minus": True,
    "font.size": 10.0,
}

_SVG = "http://www.w3.org/2000/svg"
_HREF = "{http://www.w3.org/1999/xlink}href"
_FONT_SIZE = re.compile(r"([\d.]+)px")
_REFERENCE = re.compile(r"#([\w-]+)")
#: Inherited by everything below, in place of matplotlib's one style rule.
_ROOT = {"stroke-linejoin": "round", "stroke-linecap": "butt"}


def inline(figure: Figure, *, title: str, description: str) -> SafeString:
    """The figure as one `<svg>` element for a page.

    Parameters
    ----------
    figure : a matplotlib Figure, drawn in the colours of `COLOURS`.
    title : name of the picture. description : what it shows, in words, for those who do not see it.
    """
    written = BytesIO()
    figure.savefig(written, format="svg", metadata={"Date": None, "Creator": None, "Format": None, "Type": None})
    root = ET.fromstring(written.getvalue())
    prefix = "p" + sha256(written.getvalue() + title.encode()).hexdigest()[:8]
    for parent in list(root.iter()):
        for child in list(parent):
            if child.tag in {f"{{{_SVG}}}metadata", f"{{{_SVG}}}style"}:
                parent.remove(child)
    _take_out_styles(root)
    _keep_used_ids(root, prefix)
    _name(root, prefix, title, description)
    for element in root.iter():
        element.tag = element.tag.removeprefix(f"{{{_SVG}}}")
    return SafeString(ET.tostring(root, encoding="unicode"))


def _take_out_styles(root: ET.Element) -> None:
    for element in root.iter():
        for declaration in element.attrib.pop("style", "").split(";"):
            name, _, value = declaration.partition(":")
            _set(element, name.strip(), value.strip())
        for name in ("fill", "stroke"):
            role = ROLES.get(element.get(name, "").lower())
            if role:
                element.set("class", f"{element.get('class', '')} plot-{name}-{role}".strip())


def _set(element: ET.Element, name: str, value: str) -> None:
    if name == "font":
        size = _FONT_SIZE.search(value)
        if size:
            element.set("font-size", size[1])
    elif name and name != "font-family":
        element.set(name, value)


def _keep_used_ids(root: ET.Element, prefix: str) -> None:
    """Several charts share a page: ids that nothing refers to go, the others get the picture's own prefix."""
    referring = (_HREF, "clip-path", "fill", "mask")
    used = {
        match for element in root.iter() for name in referring for match in _REFERENCE.findall(_link(element, name))
    }
    for element in root.iter():
        ident = element.attrib.pop("id", None)
        if ident in used:
            element.set("id", f"{prefix}-{ident}")
        for name in referring:
            value = _link(element, name)
            if value:
                element.attrib.pop(name)
                element.set("href" if name == _HREF else name, value.replace("#", f"#{prefix}-"))


def _link(element: ET.Element, name: str) -> str:
    """A reference such as #m1 or url(#p1); empty for anything else, a colour above all."""
    value = element.get(name, "")
    return value if name == _HREF or value.startswith("url(") else ""


def _name(root: ET.Element, prefix: str, title: str, description: str) -> None:
    for name in ("width", "height"):
        root.attrib.pop(name, None)
    root.attrib.update(_ROOT)
    root.set("class", "plot")
    root.set("role", "img")
    root.set("aria-labelledby", f"{prefix}-t {prefix}-d")
    said = (("title", "t", title), ("desc", "d", description))
    for place, (tag, ident, text) in enumerate(said):
        element = ET.Element(f"{{{_SVG}}}{tag}", {"id": f"{prefix}-{ident}"})
        element.text = text
        root.insert(place, element)
