"""The model as it is in one phase of a mission."""

from __future__ import annotations

from dataclasses import replace

from markov.model import Group, Model
from markov.states.timetable import Action, Step, Timetable


def model_in_phase(model: Model, number: int) -> Model:
    """Return the model with the structure of success and the numbers required in one phase."""
    if not model.phases:
        return model
    phase = model.phases[number]
    changed: dict[str, object] = {}
    if phase.system is not None:
        changed["system"] = phase.system
    if phase.required:
        changed["groups"] = {
            name: _requiring(group, phase.required[name]) if name in phase.required else group
            for name, group in model.groups.items()
        }
    return model.model_copy(update=changed) if changed else model


def _requiring(group: Group, required: int) -> Group:
    redundancy = "active" if group.is_active else group.redundancy
    return group.model_copy(update={"required": required, "redundancy": redundancy})


def by_phase(table: Timetable | None) -> tuple[Timetable | None, tuple[int, ...]]:
    """Tell instants apart by the phase that they lead into.

    Returns
    -------
    table : Timetable or None
    phases : tuple of int
        Of each instant of the table, the phase that holds from then on.
    """
    if table is None:
        return None, ()
    steps = (*table.prefix, *table.cycle)
    after = [step.regime for step in steps[1:]]
    after.append(table.cycle[0].regime if table.cycle else steps[-1].regime)
    numbers: dict[tuple[tuple[Action, ...], int], int] = {}
    renumbered: list[Step] = []
    for step, phase in zip(steps, after, strict=True):
        if step.instant is None:
            renumbered.append(step)
            continue
        actions = table.instants[step.instant]
        begun = [int(action.name) for action in actions if action.kind == "phase"]
        key = actions, begun[-1] if begun else phase
        renumbered.append(replace(step, instant=numbers.setdefault(key, len(numbers))))
    cut = len(table.prefix)
    return (
        Timetable(tuple(renumbered[:cut]), tuple(renumbered[cut:]), tuple(actions for actions, _ in numbers)),
        tuple(phase for _, phase in numbers),
    )
