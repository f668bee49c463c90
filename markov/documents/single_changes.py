"""Which change turned a verdict: each change alone, made to the old spec."""

from __future__ import annotations

import copy
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from typing import Any

from markov.documents.revision import Alone, KeyChange, ParameterChange, VerdictChange
from markov.documents.spec_lines import SpecLines
from markov.errors import IllPosed, MarkovError
from markov.evaluation.questions import question_of
from markov.evaluation.replies import reply
from markov.evaluation.solver import Solver
from markov.evaluation.verdicts import judge
from markov.model import Model, Target
from markov.results import TargetResult

#: Most changes that are tried alone, and most states of the chains that this is done for.
MOST_CHANGES = 16
MOST_STATES = 3_000

#: Keys at the top that say nothing about the plant.
_NO_PLANT = frozenset({"title", "reference", "notes", "targets"})
#: Keys at the top whose entries go by name.
_NAMED = frozenset({"parameters", "units", "groups", "crews", "spares", "tests", "common_causes", "initial", "states"})


def told_alone(
    old: Model,
    new: Model,
    old_lines: SpecLines,
    new_lines: SpecLines,
    verdicts: Sequence[VerdictChange],
    changes: Sequence[ParameterChange | KeyChange],
) -> tuple[VerdictChange, ...]:
    """Add to each verdict that turned what every single change would have done to it.

    The old spec is read again with one entry of the new one in place of its own, such as one parameter or one group.
    Nothing is added where the texts of the specs are not at hand, where more than `MOST_CHANGES` entries changed, or
    where only one did.

    Parameters
    ----------
    old, new : Model
    old_lines, new_lines : SpecLines
        Hold the specs as written.
    verdicts : sequence of VerdictChange
    changes : sequence of ParameterChange or KeyChange
    """
    turned = [each for each in verdicts if each.turn in ("flipped", "unsettled") and each.new is not None]
    if not turned or not changes or old_lines.tree is None or new_lines.tree is None:
        return tuple(verdicts)
    before, after = old_lines.tree.plain(), new_lines.tree.plain()
    entries = list(_entries(before, after))
    if not 1 < len(entries) <= MOST_CHANGES:
        return tuple(verdicts)
    wanted = {each.id for each in turned}
    targets = tuple(target for target in new.targets if target.id in wanted)
    found: dict[str, list[Alone]] = {id_: [] for id_ in wanted}
    for top, name in entries:
        words = f"{top}.{name}" if name else top
        for judged in _with(before, after, top, name, targets):
            found[judged.id].append(Alone(words, judged.result.value, judged.verdict))
    return tuple(replace(each, alone=tuple(found[each.id])) if each.id in wanted else each for each in verdicts)


def _entries(before: Mapping[str, Any], after: Mapping[str, Any]) -> Iterator[tuple[str, str]]:
    """Yield the entries in which two specs differ: key at the top, and name where its entries have one."""
    for top in dict.fromkeys((*after, *before)):
        one, other = before.get(top), after.get(top)
        if one == other or top in _NO_PLANT:
            continue
        if top in _NAMED and isinstance(one or {}, dict) and isinstance(other or {}, dict):
            for name in dict.fromkeys((*(other or {}), *(one or {}))):
                if (one or {}).get(name) != (other or {}).get(name):
                    yield top, name
        else:
            yield top, ""


def _with(
    before: Mapping[str, Any], after: Mapping[str, Any], top: str, name: str, targets: Sequence[Target]
) -> list[TargetResult]:
    """Return what targets say of the old spec with one entry of the new one; nothing where that is no spec."""
    mixed = copy.deepcopy(dict(before))
    mixed.pop("targets", None)
    if not name:
        _put(mixed, after, top)
    else:
        held = dict(mixed.get(top) or {})
        _put(held, after.get(top) or {}, name)
        mixed[top] = held
    try:
        model = Model.from_mapping(mixed).model_copy(update={"targets": tuple(targets)})
        questions = [question_of(model, target) for target in targets]
        times = [question.at_hours for question in questions if question.at_hours is not None]
        solver = Solver(model, tuple(dict.fromkeys(times)), limit=MOST_STATES)
        for question in questions:
            solver.expect(question)
        return [
            judge(target, reply(model, solver, question), can_fail=_can_fail(solver, target.of))
            for target, question in zip(targets, questions, strict=True)
        ]
    except MarkovError:
        return []  # the change makes no spec of its own, or too large a chain


def _put(held: dict[str, Any], source: Mapping[str, Any], key: str) -> None:
    if key in source:
        held[key] = source[key]
    else:
        held.pop(key, None)


def _can_fail(solver: Solver, of: str | None) -> bool:
    try:
        return solver.can_fail(of)
    except IllPosed:
        return True
