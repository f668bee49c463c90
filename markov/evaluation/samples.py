"""Values of parameters in many samples, with every rate of a chain that follows from them.

A quantity that no sampled parameter enters stays the exact fraction that it is.  The others are evaluated in floats,
all samples at once, along the tree of their expression.

Complements.  ``1 - c`` of a float c is off by the rounding of c itself, which no care afterwards brings back: of a
coverage of 1 - 1e-9 seven digits of the complement are left.  Who samples such a share therefore hands over its
complement beside it, and wherever the complement is meant, written as ``1 - c`` or drawn by a rule, that number is
taken. Through expressions value and complement are carried side by side: ``1 - (1 - c)`` is c, the complement of a
product is the sum of ``x_1 ... x_{i-1} (1 - x_i)``, that of ``1/x`` is ``(x - 1)/x``; of any other expression it is
one minus the value.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from markov.errors import IllPosed, UsageError
from markov.model import Model
from markov.quantities import Expression, Name, Negative, Number, Product, Quantity, Reciprocal, Sum, names
from markov.rates import Factor, RateTable

Floats = NDArray[np.float64]
Value = Fraction | Floats
"""One exact number for all samples, or a float for each."""

#: What a quantity of the spec has to be for the chain to keep its structure.
Kind = Literal["rate", "time", "lasting rate", "share", "number"]

_ONE = Number(Fraction(1), "share")


class Samples:
    """Values of some parameters of a model in s samples.

    Parameters
    ----------
    model : Model
    values : mapping of name to float64[s]
        Hours, per hour or plain.  A parameter that another one follows from takes that one along, unless it is sampled
        itself.
    complements : mapping of name to float64[s], optional
        One minus the value, for shares so close to 1 that a float does not hold their complement.

    Raises
    ------
    UsageError
        An unknown name, arrays of unequal length, a value that is negative or not finite, a complement that does not
        belong to its value.
    """

    def __init__(
        self, model: Model, values: Mapping[str, ArrayLike], complements: Mapping[str, ArrayLike] | None = None
    ) -> None:
        self._model = model
        self._given = {name: _array(name, value, model) for name, value in values.items()}
        self._complements = {name: _array(name, value, model) for name, value in (complements or {}).items()}
        sizes = {len(each) for each in (*self._given.values(), *self._complements.values())}
        if len(sizes) != 1:
            raise UsageError(f"samples of {sorted(sizes)} values; expected one number of samples for every parameter")
        (self.count,) = sizes
        for name, complement in self._complements.items():
            if name not in self._given:
                raise UsageError(f"parameter {name}: a complement without values; give both")
            off = np.abs(self._given[name] + complement - 1.0)
            if off.size and off.max() > 1e-9:
                where = int(off.argmax())
                raise UsageError(f"parameter {name}: value and complement of sample {where} do not add up to 1")
        self._found: dict[Expression, Value] = {}
        self._opposite: dict[Expression, Value] = {}

    # --- expressions -----------------------------------------------------------------------------------------------

    def value(self, expression: Expression) -> Value:
        """Return the value of an expression in every sample."""
        if expression not in self._found:
            self._found[expression] = self._evaluate(expression)
        return self._found[expression]

    def complement(self, expression: Expression) -> Value:
        """Return one minus an expression in every sample, with the digits of complements that were given."""
        if expression not in self._opposite:
            self._opposite[expression] = self._evaluate_complement(expression)
        return self._opposite[expression]

    def _evaluate(self, expression: Expression) -> Value:
        match expression:
            case Number():
                return expression.exact
            case Name():
                given = self._given.get(expression.name)
                return self.value(self._model.parameters[expression.name].value.expression) if given is None else given
            case Negative():
                return -self.value(expression.term)
            case Reciprocal():
                return _over(Fraction(1), self.value(expression.term))
            case Sum():
                meant = self._complement_of(expression)
                return self.complement(meant) if meant is not None else _sum(self.value(e) for e in expression.terms)
            case Product():
                return _product(self.value(term) for term in expression.terms)

    def _evaluate_complement(self, expression: Expression) -> Value:
        match expression:
            case Name():
                if expression.name in self._complements:
                    return self._complements[expression.name]
                if expression.name not in self._given:
                    return self.complement(self._model.parameters[expression.name].value.expression)
            case Negative():
                return _sum((Fraction(1), self.value(expression.term)))
            case Reciprocal():
                return -_over(self.complement(expression.term), self.value(expression.term))
            case Sum():
                meant = self._complement_of(expression)
                if meant is not None:
                    return self.value(meant)
            case Product():
                before: Value = Fraction(1)
                parts: list[Value] = []
                for term in expression.terms:
                    parts.append(_product((before, self.complement(term))))
                    before = _product((before, self.value(term)))
                return _sum(parts)
            case Number():
                pass
        return _sum((Fraction(1), -self.value(expression)))

    def _complement_of(self, expression: Sum) -> Expression | None:
        """Return x where a sum says one minus x, whatever exact numbers the one is made of."""
        values = [(term, self.value(term)) for term in expression.terms]
        fixed = sum((value for _, value in values if isinstance(value, Fraction)), Fraction(0))
        moving = [term for term, value in values if not isinstance(value, Fraction)]
        if fixed == 1 and len(moving) == 1 and isinstance(moving[0], Negative):
            return moving[0].term
        return None

    # --- factors and rates -----------------------------------------------------------------------------------------

    def factor(self, factor: Factor) -> Value:
        """Return the value of a factor of a rate, per hour or plain."""
        if factor.base is not None:
            inside = factor.base
            if inside.base is None and inside.quantity is not None and not inside.is_reciprocal and inside.stages == 1:
                return self.complement(inside.quantity.expression)
            return _sum((Fraction(1), -self.factor(inside)))
        if factor.quantity is None:
            return factor.exact
        value = self.value(factor.quantity.expression)
        if isinstance(value, Fraction):
            return factor.exact
        stages = Fraction(factor.stages)
        return _over(stages, value) if factor.is_reciprocal else _product((stages, value))

    def rates(self, table: RateTable) -> Floats:
        """Return all rates of a chain, float64[r, s], each off by a few roundings."""
        result = np.empty((len(table), self.count))
        for number, rate in enumerate(table.rates):
            value = _product((rate.coefficient, *(self.factor(factor) for factor in rate.factors)))
            result[number] = _floats(value, self.count)
        return result

    # --- what may change -------------------------------------------------------------------------------------------

    def check(self) -> None:
        """Refuse samples in which the plant is another one than that of the spec.

        Raises
        ------
        UsageError
            A share outside 0 to 1, a time or a rate below zero.
        IllPosed
            A quantity is zero, or a share one, in the spec but not in a sample: the chain of the spec leaves out what
            could happen there.  Or a time is zero, or a repair never ends, in a sample only.
        """
        for where, quantity, kind in written(self._model):
            value = self.value(quantity.expression)
            if not isinstance(value, Fraction):
                self._check(f"{where}: {quantity.text}", quantity, value, kind)

    def _check(self, told: str, quantity: Quantity, value: Floats, kind: Kind) -> None:
        opposite = _floats(self.complement(quantity.expression), self.count)
        if kind == "share" and (opposite < 0).any() and quantity.exact != 1:
            where = int(np.argmin(opposite))
            raise UsageError(f"{told} is {value[where]:g} in sample {where}; expected a share of at most 1")
        if (value < 0).any() or not np.isfinite(value).all():
            where = int(np.argmax((value < 0) | ~np.isfinite(value)))
            raise UsageError(f"{told} is {value[where]:g} in sample {where}; expected a number of zero or more")
        zero = value == 0
        if kind != "number" and quantity.exact == 0 and not zero.all():
            raise _other(told, "0", value, int(np.argmin(zero)))
        if kind in ("time", "lasting rate") and quantity.exact != 0 and zero.any():
            raise _other(told, f"{float(quantity.exact):g}", value, int(np.argmax(zero)))
        if kind == "share" and quantity.exact == 1 and (opposite != 0).any():
            raise _other(told, "1", value, int(np.argmax(opposite != 0)))


def written(model: Model) -> Iterator[tuple[str, Quantity, Kind]]:
    """Yield every quantity that the chain of a model is made from: where it stands, what it says, what it is."""
    kinds: dict[str, Kind] = {
        "failure_rate": "rate",
        "mean_time_to_failure": "time",
        "repair_time": "time",
        "repair_rate": "lasting rate",
        "logistic_delay": "time",
        "start_failure": "share",
        "detected": "share",
        "capacity": "number",
    }
    for name, unit in model.units.items():
        for key, kind in kinds.items():
            found: Quantity | None = getattr(unit, key)
            if found is not None:
                yield f"units.{name}.{key}", found, kind
    for name, group in model.groups.items():
        for quantity in group.coverage_list:
            yield f"groups.{name}.coverage", quantity, "share"
        if group.dormancy_factor is not None:
            yield f"groups.{name}.dormancy_factor", group.dormancy_factor, "share"
        for key, time in (("switchover.time", group.takeover_time), ("uncovered.time", group.outcome_time)):
            if time is not None:
                yield f"groups.{name}.{key}", time, "time"
    for name, state in model.states.items():
        if state.capacity is not None:
            yield f"states.{name}.capacity", state.capacity, "number"
    for number, transition in enumerate(model.transitions):
        given = transition.given
        yield f"transitions[{number}]", given, "rate" if given.dimension == "rate" else "time"


def parameters_of(model: Model, quantity: Quantity) -> frozenset[str]:
    """Name every parameter that a quantity follows from, through other parameters too."""
    found: set[str] = set()
    pending = list(names(quantity.expression))
    while pending:
        name = pending.pop()
        if name not in found:
            found.add(name)
            pending.extend(names(model.parameters[name].value.expression))
    return frozenset(found)


def _other(told: str, said: str, value: Floats, where: int) -> IllPosed:
    return IllPosed(
        f"{told} is {said} in the spec and {value[where]:g} in sample {where}, which makes another chain; "
        "write a value in the spec that is neither 0 nor 1, or solve such samples apart"
    )


def _array(name: str, value: ArrayLike, model: Model) -> Floats:
    if name not in model.parameters:
        raise UsageError(f"no parameter is named {name}; the spec has {', '.join(model.parameters) or 'none'}")
    array = np.array(value, dtype=np.float64)
    if array.ndim != 1:
        raise UsageError(f"parameter {name}: values of shape {array.shape}; expected one number a sample")
    if not np.isfinite(array).all() or (array < 0).any():
        raise UsageError(f"parameter {name}: a value is negative or not finite")
    return array


def _floats(value: Value, count: int) -> Floats:
    return np.full(count, float(value)) if isinstance(value, Fraction) else value


def _sum(terms: Iterable[Value]) -> Value:
    fixed, moving = Fraction(0), []
    for term in terms:
        if isinstance(term, Fraction):
            fixed += term
        else:
            moving.append(term)
    if not moving:
        return fixed
    total = moving[0]
    for term in moving[1:]:
        total = total + term
    return total + float(fixed) if fixed else total


def _product(terms: Iterable[Value]) -> Value:
    fixed, moving = Fraction(1), []
    for term in terms:
        if isinstance(term, Fraction):
            fixed *= term
        else:
            moving.append(term)
    if not moving or fixed == 0:
        return fixed
    total = moving[0]
    for term in moving[1:]:
        total = total * term
    return total * float(fixed) if fixed != 1 else total


def _over(above: Value, below: Value) -> Value:
    if isinstance(below, Fraction):
        return above / below if isinstance(above, Fraction) else above / float(below)
    if (below == 0).any():
        raise UsageError(f"a division by zero in sample {int(np.argmax(below == 0))}")
    return np.asarray((float(above) if isinstance(above, Fraction) else above) / below)
