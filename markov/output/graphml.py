"""A state diagram as GraphML, for programs that read graphs."""

from __future__ import annotations

from markov.output.diagram import StateDiagram
from markov.output.lettering import legible


def graphml_text(diagram: StateDiagram) -> str:
    """Return `diagram` as a GraphML document, whatever its size: a node a state, an edge an arrow.

    Nodes are named by the numbers of the states and carry ``label``, ``condition``, ``initial``, ``final`` and
    ``level`` (failed units, or steps from the start); edges carry ``label`` (the formula), ``kind`` and ``value`` (per
    hour, or a chance for an instant).  The graph carries title, subtitle and the legend.
    """
    import networkx  # late: a tenth of a second

    graph = networkx.MultiDiGraph(
        title=legible(diagram.title),
        subtitle=legible("; ".join(diagram.subtitle)),
        legend=legible("; ".join(f"{entry.symbol}: {entry.meaning}, {entry.value}" for entry in diagram.legend)),
    )
    for node in diagram.nodes:
        graph.add_node(
            str(node.number),
            label=legible(" ".join(node.lines)),
            condition=node.condition,
            initial=node.initial,
            final=node.final,
            level=node.level,
        )
    for number, arrow in enumerate(diagram.arrows):
        told = {"label": legible(arrow.label), "kind": arrow.kind}
        value = {} if arrow.value is None else {"value": arrow.value[0]}
        graph.add_edge(str(arrow.source), str(arrow.target), key=f"a{number}", **told, **value)
    return "\n".join(networkx.generate_graphml(graph, named_key_ids=True)) + "\n"
