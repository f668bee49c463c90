"""A chain written by hand: states and transitions taken as they stand."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np

from markov.errors import IllPosed
from markov.model import Model
from markov.quantities import Quantity
from markov.rates import Factor, Rate
from markov.states.arrows import ArrowKind, ArrowKinds
from markov.states.space import Arrows, Mask, Values, no_such_state


@dataclass(frozen=True)
class ExplicitSpace:
    """States and transitions of a hand-written chain; see `markov.states.space.StateSpace`."""

    model: Model
    names: tuple[str, ...]
    arrows: Arrows
    kinds: ArrowKinds
    start: tuple[tuple[int, Fraction], ...]

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.names)

    @cached_property
    def up(self) -> Mask:
        """States marked up, shape (n,)."""
        return np.array([state.up for state in self.model.states.values()], np.bool_)

    def delivers(self, subject: str) -> Mask:
        """Raise: a hand-written chain has no groups."""
        raise IllPosed(f"a hand-written chain has no group or unit {subject!r}")

    def failed(self, subject: str | None) -> Values:
        """Raise: a hand-written chain does not say which units have failed."""
        raise IllPosed("a hand-written chain does not say which units have failed")

    def capacity(self, subject: str | None) -> Values:
        """Delivered share as written; 1 in an up state and 0 in a down state where none is written, shape (n,)."""
        if subject is not None:
            raise IllPosed(f"a hand-written chain has no group {subject!r}")
        return np.array(
            [
                float(state.up) if state.capacity is None else float(state.capacity.exact)
                for state in self.model.states.values()
            ]
        )

    def label(self, state: int) -> str:
        """Name of a state as written."""
        return self.names[state]

    def find(self, name: str) -> int:
        """Number of the state of that name."""
        try:
            return self.names.index(name)
        except ValueError:
            raise no_such_state(name) from None


def _symbol(given: Quantity, *, of_a_time: bool) -> str:
    """Return a rate as the formula prints it: as written, with the signs of printed formulas."""
    if given.name:
        return f"1/{given.name}" if of_a_time else given.name
    text = given.text.strip()
    for written, printed in ((" * ", "·"), ("*", "·"), (" / ", "/"), ("-", "−")):
        text = text.replace(written, printed) if given.parameters else text
    return f"1/({text})" if of_a_time else text


def take(model: Model) -> ExplicitSpace:
    """Take over the states and transitions of a hand-written chain; only states that can be reached are kept or not.

    States that the initial state never reaches stay in the chain, as written.
    """
    names = tuple(model.states)
    number = {name: position for position, name in enumerate(names)}
    kinds = ArrowKinds()
    source, target, kind = [], [], []
    for position, transition in enumerate(model.transitions):
        if transition.hourly == 0:
            continue
        given = transition.rate if transition.rate is not None else transition.mean_time
        if given is None:
            raise AssertionError("a transition has a rate or a mean time")
        of_a_time = transition.rate is None
        symbol = _symbol(given, of_a_time=of_a_time)
        where = f"transitions[{position}]"
        factor = Factor(symbol, transition.hourly, "as written", where, quantity=given, is_reciprocal=of_a_time)
        rate = kinds.rates.intern(Rate(Fraction(1), (factor,)))
        cause = transition.cause or f"{transition.source} to {transition.target}"
        source.append(number[transition.source])
        target.append(number[transition.target])
        kind.append(kinds.intern(ArrowKind(cause, rate)))
    start = tuple((number[name], Fraction(1)) for name, state in model.states.items() if state.initial)
    arrows = Arrows(
        np.array(source, np.int32), np.array(target, np.int32), np.array(kind, np.int32), np.ones(len(source), np.int32)
    )
    return ExplicitSpace(model, names, arrows, kinds, start)
