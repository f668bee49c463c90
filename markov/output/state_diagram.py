"""From a chain to its state diagram: columns by failed units, formulas on the arrows, a legend of the symbols."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from markov._version import __version__
from markov.errors import TooLarge
from markov.model import Model
from markov.output.diagram import ArrowKind, Condition, DiagramArrow, DiagramNode, LegendEntry, StateDiagram
from markov.output.drawing import STATE_LIMIT
from markov.rates import Factor
from markov.states import GeneratedSpace, StateSpace

#: States beyond which no diagram is made, not even a folded one.
DRAWING_LIMIT = 20_000

#: Characters of a line in a box.
_LINE = 26


def state_diagram(model: Model, space: StateSpace, *, values: bool = False) -> StateDiagram:
    """Return the state diagram of a chain.

    Parameters
    ----------
    model : Model
    space : StateSpace
        Its chain.
    values : bool
        Whether arrows carry the value per hour beside the formula.

    Raises
    ------
    TooLarge
        More than `DRAWING_LIMIT` states.
    """
    values = values and space.size <= STATE_LIMIT  # a folded arrow sums many, and a sum of equations is none
    if space.size > DRAWING_LIMIT:
        raise TooLarge(f"{space.size:,} states are too many to draw; at most {DRAWING_LIMIT:,}, folded by level")
    levels = _levels(space)
    moving = space.arrows.moving
    leaves = set(space.arrows.source[moving].tolist())
    starts = {state for state, _ in space.start}
    up = space.up
    nodes = tuple(
        DiagramNode(
            number=state,
            lines=_wrapped(space.label(state)),
            condition=_condition(space, state, levels, up),
            initial=state in starts,
            final=state not in leaves,
            level=int(levels[state]),
        )
        for state in range(space.size)
    )
    return StateDiagram(
        title=model.title or model.source_name,
        subtitle=_subtitle(model),
        nodes=nodes,
        arrows=_arrows(space, levels, up, values=values),
        legend=_legend(space) if isinstance(space, GeneratedSpace) else _parameters(model),
        columns="failed units" if isinstance(space, GeneratedSpace) else "steps",
    )


def _levels(space: StateSpace) -> NDArray[np.int64]:
    """Return the column of each state: failed units, or the distance from the start in a hand-written chain."""
    if isinstance(space, GeneratedSpace):
        return space.failed_items.astype(np.int64)
    levels = np.full(space.size, -1, np.int64)
    frontier = [state for state, _ in space.start]
    distance = 0
    while frontier:
        levels[frontier] = distance
        distance += 1
        after = np.unique(space.arrows.target[np.isin(space.arrows.source, frontier)])
        frontier = [int(state) for state in after if levels[state] < 0]
    levels[levels < 0] = distance
    return levels


def _condition(space: StateSpace, state: int, levels: NDArray[np.int64], up: NDArray[np.bool_]) -> Condition:
    if not up[state]:
        return "down"
    if isinstance(space, GeneratedSpace):
        return "degraded" if levels[state] else "up"
    return "degraded" if space.capacity(None)[state] < 1 else "up"


def _arrows(
    space: StateSpace, levels: NDArray[np.int64], up: NDArray[np.bool_], *, values: bool
) -> tuple[DiagramArrow, ...]:
    arrows, kinds = space.arrows, space.kinds
    by_steps = not isinstance(space, GeneratedSpace)
    multiples: dict[tuple[int, int, ArrowKind, int], int] = {}
    for source, target, kind, multiple in zip(
        arrows.source.tolist(), arrows.target.tolist(), arrows.kind.tolist(), arrows.multiple.tolist(), strict=True
    ):
        if source != target:
            direction = _direction(source, target, kinds.kinds[kind].cause, levels, up, by_steps=by_steps)
            key = (source, target, direction, kinds.kinds[kind].rate)
            multiples[key] = multiples.get(key, 0) + multiple
    found = []
    for (source, target, direction, rate), multiple in multiples.items():
        label = kinds.rates.rates[rate].formula(multiple)
        if values:
            label += f" = {float(kinds.rates.rates[rate].exact * multiple):.4g}/h"
        found.append(DiagramArrow(source, target, label, direction))
    return tuple(found)


def _direction(
    source: int, target: int, cause: str, levels: NDArray[np.int64], up: NDArray[np.bool_], *, by_steps: bool
) -> ArrowKind:
    """Tell a fault from a restoration: by the number of failed units, else by what becomes of delivery."""
    if up[source] != up[target] and (by_steps or levels[source] == levels[target]):
        return "fault" if up[source] else "restoration"
    if levels[source] != levels[target]:
        return "fault" if levels[target] > levels[source] else "restoration"
    return "fault" if " fails " in cause else "restoration"


def _legend(space: StateSpace) -> tuple[LegendEntry, ...]:
    used = {space.kinds.kinds[kind].rate for kind in np.unique(space.arrows.kind[space.arrows.moving]).tolist()}
    factors: dict[str, Factor] = {}
    for rate in sorted(used):
        for factor in space.kinds.rates.rates[rate].factors:
            base = factor.base or factor
            factors.setdefault(base.symbol, base)
    return tuple(_legend_entry(factor) for factor in factors.values())


def _parameters(model: Model) -> tuple[LegendEntry, ...]:
    """Return the parameters that the formulas of a hand-written chain name."""
    written = [each.rate or each.mean_time for each in model.transitions]
    used = {name for quantity in written if quantity is not None for name in quantity.parameters}
    units = {"time": " h", "rate": " /h", "share": ""}
    return tuple(
        LegendEntry(
            name,
            f"source: {parameter.source}" if parameter.source else "no source: unsupported",
            _plain(parameter.value.exact) + units[parameter.value.dimension],
        )
        for name, parameter in model.parameters.items()
        if name in used
    )


def _legend_entry(factor: Factor) -> LegendEntry:
    if factor.is_share:
        return LegendEntry(factor.symbol, factor.meaning, _plain(factor.exact))
    if factor.symbol.startswith("1/") and factor.exact:
        return LegendEntry(factor.symbol[2:], f"mean time: {factor.meaning}", f"{_plain(1 / factor.exact)} h")
    return LegendEntry(factor.symbol, factor.meaning, f"{_plain(factor.exact)} /h")


def _plain(value: Fraction) -> str:
    return f"{float(value):.6g}"


def _subtitle(model: Model) -> tuple[str, ...]:
    lines = []
    if model.reference:
        told = [f"{key} {value}" for key, value in model.reference.items()]
        lines.append(", ".join(told))
    lines.append(f"spec {model.sha256[:12]}, markov {__version__}")
    return tuple(lines)


def _wrapped(label: str) -> tuple[str, ...]:
    """Break a state's name at its separators into lines of moderate length."""
    lines: list[str] = []
    for part in label.replace("; ", ";\n").replace(", ", ",\n").split("\n"):
        if lines and len(lines[-1]) + 1 + len(part) <= _LINE:
            lines[-1] += f" {part}"
        else:
            lines.append(part)
    return tuple(lines)
