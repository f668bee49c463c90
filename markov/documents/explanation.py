"""What there is to say about a model, a state or an arrow, before it is put on paper."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from markov.documents.tree import Text


@dataclass(frozen=True)
class Key:
    """A key of the spec: how documents print it, and its line where it is written and known."""

    words: str
    line: int | None


@dataclass(frozen=True)
class Term:
    """One symbol of a formula.

    Attributes
    ----------
    symbol, meaning : str
        As in the formula, and what it stands for.
    exact : Fraction
        Per hour, or plain for a share.
    is_share : bool
    written : str
        What the spec says; empty where the value is made of several.
    keys : tuple of Key
        Where it says so, the parameters behind it last.
    sources : tuple of (str, str)
        Each parameter with its source, or the word for none.
    rule : str
        Why the factor belongs into this rate, where that is not plain from its meaning.
    """

    symbol: str
    meaning: str
    exact: Fraction
    is_share: bool
    written: str
    keys: tuple[Key, ...]
    sources: tuple[tuple[str, str], ...]
    rule: str


@dataclass(frozen=True)
class Reason:
    """One event that leads from one state to another.

    Attributes
    ----------
    cause : str
        The event and the results of its draws.
    when : str
        Phase or instant that it belongs to; empty for one that may happen at any time.
    formula : str
    exact : Fraction
        Per hour; the chance for an event at a fixed instant.
    is_chance : bool
        Whether it happens at a fixed instant.
    multiple : str
        What the whole number before the formula counts; empty where it is one.
    choices : int
        Number of equally likely results of which this is one.
    terms : tuple of Term
    rules : tuple of Key
        What decides where the event leads.
    assumptions : tuple of (int, str)
        Choices left unsaid, by their number from 1.
    """

    cause: str
    when: str
    formula: str
    exact: Fraction
    is_chance: bool
    multiple: str
    choices: int
    terms: tuple[Term, ...]
    rules: tuple[Key, ...]
    assumptions: tuple[tuple[int, str], ...]


@dataclass(frozen=True)
class StateSketch:
    """A state by number and name, with what it is to the system."""

    number: int
    name: str
    up: bool
    initial: bool
    final: bool


@dataclass(frozen=True)
class Passage:
    """An arrow seen from one of its ends: the other end, the total rate, the causes.

    `when` names the phase or the fixed instant it belongs to, or is empty; at an instant `exact` is a chance.
    """

    other: StateSketch
    exact: Fraction
    formula: str
    causes: tuple[str, ...]
    when: str = ""
    is_chance: bool = False


@dataclass(frozen=True)
class Explanation:
    """An answer to `markov explain`.

    Attributes
    ----------
    kind : str
        ``model``, ``state`` or ``arrow``.
    title, sha256, version : str
    text : Text
        The paragraph, or the sentence.
    states : tuple of StateSketch
        The state; both ends of the arrow.
    reasons : tuple of Reason
        Of an arrow.
    leaving, entering : tuple of Passage
        Of a state.
    keys : tuple of Key
        What decides whether a state is up; where a hand-written state stands.
    assumptions : tuple of (int, str)
        Choices left unsaid that a state, or the whole model, rests on.
    """

    kind: Literal["model", "state", "arrow"]
    title: str
    sha256: str
    version: str
    text: Text
    states: tuple[StateSketch, ...] = ()
    reasons: tuple[Reason, ...] = ()
    leaving: tuple[Passage, ...] = ()
    entering: tuple[Passage, ...] = ()
    keys: tuple[Key, ...] = ()
    assumptions: tuple[tuple[int, str], ...] = ()
