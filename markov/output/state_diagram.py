"""From a chain to its state diagram: columns by failed units, formulas or values on the arrows, a legend."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from markov._version import __version__
from markov.errors import TooLarge
from markov.model import Model
from markov.output.diagram import ArrowKind, Condition, DiagramArrow, DiagramNode, Labels, LegendEntry, StateDiagram
from markov.output.wording import hours_words
from markov.rates import Factor
from markov.states import GeneratedSpace, StateSpace
from markov.states.space import Arrows, Mask
from markov.states.symmetry import raw_counts
from markov.states.timetable import Action

#: States beyond which no diagram is made, not even a folded one.
DRAWING_LIMIT = 20_000

#: Characters of a line in a box.
_LINE = 26


def state_diagram(model: Model, space: StateSpace, *, labels: Labels = "formulas") -> StateDiagram:
    """Return the state diagram of a chain.

    Parameters
    ----------
    model : Model
    space : StateSpace
        Its chain.
    labels : str
        Whether arrows carry formulas, values per hour, or both.

    Raises
    ------
    TooLarge
        More than `DRAWING_LIMIT` states.
    """
    if space.size > DRAWING_LIMIT:
        raise TooLarge(f"{space.size:,} states are too many to draw; at most {DRAWING_LIMIT:,}, folded by level")
    levels = _levels(space)
    leaves: set[int] = set()
    for arrows in _every(space):
        leaves.update(arrows.source[arrows.moving].tolist())
    starts = {state for state, _ in space.start}
    up = ups(space)
    merged = _merged(space)
    nodes = tuple(
        DiagramNode(
            number=state,
            lines=(*_wrapped(space.label(state)), *_merged_line(merged[state]), *_phase_line(model, up[:, state])),
            condition=condition(space, state, levels, up[0]),
            initial=state in starts,
            final=state not in leaves,
            level=int(levels[state]),
        )
        for state in range(space.size)
    )
    arrows_drawn = (*_arrows(model, space, levels, up[0]), *_instants(space))
    return StateDiagram(
        title=model.title or model.source_name,
        subtitle=_subtitle(model),
        nodes=nodes,
        arrows=arrows_drawn,
        legend=_legend(space) if isinstance(space, GeneratedSpace) else _parameters(model),
        remarks=_remarks(model, space),
        columns="failed units" if isinstance(space, GeneratedSpace) else "steps",
        labels=labels,
    )


def _every(space: StateSpace) -> tuple[Arrows, ...]:
    """Return the transitions of every phase and the jumps of every fixed instant."""
    return (*space.every_arrows, *space.jumps) if isinstance(space, GeneratedSpace) else (space.arrows,)


def ups(space: StateSpace) -> NDArray[np.bool_]:
    """Return in which states the system delivers, a row a phase."""
    if isinstance(space, GeneratedSpace):
        return np.array([regime.up(None) for regime in space.regimes])
    return space.up[None, :]


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


def condition(space: StateSpace, state: int, levels: NDArray[np.int64], up: Mask) -> Condition:
    """Return whether a state is up, degraded or down, in the phase that `up` belongs to."""
    if not up[state]:
        return "down"
    if isinstance(space, GeneratedSpace):
        return "degraded" if levels[state] else "up"
    return "degraded" if space.capacity(None)[state] < 1 else "up"


def _merged(space: StateSpace) -> NDArray[np.float64]:
    """Return how many states each one stands for, as alike groups have been merged, shape (n,)."""
    if not isinstance(space, GeneratedSpace):
        return np.ones(space.size)
    counts = np.asarray(raw_counts(space.columns, space.classes), np.float64)
    for chart, local in zip(space.charts, space.columns, strict=True):
        if chart.orbits is not None:
            counts = counts * chart.orbits[local]
    return counts


def _merged_line(count: float) -> tuple[str, ...]:
    return (f"merged: {round(count)} alike",) if count > 1.5 else ()


def _phase_line(model: Model, up: Sequence[bool] | NDArray[np.bool_]) -> Iterator[str]:
    """Tell the phases in which a state is up or down unlike in the first one."""
    named = [phase.name for phase in model.phases]
    other = [name for name, each in zip(named, up, strict=False) if bool(each) != bool(up[0])]
    if other:
        yield f"in {', '.join(other)}: {'down' if up[0] else 'up'}"


def _arrows(model: Model, space: StateSpace, levels: NDArray[np.int64], up: Mask) -> Iterator[DiagramArrow]:
    """Yield the transitions; those of some phases only name them."""
    phases = space.every_arrows if isinstance(space, GeneratedSpace) else (space.arrows,)
    by_steps = not isinstance(space, GeneratedSpace)
    held: dict[tuple[int, int, ArrowKind, int, int], list[int]] = {}
    for phase, arrows in enumerate(phases):
        for key, multiple in _summed(space, arrows, levels, up, by_steps=by_steps).items():
            held.setdefault((*key, multiple), []).append(phase)
    for (source, target, direction, rate, multiple), where in held.items():
        label = space.kinds.rates.rates[rate].formula(multiple)
        if len(where) < len(phases):
            label += f" in {', '.join(model.phases[phase].name for phase in where)}"
        value = float(space.kinds.rates.rates[rate].exact * multiple)
        # Values of different phases are no sum; they are told as formulas.
        yield DiagramArrow(source, target, label, direction, (value, value) if len(phases) == 1 else None)


def _summed(
    space: StateSpace, arrows: Arrows, levels: NDArray[np.int64], up: Mask, *, by_steps: bool
) -> dict[tuple[int, int, ArrowKind, int], int]:
    """Add up the multiples of transitions that have ends, direction and rate in common."""
    kinds = space.kinds.kinds
    multiples: dict[tuple[int, int, ArrowKind, int], int] = {}
    for source, target, kind, multiple in zip(
        arrows.source.tolist(), arrows.target.tolist(), arrows.kind.tolist(), arrows.multiple.tolist(), strict=True
    ):
        if source != target:
            direction = _direction(source, target, kinds[kind].cause, levels, up, by_steps=by_steps)
            key = (source, target, direction, kinds[kind].rate)
            multiples[key] = multiples.get(key, 0) + multiple
    return multiples


def _instants(space: StateSpace) -> Iterator[DiagramArrow]:
    """Yield what tests, visits and phase boundaries do at their fixed instants: what happens, with its chance."""
    if not isinstance(space, GeneratedSpace):
        return
    chances: dict[tuple[int, int], dict[str, dict[int, Fraction]]] = {}
    for number, jumps in enumerate(space.jumps):
        for source, target, kind, multiple in zip(
            jumps.source.tolist(), jumps.target.tolist(), jumps.kind.tolist(), jumps.multiple.tolist(), strict=True
        ):
            if source != target:
                found = space.kinds.kinds[kind]
                by_instant = chances.setdefault((source, target), {}).setdefault(_told(space, number), {})
                exact = space.kinds.rates.rates[found.rate].exact * multiple
                by_instant[number] = by_instant.get(number, Fraction(0)) + exact
    for (source, target), by_words in chances.items():
        for what, by_instant in by_words.items():
            chance = max(by_instant.values())
            label = f"at {what}" if chance == 1 else f"at {what}, chance {float(chance):.4g}"
            yield DiagramArrow(source, target, label, "instant", (float(chance), float(chance)))


def _told(space: GeneratedSpace, instant: int) -> str:
    """Name what happens at an instant as the spec does."""
    assert space.timetable is not None
    return ", ".join(_action_words(space.plan.model, action) for action in space.timetable.instants[instant])


def _action_words(model: Model, action: Action) -> str:
    if action.kind == "phase":
        return f"start of {model.phases[int(action.name)].name}"
    return {
        "visit": f"visit to {action.name}",
        "test_start": f"start of {action.name}",
        "test_end": f"end of {action.name}",
        "test": str(action.name),
    }[action.kind]


def _direction(
    source: int, target: int, cause: str, levels: NDArray[np.int64], up: Mask, *, by_steps: bool
) -> ArrowKind:
    """Tell a fault from a restoration: by the number of failed units, else by what becomes of delivery."""
    if up[source] != up[target] and (by_steps or levels[source] == levels[target]):
        return "fault" if up[source] else "restoration"
    if levels[source] != levels[target]:
        return "fault" if levels[target] > levels[source] else "restoration"
    return "fault" if " fails " in cause else "restoration"


def _legend(space: GeneratedSpace) -> tuple[LegendEntry, ...]:
    used = {
        space.kinds.kinds[kind].rate
        for arrows in space.every_arrows
        for kind in np.unique(arrows.kind[arrows.moving]).tolist()
    }
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


def _remarks(model: Model, space: StateSpace) -> tuple[str, ...]:
    """Tell what the arrows of a model with fixed instants leave to the reader: when the instants are."""
    if not isinstance(space, GeneratedSpace) or space.timetable is None:
        return ()
    told = [f"{name} every {hours_words(test.interval.exact)}" for name, test in model.tests.items()]
    told += [
        phase.name + (f" for {hours_words(phase.duration.exact)}" if phase.duration else "") for phase in model.phases
    ]
    listed = f" ({'; '.join(told)})" if told else ""
    remark = f"Dotted arrows are taken at fixed instants{listed}, at once and whatever the time spent in the state."
    return (remark,) if any(jumps.moving.any() for jumps in space.jumps) else (f"Fixed instants{listed}.",)


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
