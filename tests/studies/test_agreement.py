"""The engine against the simulation: two readings of the language, written apart, on plants in which matters meet."""

from __future__ import annotations

import random
from itertools import combinations

import pytest

from markov.model import Model
from tests.studies.compare import Asked, compare
from tests.studies.random_specs import FEATURES, NotTogether, random_spec

MEASURES: tuple[Asked, ...] = (
    ("unreliability", None, 500.0),
    ("unavailability", None, 500.0),
    ("expected_failures", None, 500.0),
    *(
        (measure, None, None)
        for measure in (
            "steady_state_unavailability",
            "failures_per_year",
            "repairs_per_year",
            "starts_per_year",
            "spares_per_year",
            "mean_units_failed",
            "mean_capacity",
            "crew_utilisation",
            "waiting_for_crew",
            "hazardous_events_per_year",
            "spurious_failures_per_year",
            "pfd_average",
            "pfh",
        )
    ),
)

PAIRS = tuple(combinations(FEATURES, 2))
QUICK = random.Random(20261201).sample(PAIRS, 16)


def _agree(first: str, second: str, seed: int, *, family: int, histories: int, horizon: float) -> None:
    try:
        spec = random_spec(seed, first, second)
    except NotTogether as reason:
        pytest.skip(f"the language refuses {first} with {second}: {reason}")
    found = compare(Model.from_mapping(spec), MEASURES, seed, family, histories=histories, horizon=horizon)
    differing = [str(each) for each in found if each.agrees is False]
    assert not differing, "\n".join(differing)
    assert sum(each.agrees is True for each in found) >= 3


@pytest.mark.parametrize("pair", QUICK, ids="+".join)
def test_the_engine_agrees_with_the_simulation_where_two_matters_meet(pair: tuple[str, str]) -> None:
    family = len(QUICK) * len(MEASURES)
    _agree(*pair, seed=PAIRS.index(pair), family=family, histories=200, horizon=4e5)


@pytest.mark.long
@pytest.mark.parametrize("feature", FEATURES)
def test_the_engine_agrees_with_the_simulation_on_each_matter_for_long(feature: str) -> None:
    family = (len(PAIRS) + len(FEATURES)) * len(MEASURES)
    _agree(feature, feature, seed=1, family=family, histories=2000, horizon=1e7)


@pytest.mark.long
@pytest.mark.parametrize("pair", PAIRS, ids="+".join)
def test_the_engine_agrees_with_the_simulation_on_every_pair_of_matters(pair: tuple[str, str]) -> None:
    family = (len(PAIRS) + len(FEATURES)) * len(MEASURES)
    _agree(*pair, seed=PAIRS.index(pair), family=family, histories=500, horizon=2e6)
