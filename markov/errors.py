"""Every error and warning that the package raises on purpose.

MarkovError
├── SpecError        the spec is at fault: holds every Problem found in it      exit status 2
├── UsageError       the call is at fault (option, file, argument)               exit status 2
├── IllPosed         the question has no answer; says why                        (a reason in the result)
├── NotReached       a method missed its tolerance                               exit status 3
├── TooLarge         the chain would exceed a stated limit                       exit status 3
└── DrawingError     no engine could lay out or write the picture                exit status 2
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


class MarkovError(Exception):
    """Base of everything that this package raises on purpose."""


@dataclass(frozen=True, order=True)
class Problem:
    """One fault in a spec: where it stands, what was found, what was expected, a fix.

    `line` and `column` count from 1; both are 0 where the spec did not come from text.
    """

    file: str
    line: int
    column: int
    found: str
    expected: str
    fix: str

    def __str__(self) -> str:
        where = f"{self.file}:{self.line}:{self.column}" if self.line else self.file
        return f"{where}: {self.found}; {self.expected}; {self.fix}"


class SpecError(MarkovError):
    """A spec that cannot be read as a model; `problems` holds all of them in the order of the text."""

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems: tuple[Problem, ...] = tuple(sorted(problems))
        super().__init__("\n".join(str(problem) for problem in self.problems))


class UsageError(MarkovError):
    """A call that cannot be carried out as written: a missing file, an option out of range."""


class IllPosed(MarkovError):
    """A question without an answer in this model; `reason` is printed in place of the number."""

    def __init__(self, reason: str) -> None:
        self.reason = reason
        super().__init__(reason)


class NotReached(MarkovError):
    """A numerical method that did not reach its tolerance; never replaced by its last iterate."""


class TooLarge(MarkovError):
    """A chain beyond a stated limit of states or memory; the message says what would help."""


class DrawingError(MarkovError):
    """A picture that no layout engine on this machine could make or no writer could store."""
