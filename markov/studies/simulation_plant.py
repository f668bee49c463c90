"""What a simulated plant is made of: items, groups, switches, each with the state it is in."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Literal

from markov.model import Outcome, WhileDown
from markov.studies.simulation_clock import Timer
from markov.studies.simulation_plan import FaultKind, GroupPlan, Kind, SwitchPlan

#: What a member does in its group.  ``duty``: carries duty, as far as the control knows.  ``starting``: takes over.
#: ``standby``: waits.  ``out``: known to be failed, under test, or a train that does not hold its criterion.
Role = Literal["duty", "starting", "standby", "out"]

#: How far the repair of an item has come.
Step = Literal["none", "deferred", "delay", "crew", "spare", "swap"]


class Item:
    """One individual of a kind.

    Attributes
    ----------
    failed, known : bool
        `known` tells that the fault is revealed; False while it is hidden.
    mode : FaultKind or None
        How it failed; None after a failed start.
    depth : float
        A test finds a hidden fault whose depth is below the coverage of the test.
    left_out, under_test : bool
        Not in service though not failed.
    bypassed : bool
        Under a test that lets the group need one unit fewer.
    alone : tuple of float
        Rates per hour, on duty in the present phase, of detected and of hidden faults that hit no other item.
    """

    def __init__(self, kind: Kind, group: Group | None, rank: int) -> None:
        self.kind = kind
        self.group = group
        self.rank = rank
        self.role: Role = "standby"
        self.start: Timer | None = None
        self.failed = False
        self.known = False
        self.mode: FaultKind | None = None
        self.depth = 0.0
        self.left_out = False
        self.under_test = False
        self.bypassed = False
        self.alone = (0.0, 0.0)
        self.alone_sum = 0.0
        self.step: Step = "none"
        self.subjects: tuple[str, ...] = ()

    @property
    def good(self) -> bool:
        """Whether it is able to deliver."""
        return not (self.failed or self.left_out or self.under_test)

    @property
    def seems_good(self) -> bool:
        """Whether it is good as far as anyone knows."""
        return not (self.known or self.under_test)

    @property
    def delivers(self) -> bool:
        """Whether it would deliver on duty."""
        return self.good

    @property
    def spurious(self) -> bool:
        """Whether it acts needlessly."""
        return self.failed and self.mode is not None and self.mode.spurious

    @property
    def hidden(self) -> bool:
        """Whether it is failed and nobody knows."""
        return self.failed and not self.known


class Switch:
    """The switch of a group; `left_out` tells that a test has left it out of service, unnoticed."""

    def __init__(self, plan: SwitchPlan) -> None:
        self.plan = plan
        self.failed = False
        self.known = False
        self.left_out = False
        self.depth = 0.0
        self.repair: Timer | None = None


class Group:
    """A group, or a train where it is a member of another group.

    Attributes
    ----------
    nodes : list of Item or Group
        Members in rank order.
    role : Role
        As a train; a group of the top level is always on duty.
    outage : Outcome or None
        What an uncovered fault has led to, until it ends.
    switchovers : list of Timer
        Under way in an active group.
    required : int
        In the present phase; fewer are needed while a test bypasses some.
    places : int
        How many members carry duty while all is well.
    may_act : bool
        Whether some of its units can act needlessly.
    """

    def __init__(self, plan: GroupPlan) -> None:
        self.plan = plan
        self.name = plan.name
        self.nodes: list[Item | Group] = []
        self.items: list[Item] = []
        self.group: Group | None = None
        self.rank = 0
        self.role: Role = "duty"
        self.start: Timer | None = None
        self.outage: Outcome | None = None
        self.outage_end: Timer | None = None
        self.lost = False
        self.switchovers: list[Timer] = []
        self.switch = None if plan.switch is None else Switch(plan.switch)
        self.required = plan.required
        self.places = 0
        self.may_act = False
        self.stopped = False
        self.released = False
        self.while_down: WhileDown = "continue"
        self.subjects: tuple[str, ...] = ()

    @property
    def depth(self) -> int:
        """How many groups it is inside of."""
        return 0 if self.group is None else 1 + self.group.depth

    @property
    def live(self) -> bool:
        """Whether what it has on duty does carry duty: it is not a train that waits."""
        return self.group is None or (self.role == "duty" and self.group.live)

    @property
    def needed(self) -> int:
        """How many members the function needs now."""
        return max(self.required - sum(isinstance(node, Item) and node.bypassed for node in self.nodes), 0)

    def count(self, role: Role) -> int:
        """Return how many members have a role."""
        return [node.role for node in self.nodes].count(role)

    @property
    def good_members(self) -> int:
        """How many members are good."""
        return len([1 for node in self.nodes if node.good])

    @property
    def running(self) -> int:
        """How many members carry duty and deliver."""
        return len([1 for node in self.nodes if node.role == "duty" and node.delivers])

    @property
    def empty_places(self) -> int:
        """How many places are empty as far as the control knows, and nothing is being started for them."""
        roles = [node.role for node in self.nodes]
        return self.places - roles.count("duty") - roles.count("starting")

    @property
    def delivers(self) -> bool:
        """Whether it would deliver on duty."""
        if self.lost or self.stopped:
            return False
        if self.plan.active and (self.outage is not None or self.switchovers):
            return False
        return self.running >= self.needed

    @property
    def good(self) -> bool:
        """Whether it is ready as a train: its criterion holds, or could at once."""
        if self.lost or self.outage is not None or self.switchovers:
            return False
        return sum(node.good and node.role != "starting" for node in self.nodes) >= self.needed

    @property
    def seems_good(self) -> bool:
        """Whether it is ready as far as anyone knows."""
        return self.good

    @property
    def could_start(self) -> bool:
        """Whether, while being started, its criterion is still within reach."""
        return not self.lost and self.outage is None and self.good_members >= self.needed

    @property
    def spurious(self) -> bool:
        """Whether it acts needlessly: as many members do as are required."""
        return sum(node.spurious for node in self.nodes) >= max(self.required, 1)

    @property
    def up(self) -> bool:
        """Whether it delivers, and does not act needlessly."""
        return self.delivers and not (self.may_act and self.spurious)

    @property
    def failed_members(self) -> int:
        """How many members are failed, known or hidden."""
        return sum(node.failed if isinstance(node, Item) else not node.good for node in self.nodes)

    @property
    def capacity(self) -> float:
        """Share of its function that is delivered."""
        if self.lost or self.stopped or (self.may_act and self.spurious):
            return 0.0
        if self.plan.active and (self.outage is not None or self.switchovers):
            return 0.0
        total = 0.0
        for node in self.nodes:
            if node.role == "duty" and node.delivers:
                share = node.kind.capacity if isinstance(node, Item) else node.capacity / self.required
                total += 1.0 / self.required if share is None else share
        return min(total, 1.0)

    def trains(self) -> Iterator[Group]:
        """Yield the groups among its members."""
        for node in self.nodes:
            if isinstance(node, Group):
                yield node


Node = Item | Group
