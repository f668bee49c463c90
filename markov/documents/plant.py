"""The plant of a report: what has to deliver, what it consists of, who keeps it up."""

from __future__ import annotations

from collections.abc import Iterator

from markov.documents.cells import NONE, code, counted, joined, listed, quantity_words, row
from markov.documents.opening import criterion_words
from markov.documents.report_pictures import structure_figures
from markov.documents.tree import Block, Column, Paragraph, Row, Section, Span, Table, Text, plain
from markov.model import Group, Model, Unit

_ARRANGED = {
    "active": "all good members carry duty",
    "hot_standby": "hot standby",
    "warm_standby": "warm standby",
    "cold_standby": "cold standby",
}
_OUTCOMES = {
    "until_repair": "out until a repair",
    "manual_takeover": "someone starts a standby",
    "restart": "all restarted as good",
    "restart_without_failed": "the good ones restarted",
    "all_failed": "all units fail",
    "lost": "down for good",
}


def plant_section(model: Model) -> Section:
    """Return the section on the plant."""
    if model.explicit:
        return Section("The system", (Paragraph(plain(_handwritten(model))),), "system")
    blocks: list[Block] = [Paragraph(_criterion(model))]
    blocks += structure_figures(model)
    if model.groups:
        blocks.append(_groups(model))
    if model.units:
        blocks.append(_units(model))
    if model.common_causes:
        blocks.append(_causes(model))
    if model.notes:
        blocks.append(Paragraph((Span("Notes of the spec: "), Span(model.notes))))
    return Section("The system", tuple(blocks), "system")


def _handwritten(model: Model) -> str:
    return (
        f"The chain is written by hand: {counted(len(model.states), 'state')} and "
        f"{counted(len(model.transitions), 'transition')} stand in the spec as they are listed here. Whether they "
        "describe the plant, nothing in this report can tell."
    )


def _criterion(model: Model) -> Text:
    told = [Span("The system delivers while this is up: "), Span("nothing named")]
    if model.system is not None:
        told[1] = Span(criterion_words(model.system), "strong")
    told.append(Span(". "))
    changed = [phase.name for phase in model.phases if phase.system is not None]
    if changed:
        told.append(Span(f"Another criterion holds in {listed(changed)}. "))
    return tuple(told)


def _groups(model: Model) -> Table:
    columns = (
        Column("Group", width=1.1),
        Column("Members, by rank", width=1.5),
        Column("Required", "right", 0.5),
        Column("Arrangement", width=1.2),
        Column("Coverage", width=0.8),
        Column("Switchover", width=1.7),
    )
    rows = tuple(_group(name, group) for name, group in model.groups.items())
    return Table("groups", "Groups of units that stand in for each other", columns, rows, "groups")


def _group(name: str, group: Group) -> Row:
    members = joined(
        (Span(member.name, "code"),) if member.is_group else (Span(f"{member.count} × "), Span(member.name, "code"))
        for member in group.members
    )
    arranged = _ARRANGED["active" if group.is_active else str(group.redundancy)]
    if group.dormancy_factor is not None:
        arranged += f", waiting at {quantity_words(group.dormancy_factor)} of the duty rate"
    coverage = joined(code(quantity_words(each)) for each in group.coverage_list)
    return row(code(name), members, str(group.required), arranged, coverage, "; ".join(_switchover(group)) or NONE)


def _switchover(group: Group) -> Iterator[str]:
    if group.takeover_time is not None:
        yield f"takes {quantity_words(group.takeover_time)}"
    if any(each.complement for each in group.coverage_list):
        after = "" if group.outcome_time is None else f" after {quantity_words(group.outcome_time)}"
        yield f"uncovered: {_OUTCOMES.get(group.outcome, group.outcome)}{after}"
    if group.switch is not None:
        yield "the switch has faults of its own"
    if group.return_to_preferred:
        yield "duty returns to the member listed first"
    if group.load_sharing is not None:
        yield "units share the load"


def _units(model: Model) -> Table:
    columns = (
        Column("Kind of unit", width=1.2),
        Column("Items", "right", 0.4),
        Column("Failure", width=1.4),
        Column("Repair", width=1.4),
        Column("Repaired by", width=0.9),
        Column("Known at once", width=0.9),
        Column("Start failure", width=0.8),
    )
    rows = tuple(
        row(
            code(name),
            str(sum(place.count for place in model.placements if place.unit == name)),
            code(quantity_words(unit.failure)),
            _repair(unit),
            listed([pool for pool, crew in model.crews.items() if name in crew.repairs]),
            plain("every fault") if unit.detected is None else code(quantity_words(unit.detected)),
            plain(NONE) if unit.start_failure is None else code(quantity_words(unit.start_failure)),
        )
        for name, unit in model.units.items()
    )
    return Table("units", "Kinds of unit", columns, rows, "units")


def _repair(unit: Unit) -> Text:
    if unit.repair is None:
        return plain("by mode" if any(mode.repair is not None for mode in unit.modes()) else "none")
    stages = f", {unit.repair_stages} stages" if unit.repair_stages > 1 else ""
    return (Span(quantity_words(unit.repair), "code"), *((Span(stages),) if stages else ()))


def _causes(model: Model) -> Table:
    columns = (Column("Common cause"), Column("Strikes", width=1.5), Column("Shares", width=1.5), Column("Exposed"))
    rows = []
    for name, cause in model.common_causes.items():
        given = {"β": (cause.beta,) if cause.beta else (), "β, γ, …": cause.greek_letters, "α": cause.alpha_factors}
        shares = [
            f"{key} = {', '.join(quantity_words(each) for each in values)}" for key, values in given.items() if values
        ]
        exposed = "all units" if cause.exposed == "all" else "units on duty"
        rows.append(row(code(name), joined(code(each) for each in cause.members), "; ".join(shares), exposed))
    return Table("common-causes", "Common causes", columns, tuple(rows), "common-causes")
