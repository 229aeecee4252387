"""Reading back the pictures that the site draws."""

from __future__ import annotations

import re
from xml.etree import ElementTree as ET

_PLACE = re.compile(r"[Mm]\s*(-?[\d.]+)")


def parsed(svg: str) -> ET.Element:
    """The picture as a tree; raises ParseError where it is not well-formed."""
    return ET.fromstring(svg)


def tagged(root: ET.Element, name: str) -> list[ET.Element]:
    return [element for element in root.iter() if element.tag.rpartition("}")[2] == name]


def classed(root: ET.Element, *names: str) -> list[ET.Element]:
    """Elements that carry all of these classes."""
    return [element for element in root.iter() if set(names) <= set(element.get("class", "").split())]


def starts(path: ET.Element) -> list[float]:
    """The x position [px] at which each stroke of a path begins."""
    return [float(place) for place in _PLACE.findall(path.get("d", ""))]


def title(root: ET.Element) -> str:
    return tagged(root, "title")[0].text or ""


def fits_the_policy(root: ET.Element) -> bool:
    """True where nothing in the picture is refused by a content policy of 'self' without inline style or script."""
    names = {element.tag.rpartition("}")[2] for element in root.iter()}
    attributes = {name for element in root.iter() for name in element.attrib}
    return not names & {"style", "script"} and not any(name == "style" or name.startswith("on") for name in attributes)
