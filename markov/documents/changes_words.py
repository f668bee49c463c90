"""Changes on paper: as text for a reviewer, what matters first, and as JSON for a program."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Iterable, Iterator
from fractions import Fraction
from typing import Any

from markov.documents.explain_words import printable
from markov.documents.revision import (
    Alone,
    ArrowChange,
    Changes,
    KeyChange,
    Listed,
    ParameterChange,
    ResultChange,
    Side,
    StatePair,
    VerdictChange,
)
from markov.measures import MEASURES
from markov.output.wording import subject_words, timing_words, unit_words, value_words
from markov.results import Result, TargetResult

_WIDTH = 110
#: Entries of one kind, and results, that the text lists; JSON lists all.
_MOST = 30
_MOST_RESULTS = 12
#: Measures that the text lists first; a change in any other is listed after them.
_FIRST = (
    "steady_state_availability",
    "failures_per_year",
    "downtime_per_year",
    "unreliability",
    "mean_time_to_first_failure",
)
_TURNS = {
    "kept": "stays",
    "flipped": "flipped",
    "unsettled": "to or from undecided",
    "added": "new",
    "removed": "gone",
}
_BASIS = {
    "name": "by name",
    "all rates": "by their rates, which all agree",
    "same future": "by their rates: states that behave alike stand for each other",
    "most rates": "by their rates, as far as these agree",
}


def changes_text(changes: Changes) -> str:
    """Return the changes as plain text, ending in a newline."""
    return "".join(f"{line}\n" for line in _lines(changes))


def _lines(changes: Changes) -> Iterator[str]:
    yield from _wrapped(f"From {_side_words(changes.old)}", "", "  ")
    yield from _wrapped(f"to   {_side_words(changes.new)}", "", "  ")
    yield ""
    yield from _wrapped(_summary(changes), "", "")
    yield from _verdict_lines(changes.verdicts)
    yield from _result_lines(changes.results)
    yield from _parameter_lines(changes.parameters)
    yield from _list_lines("Choices left unsaid", changes.assumptions)
    yield from _list_lines("Warnings", changes.warnings)
    yield from _key_lines(changes.keys)
    yield from _state_lines(changes)
    yield from _arrow_lines(changes.arrows, changes)
    if changes.notes:
        yield from _heading("Not compared, or with a limit")
        for note in changes.notes:
            yield from _wrapped(note, "  ", "    ")


def _side_words(side: Side) -> str:
    reference = ", ".join(f"{key} {value}" for key, value in side.reference)
    told = [side.title or "(no title)", *([reference] if reference else []), side.source_name, side.sha256[:12]]
    told.append(f"{side.states:,} states" + (", written by hand" if side.by_hand else ""))
    return "; ".join(told)


def _summary(changes: Changes) -> str:
    if changes.nothing_changed:
        if changes.old.sha256 == changes.new.sha256:
            return "Nothing changed: the specs are the same to the last byte."
        if changes.holds_hand_against_generated:
            return "Nothing differs: every state has a partner, every rate agrees, no result and no verdict differs."
        rewritten = " (some values are written differently and mean the same)" if changes.keys else ""
        return f"Nothing changed that has an effect{rewritten}: states, arrows, parameters, results and verdicts agree."
    flipped = [each for each in changes.verdicts if each.turn == "flipped"]
    told = []
    if flipped:
        told.append(f"{_count(len(flipped), 'verdict')} flipped: {', '.join(map(_flip_words, flipped))}")
    elif changes.verdicts:
        told.append("no verdict flipped")
    for turn, words in (("unsettled", "became or ceased to be undecided"), ("removed", "gone"), ("added", "new")):
        number = sum(each.turn == turn for each in changes.verdicts)
        if number:
            told.append(f"{_count(number, 'target')} {words}")
    counted = (
        (len(changes.results), "result"),
        (len(changes.parameters), "parameter"),
        (sum(not each.same_value or each.renamed for each in changes.keys), "other key"),
        (len(changes.assumptions.added) + len(changes.assumptions.removed), "unsaid choice"),
        (len(changes.only_old) + len(changes.only_new), "state"),
        (len(changes.arrows), "arrow"),
    )
    differ = [_count(number, word) for number, word in counted if number]
    if differ:
        told.append(f"{_joined(differ)} {'differs' if differ[0].startswith('1 ') and len(differ) == 1 else 'differ'}")
    text = "; ".join(told) + "."
    return text[0].upper() + text[1:]


def _flip_words(change: VerdictChange) -> str:
    if change.old is None or change.new is None:
        return change.id
    return f"{change.id} from {_verdict(change.old)} to {_verdict(change.new)}"


# --------------------------------------------------------------------------------------------- verdicts and results


def _verdict_lines(verdicts: tuple[VerdictChange, ...]) -> Iterator[str]:
    shown = [each for each in verdicts if each.turn != "kept" or each.asks_differently]
    if not shown:
        return
    yield from _heading("Verdicts")
    for change in shown:
        yield from _wrapped(f"{change.id}: {_TURNS[change.turn]}", "  ", "    ")
        for which, target in (("before", change.old), ("now", change.new)):
            if target is not None:
                yield from _wrapped(f"{which}: {_target_words(target)}", "    ", "      ")
        if change.old_limit_verdict is not None and change.new is not None:
            yield from _wrapped(
                "the limit itself changed: "
                f"under the old limit the new value would be {change.old_limit_verdict.replace('_', ' ')}",
                "    ",
                "      ",
            )
        if change.alone:
            yield "    each change alone, made to the old spec:"
            for each in change.alone:
                yield from _wrapped(_alone_words(each, change), "      ", "        ")
    kept = len(verdicts) - len(shown)
    if kept:
        yield f"  {_count(kept, 'other target')}: as before"


def _alone_words(alone: Alone, change: VerdictChange) -> str:
    target = change.new
    value = "no value" if alone.value is None or target is None else value_words(target.measure, alone.value)
    return f"{alone.change}: {alone.verdict.replace('_', ' ')} ({value})"


def _target_words(target: TargetResult) -> str:
    limit = f"{target.direction.replace('_', ' ')} {target.limit_text}"
    name = _measure(target.result)
    value = "no value" if target.result.value is None else _value(target.result)
    return f"{_verdict(target)}, {name} {value}, {limit} ({target.why})"


def _verdict(target: TargetResult) -> str:
    return target.verdict.replace("_", " ")


def _result_lines(results: tuple[ResultChange, ...]) -> Iterator[str]:
    if not results:
        return
    yield from _heading("Results")
    for change in _most(sorted(results, key=_result_weight), most=_MOST_RESULTS):
        if isinstance(change, str):
            yield change
            continue
        name = _measure(change.any)
        if change.old is None or change.new is None:
            what = "new" if change.old is None else "no longer asked"
            yield from _wrapped(f"{name}: {what}, {_value(change.any)}", "  ", "    ")
            continue
        told = f"{name}: {_value(change.old)} → {_value(change.new)}"
        if change.trend in ("better", "worse") and change.old.value and change.new.value is not None:
            told += f", {_change(change.any.measure, change.old.value, change.new.value)}, {change.trend}"
        yield from _wrapped(told, "  ", "    ")


def _result_weight(change: ResultChange) -> tuple[int, int]:
    measure = change.any.measure
    missing = change.old is None or change.new is None
    return int(missing), _FIRST.index(measure) if measure in _FIRST else len(_FIRST)


def _measure(result: Result) -> str:
    words = subject_words(result)
    timing = timing_words(result)
    return f"{words} {timing}" if timing and timing != "long run" else words


def _value(result: Result) -> str:
    if result.value is None:
        return f"no value ({result.reason})"
    unit = unit_words(result.unit)
    value = value_words(result.measure, result.value)
    return f"{value}{unit}" if unit.startswith("/") else f"{value} {unit}".rstrip()


def _change(measure: str, old: float, new: float) -> str:
    """Return how far a value moved, of its distance from one where it is meant to be near one."""
    asked = MEASURES[measure]
    if asked.limit == "share" and not asked.low_is_good and min(old, new) > 0.9 and max(old, new) < 1:
        return f"shortfall from 1 {_ratio((1 - new) / (1 - old))}"
    return _ratio(new / old)


def _ratio(ratio: float) -> str:
    if ratio == 0:
        return "down to zero"
    if not 0.01 <= ratio < 100:
        return f"{ratio:.3g} times"
    return f"{100 * (ratio - 1):+.3g} %"


# ------------------------------------------------------------------------------------------------- what is written


def _parameter_lines(parameters: tuple[ParameterChange, ...]) -> Iterator[str]:
    if not parameters:
        return
    yield from _heading("Parameters")
    for change in _most(parameters):
        if isinstance(change, str):
            yield change
            continue
        where = _where(change.line_old, change.line_new)
        if change.fate != "changed":
            what = "new" if change.fate == "added" else "gone"
            source = change.new_source or change.old_source
            told = f"{change.name}: {what}, {change.new_value or change.old_value} (source: {source})"
            yield from _wrapped(told + where, "  ", "    ")
            continue
        told_parts = []
        if change.old_value != change.new_value:
            same = change.ratio == 1.0
            beside = ", the same value" if same else "" if change.ratio is None else f", {_ratio(change.ratio)}"
            told_parts.append(f"{change.old_value} → {change.new_value}{beside}")
        elif change.ratio is not None and change.ratio != 1.0:
            told_parts.append(f"{change.new_value}, {_ratio(change.ratio)} with what it is made of")
        if change.old_source != change.new_source:
            told_parts.append(f"source: {change.old_source} → {change.new_source}")
        if change.old_uncertainty != change.new_uncertainty:
            told_parts.append(f"uncertainty: {change.old_uncertainty or 'none'} → {change.new_uncertainty or 'none'}")
        yield from _wrapped(f"{change.name}: {'; '.join(told_parts)}{where}", "  ", "    ")


def _key_lines(keys: tuple[KeyChange, ...]) -> Iterator[str]:
    if not keys:
        return
    yield from _heading("Other keys of the spec")
    for change in _most(sorted(keys, key=lambda each: each.same_value)):
        if isinstance(change, str):
            yield change
            continue
        where = _where(change.line_old, change.line_new)
        if change.renamed:
            told = f"{change.words}: now called {change.new}, otherwise the same"
        elif change.fate == "added":
            told = f"{change.words}: new, {change.new}"
        elif change.fate == "removed":
            told = f"{change.words}: gone, was {change.old}"
        elif change.old == change.new:
            told = f"{change.words}: {change.new}, written as before and worth something else"
        else:
            told = f"{change.words}: {change.old} → {change.new}"
            told += ", only written differently" if change.same_value else ""
        yield from _wrapped(told + where, "  ", "    ")


def _where(old: int | None, new: int | None) -> str:
    if new is not None and old is not None:
        return f" (line {old} → line {new})" if old != new else f" (line {new})"
    if new is not None:
        return f" (line {new})"
    return "" if old is None else f" (line {old} of the old spec)"


def _list_lines(heading: str, listed: Listed) -> Iterator[str]:
    if not listed:
        return
    yield from _heading(heading)
    for what, entries in (("new", listed.added), ("gone", listed.removed)):
        for entry in _most(entries, text=True):
            yield from _wrapped(f"{what}: {entry}", "  ", "    ")


# ---------------------------------------------------------------------------------------------- states and arrows


def _state_lines(changes: Changes) -> Iterator[str]:
    by_basis: dict[str, int] = {}
    for pair in changes.pairs:
        by_basis[pair.basis] = by_basis.get(pair.basis, 0) + 1
    telling = changes.holds_hand_against_generated or any(basis != "name" for basis in by_basis)
    differing = [pair for pair in changes.pairs if pair.differences]
    if not (telling or differing or changes.only_old or changes.only_new):
        return
    yield from _heading("States")
    for basis, number in by_basis.items():
        yield from _wrapped(f"{_count(number, 'pair')} matched {_BASIS[basis]}", "  ", "    ")
    if telling:
        for shown in _most([pair for pair in changes.pairs if pair.basis != "name"]):
            yield from ([shown] if isinstance(shown, str) else _wrapped(_pair_words(shown), "    ", "      "))
    for pair in differing:
        yield from _wrapped(f"{_pair_words(pair)}: {'; '.join(pair.differences)}", "  ", "    ")
    for what, states in (("only in the new", changes.only_new), ("only in the old", changes.only_old)):
        for entry in _most([f"{number} ({name})" for number, name in states], text=True):
            yield from _wrapped(f"{what}: {entry}", "  ", "    ")


def _pair_words(pair: StatePair) -> str:
    sides = (" and ".join(f"{number} ({name})" for number, name in side) for side in (pair.old, pair.new))
    return " = ".join(sides)


def _arrow_lines(arrows: tuple[ArrowChange, ...], changes: Changes) -> Iterator[str]:
    if not arrows:
        return
    yield from _heading("Arrows")
    followed: dict[tuple[str, ...], int] = {}
    rest: list[ArrowChange] = []
    for change in arrows:
        if change.keeps_formula and change.moved:
            followed[change.moved] = followed.get(change.moved, 0) + 1
        else:
            rest.append(change)
    for moved, number in followed.items():
        keep = "keeps its formula and follows" if number == 1 else "keep their formulas and follow"
        yield from _wrapped(f"{_count(number, 'arrow')} {keep} {', '.join(moved)}", "  ", "    ")
    grouped: dict[tuple[str, ...], list[ArrowChange]] = {}
    for change in rest:
        grouped.setdefault((change.fate, change.old_formula, change.new_formula, *change.causes), []).append(change)
    order = {"added": 0, "removed": 1, "changed": 2}
    for shown in _most(sorted(grouped.values(), key=lambda held: order[held[0].fate])):
        yield from ([shown] if isinstance(shown, str) else _arrow_group(shown, changes))


def _arrow_group(held: list[ArrowChange], changes: Changes) -> list[str]:
    first = held[0]
    what = {"added": "only in the new", "removed": "only in the old", "changed": "differs"}[first.fate]
    if first.fate == "changed":
        relative = first.relative
        beside = "" if relative is None else f" ({_ratio(1 + relative)})"
        rate = f"{_rated(first.old_formula, first.old_exact)} → {_rated(first.new_formula, first.new_exact)}{beside}"
    else:
        rate = _rated(first.new_formula or first.old_formula, first.new_exact or first.old_exact)
    ends = [f"{each.source} → {each.target}" for each in held[:6]]
    if len(held) > 6:
        ends.append(f"{len(held) - 6} more")
    if len(held) == 1:
        ends = [f"{first.source} ({first.source_name}) → {first.target} ({first.target_name})"]
    phases = f", in phase {', '.join(first.phases)}" if first.phases else ""
    return _wrapped(f"{what}: {', '.join(ends)}: {' or '.join(first.causes)}, {rate}{phases}", "  ", "    ")


def _rated(formula: str, exact: Fraction | None) -> str:
    value = "nothing" if exact is None else f"{float(exact):.6g} /h"
    return f"{formula} = {value}" if formula else value


# ------------------------------------------------------------------------------------------------------ small steps


def _heading(text: str) -> Iterator[str]:
    yield ""
    yield text


def _most(entries: Iterable[Any], *, text: bool = False, most: int = _MOST) -> Iterator[Any]:
    """Yield entries up to a number, then a line that says how many more there are."""
    held = list(entries)
    yield from held[:most]
    if len(held) > most:
        more = f"and {len(held) - most} more, all of them in the JSON"
        yield more if text else f"  {more}"


def _wrapped(text: str, first: str, rest: str) -> list[str]:
    return textwrap.wrap(
        printable(text), _WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False
    ) or [first.rstrip()]


def _count(number: int, word: str) -> str:
    return f"{number:,} {word}" if number == 1 else f"{number:,} {word}s"


def _joined(words: list[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"


# ------------------------------------------------------------------------------------------------------------- JSON


def changes_json(changes: Changes) -> str:
    """Return the changes as JSON text, one object, ending in a newline."""
    found = {
        "old": _side(changes.old),
        "new": _side(changes.new),
        "nothing_changed": changes.nothing_changed,
        "exit_status": changes.exit_status,
        "verdicts": [_verdict_object(each) for each in changes.verdicts],
        "results": [_result_object(each) for each in changes.results],
        "parameters": [_parameter_object(each) for each in changes.parameters],
        "assumptions": {"added": list(changes.assumptions.added), "removed": list(changes.assumptions.removed)},
        "warnings": {"added": list(changes.warnings.added), "removed": list(changes.warnings.removed)},
        "keys": [_key_object(each) for each in changes.keys],
        "states": {
            "pairs": [
                {
                    "old": [number for number, _ in pair.old],
                    "new": [number for number, _ in pair.new],
                    "old_names": [name for _, name in pair.old],
                    "new_names": [name for _, name in pair.new],
                    "matched_by": pair.basis,
                    "differences": list(pair.differences),
                }
                for pair in changes.pairs
            ],
            "only_old": [{"number": number, "name": name} for number, name in changes.only_old],
            "only_new": [{"number": number, "name": name} for number, name in changes.only_new],
        },
        "arrows": [_arrow_object(each) for each in changes.arrows],
        "notes": list(changes.notes),
    }
    return json.dumps(found, indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _side(side: Side) -> dict[str, Any]:
    return {
        "source": side.source_name,
        "title": side.title,
        "reference": dict(side.reference),
        "spec_sha256": side.sha256,
        "states": side.states,
        "transitions": side.transitions,
        "written_by_hand": side.by_hand,
    }


def _verdict_object(change: VerdictChange) -> dict[str, Any]:
    return {
        "id": change.id,
        "turn": change.turn,
        "old": None if change.old is None else _target_object(change.old),
        "new": None if change.new is None else _target_object(change.new),
        "asks_differently": change.asks_differently,
        "verdict_under_old_limit": change.old_limit_verdict,
        "each_change_alone": [
            {"change": each.change, "value": each.value, "verdict": each.verdict} for each in change.alone
        ],
    }


def _target_object(target: TargetResult) -> dict[str, Any]:
    return {
        "measure": target.measure,
        "of": target.of,
        "at_hours": None if target.at_hours is None else float(target.at_hours),
        "direction": target.direction,
        "limit": float(target.limit),
        "limit_text": target.limit_text,
        "value": target.result.value,
        "lower": target.result.lower,
        "upper": target.result.upper,
        "verdict": target.verdict,
        "why": target.why,
    }


def _result_object(change: ResultChange) -> dict[str, Any]:
    named = change.any
    return {
        "measure": named.measure,
        "of": named.of,
        "state": named.state,
        "at_hours": None if named.at_hours is None else float(named.at_hours),
        "for_hours": None if named.for_hours is None else float(named.for_hours),
        "unit": named.unit,
        "old": _number_object(change.old),
        "new": _number_object(change.new),
        "trend": change.trend,
    }


def _number_object(result: Result | None) -> dict[str, Any] | None:
    if result is None:
        return None
    return {"value": result.value, "lower": result.lower, "upper": result.upper, "reason": result.reason}


def _parameter_object(change: ParameterChange) -> dict[str, Any]:
    return {
        "name": change.name,
        "fate": change.fate,
        "old": {
            "value": change.old_value,
            "source": change.old_source,
            "uncertainty": change.old_uncertainty,
            "line": change.line_old,
        },
        "new": {
            "value": change.new_value,
            "source": change.new_source,
            "uncertainty": change.new_uncertainty,
            "line": change.line_new,
        },
        "ratio": change.ratio,
    }


def _key_object(change: KeyChange) -> dict[str, Any]:
    return {
        "key": change.words,
        "fate": change.fate,
        "old": change.old,
        "new": change.new,
        "same_value": change.same_value,
        "renamed": change.renamed,
        "line_old": change.line_old,
        "line_new": change.line_new,
    }


def _arrow_object(change: ArrowChange) -> dict[str, Any]:
    return {
        "fate": change.fate,
        "from": change.source,
        "to": change.target,
        "from_name": change.source_name,
        "to_name": change.target_name,
        "causes": list(change.causes),
        "old_formula": change.old_formula or None,
        "new_formula": change.new_formula or None,
        "old_per_hour": None if change.old_exact is None else float(change.old_exact),
        "new_per_hour": None if change.new_exact is None else float(change.new_exact),
        "relative": change.relative,
        "follows": list(change.moved),
        "phases": list(change.phases),
    }
