"""Exact derivatives of what a spec says with respect to its parameters.

Everything that enters a rate is an exact fraction, and so is its derivative: sums, products and reciprocals are
differentiated along the tree of the expression, products of factors by the product rule.  A parameter that others
follow from takes them along; a parameter that follows from others is varied by itself, as if its value were replaced.
"""

from __future__ import annotations

from fractions import Fraction

from markov.model import Model
from markov.quantities import Expression, Name, Negative, Number, Product, Quantity, Reciprocal, Sum
from markov.rates import Factor, RateTable

Slope = dict[str, Fraction]
"""Derivative by parameter; parameters without influence are left out."""


class Slopes:
    """Derivatives of quantities, factors and rates of one model by each of its parameters."""

    def __init__(self, model: Model) -> None:
        self._model = model
        self._parameters: dict[str, Slope] = {}

    def quantity(self, quantity: Quantity) -> Slope:
        """Return the derivatives of a quantity."""
        return self._of(quantity.expression)[1]

    def factor(self, factor: Factor) -> Slope:
        """Return the derivatives of a factor."""
        if factor.base is not None:
            return _scaled(self.factor(factor.base), Fraction(-1))
        if factor.quantity is None:
            return {}
        slope = self.quantity(factor.quantity)
        if factor.is_reciprocal:
            return _scaled(slope, -factor.stages / factor.quantity.exact**2)
        return _scaled(slope, Fraction(factor.stages))

    def rates(self, table: RateTable) -> dict[str, dict[int, Fraction]]:
        """Return parameter -> number of a rate -> derivative, without what is zero."""
        found: dict[str, dict[int, Fraction]] = {}
        factors: dict[Factor, Slope] = {}
        for number, rate in enumerate(table.rates):
            for at, factor in enumerate(rate.factors):
                if factor not in factors:
                    factors[factor] = self.factor(factor)
                if not factors[factor]:
                    continue
                others = rate.coefficient
                for other, each in enumerate(rate.factors):
                    if other != at:
                        others *= each.exact
                for name, slope in factors[factor].items():
                    by_rate = found.setdefault(name, {})
                    by_rate[number] = by_rate.get(number, Fraction(0)) + others * slope
        return {name: {k: slope for k, slope in by_rate.items() if slope} for name, by_rate in found.items()}

    def _of(self, expression: Expression) -> tuple[Fraction, Slope]:
        """Return value and derivatives of an expression."""
        match expression:
            case Number():
                return expression.exact, {}
            case Name():
                return self._model.parameters[expression.name].value.exact, self._parameter(expression.name)
            case Negative():
                value, slope = self._of(expression.term)
                return -value, _scaled(slope, Fraction(-1))
            case Reciprocal():
                value, slope = self._of(expression.term)
                return 1 / value, _scaled(slope, -1 / value**2)
            case Sum():
                total, sloped = Fraction(0), dict[str, Fraction]()
                for value, slope in map(self._of, expression.terms):
                    total += value
                    sloped = _added(sloped, slope)
                return total, sloped
            case Product():
                product, sloped = Fraction(1), dict[str, Fraction]()
                for value, slope in map(self._of, expression.terms):
                    sloped = _added(_scaled(sloped, value), _scaled(slope, product))
                    product *= value
                return product, sloped

    def _parameter(self, name: str) -> Slope:
        if name not in self._parameters:
            own = {name: Fraction(1)}
            self._parameters[name] = _added(self._of(self._model.parameters[name].value.expression)[1], own)
        return self._parameters[name]


def _scaled(slope: Slope, factor: Fraction) -> Slope:
    return {name: value * factor for name, value in slope.items()}


def _added(one: Slope, other: Slope) -> Slope:
    return {name: one.get(name, Fraction(0)) + other.get(name, Fraction(0)) for name in {**one, **other}}
