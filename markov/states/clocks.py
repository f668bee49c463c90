"""How a random time passes in stages: which events move it on and which end it.

A time of one stage is exponential.  Several stages of equal rate make an Erlang time; stages of unequal rate with
early exits fit a mean and a spread (H. C. Tijms, A First Course in Stochastic Models, 2003, section 5.5 and appendix B;
cited from memory).
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import partial

import numpy as np
from numpy.typing import NDArray

from markov.rates import Factor
from markov.states.branching import Apply, Branch, Dice, Event, Mode, row_count
from markov.states.layout import Clock, Digits


def clock_events(
    dice: Dice,
    clock: Clock,
    rows: tuple[int, ...],
    *,
    of: str,
    ends: str,
    apply: Apply,
    mode: Mode = "always",
    crew: int | None = None,
) -> Iterator[Event]:
    """Yield the events of items that stand in `rows` by finished stages.

    Parameters
    ----------
    dice : Dice
    clock : Clock
    rows : tuple of int
        One row a stage.
    of : str
        What takes its time, for the causes: "repair" in "repair of pump ends".
    ends : str
        The rest of the cause: "pump".
    apply : callable
        Takes branches in which one item has left all rows, and does what follows the end.
    mode : str
    crew : int, optional
        Lane whose crews do the work.
    """
    for stage, row in enumerate(rows):
        final = stage == len(rows) - 1
        cause = f"{of} of {ends} ends" if final else f"{of} stage {stage + 1} of {ends} ends"
        leave_early = clock.exits[stage]
        onward = None if final else rows[stage + 1]
        yield Event(
            cause,
            mode,
            dice.table.of(clock.rates[stage]),
            partial(row_count, row),
            partial(_pass, dice, row, onward, leave_early, apply),
            None if crew is None else (crew, stage),
        )


def _pass(dice: Dice, row: int, onward: int | None, early: Factor | None, apply: Apply, branch: Branch) -> list[Branch]:
    branch.x[row] -= 1
    return apply(branch) if onward is None else _further(dice, onward, early, apply, branch)


def _further(dice: Dice, row: int, early: Factor | None, apply: Apply, branch: Branch) -> list[Branch]:
    """Let a time that has stages left pass to the next, counted in `row`, unless it ends early."""
    ended, lasting = (None, branch) if early is None else dice.draw(branch, early, "no further stage", "")
    result = [] if ended is None else apply(ended)
    if lasting is not None:
        lasting.x[row] += 1
        result.append(lasting)
    return result


def staged_flag_events(dice: Dice, clock: Clock, row: int, *, cause: str, apply: Apply) -> Iterator[Event]:
    """Yield the events of a time that one row counts, as 1 + the number of finished stages; `apply` sees the row."""
    for stage in range(clock.stages):
        final = stage == clock.stages - 1
        told = cause if final else f"{cause} (stage {stage + 1} passes)"
        yield Event(
            told,
            "always",
            dice.table.of(clock.rates[stage]),
            partial(_at_stage, row, stage),
            apply if final else partial(_further, dice, row, clock.exits[stage], apply),
        )


def _at_stage(row: int, stage: int, x: Digits) -> NDArray[np.int32]:
    here: NDArray[np.int32] = (x[row] == stage + 1).astype(np.int32)
    return here
