"""The plain arrangement: each group cut down to the units that it requires."""

from __future__ import annotations

from markov.evaluation.dependence import changed, relieved
from markov.model import Group, LoadSharing, Member, Model
from markov.quantities import Number, Quantity


def plain_arrangement(model: Model) -> Model:
    """Return the plant with each group cut down to its `required` first units, and without what is then in no group.

    A kind that a crew repairs and no group holds would else stand outside of the system and still load the crew.
    """
    groups = {name: _plain(model, name) for name in model.groups}
    inside = {member.name for group in groups.values() for member in group.members}
    cut = {name for train in model.trains - inside for name in model.with_trains(train)}
    groups = {name: group for name, group in groups.items() if name not in cut}
    plain = changed(model, groups=groups, targets=())
    kept = {member.name for group in groups.values() for member in group.members} | {*plain.named_in_any_phase}
    gone = {member.name for group in model.groups.values() for member in group.members} - kept
    crews = model.crews
    for name in gone:
        crews = {key: relieved(crew, name) for key, crew in crews.items()}
    spares = {
        key: pool.model_copy(update={"for_": tuple(name for name in pool.for_ if name not in gone)})
        for key, pool in model.spares.items()
    }
    return changed(
        plain,
        crews={key: crew for key, crew in crews.items() if crew.repairs},
        spares={key: pool for key, pool in spares.items() if pool.for_},
    )


def _plain(model: Model, name: str) -> Group:
    """Cut a group down to the units that it requires, in the phase that requires most."""
    group = model.groups[name]
    members: list[Member] = []
    left = max([group.required, *(phase.required.get(name, 0) for phase in model.phases)])
    for member in group.members:
        count = min(member.count, left)
        if count:
            members.append(member.model_copy(update={"count": count}))
            left -= count
    nothing = {"on_duty": None, "redundancy": "active", "dormancy_factor": None, "coverage": None, "switchover": None}
    return group.model_copy(
        update={**nothing, "members": tuple(members), "load_sharing": _factors(group, sum(m.count for m in members))}
    )


def _factors(group: Group, most: int) -> LoadSharing | None:
    """Keep the load of each unit as it was in the full group: a power of its places becomes factors by number."""
    sharing = group.load_sharing
    if sharing is None or sharing.exponent is None:
        return sharing
    exact = {number: sharing.factor(number, group.duty_places) for number in range(1, most + 1)}
    table = {
        number: Quantity(str(factor), "share", factor, (), Number(factor, "share")) for number, factor in exact.items()
    }
    return LoadSharing(table=table)
