"""Delivered share of every state where the capacities of units are parameters: for many values, or with slopes.

The share is what `GeneratedSpace.capacity` gives for the capacities of the spec, the same rules carried out on numbers
that differ from sample to sample: a sum of the members on duty, at most 1, then the least, the greatest or the k-th
greatest of the parts.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from markov.errors import IllPosed
from markov.model import AllOf, AnyOf, Named, Success
from markov.quantities import Quantity
from markov.states import GeneratedSpace, StateSpace
from markov.states.layout import Digits, Node, Slot, Train

Floats = NDArray[np.float64]

#: Shares of two parts closer than this are taken as equal: they are formed by a few roundings.
_CLOSE = 2.0**-48


@dataclass(frozen=True)
class Delivery:
    """Delivered share by state and sample, with slopes in some directions.

    Attributes
    ----------
    share : float64[n, s]
    slope : float64[n, s, d]
        Derivatives in d directions; nan where there is none because a limit is just reached.
    """

    share: Floats
    slope: Floats


#: Value of a written capacity: float64[s] or one float; and its slopes, float64[d].
Capacity = Callable[[Quantity], tuple[Floats | float, Floats]]


def capacities_of(space: StateSpace, of: str | None) -> tuple[Quantity, ...]:
    """Return the quantities that the delivered share of the system or of a group is made from."""
    if isinstance(space, GeneratedSpace):
        slots = [slot for chart in space.charts for slot in chart.layout.slots]
        factors = [slot.capacity for slot in slots if slot.capacity is not None]
        return tuple(dict.fromkeys(factor.quantity for factor in factors if factor.quantity is not None))
    model = getattr(space, "model")  # noqa: B009  (a hand-written chain holds its model)
    return tuple(state.capacity for state in model.states.values() if state.capacity is not None)


def delivered(space: StateSpace, of: str | None, capacity: Capacity, samples: int, directions: int) -> Delivery:
    """Return the delivered share of the system or of a group.

    Parameters
    ----------
    space : StateSpace
    of : str or None
    capacity : callable
        From a written capacity to its values and slopes.
    samples, directions : int

    Raises
    ------
    IllPosed
        The subject has no delivered share.
    """
    fixed = space.capacity(of)  # raises where there is none
    if isinstance(space, GeneratedSpace):
        return _Plant(space, capacity, samples, directions).of(of)
    model = getattr(space, "model")  # noqa: B009
    share = np.repeat(fixed[:, None], samples, axis=1)
    slope = np.zeros((space.size, samples, directions))
    for number, state in enumerate(model.states.values()):
        if state.capacity is not None:
            share[number], slope[number] = capacity(state.capacity)
    return Delivery(share, slope)


class _Plant:
    """A generated chain with the capacities as they are asked for."""

    def __init__(self, space: GeneratedSpace, capacity: Capacity, samples: int, directions: int) -> None:
        self.space, self.capacity, self.samples, self.directions = space, capacity, samples, directions

    def of(self, subject: str | None) -> Delivery:
        system = self.space.plan.model.system
        if subject is not None:
            return self._island(subject)
        if system is None:
            raise AssertionError("a generated chain has a system")
        return self._structure(system)

    def _structure(self, success: Success) -> Delivery:
        if isinstance(success, Named):
            return self._island(success.name)
        parts = [self._structure(each) for each in success.of]
        needed = len(parts) if isinstance(success, AllOf) else 1 if isinstance(success, AnyOf) else success.count
        rank = len(parts) - needed
        share, slope = np.stack([part.share for part in parts]), np.stack([part.slope for part in parts])
        chosen = np.argsort(share, axis=0, kind="stable")[rank][None]
        value = np.take_along_axis(share, chosen, 0)[0]
        found = np.take_along_axis(slope, chosen[..., None], 0)[0]
        equal = np.abs(share - value) <= _CLOSE
        torn = (equal[..., None] & (slope != found)).any(axis=0)
        return Delivery(value, np.where(torn, np.nan, found))

    def _island(self, name: str) -> Delivery:
        number = self.space.plan.island(name)
        if number is None:
            raise IllPosed(f"{name} is not in the chain")
        chart = self.space.charts[number]
        node = chart.layout.node_named(name) or chart.layout.nodes[0]  # alike islands share the chart of the first
        local = self._node(node, chart.digits)
        where = self.space.columns[number]
        return Delivery(local.share[where], local.slope[where])

    def _node(self, node: Node, x: Digits) -> Delivery:
        share = np.zeros((x.shape[1], self.samples))
        slope = np.zeros((x.shape[1], self.samples, self.directions))
        for entry in node.entries:
            on_duty = (entry.good(x) if node.active else x[entry.duty]).astype(np.float64)[:, None]
            if isinstance(entry, Train):
                inside = self._node(entry.node, x)
                share += on_duty * inside.share / node.required
                slope += np.where(on_duty[..., None] > 0, on_duty[..., None] * inside.slope, 0.0) / node.required
            else:
                value, slopes = self._each(entry, node)
                share += on_duty * value
                slope += on_duty[..., None] * slopes
        stopped = node.in_outage(x) if node.active or node.outcome == "lost" else np.zeros(x.shape[1], np.bool_)
        stopped = stopped | node.switching_now(x)
        share[stopped], slope[stopped] = 0.0, 0.0
        over, just = share > 1.0 + _CLOSE, np.abs(share - 1.0) <= _CLOSE
        slope[over] = 0.0
        slope[just] = np.where(slope[just] == 0.0, 0.0, np.nan)
        return Delivery(np.minimum(share, 1.0), slope)

    def _each(self, slot: Slot, node: Node) -> tuple[Floats | float, Floats]:
        if slot.capacity is None or slot.capacity.quantity is None:
            return 1.0 / node.required, np.zeros(self.directions)
        return self.capacity(slot.capacity.quantity)
