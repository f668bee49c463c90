"""A picture with parts to click, made fit to stand inside a page among others."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from html import escape
from xml.etree import ElementTree

from markov.errors import DrawingError

_SVG = "{http://www.w3.org/2000/svg}"
_DRAWN = frozenset(
    ("svg", "g", "path", "rect", "circle", "ellipse", "line", "polyline", "polygon", "text", "tspan", "title", "desc")
)
_LEFT_OUT = frozenset(("title", "desc"))  # the page says it as a label; a browser would show them as a passing hint


def inline(svg: str, *, prefix: str, alt: str, style: str, targets: Mapping[str, str]) -> str | None:
    """Return `svg` as part of an HTML page, its parts to click as links; None if it has none.

    Parameters
    ----------
    svg
        A whole SVG document; an element with ``data-target`` becomes a link to that anchor.
    prefix
        Put before every identity in it, for another picture may use the same.
    alt, style
        What it shows; how large it stands.
    targets
        The anchors of the page, and what each is called; parts that lead elsewhere become plain.

    Raises
    ------
    DrawingError
        It is no XML, or holds what cannot stand in a page: scripts, style sheets, anything from outside.
    """
    if "data-target" not in svg:
        return None
    try:
        root = ElementTree.fromstring(svg)
    except ElementTree.ParseError as error:
        raise DrawingError(f"the picture {alt[:60]!r} is no XML: {error}") from error
    root.attrib.pop("aria-labelledby", None)
    root.attrib.update({"role": "group", "aria-label": alt, "style": style})
    if "viewBox" in root.attrib:
        root.attrib.pop("width", None)
        root.attrib.pop("height", None)
    return "".join(_element(root, prefix, targets)).rstrip()


def _element(element: ElementTree.Element, prefix: str, targets: Mapping[str, str]) -> Iterator[str]:
    name = element.tag.removeprefix(_SVG)
    if name not in _DRAWN:
        raise DrawingError(f"a picture with parts to click holds <{name}>; expected only {', '.join(sorted(_DRAWN))}")
    if name in _LEFT_OUT:
        yield escape(element.tail or "", quote=False)
        return
    attributes = dict(_attributes(element, prefix))
    target = attributes.pop("data-target", "")
    linked = target in targets
    if linked:
        label = escape(_label(element) or targets[target])
        yield f'<a href="#{target}" data-target="{target}" aria-label="{label}">'
    yield f"<{name}" + "".join(f' {key}="{escape(value)}"' for key, value in attributes.items()) + ">"
    yield escape(element.text or "", quote=False)
    for child in element:
        yield from _element(child, prefix, targets)
    yield f"</{name}>"
    if linked:
        yield "</a>"
    yield escape(element.tail or "", quote=False)


def _attributes(element: ElementTree.Element, prefix: str) -> Iterator[tuple[str, str]]:
    for key, value in element.attrib.items():
        if key.startswith(("on", "{")) or key == "href" or "url(" in value:
            raise DrawingError(
                f"a picture with parts to click has {key}={value[:60]!r}; expected shapes and words alone"
            )
        yield key, prefix + value if key == "id" else value


def _label(element: ElementTree.Element) -> str:
    """Return the words drawn in a part."""
    words = (" ".join(text.itertext()).strip() for text in element.iter(f"{_SVG}text"))
    return " ".join(word for word in words if word)
