"""What strikes the items of a simulated plant: faults of one item, shocks of a common cause."""

from __future__ import annotations

import math

from markov.studies.simulation_building import Plant
from markov.studies.simulation_draws import Draws
from markov.studies.simulation_plan import CausePlan, FaultKind, Kind
from markov.studies.simulation_plant import Item

#: A fault about to happen: the item, its mode, whether it is detected, its depth.
Hit = tuple[Item, FaultKind | None, bool, float]


def detected_share(kind: Kind) -> float:
    """Return the share of the faults of a kind that is known at once, over all its modes."""
    return sum(mode.share * mode.detected for mode in kind.modes)


class Shocks:
    """One common cause, with its rates in the present phase.

    Attributes
    ----------
    rate : float
        Of shocks of all sizes together, per hour.
    """

    def __init__(self, plan: CausePlan, plant: Plant) -> None:
        self.plan = plan
        self.items = list(dict.fromkeys(item for name in plan.members for item in plant.items_called(name)))
        self.weights = plan.weights(len(self.items))
        self.rate = 0.0
        self.sizes: list[float] = []
        self.detected = 1.0

    def set_rates(self, factors: dict[str, float]) -> None:
        """Take over the factors of a phase, and take the part of this cause from the rates of its items alone."""
        size = len(self.items)
        base = self._base(factors)
        # Per item: rate of detected and of hidden faults that it has from this cause.
        shared = math.fsum(math.comb(size - 1, k - 1) * self.weights[k - 1] for k in range(2, size + 1)) * base
        shared_detected = shared
        beta, other = self.plan.beta, self.plan.beta_detected
        if beta is not None and other is not None:
            shared_detected = base * other
        for item in self.items:
            seen = detected_share(item.kind)
            known, hidden = item.alone
            item.alone = (max(known - shared_detected * seen, 0.0), max(hidden - shared * (1.0 - seen), 0.0))
        self.sizes = [0.0 if k < 2 else math.comb(size, k) * self.weights[k - 1] * base for k in range(1, size + 1)]
        self.rate = math.fsum(self.sizes)
        if beta is not None and other is not None:
            seen = detected_share(self.items[0].kind)
            self.rate = base * (other * seen + beta * (1.0 - seen))
            self.sizes = [*(0.0 for _ in range(size - 1)), self.rate]
            self.detected = other * seen * base / self.rate if self.rate else 1.0

    def _base(self, factors: dict[str, float]) -> float:
        """Return the failure rate that the shares of this cause are shares of, in a phase."""
        scales = {item.kind.name: factors.get(item.kind.name, 1.0) for item in self.items}
        if self.plan.rate is not None:
            return self.plan.rate * min(scales.values())
        rates = [item.kind.rate * scales[item.kind.name] for item in self.items]
        if self.plan.basis == "geometric_mean":
            return math.prod(rates) ** (1.0 / len(rates))
        return min(rates)

    def strike(self, draws: Draws) -> list[Hit]:
        """Return what one shock does: all items it strikes fail in the same way."""
        size = draws.index(self.sizes) + 1
        struck = self.items if size == len(self.items) else draws.shuffled(self.items)[:size]
        seen, way, depth = draws.uniform(), draws.uniform(), draws.uniform()
        hits: list[Hit] = []
        for item in struck:
            share = self.detected if self.plan.beta_detected is not None else detected_share(item.kind)
            detected = seen < share
            hits.append((item, mode_at(item.kind, detected, way), detected, depth))
        return hits


def mode_at(kind: Kind, detected: bool, point: float) -> FaultKind:
    """Return the failure mode at a point in [0, 1) of those of a kind, by their shares given detection."""
    if len(kind.modes) == 1:
        return kind.modes[0]
    weights = [mode.share * (mode.detected if detected else 1.0 - mode.detected) for mode in kind.modes]
    point *= math.fsum(weights)
    for mode, weight in zip(kind.modes, weights, strict=True):
        point -= weight
        if point < 0.0:
            return mode
    return max(zip(weights, range(len(weights)), kind.modes, strict=True))[2]


def fault_alone(item: Item, draws: Draws) -> Hit:
    """Return a fault that hits one item only."""
    known, hidden = item.alone
    detected = hidden == 0.0 or (known > 0.0 and draws.uniform() * (known + hidden) < known)
    return item, mode_at(item.kind, detected, draws.uniform()), detected, draws.uniform()
