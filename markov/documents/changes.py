"""Two specs, or a hand-written chain and a generated one, held against each other."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import replace
from fractions import Fraction

from markov.documents.matching import Matching, match
from markov.documents.rate_tables import Entry, RateTable, rate_table
from markov.documents.revision import (
    ArrowChange,
    Changes,
    Fate,
    KeyChange,
    Listed,
    ParameterChange,
    ResultChange,
    Side,
    StatePair,
    Trend,
    Turn,
    VerdictChange,
)
from markov.documents.single_changes import told_alone
from markov.documents.spec_lines import Path_, SpecLines, lines_of
from markov.documents.written_keys import WrittenValue, written_keys
from markov.documents.written_places import UNSUPPORTED
from markov.errors import TooLarge
from markov.evaluation import build_space, solve_model
from markov.evaluation.verdicts import judge
from markov.measures import MEASURES
from markov.model import Model, Target
from markov.model.parameters import Parameter, Uncertainty
from markov.quantities import Quantity
from markov.results import Result, Solution, TargetResult
from markov.states import GeneratedSpace, StateSpace

__all__ = ["compare"]

#: States beyond which chains are not held against each other state by state.
MOST_STATES = 50_000


def compare(
    old: Model,
    new: Model,
    *,
    old_lines: SpecLines | None = None,
    new_lines: SpecLines | None = None,
    progress: Callable[[str], None] = lambda _: None,
) -> Changes:
    """Solve two specs and list what changed from the first to the second.

    States are matched by their names, and by their rates where names differ; always by rates where one chain is written
    by hand and the other is generated.

    Parameters
    ----------
    old, new : Model
    old_lines, new_lines : SpecLines, optional
        Where the specs stand in their files; found from the files if left out.
    progress : callable
        Told what is being done.

    Raises
    ------
    TooLarge
        A chain would be too large to be solved.
    """
    lines = (
        lines_of(old) if old_lines is None else old_lines,
        lines_of(new) if new_lines is None else new_lines,
    )
    solutions = []
    for which, model in (("old", old), ("new", new)):

        def tell(doing: str, which: str = which) -> None:
            progress(f"{which}: {doing}")

        solutions.append(solve_model(model, progress=tell))
    before, after = solutions
    alike = old.explicit == new.explicit
    parameters = tuple(each for each in _parameters(old, new, *lines) if alike or each.fate == "changed")
    called = _renamed(written_keys(old), written_keys(new)) if alike else {}
    keys = tuple(_keys(old, new, *lines, called)) if alike else ()
    verdicts = tuple(sorted(_verdicts(old, new, before, after), key=_weight))
    results = tuple(each for each in _results(before, after) if alike or _both_told(each))
    if alike:
        progress("what single changes do")
        verdicts = told_alone(old, new, *lines, verdicts, (*parameters, *keys))
    progress("holding the chains against each other")
    pairs, only_old, only_new, arrows, notes = _chains(old, new)
    return Changes(
        old=_side(old, before),
        new=_side(new, after),
        verdicts=verdicts,
        results=results,
        parameters=parameters,
        keys=keys,
        assumptions=_listed(_in_new_names(before.assumptions, called), after.assumptions) if alike else Listed((), ()),
        warnings=_listed(before.warnings, after.warnings) if alike else Listed((), ()),
        pairs=pairs,
        only_old=only_old,
        only_new=only_new,
        arrows=arrows,
        notes=notes,
    )


def _side(model: Model, solution: Solution) -> Side:
    return Side(
        model.source_name,
        model.title or "",
        tuple(model.reference.items()),
        model.sha256,
        solution.states,
        solution.transitions,
        model.explicit,
    )


def _listed(old: Iterable[str], new: Iterable[str]) -> Listed:
    before, after = dict.fromkeys(old), dict.fromkeys(new)
    return Listed(
        tuple(each for each in after if each not in before), tuple(each for each in before if each not in after)
    )


# --------------------------------------------------------------------------------------------- verdicts and results


def _weight(change: VerdictChange) -> int:
    order: tuple[Turn, ...] = ("flipped", "unsettled", "removed", "added", "kept")
    return order.index(change.turn)


def _verdicts(old: Model, new: Model, before: Solution, after: Solution) -> Iterator[VerdictChange]:
    olds, news = ({each.id: each for each in solution.targets} for solution in (before, after))
    asked_old, asked_new = ({each.id: each for each in model.targets} for model in (old, new))
    for id_ in dict.fromkeys((*olds, *news)):
        one, other = olds.get(id_), news.get(id_)
        if one is None or other is None:
            yield VerdictChange(id_, "removed" if other is None else "added", one, other, False, None)
            continue
        turn: Turn = "kept"
        if one.satisfied is None or other.satisfied is None:
            turn = "kept" if one.satisfied is other.satisfied else "unsettled"
        elif one.satisfied != other.satisfied:
            turn = "flipped"
        differs = _asked(one) != _asked(other)
        moved = _limit(one) != _limit(other)
        under = None
        if moved and not differs:
            under = judge(asked_old[id_], other.result, can_fail=other.why != "no down state can be reached").verdict
        differs = differs or _text(asked_old[id_]) != _text(asked_new[id_])
        yield VerdictChange(id_, turn, one, other, differs or moved, under)


def _asked(target: TargetResult) -> tuple[object, ...]:
    result = target.result
    return target.measure, target.of, result.state, target.at_hours, result.for_hours


def _limit(target: TargetResult) -> tuple[object, ...]:
    return target.direction, target.limit


def _text(target: Target) -> tuple[object, ...]:
    return target.measure, target.of, target.state


def _results(before: Solution, after: Solution) -> Iterator[ResultChange]:
    olds, news = ({_key(each): each for each in solution.results} for solution in (before, after))
    for key in dict.fromkeys((*news, *olds)):
        one, other = olds.get(key), news.get(key)
        trend = _trend(one, other)
        if trend != "same":
            yield ResultChange(one, other, trend)


def _both_told(change: ResultChange) -> bool:
    """Tell whether both sides have a value; a hand-written chain does not answer what asks for units."""
    return all(each is not None and each.value is not None for each in (change.old, change.new))


def _key(result: Result) -> tuple[object, ...]:
    return result.measure, result.of, result.state, result.at_hours, result.for_hours


def _trend(old: Result | None, new: Result | None) -> Trend:
    """Say what became of a result; a difference within the proven bounds is none."""
    if old is None or new is None:
        return "removed" if new is None else "added"
    if old.value is None or new.value is None:
        return "same" if old.value is new.value and old.reason == new.reason else "differs"
    if old.lower is None or old.upper is None or new.lower is None or new.upper is None:
        if old.value == new.value:
            return "same"
    elif old.lower <= new.upper and new.lower <= old.upper:
        return "same"
    falls = new.value < old.value
    return "better" if falls == MEASURES[new.measure].low_is_good else "worse"


# ------------------------------------------------------------------------------------------------- what is written


def _parameters(old: Model, new: Model, old_lines: SpecLines, new_lines: SpecLines) -> Iterator[ParameterChange]:
    for name in dict.fromkeys((*new.parameters, *old.parameters)):
        one, other = old.parameters.get(name), new.parameters.get(name)
        if one is not None and other is not None and _said(one) == _said(other):
            continue
        fate: Fate = "added" if one is None else "removed" if other is None else "changed"
        ratio = None
        if one is not None and other is not None and one.value.exact and one.value.dimension == other.value.dimension:
            ratio = float(other.value.exact / one.value.exact)
        path: Path_ = ("parameters", name)
        yield ParameterChange(
            name=name,
            fate=fate,
            old_value="" if one is None else one.value.text,
            new_value="" if other is None else other.value.text,
            ratio=ratio,
            old_source="" if one is None else one.source or UNSUPPORTED,
            new_source="" if other is None else other.source or UNSUPPORTED,
            old_uncertainty="" if one is None else _uncertainty(one.uncertainty),
            new_uncertainty="" if other is None else _uncertainty(other.uncertainty),
            line_old=old_lines.line(path),
            line_new=new_lines.line(path),
        )


def _said(parameter: Parameter) -> tuple[object, ...]:
    return parameter.value.exact, parameter.value.text, parameter.source, _uncertainty(parameter.uncertainty)


def _uncertainty(uncertainty: Uncertainty | None) -> str:
    if uncertainty is None:
        return ""
    told = []
    for key in type(uncertainty).model_fields:
        value: Quantity | int | None = getattr(uncertainty, key)
        if value is not None:
            told.append(f"{key.replace('_', ' ')} {value}")
    return ", ".join(told)


_Entry = tuple[str, str]


def _keys(
    old: Model, new: Model, old_lines: SpecLines, new_lines: SpecLines, called: Mapping[_Entry, str]
) -> Iterator[KeyChange]:
    before, after = written_keys(old), written_keys(new)
    anew = {(top, name) for (top, _), name in called.items()}
    for (top, name), now in called.items():
        lines = old_lines.line((top, name)), new_lines.line((top, now))
        yield KeyChange(f"{top}.{name}", "changed", name, now, True, *lines, renamed=True)
    for words in dict.fromkeys((*after, *before)):
        one, other = before.get(words), after.get(words)
        if one is not None and other is not None and one.text == other.text and _means(one) == _means(other):
            continue
        if (one is None or _entry(one.path) in called) and (other is None or _entry(other.path) in anew):
            continue  # told as a new name
        fate: Fate = "added" if one is None else "removed" if other is None else "changed"
        yield KeyChange(
            words,
            fate,
            "" if one is None else one.text,
            "" if other is None else other.text,
            one is not None and other is not None and one.same == other.same,
            None if one is None else old_lines.line(one.path),
            None if other is None else new_lines.line(other.path),
        )


def _entry(path: Path_) -> _Entry:
    """Return the entry that a key belongs to: key at the top, and name."""
    return str(path[0]), str(path[1]) if len(path) > 1 else ""


def _renamed(before: Mapping[str, WrittenValue], after: Mapping[str, WrittenValue]) -> dict[_Entry, str]:
    """Return the entries that say the same under another name, where only one can be meant."""
    olds, news = _entries(before), _entries(after)
    gone = {entry: said for entry, said in olds.items() if entry not in news}
    come = {entry: said for entry, said in news.items() if entry not in olds}
    found = {}
    for entry, said in gone.items():
        meant = [other for other, its in come.items() if other[0] == entry[0] and its == said]
        alike = [other for other, its in gone.items() if other[0] == entry[0] and its == said]
        if len(meant) == len(alike) == 1:
            found[entry] = meant[0][1]
    return found


def _entries(keys: Mapping[str, WrittenValue]) -> dict[_Entry, frozenset[tuple[Path_, object]]]:
    found: dict[_Entry, set[tuple[Path_, object]]] = {}
    for value in keys.values():
        if len(value.path) > 2:  # an entry that has a name of its own, and says something
            found.setdefault(_entry(value.path), set()).add((value.path[2:], value.same))
    return {entry: frozenset(said) for entry, said in found.items()}


def _in_new_names(assumptions: Iterable[str], called: Mapping[_Entry, str]) -> Iterator[str]:
    """Yield choices left unsaid, those about a renamed entry under its new name."""
    for assumption in assumptions:
        for (top, name), now in called.items():
            beginning = f"{top}.{name}."
            if assumption.startswith(beginning):
                assumption = f"{top}.{now}.{assumption.removeprefix(beginning)}"
                break
        yield assumption


def _means(value: WrittenValue) -> object:
    """Return what a value means by itself; what changed in a parameter that it names is told there."""
    return value.text if value.parameters else value.same


# ---------------------------------------------------------------------------------------------- states and arrows


_Chains = tuple[
    tuple[StatePair, ...],
    tuple[tuple[int, str], ...],
    tuple[tuple[int, str], ...],
    tuple[ArrowChange, ...],
    tuple[str, ...],
]


def _chains(old: Model, new: Model) -> _Chains:
    try:
        spaces = (build_space(old, limit=MOST_STATES), build_space(new, limit=MOST_STATES))
    except TooLarge as error:
        return (), (), (), (), (f"states and arrows were not compared: {error}",)
    notes: list[str] = []
    tables = (rate_table(spaces[0]), rate_table(spaces[1]))
    found = match(*tables, by_name=old.explicit == new.explicit)
    if found.note:
        notes.append(found.note)
    pairs = tuple(
        StatePair(
            tuple((number, tables[0].names[number]) for number in pair.old),
            tuple((number, tables[1].names[number]) for number in pair.new),
            pair.basis,
            tuple(_differences(*tables, pair.old, pair.new)),
        )
        for pair in found.pairs
    )
    phases = _phases(old, new, spaces, notes)
    arrows: dict[tuple[object, ...], ArrowChange] = {}
    for phase, named in phases:
        each = tables if phase == 0 else (rate_table(spaces[0], phase), rate_table(spaces[1], phase))
        for change in _arrows(*each, found):
            key = (change.fate, change.source, change.target, change.old_formula, change.new_formula, change.old_exact)
            known = arrows.get(key)
            told = () if known is None else known.phases
            arrows[key] = replace(change, phases=(*told, named) if named else told)
    return (
        pairs,
        tuple((number, tables[0].names[number]) for number in found.only_old),
        tuple((number, tables[1].names[number]) for number in found.only_new),
        tuple(arrows.values()),
        tuple(notes),
    )


def _phases(old: Model, new: Model, spaces: tuple[StateSpace, StateSpace], notes: list[str]) -> list[tuple[int, str]]:
    """Return the numbers and names of the phases whose arrows are compared."""
    counts = [len(space.every_arrows) if isinstance(space, GeneratedSpace) else 1 for space in spaces]
    if any(isinstance(space, GeneratedSpace) and space.timetable is not None for space in spaces):
        notes.append("what happens at fixed instants is compared by its keys in the spec, not arrow by arrow")
    if counts[0] != counts[1]:
        notes.append("the specs have different numbers of phases; arrows are compared in the first phase only")
        return [(0, "")]
    if counts[0] == 1:
        return [(0, "")]
    return [(number, new.phases[number].name) for number in range(counts[0])]


def _differences(old: RateTable, new: RateTable, ones: tuple[int, ...], others: tuple[int, ...]) -> Iterator[str]:
    """Say in what states that stand for each other differ, apart from their arrows."""
    if old.up[ones[0]] != new.up[others[0]]:
        yield f"{_up(old.up[ones[0]])} before, {_up(new.up[others[0]])} now"
    begins = [sum((table.start[n] for n in states), Fraction(0)) for table, states in ((old, ones), (new, others))]
    if begins[0] != begins[1]:
        yield f"the plant begins here with the probability {float(begins[0]):.6g} before, {float(begins[1]):.6g} now"


def _up(up: bool) -> str:
    return "up" if up else "down"


def _arrows(old: RateTable, new: RateTable, found: Matching) -> Iterator[ArrowChange]:
    """Yield every difference between the arrows of two chains; states of a pair count as one."""
    place_old = {number: ("pair", index) for index, pair in enumerate(found.pairs) for number in pair.old}
    place_new = {number: ("pair", index) for index, pair in enumerate(found.pairs) for number in pair.new}
    place_old |= {number: ("old", number) for number in found.only_old}
    place_new |= {number: ("new", number) for number in found.only_new}
    before = _merged(old, place_old, {pair.old[0] for pair in found.pairs} | set(found.only_old))
    after = _merged(new, place_new, {pair.new[0] for pair in found.pairs} | set(found.only_new))
    for ends in dict.fromkeys((*after, *before)):
        one, other = before.get(ends), after.get(ends)
        if one is not None and other is not None and one[1].exact == other[1].exact:
            continue
        table, (source, target) = (new, other[0]) if other is not None else (old, one[0] if one else (0, 0))
        yield ArrowChange(
            fate="added" if one is None else "removed" if other is None else "changed",
            source=source,
            target=target,
            source_name=table.names[source],
            target_name=table.names[target],
            old_formula="" if one is None else one[1].formula,
            new_formula="" if other is None else other[1].formula,
            old_exact=None if one is None else one[1].exact,
            new_exact=None if other is None else other[1].exact,
            causes=other[1].causes if other is not None else one[1].causes if one is not None else (),
            moved=() if one is None or other is None else _moved(one[1], other[1]),
        )


_Ends = tuple[tuple[str, int], tuple[str, int]]


def _merged(
    table: RateTable, place: Mapping[int, tuple[str, int]], speakers: set[int]
) -> dict[_Ends, tuple[tuple[int, int], Entry]]:
    """Return the arrows between pairs; the first state of each speaks for it, rates to one pair are added."""
    found: dict[_Ends, tuple[tuple[int, int], Entry]] = {}
    for (source, target), entry in table.entries.items():
        if source not in speakers or place[source] == place[target]:
            continue
        ends = (place[source], place[target])
        if ends not in found:
            found[ends] = (source, target), entry
            continue
        numbers, known = found[ends]
        found[ends] = (
            numbers,
            Entry(
                known.exact + entry.exact,
                f"{known.formula} + {entry.formula}",
                tuple(dict.fromkeys((*known.causes, *entry.causes))),
                tuple(sorted({*known.symbols, *entry.symbols})),
            ),
        )
    return found


def _moved(old: Entry, new: Entry) -> tuple[str, ...]:
    """Name the symbols whose value changed."""
    before, after = dict(old.symbols), dict(new.symbols)
    return tuple(symbol for symbol, value in after.items() if before.get(symbol, value) != value)
