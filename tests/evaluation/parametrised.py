"""Random small specs in which every number is a parameter, and the same specs with other numbers."""

from __future__ import annotations

import random
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from markov.evaluation.questions import Question, all_questions
from markov.model import Model
from tests.states.test_against_oracle import as_mapping, draw_spec

TIMES = (Fraction(7, 10), Fraction(6))

#: Suffix of a number by the key it is written for.
SUFFIX = {"failure_rate": "/h", "repair_time": "h", "logistic_delay": "h", "time": "h", "repair_rate": "/h"}


@dataclass(frozen=True)
class Parametrised:
    """A spec as a mapping, with the exact values of its parameters and what stands behind their numbers."""

    mapping: Mapping[str, Any]
    values: Mapping[str, Fraction]
    suffixes: Mapping[str, str]

    def model(self, **moved: Fraction) -> Model:
        """The model, with some parameters at other values."""
        parameters = {
            name: f"{value.numerator} {self.suffixes[name]} / {value.denominator}"
            for name, value in {**self.values, **moved}.items()
        }
        return Model.from_mapping({**self.mapping, "parameters": parameters})

    @property
    def movable(self) -> list[str]:
        """Parameters that may move without making another chain."""
        return [
            name
            for name, value in self.values.items()
            if value != 0 and (self.suffixes[name] or value != 1 or "capacity" in name)
        ]


def draw(seed: int, largest: int = 3) -> Parametrised:
    """Draw a spec."""
    spec = draw_spec(random.Random(seed), largest)
    mapping = as_mapping(spec)
    values: dict[str, Fraction] = {}
    suffixes: dict[str, str] = {}

    def name(place: str, key: str, text: str) -> str:
        made = f"{place}_{key}"
        values[made], suffixes[made] = Fraction(text.split()[0]), SUFFIX.get(key, "")
        return made

    for unit, written in mapping["units"].items():
        for key in ("failure_rate", "repair_time", "logistic_delay", "start_failure", "capacity"):
            if key in written:
                written[key] = name(unit, key, written[key])
    for group, written in mapping.get("groups", {}).items():
        if "dormancy_factor" in written:
            written["dormancy_factor"] = name(group, "dormancy_factor", written["dormancy_factor"])
        switchover = written.get("switchover", {})
        if "time" in switchover:
            switchover["time"] = name(f"{group}_takeover", "time", switchover["time"])
        if "time" in switchover.get("uncovered", {}):
            switchover["uncovered"]["time"] = name(f"{group}_outage", "time", switchover["uncovered"]["time"])
        if "coverage" in switchover:
            given = switchover["coverage"] if isinstance(switchover["coverage"], list) else [switchover["coverage"]]
            switchover["coverage"] = [name(group, f"coverage_{at}", text) for at, text in enumerate(given)]
    mapping["mission"] = {"time": "6 h"}
    return Parametrised(mapping, values, suffixes)


def questions_of(model: Model) -> list[Question]:
    """Every measure that one chain answers, of the system."""
    asked = [each for each in all_questions(model, TIMES[:1]) if not each.measure.startswith("gain")]
    interval = Question("interval_reliability", for_hours=Fraction(3, 2))
    first, second = list(model.states)[:2] if model.explicit else ("0", "1")
    return [
        *asked,
        interval,
        Question("interval_reliability", at_hours=TIMES[0], for_hours=Fraction(3, 2)),
        Question("state_probability", state=first),
        Question("state_probability", state=second, at_hours=TIMES[1]),
    ]
