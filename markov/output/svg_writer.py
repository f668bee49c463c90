"""A picture as SVG text."""

from __future__ import annotations

import hashlib
from itertools import groupby
from xml.sax.saxutils import escape

from markov.output.picture import Picture, Shape, Words

_FONTS = "DejaVu Sans, Verdana, Noto Sans, sans-serif"


def svg_text(picture: Picture) -> str:
    """Return `picture` as an SVG document, its title and description marked up for readers who do not see it.

    The words stay text. Their widths were reckoned for DejaVu Sans, which runs wider than the faces that may stand in.
    Marks that follow each other and have the same target stand in one element that bears it as ``data-target``.
    """
    parts = (
        (target, "\n".join(map(_mark, marks))) for target, marks in groupby(picture.marks, lambda mark: mark.target)
    )
    body = "\n".join(f'<g data-target="{escape(target)}">\n{held}\n</g>' if target else held for target, held in parts)
    # Names for the two texts, the same on every run, unlike those of another diagram on the same page.
    mark = "d" + hashlib.sha256(f"{picture.title}\0{picture.description}\0{body}".encode()).hexdigest()[:10]
    width, height = _number(picture.width), _number(picture.height)
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width}pt" height="{height}pt" viewBox="0 0 {width} {height}"'
        f' role="img" aria-labelledby="{mark}-title {mark}-desc" font-family="{_FONTS}">\n'
        f'<title id="{mark}-title">{escape(picture.title)}</title>\n'
        f'<desc id="{mark}-desc">{escape(picture.description)}</desc>\n'
        f"{body}\n</svg>\n"
    )


def _mark(mark: Shape | Words) -> str:
    return _shape(mark) if isinstance(mark, Shape) else _words(mark)


def _shape(shape: Shape) -> str:
    path = " ".join(step.kind + " ".join(f"{_number(x)} {_number(y)}" for x, y in step.points) for step in shape.steps)
    looks = f' fill="{shape.fill or "none"}"'
    if shape.line is not None:
        looks += f' stroke="{shape.line}" stroke-width="{_number(shape.width)}"'
        if shape.dashes:
            looks += f' stroke-dasharray="{" ".join(_number(dash) for dash in shape.dashes)}"'
    return f'<path d="{path}"{looks}/>'


def _words(words: Words) -> str:
    looks = f'x="{_number(words.x)}" y="{_number(words.y)}" font-size="{_number(words.size)}" fill="{words.colour}"'
    if words.anchor != "start":
        looks += f' text-anchor="{words.anchor}"'
    if words.bold:
        looks += ' font-weight="bold"'
    return f"<text {looks}>{escape(words.text)}</text>"


def _number(value: float) -> str:
    text = f"{value:.2f}".rstrip("0").rstrip(".")
    return "0" if text == "-0" else text
