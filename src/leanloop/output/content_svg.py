"""SVG pictures made fit to stand inside a page."""

from __future__ import annotations

import re
from xml.etree import ElementTree

SVG = "{http://www.w3.org/2000/svg}"
NEVER = ("metadata", "script", "foreignObject")  # what may lead outside the page, or run


def inline(svg: str, name: str, label: str) -> str:
    """Turn an SVG file into an element of a page.

    Declarations, comments, metadata and elements of other languages are left out, as is what leads outside the
    picture. Its identifiers and style rules are tied to a name, so that several pictures on a page keep apart.

    Parameters
    ----------
    svg : str
        A whole file, or an `svg` element.
    name : str
        Identifier of the picture, given to one picture of a page; the picture's own identifiers begin with it.
    label : str
        What the picture shows, for those who do not see it.

    Returns
    -------
    str
        An `svg` element without name spaces, as HTML has it.

    Raises
    ------
    ValueError
        Where the text is no SVG.
    """
    try:
        root = ElementTree.fromstring(svg.strip().encode())
    except ElementTree.ParseError as error:
        raise ValueError(f"picture '{label}' is no SVG: {error}") from error
    if root.tag.removeprefix(SVG) != "svg":
        raise ValueError(f"picture '{label}' is no SVG: it starts with '{root.tag}'")
    _clean(root, name)
    root.attrib |= {"id": name, "role": "img", "aria-label": label}
    root.tail = None
    return ElementTree.tostring(root, encoding="unicode")


def _clean(element: ElementTree.Element, name: str) -> None:
    element.tag = element.tag.removeprefix(SVG)
    for child in list(element):
        tag = child.tag.removeprefix(SVG)
        if tag in NEVER or "{" in tag:
            element.remove(child)
        else:
            _clean(child, name)
    found = {}
    for key, value in element.attrib.items():
        key = key.rpartition("}")[2]  # xlink:href, which is plain href now
        if key == "id":
            found[key] = f"{name}-{value}"
        elif key == "href":
            if value.startswith("#"):
                found[key] = f"#{name}-{value[1:]}"
            elif value.startswith("data:image/"):
                found[key] = value
        elif not key.startswith("on"):
            found[key] = _references(value, name)
    element.attrib.clear()
    element.attrib.update(found)
    if element.tag == "style":
        element.text = _rules(element.text or "", name)


def _references(text: str, name: str) -> str:
    """Lead references inside the picture to its identifiers on the page, and those outside nowhere."""
    text = re.sub(r"url\(\s*['\"]?#([^)'\"]*)['\"]?\s*\)", rf"url(#{name}-\1)", text)
    return re.sub(r"url\((?!#)[^)]*\)", "none", text)


def _rules(text: str, name: str) -> str:
    """Tie style rules to a picture: a rule for everything would be one for the whole page."""
    found = []
    for selectors, body in re.findall(r"([^{}@;]+)\{([^{}]*)\}", text):
        tied = ", ".join(f"#{name} {selector.strip()}" for selector in selectors.split(","))
        found.append(f"{tied} {{{_references(body, name)}}}")
    return "\n".join(found)
