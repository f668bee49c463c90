"""Symbolic factors of rates from the quantities of a spec."""

from __future__ import annotations

from fractions import Fraction

from markov.model import TimeShape, Unit
from markov.quantities import Quantity
from markov.rates import Factor
from markov.states.fitting import fit_stages
from markov.states.layout import Clock


def share_of(share: Quantity, symbol: str, meaning: str, origin: str) -> Factor:
    """Return a probability, or another plain factor, under its own name where it has one."""
    return Factor(share.name or symbol, share.exact, meaning, origin, is_share=True, quantity=share)


def certain(share: Quantity | None) -> bool:
    """Tell whether a share is left out, or is one."""
    return share is None or share.exact == 1


def per(time: Quantity, stages: int, symbol: str, meaning: str, origin: str) -> Factor:
    """Return the rate of one of some stages of a mean time."""
    return Factor(
        f"{stages}/{time.name}" if time.name else symbol,
        Fraction(stages) / time.exact,
        meaning,
        origin,
        quantity=time,
        stages=stages,
        is_reciprocal=True,
    )


def rate_of(rate: Quantity, symbol: str, meaning: str, origin: str) -> Factor | None:
    """Return a rate as it is written; None where it is zero."""
    if rate.exact == 0:
        return None
    return Factor(rate.name or symbol, rate.exact, meaning, origin, quantity=rate)


def clock_of(
    time: Quantity | None, symbol: str, what: str, origin: str, *, stages: int = 1, shape: TimeShape | None = None
) -> Clock | None:
    """Return the stages that a time passes; None where there is none, or it is zero."""
    if time is None or time.is_zero:
        return None
    if shape is not None:
        return _fitted(time, shape, symbol, what, origin)
    meaning = what if stages == 1 else f"one of {stages} stages: {what}"
    return Clock((per(time, stages, symbol, meaning, origin),) * stages, (None,) * stages)


def _fitted(time: Quantity, shape: TimeShape, symbol: str, what: str, origin: str) -> Clock:
    fit = fit_stages(shape)
    rates = tuple(
        Factor(
            symbol if fit.stages == 1 else f"{symbol}[{stage}]" if fit.unequal else symbol,
            weight / time.exact,
            f"stage of {what}, fitted",
            origin,
        )
        for stage, weight in enumerate(fit.weights, 1)
    )
    exits = tuple(
        None
        if not chance
        else Factor(f"p({origin.split('.')[1]})", chance, f"early end of {what}, fitted", origin, True)
        for chance in fit.exits
    )
    return Clock(rates, exits)


def failure_of(name: str, kind: Unit, where: str) -> Factor | None:
    """Return the failure rate of a unit on duty; None where it never fails."""
    if kind.failure_hourly == 0:
        return None
    given = kind.failure
    if given.dimension == "rate":
        what = f"failure rate of {name}"
        return Factor(given.name or f"λ({name})", given.exact, what, f"{where}.failure_rate", quantity=given)
    return per(given, 1, f"λ({name})", f"failure rate of {name}", f"{where}.mean_time_to_failure")


def start_failure_of(name: str, kind: Unit, where: str) -> Factor | None:
    """Return the chance that a start fails; None where it never does."""
    given = kind.start_failure
    if given is None or given.is_zero:
        return None
    return share_of(given, f"q({name})", f"probability that a start of {name} fails", f"{where}.start_failure")


def repair_of(name: str, kind: Unit, where: str) -> Clock | None:
    """Return the repair of a unit; None where it is never repaired, or renewed at once."""
    if not kind.repairable or kind.repaired_at_once:
        return None
    stages = kind.repair_stages
    what = f"repair rate of {name}" if stages == 1 else f"rate of one of {stages} repair stages of {name}"
    if kind.repair_time is not None:
        if kind.repair_time_shape is not None:
            return _fitted(kind.repair_time, kind.repair_time_shape, f"μ({name})", what, f"{where}.repair_time")
        factor = per(kind.repair_time, stages, f"μ({name})", what, f"{where}.repair_time")
        return Clock((factor,) * stages, (None,) * stages)
    given = kind.repair_rate
    if given is None:
        raise AssertionError("a repairable unit has a repair time or a repair rate")
    symbol = given.name if given.name and stages == 1 else f"μ({name})"
    factor = Factor(symbol, given.exact * stages, what, f"{where}.repair_rate", quantity=given, stages=stages)
    return Clock((factor,) * stages, (None,) * stages)
