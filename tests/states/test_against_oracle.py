"""Holds the rule engine against an independent enumeration, item by item."""

from __future__ import annotations

import functools
import random
from collections import defaultdict
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import markov
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
        place = layout.name
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
    return numbers_of(generate(Model.from_mapping(as_mapping(spec)), tuple(outside)), spec)


def numbers_of(space: GeneratedSpace, spec: Spec) -> dict[str, float]:
    """Return all numbers of a generated chain."""
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
        unit: dict[str, Any] = {"failure_rate": number(*["0.02", "0.05", "0.1", "0.3"] * 5, "0")}
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


@functools.cache
def draw_fitting(seed: int, largest: int, most: int) -> tuple[Spec, dict[str, float]]:
    """Draw specs from a seed until one has few enough states; return it with the numbers of the oracle."""
    rng = random.Random(seed)
    while True:
        spec = draw_spec(rng, largest)
        try:
            return spec, of_oracle(spec, most)
        except TooLarge:
            continue


@pytest.mark.parametrize("seed", range(300))
def test_the_engine_agrees_with_the_oracle_on_a_random_spec(seed: int) -> None:
    spec, oracle = draw_fitting(seed, largest=4, most=120)
    assert disagreements(spec, of_engine(spec), oracle) == [], spec


@pytest.mark.long
@pytest.mark.parametrize("seed", range(1_000, 1_200))
def test_the_engine_agrees_with_the_oracle_on_a_larger_random_spec(seed: int) -> None:
    spec, oracle = draw_fitting(seed, largest=5, most=700)
    assert disagreements(spec, of_engine(spec), oracle) == [], spec


def test_the_random_specs_use_every_feature() -> None:
    used: set[str] = set()
    for seed in range(300):
        spec, _ = draw_fitting(seed, largest=4, most=120)
        used |= {key for key in ("initial", "while_down") if spec.get(key)}
        used |= {f"while down: {spec.get('while_down')}", f"{len(spec['groups'])} groups"}
        used |= {key for unit in spec["units"].values() for key in unit}
        used |= {"renewed at once" for unit in spec["units"].values() if unit.get("repair_time") == 0}
        used |= {"outside" for name in spec["groups"] if name not in set(names(spec["system"]))}
        used |= {"serves in several" for kind in spec["units"] if serves_in(spec, kind) > 1}
        used |= {form for form in ("all_of", "any_of", "at_least") if form in spec["system"]}
        used |= {"shared crew" for crew in spec["crews"].values() if len(crew["repairs"]) > 1}
        for group in spec["groups"].values():
            used |= {*group, str(group.get("outcome")), str(group.get("redundancy"))}
            used |= {f"here: {group.get('while_down')}", f"{len(group['members'])} kinds"}
            used |= {"coverage list" for _ in group.get("coverage", ())[1:]}
    assert used >= {
        *("initial", "while down: stop", "while down: standby_rate", "here: stop", "here: continue"),
        *("here: standby_rate", "1 groups", "2 groups", "3 groups", "1 kinds", "2 kinds", "3 kinds"),
        *("repair_time", "repair_stages", "logistic_delay", "start_failure", "capacity", "renewed at once"),
        *("outside", "serves in several", "all_of", "any_of", "at_least", "shared crew", "coverage list"),
        *("required", "on_duty", "return_to_preferred", "after_repair", "switchover_time", "switchover_stages"),
        *("until_repair", "manual_takeover", "restart", "restart_without_failed", "all_failed", "lost"),
        *("active", "hot_standby", "warm_standby", "cold_standby"),
    }


def serves_in(spec: Spec, kind: str) -> int:
    grouped = sum(kind == member for group in spec["groups"].values() for member, _ in group["members"])
    return grouped + (kind in set(names(spec["system"])))


# --------------------------------------------------------------------------------------- chains worked out by hand


def test_an_oracle_that_forgets_a_rule_is_found_out() -> None:
    spec = cold_pair(coverage=[Fraction("0.8")])
    assert disagreements(spec, of_engine(spec), of_oracle({**spec, "groups": cold_pair()["groups"]})) != []


def worked(arrows: Mapping[tuple[str, str], float], up: str, **rewards: Mapping[str, float]) -> dict[str, float]:
    """Return the numbers of a chain that was worked out by hand; the first state named is the initial one.

    States are words; `up` lists those in which the system is up; a reward lists its value where it is not zero.
    """
    states = list(dict.fromkeys(state for pair in arrows for state in pair))
    matrix = np.zeros((len(states), len(states)))
    for (source, target), rate in arrows.items():
        matrix[states.index(source), states.index(target)] += rate
    matrix -= np.diag(matrix.sum(axis=1))
    values = {
        name.replace("_", " "): np.array([float(value.get(state, 0)) for state in states])
        for name, value in rewards.items()
    }
    first = np.eye(len(states))[0]
    return numbers(matrix, first, np.array([state in up.split() for state in states]), values, TIMES)


def differences(spec: Spec, by_hand: Mapping[str, float], extra: Mapping[str, str] | None = None) -> list[str]:
    """Return every number on which the engine or the oracle differs from a chain worked out by hand."""
    found = []
    for who, theirs in (("engine", of_engine(spec)), ("oracle", of_oracle(spec))):
        for name, value in by_hand.items():
            there = name
            for ours, word in (extra or {}).items():
                there = there.replace(ours, word)
            got = theirs.get(there, 0.0)
            if got != value and abs(got - value) > 1e-9 * abs(value) + 1e-15:
                found.append(f"{who}: {there}: {got!r}, by hand {value!r}")
    return found


def unit(rate: str, repair: str | None = None, **more: Any) -> dict[str, Any]:
    said = {} if repair is None else {"repair_time": Fraction(repair)}
    return {"failure_rate": Fraction(rate), **said, **more}


def plant(units: dict[str, Any], system: Any, group: dict[str, Any] | None = None, **more: Any) -> dict[str, Any]:
    """A spec with one group "g" at most."""
    return {"units": units, "groups": {"g": group} if group else {}, "crews": {}, "system": system, **more}


def cold_pair(repair: str | None = "5", crews: int = 0, **group: Any) -> dict[str, Any]:
    """Two pumps that fail every ten hours, one on duty, one that cannot fail while waiting."""
    members = {"members": [("pump", 2)], "redundancy": "cold_standby", **group}
    spec = plant({"pump": unit("0.1", repair)}, "g", members)
    return {**spec, "crews": {"crew": {"size": crews, "repairs": ["pump"]}}} if crews else spec


def test_the_lock_gate_drive_has_the_published_numbers() -> None:
    spec = plant(
        {"drive": unit("0.0002", "24", start_failure=Fraction("0.02"))},
        "g",
        {
            "members": [("drive", 2)],
            "redundancy": "cold_standby",
            "coverage": [Fraction("0.95")],
            "outcome": "manual_takeover",
            "outcome_time": Fraction("0.75"),
        },
        crews={"fitters": {"size": 1, "repairs": ["drive"]}},
    )
    for found in (of_engine(spec), of_oracle(spec)):
        assert found["steady-state availability"] == pytest.approx(0.999874485, abs=5e-10)
        assert found["failure frequency"] * 8760 == pytest.approx(0.128652, abs=5e-7)
        assert found["mean time to first failure"] == pytest.approx(68378.6, abs=0.05)
        down = found["steady-state unavailability"] / found["failure frequency"]
        assert down == pytest.approx(8.54640, abs=5e-6)


def test_a_start_lost_during_the_switchover_begins_again_in_full() -> None:
    # Three hot pumps, no repair, a switchover of 2 h in two stages.  "S1W": one failed, one at stage 1, one waiting.
    spec = plant(
        {"pump": unit("0.1")},
        "g",
        {
            "members": [("pump", 3)],
            "redundancy": "hot_standby",
            "switchover_time": Fraction(2),
            "switchover_stages": 2,
        },
    )
    by_hand = worked(
        {
            ("DWW", "S1W"): 0.1,
            ("DWW", "DW"): 0.2,
            ("S1W", "S1"): 0.1 + 0.1,
            ("S1W", "S2W"): 1.0,
            ("S2W", "S1"): 0.1,  # lost at its second stage: the next begins with the first
            ("S2W", "S2"): 0.1,
            ("S2W", "DW"): 1.0,
            ("DW", "S1"): 0.1,
            ("DW", "D"): 0.1,
            ("S1", "none"): 0.1,
            ("S1", "S2"): 1.0,
            ("S2", "none"): 0.1,
            ("S2", "D"): 1.0,
            ("D", "none"): 0.1,
        },
        up="DWW DW D",
        starts={"DWW": 0.1, "S1W": 0.1, "S2W": 0.1, "DW": 0.1},
    )
    assert differences(spec, by_hand, {"starts": "g: starts of pump"}) == []


def test_a_repair_during_a_switchover_sends_the_start_back_to_waiting() -> None:
    by_hand = worked(
        {
            ("all_good", "starting"): 0.1,
            ("starting", "all_good"): 0.2,
            ("starting", "one_left"): 0.5,
            ("one_left", "all_good"): 0.2,
            ("one_left", "none"): 0.1,
            ("none", "one_left"): 0.4,
        },
        up="all_good one_left",
        units_failed={"starting": 1, "one_left": 1, "none": 2},
    )
    assert differences(cold_pair(switchover_time=Fraction(2)), by_hand) == []


def test_an_uncovered_fault_waits_for_the_repair() -> None:
    by_hand = worked(
        {
            ("all_good", "one_left"): 0.08,
            ("all_good", "out"): 0.02,
            ("out", "all_good"): 0.2,
            ("one_left", "all_good"): 0.2,
            ("one_left", "none"): 0.1,
            ("none", "one_left"): 0.4,
        },
        up="all_good one_left",
        units_failed={"out": 1, "one_left": 1, "none": 2},
        starts={"all_good": 0.08},  # the repair puts a good unit on duty without a start attempt
    )
    assert differences(cold_pair(coverage=[Fraction("0.8")]), by_hand, {"starts": "g: starts of pump"}) == []


def test_the_last_repair_ends_a_restart_outage() -> None:
    spec = plant(
        {"pump": unit("0.1", "5")},
        "g",
        {
            "members": [("pump", 2)],
            "redundancy": "active",
            "coverage": [Fraction(0)],
            "outcome": "restart",
            "outcome_time": Fraction(4),
        },
    )
    by_hand = worked(
        {
            ("all_good", "out_one"): 0.2,
            ("out_one", "all_good"): 0.2 + 0.25,
            ("out_one", "out_two"): 0.1,  # a unit shut out keeps the duty rate
            ("out_two", "out_one"): 0.4,
            ("out_two", "all_good"): 0.25,
        },
        up="all_good",
        units_failed={"out_one": 1, "out_two": 2},
        repairs={"out_one": 0.2, "out_two": 0.4},  # what the restart renews is not a completed repair
    )
    assert differences(spec, by_hand, {"repairs": "g: repairs of pump"}) == []


def test_an_uncovered_fault_fails_the_healthy_units_which_one_crew_repairs_one_by_one() -> None:
    spec = plant(
        {"pump": unit("0.1", "5")},
        "g",
        {"members": [("pump", 2)], "redundancy": "active", "coverage": [Fraction("0.8")], "outcome": "all_failed"},
        crews={"crew": {"size": 1, "repairs": ["pump"]}},
    )
    by_hand = worked(
        {
            ("all_good", "one_left"): 0.16,
            ("all_good", "none"): 0.04,
            ("one_left", "none"): 0.1,
            ("one_left", "all_good"): 0.2,
            ("none", "one_left"): 0.2,
        },
        up="all_good one_left",
        waiting={"none": 1},
        calls={"all_good": 0.16 + 2 * 0.04, "one_left": 0.1},
        refused={"all_good": 0.04, "one_left": 0.1},
    )
    words = {"waiting": "crew: waiting", "calls": "crew: calls", "refused": "crew: calls that wait"}
    assert differences(spec, by_hand, words) == []


def test_a_lost_group_is_down_for_good_though_its_units_are_repaired() -> None:
    by_hand = worked(
        {
            ("all_good", "one_left"): 0.08,
            ("all_good", "lost"): 0.02,
            ("lost", "lost_and_all_good"): 0.2,
            ("one_left", "all_good"): 0.2,
            ("one_left", "none"): 0.1,
            ("none", "one_left"): 0.4,
        },
        up="all_good one_left",
        units_failed={"lost": 1, "one_left": 1, "none": 2},
    )
    assert differences(cold_pair(coverage=[Fraction("0.8")], outcome="lost"), by_hand) == []


def test_a_failed_return_to_the_preferred_member_leaves_the_running_one_on_duty() -> None:
    spec = plant(
        {"main": unit("0.1", "5", start_failure=Fraction("0.25")), "spare": unit("0.2", "2")},
        "g",
        {"members": [("main", 1), ("spare", 1)], "redundancy": "cold_standby", "return_to_preferred": True},
    )
    by_hand = worked(
        {
            ("main", "spare_alone"): 0.1,
            ("spare_alone", "main"): 0.75 * 0.2,  # a quarter of the returns fail, and the repair begins anew
            ("spare_alone", "none"): 0.2,
            ("none", "main_alone"): 0.2,
            ("none", "spare_alone"): 0.5,
            ("main_alone", "none"): 0.1,
            ("main_alone", "main"): 0.5,
        },
        up="main spare_alone main_alone",
        starts={"spare_alone": 0.2},
        repairs={"spare_alone": 0.2, "none": 0.2},
    )
    assert differences(spec, by_hand, {"starts": "g: starts of main", "repairs": "g: repairs of main"}) == []


def test_a_repair_that_was_interrupted_resumes_in_its_stage() -> None:
    units = {"urgent": unit("0.1", "2"), "slow": unit("0.2", "4", repair_stages=2)}
    spec = plant(units, {"all_of": ["urgent", "slow"]}, crews={"crew": {"size": 1, "repairs": ["urgent", "slow"]}})
    by_hand = worked(
        {
            ("good", "u"): 0.1,
            ("good", "s1"): 0.2,
            ("u", "good"): 0.5,
            ("u", "u+s1"): 0.2,  # never begun, which goes on as the first stage does
            ("s1", "u+s1"): 0.1,
            ("s1", "s2"): 0.5,
            ("s2", "u+s2"): 0.1,
            ("s2", "good"): 0.5,
            ("u+s1", "s1"): 0.5,
            ("u+s2", "s2"): 0.5,
        },
        up="good",
        waiting={"u+s1": 1, "u+s2": 1},
        busy={"u": 1, "s1": 1, "s2": 1, "u+s1": 1, "u+s2": 1},
    )
    assert differences(spec, by_hand, {"waiting": "crew: waiting", "busy": "crew: busy"}) == []


def test_a_crew_takes_a_begun_repair_before_one_of_the_same_kind_that_never_began() -> None:
    # One crew, an urgent unit, a slow kind (two stages) in two groups.  In a state, "!" marks the urgent unit's fault,
    # 0 a repair that never began, 1 and 2 a begun one by its stage; the crew works on what stands first.
    spec: dict[str, Any] = {
        "units": {"urgent": unit("0.1", "2"), "slow": unit("0.2", "4", repair_stages=2)},
        "groups": {"left": {"members": [("slow", 1)]}, "right": {"members": [("slow", 1)]}},
        "crews": {"crew": {"size": 1, "repairs": ["urgent", "slow"]}},
        "system": {"any_of": [{"all_of": ["left", "right"]}, "urgent"]},
    }
    by_hand = worked(
        {
            ("good", "!"): 0.1,
            ("good", "1"): 0.4,
            ("!", "good"): 0.5,
            ("!", "!0"): 0.4,
            ("!0", "1"): 0.5,
            ("!0", "!00"): 0.2,
            ("!00", "10"): 0.5,  # the two have the same chance, and look alike from here on
            ("1", "2"): 0.5,
            ("1", "10"): 0.2,
            ("1", "!1"): 0.1,
            ("2", "good"): 0.5,
            ("2", "20"): 0.2,
            ("2", "!2"): 0.1,
            ("10", "20"): 0.5,
            ("10", "!10"): 0.1,
            ("20", "1"): 0.5,
            ("20", "!20"): 0.1,
            ("!1", "1"): 0.5,
            ("!1", "!10"): 0.2,
            ("!2", "2"): 0.5,
            ("!2", "!20"): 0.2,
            ("!10", "10"): 0.5,  # the begun one first
            ("!20", "20"): 0.5,
        },
        up="good ! 1 2 10 20",
        waiting={"!0": 1, "!00": 2, "10": 1, "20": 1, "!1": 1, "!2": 1, "!10": 2, "!20": 2},
    )
    assert differences(spec, by_hand, {"waiting": "crew: waiting"}) == []


def test_the_logistic_delay_holds_no_crew_and_is_no_waiting() -> None:
    units = {"far": unit("0.1", "2", logistic_delay=Fraction(4)), "near": unit("0.2", "4")}
    spec = plant(units, {"any_of": ["far", "near"]}, crews={"crew": {"size": 1, "repairs": ["far", "near"]}})
    by_hand = worked(
        {
            ("good", "travel"): 0.1,
            ("good", "n"): 0.2,
            ("travel", "f"): 0.25,
            ("travel", "travel+n"): 0.2,
            ("n", "good"): 0.25,
            ("n", "travel+n"): 0.1,
            ("travel+n", "travel"): 0.25,
            ("travel+n", "f+n"): 0.25,
            ("f", "good"): 0.5,
            ("f", "f+n"): 0.2,
            ("f+n", "n"): 0.5,
        },
        up="good travel n f",
        waiting={"f+n": 1},
    )
    assert differences(spec, by_hand, {"waiting": "crew: waiting"}) == []


def test_nothing_fails_in_a_stopped_system_but_a_group_with_its_own_word_goes_on() -> None:
    spec: dict[str, Any] = {
        "units": {"belt": unit("0.1", "5"), "pump": unit("0.2", "2"), "light": unit("0.3", "4")},
        "groups": {
            "pumps": {"members": [("pump", 1)]},
            "lights": {"members": [("light", 1)], "while_down": "continue"},
        },
        "crews": {},
        "system": {"all_of": ["belt", "pumps", "lights"]},
        "while_down": "stop",
    }
    by_hand = worked(
        {
            ("good", "b"): 0.1,
            ("good", "p"): 0.2,
            ("good", "l"): 0.3,
            ("b", "good"): 0.2,
            ("p", "good"): 0.5,
            ("l", "good"): 0.25,
            ("b", "b+l"): 0.3,
            ("p", "p+l"): 0.3,
            ("b+l", "b"): 0.25,
            ("b+l", "l"): 0.2,
            ("p+l", "p"): 0.25,
            ("p+l", "l"): 0.5,
        },
        up="good",
        units_failed={"b": 1, "p": 1, "l": 1, "b+l": 2, "p+l": 2},
    )
    assert differences(spec, by_hand) == []


def test_manual_takeover_fills_every_empty_place_down_the_rank() -> None:
    # Four cold pumps, two of them needed on duty, nothing covered, no repair, a start fails with chance 1/4.
    # In a state: units on duty, units waiting; "!" while the outage lasts.
    q, p = 0.25, 0.75
    spec = plant(
        {"pump": unit("0.1", start_failure=Fraction(1, 4))},
        "g",
        {
            "members": [("pump", 4)],
            "required": 2,
            "redundancy": "cold_standby",
            "coverage": [Fraction(0)],
            "outcome": "manual_takeover",
            "outcome_time": Fraction(2),
        },
    )
    by_hand = worked(
        {
            ("22", "12!"): 0.2,
            ("12!", "02!"): 0.1,
            ("12!", "21"): 0.5 * p,
            ("12!", "20"): 0.5 * q * p,
            ("12!", "10"): 0.5 * q * q,
            ("02!", "20"): 0.5 * p * p,
            ("02!", "10"): 0.5 * 2 * p * q,
            ("02!", "00"): 0.5 * q * q,
            ("21", "11!"): 0.2,
            ("11!", "01!"): 0.1,
            ("11!", "20"): 0.5 * p,
            ("11!", "10"): 0.5 * q,
            ("01!", "10"): 0.5 * p,
            ("01!", "00"): 0.5 * q,
            ("20", "10"): 0.2,
            ("10", "00"): 0.1,
        },
        up="22 21 20",
        starts={"12!": 0.5 * (1 + q), "02!": 0.5 * 2, "11!": 0.5, "01!": 0.5},
        capacity={state: int(state[0]) / 2 for state in ("22", "12!", "21", "11!", "20", "10")},
    )
    assert differences(spec, by_hand, {"starts": "g: starts of pump"}) == []


def test_each_covered_fault_of_an_active_group_has_a_switchover_of_its_own() -> None:
    spec = plant(
        {"pump": unit("0.1", "5")},
        "g",
        {"members": [("pump", 3)], "redundancy": "active", "switchover_time": Fraction(2)},
    )
    # In a state: good units, switchovers under way.
    by_hand = worked(
        {
            ("30", "21"): 0.3,
            ("21", "20"): 0.5,
            ("21", "12"): 0.2,
            ("21", "30"): 0.2,
            ("20", "11"): 0.2,
            ("20", "30"): 0.2,
            ("12", "11"): 1.0,
            ("12", "02"): 0.1,
            ("12", "20"): 0.4,  # a repair ends all of them
            ("11", "10"): 0.5,
            ("11", "01"): 0.1,
            ("11", "20"): 0.4,
            ("10", "00"): 0.1,
            ("10", "20"): 0.4,
            ("02", "01"): 1.0,
            ("02", "10"): 0.6,
            ("01", "00"): 0.5,
            ("01", "10"): 0.6,
            ("00", "10"): 0.6,
        },
        up="30 20 10",
    )
    assert differences(spec, by_hand) == []


# ------------------------------------------------------------------------- where the text is easily read past


@pytest.mark.parametrize("outcome", ["manual_takeover", "restart_without_failed"])
def test_the_end_of_an_outage_readmits_an_active_group_whose_switchover_is_under_way(outcome: str) -> None:
    # "in `active` groups the good units are re-admitted", "the good ones are back": then they deliver.  In a state:
    # good units, "s" for a switchover under way, "!" for the outage.  The first fault is covered, the second is not.
    spec = plant(
        {"pump": unit("0.1")},
        "g",
        {
            "members": [("pump", 3)],
            "redundancy": "active",
            "coverage": [Fraction(1), Fraction(0)],
            "switchover_time": Fraction(4),
            "outcome": outcome,
            "outcome_time": Fraction(2),
        },
    )
    by_hand = worked(
        {
            ("3", "2s"): 0.3,
            ("2s", "2"): 0.25,
            ("2s", "1s!"): 0.2,
            ("2", "1!"): 0.2,
            ("1s!", "1!"): 0.25,
            ("1s!", "1"): 0.5,
            ("1s!", "0"): 0.1,
            ("1!", "1"): 0.5,
            ("1!", "0"): 0.1,
            ("1", "0"): 0.1,
        },
        up="3 2 1",
    )
    assert differences(spec, by_hand) == []


def test_a_further_fault_does_not_let_an_active_group_in_an_outage_deliver_again() -> None:
    # Two of three needed, nothing covered, no repair: out at the first fault, and shut out it stays.
    spec = plant(
        {"pump": unit("0.1")},
        "g",
        {"members": [("pump", 3)], "required": 2, "redundancy": "active", "coverage": [Fraction(0)]},
    )
    by_hand = worked({("3", "2!"): 0.3, ("2!", "1!"): 0.2, ("1!", "0!"): 0.1}, up="3", capacity={"3": 1})
    assert differences(spec, by_hand) == []


def test_a_further_fault_does_not_end_the_switchover_of_an_active_group() -> None:
    spec = plant(
        {"pump": unit("0.1")},
        "g",
        {"members": [("pump", 3)], "required": 2, "redundancy": "active", "switchover_time": Fraction(2)},
    )
    by_hand = worked(
        {
            ("3", "2s"): 0.3,
            ("2s", "2"): 0.5,
            ("2s", "1s"): 0.2,
            ("2", "1"): 0.2,
            ("1s", "1"): 0.5,
            ("1s", "0"): 0.1,
            ("1", "0"): 0.1,
        },
        up="3 2",
        capacity={"3": 1, "2": 1, "1": 0.5},
    )
    assert differences(spec, by_hand) == []


def test_a_takeover_under_way_is_seen_through_when_another_place_becomes_uncovered() -> None:
    # "a unit lost meanwhile begins a new attempt ... A takeover under way completes when another place becomes
    # uncovered."  Two mains and two hot spares, the first fault covered, a later one not.
    # In a state: mains on duty, then D, S, W for spares on duty, being switched in, waiting; "!" for the outage.
    spec = plant(
        {"main": unit("0.1"), "spare": unit("0.2")},
        "g",
        {
            "members": [("main", 2), ("spare", 2)],
            "on_duty": 2,
            "redundancy": "hot_standby",
            "coverage": [Fraction(1), Fraction(0)],
            "switchover_time": Fraction(2),
        },
    )
    by_hand = worked(
        {
            ("2WW", "1SW"): 0.2,
            ("2WW", "2W"): 0.4,
            ("2W", "1W!"): 0.2,
            ("2W", "2"): 0.2,
            ("2", "1"): 0.2,
            ("1SW", "SW!"): 0.1,
            ("1SW", "1S"): 0.4,  # either spare fails: the other is being switched in, from the beginning
            ("1SW", "1DW"): 0.5,
            ("1S", "S"): 0.1,
            ("1S", "1"): 0.2,
            ("1S", "1D"): 0.5,
            ("1DW", "DW!"): 0.1,
            ("1DW", "1W!"): 0.2,
            ("1DW", "1D"): 0.2,
            ("1D", "D"): 0.1,
            ("1D", "1"): 0.2,
            ("1W!", "W!"): 0.1,
            ("1W!", "1"): 0.2,
            ("W!", "none"): 0.2,
            ("1", "none"): 0.1,
            ("SW!", "S!"): 0.4,  # the lost start is begun anew, as it is without the outage
            ("SW!", "DW!"): 0.5,
            ("S!", "none"): 0.2,
            ("S!", "D"): 0.5,
            ("S", "none"): 0.2,
            ("S", "D"): 0.5,
            ("DW!", "W!"): 0.2,
            ("DW!", "D"): 0.2,
            ("D", "none"): 0.2,
        },
        up="2WW 2W 2 1SW 1S 1DW 1D 1W! 1 DW! D",
    )
    assert differences(spec, by_hand) == []


def test_a_preferred_member_does_not_wait_behind_one_that_was_repaired_during_its_start() -> None:
    # "`return_to_preferred: true` switches back at once to a member listed earlier".  One main is failed, the other
    # is being switched in when the spare, repaired, takes the empty place; the main that now waits is listed earlier.
    spec = plant(
        {"main": unit("0.1", "5"), "spare": unit("0.2", "2")},
        "g",
        {
            "members": [("main", 2), ("spare", 1)],
            "redundancy": "cold_standby",
            "switchover_time": Fraction(2),
            "return_to_preferred": True,
        },
    )
    # In a state: D, S, W for mains, d, s, w for the spare.
    by_hand = worked(
        {
            ("DWw", "Sw"): 0.1,
            ("Sw", "DWw"): 0.2,
            ("Sw", "Dw"): 0.5,
            ("Dw", "DWw"): 0.2,
            ("Dw", "s"): 0.1,
            ("s", "Dw"): 0.4,
            ("s", "d"): 0.5,
            ("d", "Dw"): 0.4,
            ("d", "none"): 0.2,
            ("none", "D"): 0.4,
            ("none", "d"): 0.5,
            ("D", "none"): 0.1,
            ("D", "DW"): 0.2,
            ("D", "Dw"): 0.5,
            ("DW", "S"): 0.1,
            ("DW", "DWw"): 0.5,
            ("S", "DW"): 0.2,
            ("S", "D"): 0.5,
            ("S", "Dw"): 0.5,  # not to "dW": the main is switched back to at once
        },
        up="DWw Dw d D DW",
        units_failed={"Sw": 1, "Dw": 1, "s": 2, "d": 2, "none": 3, "D": 2, "DW": 1, "S": 2},
    )
    assert differences(spec, by_hand) == []


def test_a_preferred_member_that_was_repaired_during_a_start_is_switched_back_to_when_that_is_done() -> None:
    spec = plant(
        {"main": unit("0.1", "5"), "spare": unit("0.2", "2")},
        "g",
        {
            "members": [("main", 1), ("spare", 1)],
            "redundancy": "cold_standby",
            "switchover_time": Fraction(2),
            "return_to_preferred": True,
            "after_repair": "start_again",
        },
    )
    by_hand = worked(
        {
            ("Dw", "s"): 0.1,
            ("s", "d"): 0.5,
            ("s", "Ws"): 0.2,  # a start is under way: the main waits
            ("Ws", "Dw"): 0.5,  # the spare runs for no time, since a member listed earlier waits
            ("d", "Dw"): 0.2,
            ("d", "none"): 0.2,
            ("none", "S"): 0.2,
            ("none", "s"): 0.5,
            ("S", "D"): 0.5,
            ("S", "Sw"): 0.5,
            ("Sw", "Dw"): 0.5,
            ("D", "none"): 0.1,
            ("D", "Dw"): 0.5,
        },
        up="Dw d D",
        units_failed={"s": 1, "d": 1, "none": 2, "S": 1, "D": 1},
    )
    assert differences(spec, by_hand) == []


def test_a_standby_that_is_renewed_at_once_takes_over_when_everything_fails() -> None:
    # "`repair_time: 0 h` means renewed at once", "to standby if duty is filled, else to duty": the spare fails with
    # the rest, is good in the same instant and takes the empty place.
    spec = plant(
        {"main": unit("0.1"), "spare": unit("0.3", "0")},
        "g",
        {
            "members": [("main", 1), ("spare", 1)],
            "redundancy": "cold_standby",
            "coverage": [Fraction(0)],
            "outcome": "all_failed",
        },
    )
    by_hand = worked({("main", "spare"): 0.1}, up="main spare", units_failed={"spare": 1})
    assert differences(spec, by_hand) == []


def test_healthy_units_without_a_failure_rate_fail_with_the_others() -> None:
    spec = plant(
        {"main": unit("0.1"), "spare": unit("0")},
        "g",
        {
            "members": [("main", 1), ("spare", 1)],
            "redundancy": "cold_standby",
            "coverage": [Fraction("0.5")],
            "outcome": "all_failed",
        },
    )
    by_hand = worked(
        {("main", "spare"): 0.05, ("main", "none"): 0.05}, up="main spare", units_failed={"spare": 1, "none": 2}
    )
    assert differences(spec, by_hand) == []


def test_a_unit_renewed_at_once_is_not_failed_at_the_start() -> None:
    spec = plant({"pump": unit("0.1", "0"), "fan": unit("0.1", "5")}, {"all_of": ["pump", "fan"]}, initial={"pump": 1})
    by_hand = worked({("good", "f"): 0.1, ("f", "good"): 0.2}, up="good", units_failed={"f": 1})
    assert differences(spec, by_hand) == []


def test_a_start_under_way_counts_as_redundancy_during_an_outage_as_it_does_without() -> None:
    # "taken as covered, with starts that succeed and no outage of takeover": the start is as good as done.
    spec = plant(
        {"pump": unit("0.1")},
        "g",
        {
            "members": [("pump", 5)],
            "on_duty": 3,
            "redundancy": "cold_standby",
            "coverage": [Fraction("0.5")],
            "switchover_time": Fraction(2),
        },
    )
    assert disagreements(spec, of_engine(spec), of_oracle(spec)) == []


def test_a_unit_outside_the_system_is_work_for_the_crew_even_if_nobody_waits() -> None:
    # The pump is down half of the time, the fan 1/11 of it: 13/22 of a crew is busy.
    spec = plant(
        {"pump": unit("0.1", "10"), "fan": unit("0.02", "5")},
        "pump",
        crews={"riggers": {"size": 2, "repairs": ["pump", "fan"]}},
    )
    solution = markov.solve(Model.from_mapping(as_mapping(spec)))
    assert solution.result("crew_utilisation").value == pytest.approx(13 / 44, rel=1e-13)
    assert solution.result("waiting_for_crew").value == 0
    assert solution.result("probability_of_waiting").value == 0
