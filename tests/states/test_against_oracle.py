"""Holds the rule engine against an independent enumeration, item by item."""

from __future__ import annotations

import random
import re
from collections import defaultdict
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from markov.model import Model
from markov.states import GeneratedSpace, generate
from tests.states.oracle import Spec, TooLarge, enumerate_chain, names, numbers

TIMES = (0.7, 6.0)


# ------------------------------------------------------------------------------------------------ the thin adapter


def as_mapping(spec: Spec) -> dict[str, Any]:
    """Write the plain numbers of a spec as the language has them."""

    def share(value: Any) -> str:
        return decimal(Fraction(value))

    def hours(value: Any) -> str:
        return f"{decimal(Fraction(value))} h"

    written: dict[str, Any] = {"units": {}, "groups": {}, "crews": {}, "system": spec["system"]}
    for name, unit in spec["units"].items():
        written["units"][name] = {"failure_rate": f"{decimal(Fraction(unit['failure_rate']))} /h"}
        for key, write in {
            "repair_time": hours,
            "logistic_delay": hours,
            "start_failure": share,
            "capacity": share,
            "repair_stages": int,
        }.items():
            if key in unit:
                written["units"][name][key] = write(unit[key])
    for name, group in spec.get("groups", {}).items():
        members = [{"unit": unit, "count": count} for unit, count in group["members"]]
        into: dict[str, Any] = {"members": members}
        for key in ("required", "on_duty", "redundancy", "return_to_preferred", "after_repair", "while_down"):
            if key in group:
                into[key] = group[key]
        if "dormancy_factor" in group:
            into["dormancy_factor"] = share(group["dormancy_factor"])
        switchover: dict[str, Any] = {}
        if "coverage" in group:
            listed = [share(each) for each in group["coverage"]]
            switchover["coverage"] = listed[0] if len(listed) == 1 else listed
        if "switchover_time" in group:
            switchover |= {"time": hours(group["switchover_time"]), "stages": group.get("switchover_stages", 1)}
        if "outcome" in group:
            switchover["uncovered"] = {"outcome": group["outcome"]}
            if "outcome_time" in group:
                switchover["uncovered"]["time"] = hours(group["outcome_time"])
        if switchover:
            into["switchover"] = switchover
        written["groups"][name] = into
    for name, crew in spec.get("crews", {}).items():
        written["crews"][name] = dict(crew)
    if "while_down" in spec:
        written["while_down"] = spec["while_down"]
    if spec.get("initial"):
        written["initial"] = {name: {"failed": number} for name, number in spec["initial"].items()}
    return {key: value for key, value in written.items() if value}


def decimal(value: Fraction) -> str:
    """Write a fraction whose denominator is a power of ten, exactly."""
    digits = 0
    while (value * 10**digits).denominator != 1:
        digits += 1
        assert digits < 30, f"{value} has no end as a decimal"
    whole = str(int(value * 10**digits)).rjust(digits + 1, "0")
    return f"{whole[: len(whole) - digits]}.{whole[len(whole) - digits :]}" if digits else whole


def rewards_of(space: GeneratedSpace, spec: Spec) -> dict[str, NDArray[np.float64]]:
    """Return what is compared, one number for each state of the engine, by name."""
    arrows = space.arrows
    exact = [float(rate.exact) for rate in space.kinds.rates.rates]
    rates = np.array([exact[kind.rate] for kind in space.kinds.kinds])[arrows.kind] * arrows.multiple
    happening: dict[str, NDArray[np.float64]] = defaultdict(lambda: np.zeros(space.size))

    def count(name: str, counted: NDArray[np.float64]) -> None:
        np.add.at(happening[name], arrows.source, rates * counted)

    for number, kind in enumerate(space.kinds.kinds):
        taken = (arrows.kind == number).astype(float)
        for slot in kind.starts:
            count(f"{kind.island}: starts of {slot.split('.')[-1]}", taken)
        if kind.repaired:
            count(f"{kind.island}: repairs of {kind.repaired.split('.')[-1]}", taken)

    rewards = {
        "units failed": space.failed(None),
        "capacity": space.capacity(None),
        "without redundancy": space.without_redundancy(None).astype(float),
    }
    grouped = grouped_kinds(spec)
    for layout in space.plan.islands:
        place = layout.node.name
        if place in spec["groups"] or place not in grouped:
            rewards[f"{place}: units failed"] = space.failed(place)
        rewards[f"{place}: capacity"] = space.capacity(place)
        rewards[f"{place}: delivers"] = space.delivers(place).astype(float)
    for pool in space.pools(None):
        calling, busy = space.calling(pool), space.crews_at_work(pool)
        rewards[f"{pool.name}: busy"] = busy
        rewards[f"{pool.name}: waiting"] = calling - busy
        repairs = spec["crews"][pool.name]["repairs"]
        ended = np.array([float(kind.repaired.split(".")[-1] in repairs) for kind in space.kinds.kinds])[arrows.kind]
        before = calling[arrows.source] - ended
        new = np.maximum(calling[arrows.target] - before, 0)
        count(f"{pool.name}: calls", new)
        count(f"{pool.name}: calls that wait", np.maximum(new - np.maximum(pool.size - before, 0), 0))
    return {**rewards, **{name: values for name, values in happening.items() if values.any()}}


def grouped_kinds(spec: Spec) -> set[str]:
    return {kind for group in spec["groups"].values() for kind, _ in group["members"]}


def of_engine(spec: Spec) -> dict[str, float]:
    """Return all numbers by the engine; those of a place that it leaves out of the chain are absent."""
    outside = [*spec["groups"], *(kind for kind in spec["units"] if kind not in grouped_kinds(spec))]
    space = generate(Model.from_mapping(as_mapping(spec)), tuple(outside))
    matrix = np.zeros((space.size, space.size))
    arrows = space.arrows
    for source, target, kind, multiple in zip(arrows.source, arrows.target, arrows.kind, arrows.multiple, strict=True):
        if source != target:
            matrix[source, target] += float(space.kinds.rates.rates[space.kinds.kinds[kind].rate].exact) * multiple
    matrix -= np.diag(matrix.sum(axis=1))
    first = np.zeros(space.size)
    for state, share in space.start:
        first[state] += float(share)
    return numbers(matrix, first, space.up, rewards_of(space, spec), TIMES)


def of_oracle(spec: Spec, most: int = 5000) -> dict[str, float]:
    """Return all numbers by the oracle."""
    chain = enumerate_chain(spec, most)
    return numbers(chain.generator(), chain.first(), chain.up(), chain.rewards(), TIMES)


def disagreements(spec: Spec, engine: Mapping[str, float], oracle: Mapping[str, float]) -> list[str]:
    """Return every number on which the two differ, in words.

    A place outside the system that meets it at no crew is left out by the engine.
    """
    known = {name.split(":")[0] for name in engine}
    assert known >= set(names(spec["system"]))
    found = []
    for name in sorted({*engine, *oracle}):
        if ":" in name and name.split(":")[0] not in known:
            continue
        ours, theirs = engine.get(name, 0.0), oracle.get(name, 0.0)
        if ours != theirs and abs(ours - theirs) > 1e-9 * abs(theirs) + 1e-15:
            found.append(f"{name}: engine {ours!r}, oracle {theirs!r}")
    return found


# --------------------------------------------------------------------------------------------------- random specs


def draw_spec(rng: random.Random, largest: int = 4) -> Spec:
    """Draw a small spec that combines features of the language at random."""

    def sometimes(chance: float) -> bool:
        return rng.random() < chance

    def number(*values: str) -> Fraction:
        return Fraction(rng.choice(values))

    units: dict[str, Any] = {}
    for name in ("pump", "fan", "valve")[: rng.choice([1, 2, 2, 3])]:
        unit: dict[str, Any] = {"failure_rate": number("0.02", "0.05", "0.1", "0.3")}
        repair = rng.choice(["never", "at once"] + ["takes time"] * 14)
        if repair == "at once":
            unit["repair_time"] = Fraction(0)
        if repair == "takes time":
            unit["repair_time"] = number("1", "2", "5", "10")
            if sometimes(0.25):
                unit["repair_stages"] = 2
            if sometimes(0.2):
                unit["logistic_delay"] = number("0.5", "4")
        if repair != "at once" and sometimes(0.4):
            unit["start_failure"] = number("0.1", "0.25")
        if sometimes(0.15):
            unit["capacity"] = number("0.3", "0.5")
        units[name] = unit

    groups: dict[str, Any] = {}
    left = rng.choice([largest, largest, largest - 1])
    for name in ("supply", "drain", "cooling")[: rng.choice([1, 1, 2, 2, 3])]:
        if left <= 0:
            break
        members = []
        kinds = rng.sample(list(units), rng.randint(1, len(units)))
        for kind in kinds:
            count = min(left, rng.choice([1, 1, 1, 2, 2, 3]))
            if count:
                members.append((kind, count))
                left -= count
        groups[name] = draw_group(rng, members)

    repaired = [name for name, unit in units.items() if unit.get("repair_time")]
    rng.shuffle(repaired)
    crews: dict[str, Any] = {}
    if repaired and sometimes(0.8):
        cut = len(repaired) if sometimes(0.7) else rng.randint(1, len(repaired))
        for name, kinds in (("fitters", repaired[:cut]), ("riggers", repaired[cut:])):
            if kinds and (name == "fitters" or sometimes(0.5)):
                crews[name] = {"size": rng.choice([1, 1, 2]), "repairs": kinds}
                if sometimes(0.5):
                    crews[name]["priority"] = rng.sample(kinds, len(kinds))

    named = [name for name in groups if name == "supply" or sometimes(0.9)]
    grouped = {kind for group in groups.values() for kind, _ in group["members"]}
    named += [name for name in units if sometimes(0.4 if name not in grouped else 0.08)]
    spec: dict[str, Any] = {"units": units, "groups": groups, "crews": crews, "system": draw_success(rng, named)}
    used = {*grouped, *names(spec["system"]), *(kind for crew in crews.values() for kind in crew["repairs"])}
    spec["units"] = {name: unit for name, unit in units.items() if name in used}

    in_system = set(names(spec["system"]))
    if sometimes(0.4):
        standby_only = all(name in groups and not is_active(groups[name]) for name in in_system)
        spec["while_down"] = rng.choice(["stop", "stop", "standby_rate" if standby_only else "continue"])
    for name, group in groups.items():
        if name in in_system and sometimes(0.2):
            group["while_down"] = rng.choice(["continue", "stop", "continue" if is_active(group) else "standby_rate"])
    if sometimes(0.15):
        spec["initial"] = draw_initial(rng, spec)
    return spec


def draw_group(rng: random.Random, members: list[tuple[str, int]]) -> dict[str, Any]:
    """Draw the rules of one group."""
    size = sum(count for _, count in members)
    required = rng.choice([1, 1, rng.randint(1, size)])
    group: dict[str, Any] = {"members": members, "required": required}
    redundancy = rng.choice(["active", "hot_standby", "warm_standby", "cold_standby", "warm_standby", "cold_standby"])
    if required == size and rng.random() < 0.5:
        redundancy = ""
    if redundancy:
        group["redundancy"] = redundancy
    if redundancy == "warm_standby":
        group["dormancy_factor"] = Fraction(rng.choice(["0.1", "0.5"]))
    if redundancy not in ("", "active") and rng.random() < 0.3:
        group["on_duty"] = rng.randint(required, size)
    if size == 1:
        return group
    if rng.random() < 0.7:
        group["coverage"] = [
            Fraction(rng.choice(["0.6", "0.9", "0.8", "1", "0"])) for _ in range(rng.choice([1, 1, 2]))
        ]
        outcome = rng.choice(
            ["until_repair", "manual_takeover", "restart", "restart_without_failed", "all_failed", "lost"] * 3
            + ["manual_takeover", "restart_without_failed", "until_repair"] * 3
        )
        if outcome != "until_repair" or rng.random() < 0.5:
            group["outcome"] = outcome
        if outcome in ("manual_takeover", "restart", "restart_without_failed"):
            group["outcome_time"] = Fraction(rng.choice(["0.5", "2", "4"]))
    if rng.random() < 0.45:
        group["switchover_time"] = Fraction(rng.choice(["0.25", "1", "2.5"]))
        group["switchover_stages"] = rng.choice([1, 1, 2])
    if not is_active(group):
        if rng.random() < 0.35:
            group["return_to_preferred"] = True
        if rng.random() < 0.35:
            group["after_repair"] = "start_again"
    return group


def is_active(group: Mapping[str, Any]) -> bool:
    return group.get("redundancy", "active") == "active"


def draw_success(rng: random.Random, named: list[str]) -> Any:
    """Draw a success criterion in which every name stands at least once."""
    if len(named) == 1:
        return named[0]
    parts: list[Any] = list(named)
    rng.shuffle(parts)
    if len(parts) > 2 and rng.random() < 0.5:
        parts = [draw_success(rng, parts[:2]), *parts[2:]]
    if rng.random() < 0.2:
        parts.append(rng.choice(named))
    form = rng.choice(["all_of", "any_of", "at_least"])
    if form == "at_least":
        return {"at_least": rng.randint(1, len(parts)), "of": parts}
    return {form: parts}


def draw_initial(rng: random.Random, spec: Spec) -> dict[str, int]:
    """Draw units that are failed at the start."""
    places = [
        (f"{name}.{kind}", kind, count) for name, group in spec["groups"].items() for kind, count in group["members"]
    ]
    grouped = {kind for _, kind, _ in places}
    places += [(kind, kind, 1) for kind in names(spec["system"]) if kind in spec["units"] and kind not in grouped]
    possible = [(key, count) for key, kind, count in places if spec["units"][kind].get("repair_time")]
    chosen = rng.sample(possible, min(len(possible), rng.choice([1, 1, 2])))
    return {key: rng.randint(1, count) for key, count in chosen}
