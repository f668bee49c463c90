"""The picture of the dominant ways to failure: their states and arrows, and everything else as one box."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from fractions import Fraction

from markov.evaluation.failure_paths import FailurePath, FailurePaths, failure_paths
from markov.model import Model
from markov.output.diagram import DiagramArrow, DiagramNode, Labels, LegendEntry, StateDiagram
from markov.output.state_diagram import state_diagram
from markov.states import StateSpace

MOST_PATHS = 60
"""Ways to failure in one diagram."""
_LISTED = 12


def path_diagram(
    model: Model,
    space: StateSpace,
    share: Fraction | float = Fraction(95, 100),
    *,
    labels: Labels = "formulas",
    most: int = MOST_PATHS,
) -> StateDiagram:
    """Return the diagram of the ways to failure that together make a share of all failures.

    Parameters
    ----------
    model : Model
    space : StateSpace
        Its chain.
    share : Fraction or float
        Above 0, at most 1.
    labels : str
        What stands on the arrows.
    most : int
        Ways that are drawn at most.  Where more would be needed, the picture says what its ways make.

    Raises
    ------
    IllPosed
        The system cannot fail, or there are fixed instants.
    TooLarge
        More states than any diagram may have.
    """
    found = failure_paths(model, space, share)
    shown = found.first(float(share), most)
    every = state_diagram(model, space, labels=labels)
    on_path = {state for path in shown.paths for state in path.states}
    steps = {step for path in shown.paths for step in zip(path.states, path.states[1:], strict=False)}
    arrows = [arrow for arrow in every.arrows if (arrow.source, arrow.target) in steps]
    nodes = [node for node in every.nodes if node.number in on_path]
    if not any(node.initial for node in nodes):  # the system starts elsewhere and gets to the ways drawn
        nodes += [node for node in every.nodes if node.initial]
    rest = _rest(every, nodes, shown)
    if rest is not None:
        begin = next((path.states[0] for path in shown.paths), nodes[0].number)
        arrows.append(DiagramArrow(begin, rest.number, f"all others: {percent(1 - shown.covered)}", "fault"))
        nodes.append(rest)
    return replace(
        every,
        nodes=tuple(_with_share(node, shown) for node in nodes),
        arrows=tuple(arrows),
        legend=_used(every, arrows),
        remarks=(*_told(every, shown, arrows, float(share)), *every.remarks),
        alt_text=_described(shown, len(nodes)),
    )


def _rest(every: StateDiagram, nodes: list[DiagramNode], shown: FailurePaths) -> DiagramNode | None:
    """Return the box for every state that is on no way drawn; None where there is none, or nothing is left."""
    drawn = {node.number for node in nodes}
    others = [node for node in every.nodes if node.number not in drawn]
    if not others:
        return None
    level = max(node.level for node in nodes)
    line = f"{percent(1 - shown.covered)} of {_BASES[shown.basis]}"
    return DiagramNode(
        others[0].number,
        ("on no way drawn", line),
        "mixed",
        level=level,
        holds=tuple(node.number for node in others) if len(others) > 1 else (),
    )


_BASES = {"failure frequency": "the failure frequency", "first failures": "all first failures"}


def percent(share: float) -> str:
    """Return a share as a percentage with three digits, never rounded up to the whole."""
    share = max(share, 0.0)
    if 0.99949 < share < 1:
        return f"{100 * share:.6f}".rstrip("0") + "%" if share < 0.99999999 else "more than 99.999999%"
    return f"{100 * share:.3g}%"


def _with_share(node: DiagramNode, shown: FailurePaths) -> DiagramNode:
    """Add to a down state which share of all failures the ways drawn bring to it."""
    share = sum(path.share for path in shown.paths if path.states[-1] == node.number)
    return replace(node, lines=(*node.lines, f"{percent(share)} of failures")) if share else node


def way_words(path: FailurePath) -> str:
    """Return a way as the numbers of its states: ``0→1→2``."""
    return "→".join(map(str, path.states))


def _used(every: StateDiagram, arrows: list[DiagramArrow]) -> tuple[LegendEntry, ...]:
    return tuple(entry for entry in every.legend if any(entry.symbol in arrow.label for arrow in arrows))


def _told(every: StateDiagram, shown: FailurePaths, arrows: list[DiagramArrow], asked: float) -> Iterator[str]:
    basis = _BASES[shown.basis]
    bound = " (an estimate)" if shown.least is None else f" (proven: at least {percent(shown.least)})"
    unit = "/h" if shown.basis == "failure frequency" else ""
    short = f"; {percent(asked)} was asked for, more ways than can be drawn" if shown.exhausted else ""
    yield (
        f"The {len(shown.paths)} most frequent ways from the start to failure. Together they make "
        f"{percent(shown.covered)} of {basis}, {shown.total.value:.4g}{unit}{bound}{short}. "
        "Detours that lead back are counted with the way."
    )
    listed = shown.paths[:_LISTED]
    more = f"; and {len(shown.paths) - _LISTED} more" if len(shown.paths) > _LISTED else ""
    yield "Ways: " + ";  ".join(f"{way_words(path)}: {percent(path.share)}" for path in listed) + f"{more}."
    hidden = len(every.arrows) - sum(arrow in every.arrows for arrow in arrows)
    if hidden:
        yield f"{hidden} of {len(every.arrows)} arrows, restorations among them, are on no way drawn and not shown."


def _described(shown: FailurePaths, boxes: int) -> str:
    ways = "; ".join(f"by states {', '.join(map(str, path.states))}: {percent(path.share)}" for path in shown.paths)
    return (
        f"Dominant ways to failure, {boxes} boxes from left to right. {percent(shown.covered)} of "
        f"{_BASES[shown.basis]} come by the ways drawn: {ways}."
    )
