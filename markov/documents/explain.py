"""Why the chain of a spec has a state or an arrow, and why at this rate."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from fractions import Fraction

from markov._version import __version__
from markov.documents.arrow_reasons import ArrowReasons
from markov.documents.explanation import Explanation, Key, Passage, Reason, StateSketch, Term
from markov.documents.opening import first_paragraph
from markov.documents.sentences import MULTIPLES, RULES, arrow_sentence, state_sentence
from markov.documents.spec_lines import Path_, SpecLines, lines_of
from markov.errors import UsageError
from markov.evaluation import build_space, solve_model
from markov.evaluation.unsaid import unsaid_choices
from markov.model import Model, names
from markov.rates import Factor
from markov.states import Arrows, GeneratedSpace, StateSpace
from markov.states.instants import told
from markov.states.timetable import Action

__all__ = ["explain", "find_state", "first_paragraph"]

#: Most names that are compared with one that is not found.
_MOST_COMPARED = 20_000
_MOST_NEAR = 3
_WORD = re.compile(r"\w+")


def explain(
    model: Model,
    states: Sequence[str] = (),
    *,
    lines: SpecLines | None = None,
    progress: Callable[[str], None] = lambda _: None,
) -> Explanation:
    """Explain a model, one of its states, or what leads from one state to another.

    Parameters
    ----------
    model : Model
    states : sequence of str
        Nothing for the whole model, one state, or two for the arrow between them; each by the name or the number that
        `markov draw` shows.
    lines : SpecLines, optional
        Where the spec stands in its file; found from the file if left out.
    progress : callable
        Told what is being done.

    Raises
    ------
    UsageError
        There is no such state, or nothing leads from one to the other; the nearest are named.
    TooLarge
        The chain would be too large.
    """
    if len(states) > 2:
        raise UsageError(f"{len(states)} states; expected none for the whole model, one, or two for an arrow")
    lines = lines_of(model) if lines is None else lines
    progress("generating the chain")
    space = build_space(model)
    if not states:
        solution = solve_model(model, progress=progress)
        numbered = tuple(enumerate(solution.assumptions, 1))
        text = first_paragraph(model, solution, space)
        return Explanation("model", model.title or "", model.sha256, __version__, text, assumptions=numbered)
    unsaid = unsaid_choices(model, space.plan if isinstance(space, GeneratedSpace) else None)
    reasons = ArrowReasons(model, space, unsaid, lines)
    numbers = [find_state(space, name) for name in states]
    if len(numbers) == 1:
        return _state(reasons, numbers[0])
    return _arrow(reasons, numbers[0], numbers[1])


def find_state(space: StateSpace, name: str) -> int:
    """Return the number of a state, given by its name or by the number in its box.

    Raises
    ------
    UsageError
        There is none; the nearest names are told.
    """
    wanted = name.strip()
    if isinstance(space, GeneratedSpace) or not wanted.isdecimal():
        for number in range(space.size if space.size <= _MOST_COMPARED else 0):
            if space.label(number) == wanted:
                return number
    else:
        named = next((number for number in range(space.size) if space.label(number) == wanted), None)
        if named is not None:
            return named
    if wanted.isdecimal() and wanted.isascii() and len(wanted) < 10 and int(wanted) < space.size:
        return int(wanted)
    near = _nearest(space, wanted)
    beside = f"; the nearest: {', '.join(near)}" if near else ""
    last = space.size - 1
    raise UsageError(f"no state {wanted!r} in this chain of {space.size:,} states, numbered 0 to {last:,}{beside}")


def _nearest(space: StateSpace, wanted: str) -> list[str]:
    """Return the states whose names share most with a name, as number and name."""
    from difflib import SequenceMatcher

    words = {word.lower() for word in _WORD.findall(wanted)}
    if space.size > _MOST_COMPARED or len(wanted) > 1000:
        return []
    labels = [space.label(number) for number in range(space.size)]
    scored = []
    for number, label in enumerate(labels):
        its = {word.lower() for word in _WORD.findall(label)}
        scored.append((-len(words & its) / max(len(words | its), 1), number))
    closest = []
    for _, number in sorted(scored)[:50]:
        ratio = SequenceMatcher(None, wanted.lower()[:300], labels[number].lower()[:300]).ratio()
        if ratio >= 0.5:
            closest.append((-ratio, number))
    return [f"{number} ({labels[number]})" for _, number in sorted(closest)[:_MOST_NEAR]]


# ----------------------------------------------------------------------------------------------------------- arrows


def _arrow(reasons: ArrowReasons, source: int, target: int) -> Explanation:
    space = reasons.space
    if source == target:
        raise UsageError(f"from state {source} to itself: a chain has no such arrow; name two states")
    found = tuple(_reasons(reasons, source, target))
    if not found:
        raise UsageError(_no_arrow(reasons, source, target))
    ends = (_sketch(space, source), _sketch(space, target))
    model = reasons.model
    text = arrow_sentence(ends[0], ends[1], found)
    return Explanation("arrow", model.title or "", model.sha256, __version__, text, ends, found)


def _no_arrow(reasons: ArrowReasons, source: int, target: int) -> str:
    space = reasons.space
    there = sorted({passage.other.number for passage in _passages(space, source, leaving=True)})
    else_to = f"from it arrows lead to {_listed(there)}" if there else "nothing leads out of the first"
    back = any(_reasons(reasons, target, source))
    return f"no arrow from state {source} to state {target}; {else_to}" + (
        f"; there is one from {target} to {source}" if back else ""
    )


def _listed(numbers: list[int]) -> str:
    shown = [str(number) for number in numbers[:12]]
    return ", ".join(shown) + (f" and {len(numbers) - 12} more" if len(numbers) > 12 else "")


def _reasons(reasons: ArrowReasons, source: int, target: int) -> Iterator[Reason]:
    """Yield every event that leads from one state to another, those of equal kind added up."""
    space = reasons.space
    every = space.every_arrows if isinstance(space, GeneratedSpace) else (space.arrows,)
    by_phase = [_multiples(arrows, source, target) for arrows in every]
    for phase, multiples in enumerate(by_phase):
        for kind, multiple in multiples.items():
            holders = [number for number, each in enumerate(by_phase) if each.get(kind) == multiple]
            if holders[0] != phase:
                continue  # told already
            when = "" if len(holders) == len(by_phase) else _phases(reasons.model, holders)
            yield _reason(reasons, source, target, kind, multiple, when, is_chance=False)
    for when, jumps, actions in _instants(space):
        for kind, multiple in _multiples(jumps, source, target).items():
            yield _reason(reasons, source, target, kind, multiple, when, is_chance=True, actions=actions)


def _instants(space: StateSpace) -> Iterator[tuple[str, Arrows, tuple[Action, ...]]]:
    """Yield what happens at fixed instants: in words, its arrows, its actions."""
    if isinstance(space, GeneratedSpace) and space.timetable is not None:
        for jumps, actions in zip(space.jumps, space.timetable.instants, strict=True):
            yield told(actions, space.plan.model), jumps, actions


def _phases(model: Model, holders: Sequence[int]) -> str:
    called = [model.phases[number].name for number in holders]
    return f"in phase {called[0]}" if len(called) == 1 else f"in phases {', '.join(called)}"


def _multiples(arrows: Arrows, source: int, target: int) -> dict[int, int]:
    here = (arrows.source == source) & (arrows.target == target)
    found: dict[int, int] = {}
    for kind, multiple in zip(arrows.kind[here].tolist(), arrows.multiple[here].tolist(), strict=True):
        found[kind] = found.get(kind, 0) + multiple
    return found


def _reason(
    reasons: ArrowReasons,
    source: int,
    target: int,
    kind: int,
    multiple: int,
    when: str,
    *,
    is_chance: bool,
    actions: Sequence[Action] = (),
) -> Reason:
    called = reasons.space.kinds.kinds[kind]
    rate = reasons.space.kinds.rates.rates[called.rate]
    driver = reasons.driver(kind)
    counted = MULTIPLES.get(driver.event, "{} at the same time").format(multiple) if multiple > 1 else ""
    rules = (*reasons.rules(kind), *(path for action in actions for path in _action_keys(action)))
    numbers = {*reasons.assumptions(source, target, kind), *reasons.numbered(_action_unsaid(reasons.model, actions))}
    choices = rate.coefficient.denominator if rate.coefficient.numerator == 1 else 1
    return Reason(
        cause=called.cause,
        when=when,
        formula=rate.formula(multiple),
        exact=rate.exact * multiple,
        is_chance=is_chance,
        multiple=counted,
        choices=choices,
        terms=tuple(_term(reasons, factor) for factor in reasons.factors(kind)),
        rules=tuple(_key(reasons, path) for path in rules if reasons.places.is_said(path)),
        assumptions=tuple((number, reasons.text(number)) for number in sorted(numbers)),
    )


def _action_keys(action: Action) -> tuple[Path_, ...]:
    """Return the keys that set an instant."""
    if action.kind == "phase":
        return (("phases", int(action.name), "duration"), ("phases", int(action.name), "name"))
    if action.kind == "visit":
        return (("groups", str(action.name), "repair_when"),)
    return tuple(("tests", str(action.name), key) for key in ("of", "interval", "first_at", "coverage", "duration"))


def _action_unsaid(model: Model, actions: Sequence[Action]) -> Iterator[str]:
    """Yield the keys of an instant whose unsaid value it rests on."""
    for action in actions:
        if action.kind == "phase":
            yield f"phases.{model.phases[int(action.name)].name}.repeat"
        elif action.kind != "visit":
            for key in ("first_at", "coverage", "duration", "in_service", "bypass", "left_out", "causes_failure"):
                yield f"tests.{action.name}.{key}"


def _term(reasons: ArrowReasons, factor: Factor) -> Term:
    places = reasons.places
    behind = places.parameters_of(factor)
    paths: list[Path_] = [*places.of(factor), *(("parameters", name, "value") for name in behind)]
    meaning = factor.meaning if factor.base is None else f"1 minus the {factor.base.meaning}"
    return Term(
        symbol=factor.symbol,
        meaning=meaning,
        exact=factor.exact,
        is_share=factor.is_share,
        written=places.text_of(factor),
        keys=tuple(_key(reasons, path) for path in paths),
        sources=tuple((name, places.source_of(name)) for name in behind),
        rule=next((RULES[word] for path in places.of(factor) for word in _rule_words(path) if word in RULES), ""),
    )


def _rule_words(path: Path_) -> Iterator[str]:
    named = [step for step in path if isinstance(step, str)]
    yield from reversed([str(step) for number, step in enumerate(named) if number != 1])


def _key(reasons: ArrowReasons, path: Path_) -> Key:
    return Key(reasons.places.words(path), reasons.places.line(path))


# ----------------------------------------------------------------------------------------------------------- states


def _state(reasons: ArrowReasons, number: int) -> Explanation:
    space, model = reasons.space, reasons.model
    state = _sketch(space, number)
    leaving = tuple(_passages(space, number, leaving=True))
    entering = tuple(_passages(space, number, leaving=False))
    standing, fallen = _delivery(model, space, number)
    first = model.phases[0].name if len(model.phases) > 1 else ""
    text = state_sentence(state, standing, fallen, leaving, entering, first)
    unsaid: list[str] = ["initial"] if state.initial else []
    if not state.up:
        unsaid += ["while_down", "restoration"]
    return Explanation(
        "state",
        model.title or "",
        model.sha256,
        __version__,
        text,
        (state,),
        leaving=leaving,
        entering=entering,
        keys=tuple(_key(reasons, path) for path in _state_keys(model, state, (*standing, *fallen))),
        assumptions=tuple((each, reasons.text(each)) for each in reasons.numbered(unsaid)),
    )


def _state_keys(model: Model, state: StateSketch, subjects: Sequence[str]) -> list[Path_]:
    """Return the keys that make a state up or down."""
    if model.explicit:
        return [("states", state.name)]
    found: list[Path_] = [("system",)]
    for name in subjects:
        if name in model.groups:
            found += [("groups", name, "members"), ("groups", name, "required")]
    return found


def _delivery(model: Model, space: StateSpace, number: int) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Return which groups and units that the criterion names deliver in a state, and which do not."""
    if model.system is None or not isinstance(space, GeneratedSpace):
        return (), ()
    standing: list[str] = []
    fallen: list[str] = []
    for name in names(model.system):
        (standing if bool(space.delivers(name)[number]) else fallen).append(name)
    return tuple(standing), tuple(fallen)


def _sketch(space: StateSpace, number: int) -> StateSketch:
    every = (*space.every_arrows, *space.jumps) if isinstance(space, GeneratedSpace) else (space.arrows,)
    leaves = any(bool(((arrows.source == number) & arrows.moving).any()) for arrows in every)
    initial = number in {state for state, _ in space.start}
    return StateSketch(number, space.label(number), bool(space.up[number]), initial, not leaves)


def _passages(space: StateSpace, number: int, *, leaving: bool) -> Iterator[Passage]:
    """Yield the arrows out of or into a state, one for each other end, in the order of the states."""
    every = space.every_arrows if isinstance(space, GeneratedSpace) else (space.arrows,)
    by_phase = [_passages_in(space, arrows, number, leaving=leaving) for arrows in every]
    for phase, passages in enumerate(by_phase):
        for passage in passages:
            holders = [each for each, others in enumerate(by_phase) if passage in others]
            if holders[0] == phase:
                model = space.plan.model if isinstance(space, GeneratedSpace) else None
                named = "" if model is None or len(holders) == len(by_phase) else _phases(model, holders)
                yield replace(passage, when=named)
    for when, jumps, _ in _instants(space):
        for passage in _passages_in(space, jumps, number, leaving=leaving):
            yield replace(passage, when=when, is_chance=True)


def _passages_in(space: StateSpace, arrows: Arrows, number: int, *, leaving: bool) -> list[Passage]:
    kinds = space.kinds
    ends, others = (arrows.source, arrows.target) if leaving else (arrows.target, arrows.source)
    here = (ends == number) & arrows.moving
    rows: dict[int, dict[int, int]] = {}
    for other, kind, multiple in zip(
        others[here].tolist(), arrows.kind[here].tolist(), arrows.multiple[here].tolist(), strict=True
    ):
        counted = rows.setdefault(other, {})
        counted[kind] = counted.get(kind, 0) + multiple
    found = []
    for other in sorted(rows):
        by_rate: dict[int, int] = {}
        for kind, multiple in rows[other].items():
            rate = kinds.kinds[kind].rate
            by_rate[rate] = by_rate.get(rate, 0) + multiple
        exact = sum((kinds.rates.rates[rate].exact * multiple for rate, multiple in by_rate.items()), Fraction(0))
        formula = " + ".join(kinds.rates.rates[rate].formula(multiple) for rate, multiple in by_rate.items())
        causes = tuple(dict.fromkeys(kinds.kinds[kind].cause for kind in rows[other]))
        found.append(Passage(_sketch(space, other), exact, formula, causes))
    return found
