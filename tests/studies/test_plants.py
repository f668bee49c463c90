"""Holds the solved demonstration plants to their simulation, all on one confidence.

Chains written by hand have no items to simulate; tests/specs/test_lessons.py compares theirs with a generated one.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import pytest

from markov.model import Model
from tests.specs.plants import mapping
from tests.studies.compare import Asked, compare

SEED = 20261201
YEAR = 8760.0
WINTER = 244 * 24.0
HALF_YEAR = 4380.0

#: How many times as much the long test simulates, and by how much narrower it has to be at least.
LONGER = 25
NARROWER = 4.0


@dataclass(frozen=True)
class Plant:
    """One plant, what is compared, and how much is simulated for it in the quick test; the long one takes more.

    `widest` is the widest standard error, relative, with which a comparison still says something; what is `rare` gets
    there only in the long test.
    """

    name: str
    asked: tuple[Asked, ...]
    horizon: float
    histories: int
    widest: float
    rare: tuple[Asked, ...] = ()
    changed: tuple[tuple[str, Any], ...] = ()

    @property
    def model(self) -> Model:
        """Return the model, with a target for each group, unit, pool or level that is asked of."""
        keys = mapping(self.name)
        for parameter, value in self.changed:
            keys["parameters"][parameter]["value"] = value
        for number, (measure, of, at) in enumerate((*self.asked, *self.rare)):
            if of is not None:
                assert at is None
                keys["targets"].append({"id": f"asked {number}", "measure": measure, "of": of, "at_least": 0})
        return Model.from_mapping(keys)


def asked(
    *long_run: str, of: tuple[tuple[str, str], ...] = (), at: tuple[tuple[str, float], ...] = ()
) -> tuple[Asked, ...]:
    """Put together what is asked: of the system in the long run, of its parts, of the system at times."""
    system: list[Asked] = [(measure, None, None) for measure in long_run]
    return (*system, *((measure, name, None) for measure, name in of), *((measure, None, time) for measure, time in at))


OFTEN = ("failures_per_year", "repairs_per_year", "mean_units_failed")
DOWN = "steady_state_unavailability"

PLANTS = (
    Plant(
        "harbour_lock_drives",
        asked(
            *OFTEN,
            DOWN,
            "starts_per_year",
            "mean_time_to_first_failure",
            of=(
                ("crew_utilisation", "fitters"),
                ("waiting_for_crew", "fitters"),
                ("failures_per_year", "gate"),
                ("steady_state_unavailability", "sluices"),
            ),
            at=(("unreliability", YEAR), ("expected_failures", YEAR)),
        ),
        horizon=4e7,
        histories=1200,
        widest=0.15,
    ),
    Plant(
        "mountain_interlocking",
        asked(*OFTEN, DOWN, of=(("crew_utilisation", "technician"),), at=(("unreliability", 20 * YEAR),)),
        horizon=4e8,
        histories=1500,
        widest=0.1,
        changed=(("coverage", 0.98),),  # at 0.9999 a stop is too rare to be seen often enough
    ),
    Plant(
        "mountain_interlocking_modes",
        asked(
            *OFTEN,
            "spurious_failures_per_year",
            "pfh",
            of=(("crew_utilisation", "technician"), ("probability_of_waiting", "technician")),
            at=(("unreliability", 20 * YEAR), ("expected_failures", 20 * YEAR)),
        ),
        horizon=4e8,
        histories=2500,
        widest=0.18,
        rare=asked(DOWN, "pfd_average"),
    ),
    Plant(
        "road_tunnel_fans",
        asked(
            *OFTEN,
            "pfh",
            of=(("crew_utilisation", "electricians"), ("waiting_for_crew", "electricians")),
            at=(("unreliability", 10 * YEAR), ("mean_unavailability", 10 * YEAR)),
        ),
        horizon=2e8,
        histories=4000,
        widest=0.18,
        rare=asked(
            DOWN, "pfd_average", "mean_capacity", "hazardous_events_per_year", at=(("mean_unavailability", HALF_YEAR),)
        ),
    ),
    Plant(
        "dialysis_water",
        asked(
            *OFTEN,
            DOWN,
            "starts_per_year",
            "spares_per_year",
            "mean_capacity",
            at=(("unreliability", YEAR), ("expected_failures", YEAR)),
        ),
        horizon=4e8,
        histories=20000,
        widest=0.18,
        rare=asked(of=(("level_probability", "reduced"),)),
    ),
    Plant(
        "polar_telescope_cooling",
        asked(
            *OFTEN,
            DOWN,
            "starts_per_year",
            "mean_time_to_first_failure",
            at=(("unreliability", WINTER), ("unavailability", WINTER), ("unreliability", YEAR)),
        ),
        horizon=1e8,
        histories=1500,
        widest=0.15,
    ),
)

#: Comparisons of this file, quick and long.
FAMILY = sum(2 * len(plant.asked) + len(plant.rare) for plant in PLANTS)


def assert_agreement(plant: Plant, measures: tuple[Asked, ...], times: int, seed: int) -> None:
    """Compare with `times` as much simulation as the quick test takes."""
    found = compare(
        plant.model, measures, seed, FAMILY, histories=plant.histories * times, horizon=plant.horizon * times
    )
    assert len(found) == len(measures)
    wrong = [str(each) for each in found if not each.agrees]
    assert not wrong, "\n".join(wrong)
    for each, one in zip(found, measures, strict=True):
        assert each.estimate is not None
        assert each.solved is not None
        # What lies close to 1 is told by how far it is from 1.
        size = min(each.solved, 1 - each.solved) if 0.9 < each.solved < 1 else each.solved
        narrower = NARROWER if times == LONGER and one in plant.asked else 1.0
        assert each.estimate.standard_error <= plant.widest / narrower * size, str(each)


@pytest.mark.parametrize("plant", PLANTS, ids=lambda plant: plant.name)
def test_a_plant_agrees_with_its_simulation(plant: Plant) -> None:
    assert_agreement(plant, plant.asked, 1, SEED)


@pytest.mark.long
@pytest.mark.parametrize("plant", PLANTS, ids=lambda plant: plant.name)
def test_a_plant_agrees_with_its_simulation_at_length(plant: Plant) -> None:
    assert_agreement(plant, (*plant.asked, *plant.rare), LONGER, SEED + 1)
