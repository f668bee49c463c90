"""The conditions of use: what the plant has to be given for the numbers of a report to hold."""

from __future__ import annotations

from collections.abc import Iterator

from markov.documents.cells import code, counted, exact_words, listed, quantity_words, row
from markov.documents.parameters import line_words
from markov.documents.spec_lines import Path_
from markov.documents.tree import Column, Paragraph, Section, Table, plain
from markov.documents.written_places import WrittenPlaces
from markov.model import Crew, Model, Phase, ProofTest, SparesPool
from markov.model.deferral import RepairAtFailed, RepairAtVisits

#: What it is about, what it has to be, where it stands.
_Condition = tuple[str, str, Path_]


def conditions_section(model: Model, places: WrittenPlaces) -> Section:
    """Return the section on the conditions of use."""
    rows = tuple(
        row(about, code(told), line_words(places, path), anchor=f"condition-{number}")
        for number, (about, told, path) in enumerate(_conditions(model), 1)
    )
    columns = (
        Column("Condition", width=1.2),
        Column("What the numbers take for granted", width=3.0),
        Column("Line", "right", 0.4),
    )
    return Section(
        "Conditions of use",
        (
            Paragraph(
                plain(
                    "The numbers hold for a plant that is run, tested, manned and supplied in this way. Where one of "
                    "these is to change, the spec has to change first."
                )
            ),
            Table("conditions", "Conditions of use", columns, rows, "conditions"),
        ),
        "conditions-of-use",
    )


def _conditions(model: Model) -> Iterator[_Condition]:
    if model.mission is not None:
        time = model.mission.time
        yield "mission", f"{time.text} ({exact_words(time.exact)} h)", ("mission", "time")
    else:
        yield "mission", "no mission time is stated: values at a time are those of targets alone", ("mission",)
    yield "year", f"{exact_words(model.year_hours)} h wherever a year or a month is named", ("year",)
    for name, crew in model.crews.items():
        yield f"crew pool {name}", _crew(crew), ("crews", name)
    for name, pool in model.spares.items():
        yield f"spares pool {name}", _spares(pool), ("spares", name)
    for name, test in model.tests.items():
        yield f"test {name}", _test(test), ("tests", name)
    for name, group in model.groups.items():
        when = group.repair_when
        if isinstance(when, RepairAtVisits):
            yield (
                f"repair of {name}",
                f"begins at visits, one every {quantity_words(when.every)}",
                ("groups", name, "repair_when"),
            )
        elif isinstance(when, RepairAtFailed):
            yield (
                f"repair of {name}",
                f"begins once {when.failed} are known to be failed",
                ("groups", name, "repair_when"),
            )
        elif when == "system_down":
            yield f"repair of {name}", "begins once the system is down", ("groups", name, "repair_when")
        if group.offline_repair:
            yield f"repair of {name}", "stops the whole group while it lasts", ("groups", name, "offline_repair")
    for number, phase in enumerate(model.phases):
        yield f"phase {phase.name}", _phase(phase), ("phases", number)
    if model.demand is not None:
        yield "demands", quantity_words(model.demand.rate), ("demand", "rate")
    if model.restoration is not None:
        told = f"once the system is down, all is restored within a mean of {quantity_words(model.restoration.time)}"
        yield "restoration", told, ("restoration",)
    if model.while_down != "continue":
        told = {"stop": "no unit fails", "standby_rate": "units fail at their standby rate"}[model.while_down]
        yield "while the system is down", told, ("while_down",)
    for name, faults in model.initial.items():
        yield f"at time zero, {name}", f"{faults.failed} failed, {faults.hidden} with a hidden fault", ("initial", name)


def _crew(crew: Crew) -> str:
    told = [f"{counted(crew.size, 'crew')} for {listed(crew.repairs)}"]
    if len(crew.repairs) > 1:
        if crew.queue == "first_come":
            told.append("first come, first served")
        else:
            told.append(f"urgent in this order: {', '.join(crew.order)}")
            told.append("a repair gives way to a more urgent one" if crew.preemptive else "a repair begun is finished")
    return "; ".join(told)


def _spares(pool: SparesPool) -> str:
    told = [f"{counted(pool.stock, 'spare')} in stock at the start for {listed(pool.for_)}"]
    told.append(f"lead time {quantity_words(pool.lead_time)}")
    told.append("ordered at every fault" if pool.order == "when_failed" else "ordered when one leaves the stock")
    if pool.batch > 1:
        told.append(f"in batches of {pool.batch}")
    if pool.swap_time is not None:
        told.append(f"exchange {quantity_words(pool.swap_time)}")
    return "; ".join(told)


def _test(test: ProofTest) -> str:
    told = [f"every {quantity_words(test.interval)} of {listed(test.of)}"]
    if test.first_at is not None:
        told.append(f"first at {quantity_words(test.first_at)}")
    told.append(
        "finds every hidden fault"
        if test.coverage is None
        else f"finds {quantity_words(test.coverage)} of hidden faults"
    )
    if test.lasts and test.duration is not None:
        told.append(f"lasts {quantity_words(test.duration)}, {'in' if test.in_service else 'out of'} service")
    if test.left_out is not None:
        told.append(f"leaves a unit out with the chance {quantity_words(test.left_out)}")
    if test.causes_failure is not None:
        told.append(f"makes a unit fail with the chance {quantity_words(test.causes_failure)}")
    return "; ".join(told)


def _phase(phase: Phase) -> str:
    told = ["goes on for ever" if phase.duration is None else f"lasts {quantity_words(phase.duration)}"]
    if phase.rate_factors:
        told.append(
            "rates " + ", ".join(f"{name} × {quantity_words(factor)}" for name, factor in phase.rate_factors.items())
        )
    if phase.required:
        told.append("required " + ", ".join(f"{number} of {name}" for name, number in phase.required.items()))
    if phase.system is not None:
        told.append("has a success criterion of its own")
    if not phase.repair:
        told.append("no repair")
    if phase.repeat:
        told.append("then the phases begin again")
    return "; ".join(told)
