"""The sentences that explain a state or an arrow."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from markov.documents.explanation import Passage, Reason, StateSketch
from markov.documents.tree import Span, Text

#: What the whole number before a formula counts, by what drives the event.
MULTIPLES: Mapping[str, str] = {
    "fault": "{} items can fail in this way, each at the rest of the formula",
    "common cause": "{} sets of items can be struck in this way, each at the rest of the formula",
    "repair": "{} repairs are under way",
    "logistics": "{} items await logistics",
    "outage": "{} outages are under way",
    "switchover": "{} switchovers are under way",
    "order": "{} orders are open",
    "exchange": "{} exchanges are under way",
}

#: Why a factor belongs into a rate, by the key that it comes from.
RULES: Mapping[str, str] = {
    "coverage": "the chance that the fault is recognised and the substitute called; drawn once for each detected duty "
    "fault that finds a substitute",
    "start_failure": "each start attempt is drawn anew; a unit that does not start has failed and the next is tried",
    "dormancy_factor": "a warm standby fails at this share of its failure rate on duty",
    "load_sharing": "fewer units on duty carry more each",
    "rate_factors": "the failure rate of the unit is multiplied so in this phase",
    "beta": "the share of the failure rate that a common cause takes; the rest strikes an item alone",
    "beta_detected": "the share that a common cause takes of the faults that are known at once",
    "greek_letters": "the share of the failure rate that strikes each set of this size together",
    "alpha_factors": "the share of the failure rate that strikes each set of this size together",
    "common_causes": "what common causes do not take strikes an item alone",
    "detected": "only faults that are revealed at once count here; their complement stays hidden",
    "share": "the share of the faults that are of this mode",
    "failure_on_demand": "the switch may refuse when it is called",
    "repair_stages": "a repair passes several stages, each with its share of the mean time",
    "repair_success": "a repair that does not succeed begins anew",
    "mean_time_to_failure": "a rate is one divided by the mean time",
    "repair_time": "a repair ends at a rate of one divided by its mean time",
    "logistic_delay": "the crew is called once this time has passed",
    "lead_time": "an order arrives at a rate of one divided by its mean time",
    "causes_failure": "the test itself may make a unit fail",
    "left_out": "the test may leave a unit out of service, unnoticed",
}


def arrow_sentence(source: StateSketch, target: StateSketch, reasons: Sequence[Reason]) -> Text:
    """Say in one sentence which events lead from one state to another, and at which rate."""
    spans = [
        Span("From state "),
        Span(str(source.number), "strong"),
        Span(f" ({source.name}) to state "),
        Span(str(target.number), "strong"),
        Span(f" ({target.name})"),
    ]
    if source.up and not target.up:
        spans.append(Span(", which takes the system down"))
    elif target.up and not source.up:
        spans.append(Span(", which brings the system up again"))
    elif not target.up:
        spans.append(Span(", the system staying down"))
    spans.append(Span(": "))
    for number, reason in enumerate(reasons):
        if number:
            spans.append(Span("; or " if number == len(reasons) - 1 else "; "))
        spans.append(Span(reason.cause if not reason.when or reason.is_chance else f"{reason.cause} ({reason.when})"))
        spans.append(Span(", with the chance " if reason.is_chance else ", at the rate "))
        spans.append(Span(reason.formula, "code"))
        value = value_with_unit(reason.exact, is_share=reason.is_chance)
        if value != reason.formula:
            spans.append(Span(f" = {value}"))
    rated = [reason for reason in reasons if not reason.is_chance and not reason.when]
    if len(rated) == len(reasons) > 1:
        total = sum((reason.exact for reason in rated), Fraction(0))
        spans.append(Span(f"; together {value_with_unit(total, is_share=False)}"))
    spans.append(Span("."))
    return tuple(spans)


def state_sentence(
    state: StateSketch,
    standing: Sequence[str],
    fallen: Sequence[str],
    leaving: Sequence[Passage],
    entering: Sequence[Passage],
    phase: str = "",
) -> Text:
    """Say in one sentence what a state is to the system and how it is left.

    Parameters
    ----------
    state : StateSketch
    standing, fallen : sequence of str
        What the success criterion names and delivers, or does not.
    leaving, entering : sequence of Passage
    phase : str
        The first of several phases, which the sentence then speaks of; empty where there are none.
    """
    spans = [Span("State "), Span(str(state.number), "strong"), Span(f" ({state.name}) ")]
    if state.initial:
        spans.append(Span("is where the plant begins; in it "))
        spans.append(Span("the system is "))
    else:
        spans.append(Span("is a state in which the system is "))
    spans.append(Span("up" if state.up else "down", "strong"))
    if state.up and fallen:
        spans.append(Span(f", although {_listed(fallen)} {_do(fallen)} not deliver"))
    elif fallen:
        spans.append(Span(f", because {_listed(fallen)} {_do(fallen)} not deliver"))
    elif not state.up and standing:
        spans.append(Span(", although every part of it delivers or acts"))
    spans.append(Span(f" in phase {phase}; there " if phase else "; "))
    into, out = (_in_first(passages, phase) for passages in (entering, leaving))
    spans.append(Span(f"{len(into)} {'arrow leads' if len(into) == 1 else 'arrows lead'} in and "))
    scheduled = phase or any(passage.is_chance for passage in (*leaving, *entering))
    if not out:
        spans.append(Span("none leads out" + (": it is never left." if state.final else " between fixed instants.")))
        return tuple(spans)
    total = sum((passage.exact for passage in out), Fraction(0))
    spans.append(Span(f"{len(out)} out, at {value_with_unit(total, is_share=False)} together, "))
    spans.append(Span(f"so that one stay lasts {_number(1 / total)} h on average"))
    if scheduled:
        spans.append(Span(", if no fixed instant ends it before,"))
    first = max(out, key=lambda passage: passage.exact)
    percent = f"{float(100 * first.exact / total):.3g} %"
    share = "" if len(out) == 1 else f" in {'nearly all' if percent == '100 %' else f'{percent} of all'} cases"
    spans.append(Span(f" and ends in state {first.other.number}{share}."))
    return tuple(spans)


def _in_first(passages: Sequence[Passage], phase: str) -> list[Passage]:
    """Return the arrows that hold between instants, in the first of several phases."""
    named = (f"in phase {phase}", f"in phases {phase}, ")
    return [each for each in passages if not each.is_chance and (not each.when or each.when.startswith(named))]


def value_with_unit(exact: Fraction, *, is_share: bool) -> str:
    """Return a value as printed: per hour, or plain for a share."""
    return _number(exact) if is_share else f"{_number(exact)} /h"


def _number(exact: Fraction) -> str:
    return f"{float(exact):.6g}"


def _listed(names: Sequence[str]) -> str:
    shown = [*names[:6], f"{len(names) - 6} more"] if len(names) > 6 else list(names)
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"


def _do(names: Sequence[str]) -> str:
    return "does" if len(names) == 1 else "do"
