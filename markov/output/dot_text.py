"""A state diagram as Graphviz source, to be laid out by the reader's own tools."""

from __future__ import annotations

from markov.output.composition import column_title
from markov.output.diagram import DiagramNode, StateDiagram, arrow_lines
from markov.output.folding import ranges
from markov.output.lettering import legible

_SHAPES = {
    "up": 'shape=box, style="rounded,filled", fillcolor="#ffffff", penwidth=0.8',
    "degraded": 'shape=octagon, style=filled, fillcolor="#f3f1e9", penwidth=0.9',
    "down": 'shape=box, style=filled, fillcolor="#dcdee2", penwidth=2.2',
    "mixed": "shape=box, style=dashed, penwidth=0.9",
}
_LINES = {
    "fault": "style=solid, arrowhead=normal",
    "restoration": 'style=dashed, arrowhead=empty, color="#2b5f86", fontcolor="#2b5f86"',
    "instant": 'style=dotted, arrowhead=tee, color="#6b4a1f", fontcolor="#6b4a1f"',
}


def dot_text(diagram: StateDiagram) -> str:
    """Return `diagram` in Graphviz's language, with plain labels, whatever its size.

    Columns are held by ranks that a hidden chain keeps in the order of the levels. Every arrow stands by itself, in
    its own direction.
    """
    levels = sorted({node.level for node in diagram.nodes})
    lines = [
        f"digraph {_quoted((diagram.title,))} {{",
        '  graph [rankdir=LR, charset="UTF-8", fontname="DejaVu Sans", fontsize=9, labelloc=b, labeljust=l,',
        f"    nodesep=0.3, ranksep=0.6, label={_quoted(_caption(diagram), align='l')}];",
        '  node [fontname="DejaVu Sans", fontsize=8, margin="0.08,0.05"];',
        '  edge [fontname="DejaVu Sans", fontsize=8, arrowsize=0.7];',
    ]
    for level in levels:
        lines.append(
            f"  level{level} [shape=plaintext, style=solid, label={_quoted((column_title(diagram, level),))}];"
        )
    if len(levels) > 1:
        lines.append("  " + " -> ".join(f"level{level}" for level in levels) + " [style=invis];")
    for node in diagram.nodes:
        looks = _SHAPES[node.condition] + (", peripheries=2" if node.final else "")
        lines.append(f"  s{node.number} [{looks}, label={_quoted(_node_lines(node))}];")
    for level in levels:
        members = "; ".join(f"s{node.number}" for node in diagram.nodes if node.level == level)
        lines.append(f"  {{ rank=same; level{level}; {members}; }}")
    for arrow in diagram.arrows:
        label = _quoted(arrow_lines([arrow], diagram.labels))
        lines.append(f"  s{arrow.source} -> s{arrow.target} [{_LINES[arrow.kind]}, label={label}];")
    lines.append("}")
    return "\n".join(lines) + "\n"


def _node_lines(node: DiagramNode) -> tuple[str, ...]:
    condition = ", ".join(
        word for word in ("initial" if node.initial else "", node.condition, "final" if node.final else "") if word
    )
    number = f"states {ranges(node.holds)}" if node.holds else str(node.number)
    return (f"{number} · {condition}", *node.lines)


def _caption(diagram: StateDiagram) -> tuple[str, ...]:
    legend = (f"{entry.symbol}: {entry.meaning}, {entry.value}" for entry in diagram.legend)
    key = (
        "rounded corners: up; cut corners: degraded; heavy line: down; double line: final; "
        "solid arrow: fault; broken arrow: restoration; dotted arrow: at a fixed instant"
    )
    return (diagram.title, *diagram.subtitle, key, *legend, *diagram.remarks)


def _quoted(lines: tuple[str, ...], *, align: str = "n") -> str:
    """Return a label of several lines as a quoted string.

    Graphviz reads backslashes as escapes and, in plain labels too, `&…;` as a character's name.
    """
    escaped = [legible(line).replace("\\", "\\\\").replace('"', '\\"').replace("&", "&amp;") for line in lines]
    if align == "n":
        return '"' + "\\n".join(escaped) + '"'
    return '"' + "".join(f"{line}\\{align}" for line in escaped) + '"'
