"""Python code may give numbers where a spec gives text, with the same checks."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest

from markov.errors import SpecError
from markov.model import Member, Model, Named, Transition
from markov.quantities import parse_quantity


def plant(**changes):
    data = {
        "title": "Pair",
        "units": {"pump": {"failure_rate": "1e-4 /h", "repair_time": "24 h"}},
        "groups": {"water": {"members": [{"unit": "pump", "count": 2}], "redundancy": "active", "coverage": 0.95}},
        "system": "water",
    }
    return {**data, **changes}


def test_numbers_and_quantities_are_taken():
    data = plant()
    data["groups"]["water"]["coverage"] = [0.1, Decimal("0.2"), Fraction(1, 3), np.float64(0.4)]
    data["groups"]["water"]["required"] = np.int64(1)
    data["units"]["pump"]["repair_time"] = parse_quantity("2 d")
    model = Model.from_mapping(data)
    coverage = [each.exact for each in model.groups["water"].coverage_list]
    assert coverage == [Fraction(1, 10), Fraction(1, 5), Fraction(1, 3), Fraction(2, 5)]
    assert model.units["pump"].repair_time.exact == 48


@pytest.mark.parametrize("value", [None, True, float("nan"), float("inf"), 0.1, "x", b"1", object(), [], {}])
def test_what_is_no_rate_is_refused(value):
    data = plant()
    data["units"]["pump"]["failure_rate"] = value
    with pytest.raises(SpecError) as caught:
        Model.from_mapping(data)
    (problem,) = caught.value.problems
    assert problem.found.startswith("units.pump.failure_rate: ")
    assert str(problem).startswith("spec: ")


def test_what_holds_itself_is_refused():
    data = plant()
    data["system"] = {"all_of": [data]}
    with pytest.raises(SpecError, match="nested too deep"):
        Model.from_mapping(data)


@pytest.mark.parametrize("data", [None, [], "text", 3, {}])
def test_what_is_no_mapping_is_refused(data):
    with pytest.raises(SpecError):
        Model.from_mapping(data)


def test_model_is_frozen():
    model = Model.from_mapping(plant())
    with pytest.raises(ValueError, match="frozen"):
        model.title = "other"
    with pytest.raises(ValueError, match="frozen"):
        model.units["pump"].repair_stages = 2


def test_fingerprint_follows_the_data():
    one, same = Model.from_mapping(plant()), Model.from_mapping(plant())
    other = Model.from_mapping(plant(title="Other"))
    assert one.sha256 == same.sha256
    assert one.sha256 != other.sha256
    assert len(one.sha256) == 64


def test_parts_can_be_made_by_name():
    assert Member(name="pump").count == 1
    assert Transition(source="a", target="b", rate="2 /h").hourly == 2


def test_names_of_fields_are_no_keys_of_a_spec():
    data = plant()
    data["groups"]["water"]["members"] = [{"name": "pump", "count": 2}]
    with pytest.raises(SpecError, match="`name` is not a key here"):
        Model.from_mapping(data)


def test_model_can_be_written_out():
    written = Model.from_mapping(plant()).model_dump(exclude_unset=True, by_alias=True)
    written.pop("system")
    assert written["units"] == {"pump": {"failure_rate": "1e-4 /h", "repair_time": "24 h"}}
    assert Model.from_mapping({**written, "system": "water"}).groups["water"].size == 2


def test_copy_with_another_criterion_works_out_its_own_places():
    model = Model.from_mapping({"units": {"a": {"failure_rate": "1 /y"}, "b": {"failure_rate": "1 /y"}}, "system": "a"})
    assert [place.key for place in model.placements] == ["a"]
    other = model.model_copy(update={"system": Named("b")})
    assert other.named_in_system == ("b",)
    assert [place.key for place in other.placements] == ["b"]
    assert [place.key for place in model.placements] == ["a"]
