"""Random small plants in which any two matters of the language meet."""

from __future__ import annotations

import random
from collections.abc import Callable
from copy import deepcopy
from typing import Any

from markov.errors import SpecError
from markov.model import Model

Spec = dict[str, Any]


class NotTogether(Exception):
    """Two matters that the language does not allow in one plant; says why."""


class _Plant:
    """A plant in the making: a group `g` of units `u` (and `w`), a second part `v` beside it."""

    def __init__(self, dice: random.Random) -> None:
        self.dice = dice
        self.count = dice.choice((2, 2, 3))
        self.u: Spec = {"failure_rate": self.rate(1, 4), "repair_time": self.time(60, 200)}
        self.v: Spec = {"failure_rate": self.rate(0.3, 1), "repair_time": self.time(50, 150)}
        self.group: Spec = {
            "members": [{"unit": "u", "count": self.count}],
            "required": 1,
            "redundancy": dice.choice(("active", "hot_standby", "cold_standby")),
        }
        self.spec: Spec = {
            "units": {"u": self.u, "v": self.v},
            "groups": {"g": self.group},
            "crews": {"f": {"size": 1, "repairs": ["u", "v"]}},
            "system": {"all_of": ["g", "v"]},
        }

    def rate(self, low: float, high: float) -> str:
        """Return a rate between two numbers of thousandths per hour."""
        return f"{self.dice.uniform(low, high):.3g}e-3 /h"

    def time(self, low: float, high: float) -> str:
        """Return a time between two numbers of hours."""
        return f"{self.dice.uniform(low, high):.3g} h"

    def share(self, low: float = 0.5, high: float = 0.95) -> float:
        """Return a share."""
        return round(self.dice.uniform(low, high), 3)

    def switchover(self) -> Spec:
        """Return the switchover of the group, with what is said so far."""
        return self.group.setdefault("switchover", {})  # type: ignore[no-any-return]

    def standby(self) -> None:
        """Make the group one with standbys."""
        if self.group["redundancy"] == "active":
            self.group["redundancy"] = self.dice.choice(("hot_standby", "cold_standby"))

    def uncovered(self, outcome: str, time: str | None = None) -> None:
        """Let some faults be uncovered, with an outcome."""
        self.switchover().setdefault("coverage", self.share())
        self.switchover()["uncovered"] = {"outcome": outcome, **({} if time is None else {"time": time})}

    def hide(self) -> None:
        """Let some faults of the group's units be hidden, and be found by a test in the end."""
        self.u.setdefault("detected", self.share(0.2, 0.7))
        self.spec.setdefault("tests", {}).setdefault("proof", {"of": ["u"], "interval": "300 h"})

    def crew(self) -> Spec:
        """Return the crew pool of the plant."""
        if "crews" not in self.spec:
            raise NotTogether("there is no crew pool")
        return self.spec["crews"]["f"]  # type: ignore[no-any-return]

    def causes(self) -> Spec:
        """Return the common causes of the plant."""
        return self.spec.setdefault("common_causes", {})  # type: ignore[no-any-return]


def _multiplicity(p: _Plant) -> None:
    p.count = 4
    p.group["members"][0]["count"] = 4
    p.group["required"] = 2


def _two_kinds(p: _Plant) -> None:
    p.spec["units"]["w"] = {"failure_rate": p.rate(1, 3), "repair_time": p.time(40, 120)}
    p.group["members"] = [*p.group["members"], "w"]
    if "crews" in p.spec:
        p.crew()["repairs"] = ["w", "u", "v"]


def _standby_rate(p: _Plant) -> None:
    p.group["redundancy"] = "warm_standby"
    p.group["dormancy_factor"] = p.share(0.1, 0.6)


def _coverage(p: _Plant) -> None:
    p.switchover()["coverage"] = p.share()


def _coverage_list(p: _Plant) -> None:
    p.switchover()["coverage"] = [p.share(0.8, 0.95), p.share(0.3, 0.6)]


def _more_on_duty(p: _Plant) -> None:
    p.standby()
    p.group["members"][0]["count"] = 3
    p.group["on_duty"] = 2


def _takeover(p: _Plant) -> None:
    p.switchover()["time"] = p.time(5, 30)


def _start_failure(p: _Plant) -> None:
    p.standby()
    p.u["start_failure"] = p.share(0.1, 0.3)


def _switch(p: _Plant) -> None:
    p.standby()
    p.switchover()["switch"] = {"failure_on_demand": p.share(0.1, 0.3), "repair_time": p.time(20, 80)}


def _latent_switch(p: _Plant) -> None:
    p.standby()
    p.switchover()["switch"] = {"failure_rate": p.rate(1, 3), "latent": True, "repair_time": p.time(20, 80)}
    p.spec.setdefault("tests", {})["switch"] = {"of": ["g.switch"], "interval": "600 h"}


def _false_operation(p: _Plant) -> None:
    p.standby()
    p.switchover()["switch"] = {"false_operation_rate": p.rate(2, 6)}
    p.u["start_failure"] = p.share(0.1, 0.3)


def _outcome(outcome: str) -> Callable[[_Plant], None]:
    timed = outcome in ("manual_takeover", "restart", "restart_without_failed")

    def add(p: _Plant) -> None:
        p.uncovered(outcome, p.time(5, 30) if timed else None)

    return add


def _start_again(p: _Plant) -> None:
    p.standby()
    p.group["after_repair"] = "start_again"
    p.u["start_failure"] = p.share(0.1, 0.3)


def _preferred(p: _Plant) -> None:
    p.standby()
    _two_kinds(p)
    p.group["return_to_preferred"] = True


def _stop(p: _Plant) -> None:
    p.spec["while_down"] = "stop"


def _while_down_standby(p: _Plant) -> None:
    p.standby()
    p.group["while_down"] = "standby_rate"


def _first_come(p: _Plant) -> None:
    p.crew()["queue"] = "first_come"


def _not_preemptive(p: _Plant) -> None:
    crew = p.crew()
    crew |= {"repairs": ["v", *(name for name in crew["repairs"] if name != "v")], "preemptive": False}


def _own_crews(p: _Plant) -> None:
    p.spec.pop("crews", None)


def _stages(p: _Plant) -> None:
    p.u["repair_stages"] = 2


def _delay(p: _Plant) -> None:
    p.u["logistic_delay"] = p.time(20, 60)


def _half_repaired(p: _Plant) -> None:
    p.u["repair_success"] = p.share(0.6, 0.9)


def _spares(p: _Plant) -> None:
    p.u.pop("repair_time", None)
    p.u.pop("repair_stages", None)
    p.u.pop("repair_success", None)
    p.spec["spares"] = {"s": {"for": ["u"], "stock": 1, "lead_time": p.time(100, 300), "swap_time": p.time(5, 20)}}
    if "crews" in p.spec:
        p.crew()["repairs"] = [name for name in p.crew()["repairs"] if name != "u"]


def _spares_at_fault(p: _Plant) -> None:
    _spares(p)
    p.spec["spares"]["s"]["order"] = "when_failed"


def _spares_in_batches(p: _Plant) -> None:
    _spares(p)
    p.spec["spares"]["s"] |= {"stock": 2, "batch": 2}


def _spares_returned(p: _Plant) -> None:
    p.spec["spares"] = {"s": {"for": ["u"], "stock": 1, "lead_time": p.time(100, 300), "swap_time": p.time(5, 20)}}


def _repair_when(when: Any) -> Callable[[_Plant], None]:
    def add(p: _Plant) -> None:
        p.group["repair_when"] = deepcopy(when)

    return add


def _restoration(p: _Plant) -> None:
    p.spec["restoration"] = {"time": p.time(40, 100), "to": "all_good"}


def _offline(p: _Plant) -> None:
    p.group["offline_repair"] = True


def _hidden(p: _Plant) -> None:
    p.hide()


def _told_by_demand(p: _Plant) -> None:
    p.u |= {"detected": p.share(0.2, 0.7), "revealed_by": ["demand"]}
    p.spec["demand"] = {"rate": p.rate(3, 8)}


def _told_by_failure(p: _Plant) -> None:
    p.hide()
    p.u["revealed_by"] = ["test", "system_failure"]


def _test_coverage(p: _Plant) -> None:
    p.hide()
    p.spec["tests"]["proof"]["coverage"] = p.share(0.4, 0.8)
    p.spec["tests"]["overhaul"] = {"of": ["u"], "interval": "900 h"}


def _long_test(p: _Plant) -> None:
    p.hide()
    p.spec["tests"]["proof"]["duration"] = "20 h"


def _test_in_service(p: _Plant) -> None:
    p.hide()
    p.spec["tests"]["proof"] |= {"duration": "20 h", "in_service": True}


def _left_out(p: _Plant) -> None:
    p.hide()
    p.spec["tests"]["proof"]["left_out"] = p.share(0.05, 0.2)


def _test_breaks(p: _Plant) -> None:
    p.hide()
    p.spec["tests"]["proof"]["causes_failure"] = p.share(0.05, 0.2)


def _bypass(p: _Plant) -> None:
    p.hide()
    p.spec["tests"]["proof"] |= {"duration": "20 h", "bypass": True}


def _staggered_tests(p: _Plant) -> None:
    p.spec["units"]["w"] = {"failure_rate": p.rate(1, 3), "repair_time": p.time(40, 120), "detected": 0.4}
    p.group["members"] = [*p.group["members"], "w"]
    p.hide()
    p.spec["tests"]["other"] = {"of": ["w"], "interval": "300 h", "first_at": "150 h"}


def _beta(p: _Plant) -> None:
    p.causes()["c"] = {"members": ["u"], "beta": p.share(0.1, 0.3)}


def _two_betas(p: _Plant) -> None:
    p.u.setdefault("detected", 0.5)
    p.hide()
    p.causes()["c"] = {"members": ["u"], "beta": p.share(0.2, 0.3), "beta_detected": p.share(0.05, 0.15)}


def _letters(p: _Plant) -> None:
    p.group["members"][0]["count"] = 3
    p.causes()["c"] = {"members": ["u"], "greek_letters": [p.share(0.2, 0.4), p.share(0.3, 0.6)]}


def _alphas(p: _Plant) -> None:
    p.group["members"][0]["count"] = 3
    testing = p.dice.choice(("staggered", "simultaneous"))
    p.causes()["c"] = {"members": ["u"], "alpha_factors": [0.7, 0.2, 0.1], "testing": testing}


def _cause_across(p: _Plant) -> None:
    p.causes()["c"] = {
        "members": ["g", "v"],
        "beta": p.share(0.1, 0.3),
        "basis": p.dice.choice(("lowest", "geometric_mean")),
    }


def _exposed_on_duty(p: _Plant) -> None:
    p.standby()
    p.causes()["c"] = {"members": ["u"], "beta": p.share(0.1, 0.3), "exposed": "on_duty"}


def _modes(p: _Plant) -> None:
    p.u["failure_modes"] = {
        "minor": {"share": "70 %"},
        "major": {"share": "30 %", "repair_time": p.time(200, 400)},
    }


def _spurious(p: _Plant) -> None:
    p.u["failure_modes"] = {
        "stays": {"share": "60 %"},
        "acts": {"share": "40 %", "effect": "acts_needlessly"},
    }


def _demand(p: _Plant) -> None:
    p.spec["demand"] = {"rate": p.rate(3, 8)}


def _phases(p: _Plant) -> None:
    p.spec["phases"] = [
        {"name": "busy", "duration": "300 h", "rate_factors": {"u": 2}},
        {"name": "calm", "duration": "600 h", "repeat": True},
    ]


def _phase_of_more(p: _Plant) -> None:
    p.spec["phases"] = [
        {"name": "easy", "duration": "300 h"},
        {"name": "hard", "duration": "300 h", "required": {"g": 2}, "repeat": True},
    ]


def _phase_without_repair(p: _Plant) -> None:
    p.spec["phases"] = [
        {"name": "summer", "duration": "300 h"},
        {"name": "winter", "duration": "300 h", "repair": False, "repeat": True},
    ]


def _phase_of_another_system(p: _Plant) -> None:
    p.spec["phases"] = [
        {"name": "both", "duration": "300 h"},
        {"name": "either", "duration": "300 h", "system": {"any_of": ["g", "v"]}, "repeat": True},
    ]


def _initial(p: _Plant) -> None:
    p.spec["initial"] = {"u": {"failed": 1}}


def _load(p: _Plant) -> None:
    p.group["load_sharing"] = {"exponent": 1}
    if p.group["redundancy"] != "active":
        _more_on_duty(p)


def _levels(p: _Plant) -> None:
    p.u["capacity"] = 0.5
    p.spec["levels"] = {"full": "100 %", "half": "50 %"}


def _trains(p: _Plant) -> None:
    p.spec["units"] |= {"a": {"failure_rate": p.rate(1, 2), "repair_time": p.time(50, 100)}}
    p.spec["groups"]["train"] = {
        "members": [{"unit": "a", "count": 2}],
        "required": p.dice.choice((1, 2)),
        "redundancy": "active",
    }
    p.group["members"] = [*p.group["members"], "train"]


def _any_of(p: _Plant) -> None:
    p.spec["system"] = {"any_of": ["g", "v"]}


def _at_least(p: _Plant) -> None:
    p.spec["units"]["x"] = {"failure_rate": p.rate(1, 3), "repair_time": p.time(50, 150)}
    p.spec["system"] = {"at_least": 2, "of": ["g", "v", "x"]}


#: Matters of the language by name, each with what it adds to a plant.
FEATURES: dict[str, Callable[[_Plant], None]] = {
    "multiplicity": _multiplicity,
    "two_kinds": _two_kinds,
    "standby_rate": _standby_rate,
    "coverage": _coverage,
    "coverage_list": _coverage_list,
    "more_on_duty": _more_on_duty,
    "takeover_time": _takeover,
    "start_failure": _start_failure,
    "switch": _switch,
    "latent_switch": _latent_switch,
    "false_operation": _false_operation,
    "until_repair": _outcome("until_repair"),
    "manual_takeover": _outcome("manual_takeover"),
    "restart": _outcome("restart"),
    "restart_without_failed": _outcome("restart_without_failed"),
    "all_failed": _outcome("all_failed"),
    "lost": _outcome("lost"),
    "start_again": _start_again,
    "return_to_preferred": _preferred,
    "while_down_stop": _stop,
    "while_down_standby_rate": _while_down_standby,
    "first_come": _first_come,
    "not_preemptive": _not_preemptive,
    "own_crews": _own_crews,
    "repair_stages": _stages,
    "logistic_delay": _delay,
    "repair_success": _half_repaired,
    "spares": _spares,
    "spares_when_failed": _spares_at_fault,
    "spares_in_batches": _spares_in_batches,
    "spares_repaired": _spares_returned,
    "repair_when_system_down": _repair_when("system_down"),
    "repair_when_failed": _repair_when({"failed": 2}),
    "repair_at_visits": _repair_when({"visits_every": "300 h"}),
    "restoration": _restoration,
    "offline_repair": _offline,
    "hidden_faults": _hidden,
    "revealed_by_demand": _told_by_demand,
    "revealed_by_system_failure": _told_by_failure,
    "test_coverage": _test_coverage,
    "test_that_lasts": _long_test,
    "test_in_service": _test_in_service,
    "left_out": _left_out,
    "test_causes_failure": _test_breaks,
    "bypass": _bypass,
    "staggered_tests": _staggered_tests,
    "beta": _beta,
    "beta_detected": _two_betas,
    "greek_letters": _letters,
    "alpha_factors": _alphas,
    "cause_across_groups": _cause_across,
    "exposed_on_duty": _exposed_on_duty,
    "failure_modes": _modes,
    "spurious_mode": _spurious,
    "demand": _demand,
    "phases": _phases,
    "phase_requires_more": _phase_of_more,
    "phase_without_repair": _phase_without_repair,
    "phase_of_another_system": _phase_of_another_system,
    "initial": _initial,
    "load_sharing": _load,
    "levels": _levels,
    "trains": _trains,
    "any_of": _any_of,
    "at_least": _at_least,
}

#: What is asked of every random plant, where it applies; the simulation estimates each of them.
LONG_RUN = (
    "steady_state_unavailability",
    "failures_per_year",
    "repairs_per_year",
    "starts_per_year",
    "mean_units_failed",
    "mean_capacity",
)


def random_spec(seed: int, feature_a: str, feature_b: str) -> Spec:
    """Return a small plant with two matters in it, always the same for the same seed.

    Raises
    ------
    NotTogether
        The language refuses the two in one plant.
    """
    plant = _Plant(random.Random(f"{seed} {feature_a} {feature_b}"))
    FEATURES[feature_a](plant)
    if feature_b != feature_a:
        FEATURES[feature_b](plant)
    spec = deepcopy(plant.spec)
    spec["targets"] = [{"id": "G", "measure": "steady_state_unavailability", "of": "g", "at_most": "100 %"}]
    spec["mission"] = {"time": "500 h"}
    try:
        Model.from_mapping(spec)
    except SpecError as error:
        raise NotTogether(str(error)) from error
    return spec
