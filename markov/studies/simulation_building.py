"""A plant as it stands at time 0, set up from the numbers of a model."""

from __future__ import annotations

from collections.abc import Iterator

from markov.model import AllOf, AnyOf, AtLeast, Named, Success, names
from markov.studies.simulation_draws import Draws
from markov.studies.simulation_plan import FaultKind, Kind, Plan
from markov.studies.simulation_plant import Group, Item

#: How counts call the whole plant that `system` names.
SYSTEM = ""


class Plant:
    """All items and groups of a plant.

    Attributes
    ----------
    items : list of Item
        Trains included, each once.
    groups : mapping of name to Group
        Inner groups after those around them.
    alone : mapping of name to Item
        Items outside of groups.
    """

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        self.items: list[Item] = []
        self.groups: dict[str, Group] = {}
        self.alone: dict[str, Item] = {}
        inside = {member.name for group in plan.groups.values() for member in group.members if member.is_group}
        for name in plan.groups:
            if name not in inside:
                self._build(name, None, 0)
        for placement in plan.model.placements:
            if placement.group is None:
                item = Item(plan.kinds[placement.unit], None, 0)
                self.alone[placement.unit] = item
                self.items.append(item)
        self._name_subjects()

    def _build(self, name: str, around: Group | None, rank: int) -> Group:
        plan = self.plan.groups[name]
        group = Group(plan)
        group.group, group.rank = around, rank
        self.groups[name] = group
        for position, member in enumerate(plan.members):
            if member.is_group:
                train = self._build(member.name, group, position)
                group.nodes.append(train)
                group.items += train.items
                continue
            for _ in range(member.count):
                item = Item(self.plan.kinds[member.name], group, position)
                group.nodes.append(item)
                group.items.append(item)
                self.items.append(item)
        group.may_act = any(mode.spurious for item in group.items for mode in item.kind.modes)
        outer = around.while_down if around is not None else self.plan.while_down
        group.while_down = plan.while_down if plan.while_down is not None else outer
        group.places = len(group.nodes) if plan.active else plan.on_duty or plan.required
        return group

    def _name_subjects(self) -> None:
        named: set[str] = set(names(self.plan.system))
        for phase in self.plan.phases:
            if phase.system is not None:
                named.update(names(phase.system))
        for group in self.groups.values():
            chain = list(_around(group))
            inside = any(each.name in named for each in chain)
            group.subjects = (*(each.name for each in chain), *((SYSTEM,) if inside else ()))
        for item in self.items:
            around = () if item.group is None else item.group.subjects
            alone = (SYSTEM,) if item.group is None and item.kind.name in named else ()
            item.subjects = (item.kind.name, *around, *alone)

    @property
    def top(self) -> list[Group]:
        """Groups that are no trains."""
        return [group for group in self.groups.values() if group.group is None]

    def items_called(self, name: str) -> list[Item]:
        """Return the items that a kind, ``GROUP.unit`` or a group means."""
        if name in self.groups:
            return self.groups[name].items
        if name in self.plan.kinds:
            return [item for item in self.items if item.kind.name == name]
        group, _, unit = name.rpartition(".")
        for split in range(1, len(name)):
            if name[split] == "." and name[:split] in self.groups and name[split + 1 :] in self.plan.kinds:
                group, unit = name[:split], name[split + 1 :]
        return [
            item for item in self.groups[group].items if item.kind.name == unit and item.group is self.groups[group]
        ]

    def switch_called(self, name: str) -> Group | None:
        """Return the group whose switch ``GROUP.switch`` means; None where it means something else."""
        group, _, last = name.rpartition(".")
        if last == "switch" and group in self.groups and self.groups[group].switch is not None:
            return self.groups[group]
        return None

    def place_initial(self, draws: Draws) -> list[Item]:
        """Set the faults of time 0, from the lowest rank up; return those that are known.

        Within a kind the known faults have the lowest ranks, the hidden ones the next.
        """
        known: list[Item] = []
        for key, faults in self.plan.model.initial.items():
            items = self.items_called(key)[::-1]
            for number, item in enumerate(items[: faults.failed + faults.hidden]):
                item.failed = True
                item.known = number < faults.failed
                item.depth = draws.uniform()
                item.mode = _drawn_mode(item.kind, item.known, draws)
                if item.known:
                    known.append(item)
        return known


def _around(group: Group | None) -> Iterator[Group]:
    while group is not None:
        yield group
        group = group.group


def _drawn_mode(kind: Kind, known: bool, draws: Draws) -> FaultKind:
    weights = [mode.share * (mode.detected if known else 1.0 - mode.detected) for mode in kind.modes]
    if not any(weights):
        weights = [mode.share for mode in kind.modes]
    return kind.modes[draws.index(weights)]


def holds(success: Success, up: dict[str, bool]) -> bool:
    """Return whether a criterion holds, given what is up."""
    match success:
        case Named():
            return up[success.name]
        case AllOf():
            return all(holds(each, up) for each in success.of)
        case AnyOf():
            return any(holds(each, up) for each in success.of)
        case AtLeast():
            return sum(holds(each, up) for each in success.of) >= success.count


def delivered(success: Success, shares: dict[str, float]) -> float:
    """Return the delivered share of a criterion: the least, the greatest or the k-th greatest."""
    match success:
        case Named():
            return shares[success.name]
        case AllOf():
            return min(delivered(each, shares) for each in success.of)
        case AnyOf():
            return max(delivered(each, shares) for each in success.of)
        case AtLeast():
            return sorted((delivered(each, shares) for each in success.of), reverse=True)[success.count - 1]
