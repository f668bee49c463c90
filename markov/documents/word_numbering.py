"""The numberings of a Word document: of headings, of lists."""

from __future__ import annotations

NAMESPACES = (
    'xmlns:w="http://schemas.openxmlformats.org/wordprocessingml/2006/main" '
    'xmlns:r="http://schemas.openxmlformats.org/officeDocument/2006/relationships" '
    'xmlns:wp="http://schemas.openxmlformats.org/drawingml/2006/wordprocessingDrawing" '
    'xmlns:a="http://schemas.openxmlformats.org/drawingml/2006/main" '
    'xmlns:pic="http://schemas.openxmlformats.org/drawingml/2006/picture"'
)
HEADINGS, BULLETS, FIRST_LIST = 1, 2, 3
"""The numbering of the headings, that of all plain lists, the first of those that each belong to one list."""
_DEEPEST = 6
_FIRST_INDENT, _FURTHER_INDENT = 480, 170


def numbering(lists: int) -> str:
    """Return the numbering part for a document with so many numbered lists, each of which begins at 1."""
    headings = "".join(_heading(level) for level in range(_DEEPEST))
    own = "".join(
        f'<w:num w:numId="{FIRST_LIST + place}"><w:abstractNumId w:val="{FIRST_LIST}"/>'
        '<w:lvlOverride w:ilvl="0"><w:startOverride w:val="1"/></w:lvlOverride></w:num>'
        for place in range(lists)
    )
    return (
        f"<w:numbering {NAMESPACES}>"
        + _pattern(HEADINGS, "multilevel", headings)
        + _pattern(BULLETS, "singleLevel", _list_level("bullet", "•"))
        + _pattern(FIRST_LIST, "singleLevel", _list_level("decimal", "%1."))
        + "".join(
            f'<w:num w:numId="{number}"><w:abstractNumId w:val="{number}"/></w:num>' for number in (HEADINGS, BULLETS)
        )
        + f"{own}</w:numbering>"
    )


def _pattern(number: int, kind: str, levels: str) -> str:
    return f'<w:abstractNum w:abstractNumId="{number}"><w:multiLevelType w:val="{kind}"/>{levels}</w:abstractNum>'


def _heading(level: int) -> str:
    indent = _FIRST_INDENT + _FURTHER_INDENT * level
    text = ".".join(f"%{part + 1}" for part in range(level + 1))
    return (
        f'<w:lvl w:ilvl="{level}"><w:start w:val="1"/><w:numFmt w:val="decimal"/><w:pStyle w:val="Heading{level + 1}"/>'
        f'<w:lvlText w:val="{text}"/><w:lvlJc w:val="left"/>'
        f'<w:pPr><w:ind w:left="{indent}" w:hanging="{indent}"/></w:pPr></w:lvl>'
    )


def _list_level(kind: str, text: str) -> str:
    return (
        f'<w:lvl w:ilvl="0"><w:start w:val="1"/><w:numFmt w:val="{kind}"/><w:lvlText w:val="{text}"/>'
        '<w:lvlJc w:val="left"/><w:pPr><w:ind w:left="400" w:hanging="300"/></w:pPr></w:lvl>'
    )
