"""Ways to failure: shares by hand, what is left over, where they begin, what they refuse."""

from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from markov.errors import IllPosed
from markov.evaluation import build_space, solve_model
from markov.evaluation.failure_paths import FailurePaths, failure_paths
from markov.model import Model
from markov.spec import read, read_text


def ways(model: Model, share: float = 0.95) -> FailurePaths:
    return failure_paths(model, build_space(model), share)


def chain(arrows: str, states: str = "a: {up: true, initial: true}, b: {up: true}, d: {up: false}") -> Model:
    return read_text(f"states: {{{states}}}\ntransitions: [{arrows}]\n", "spec")


def test_two_ways_share_failures_as_their_rates_do() -> None:
    model = chain(
        "{from: a, to: d, rate: 1 /h}, {from: a, to: b, rate: 3 /h}, "
        "{from: b, to: d, rate: 5 /h}, {from: d, to: a, rate: 7 /h}"
    )
    found = ways(model, 1.0)
    assert {path.states: path.share for path in found.paths} == pytest.approx({(0, 1, 2): 3 / 4, (0, 2): 1 / 4})
    assert found.covered == pytest.approx(1)
    assert found.least is not None
    assert 1 - 1e-12 < found.least <= 1
    assert found.basis == "failure frequency"


def test_a_detour_that_leads_back_is_counted_with_the_way() -> None:
    # From b one comes back to c with chance 1/2 before the failure; each round is the same way with a detour.
    model = chain(
        "{from: a, to: c, rate: 1 /h}, {from: c, to: b, rate: 1 /h}, {from: b, to: c, rate: 1 /h}, "
        "{from: b, to: d, rate: 1 /h}, {from: d, to: a, rate: 1 /h}",
        "a: {up: true, initial: true}, b: {up: true}, c: {up: true}, d: {up: false}",
    )
    found = ways(model, 0.999)
    # c is the most usual up state, so ways may begin there, too; all of them end by b.
    assert {path.states[-2:] for path in found.paths} == {(1, 3)}
    assert all(len(set(path.states)) == len(path.states) for path in found.paths)
    assert 0.999 <= found.covered <= 1


def test_the_frequency_of_all_ways_is_the_failure_frequency(checkout: Path) -> None:
    model = read(checkout / "specs" / "harbour_lock.yaml")
    found = ways(model, 0.99999)
    frequency = solve_model(model).result("failure_frequency").value
    assert found.total.value == pytest.approx(frequency, rel=1e-12)
    assert found.covered > 0.99999
    assert found.paths[0].states == (0, 3)


def test_after_a_restart_with_a_fault_left_a_way_begins_at_the_down_state() -> None:
    model = chain(
        "{from: a, to: d, rate: 1 /h}, {from: d, to: b, rate: 1 /h}, "
        "{from: b, to: d, rate: 9 /h}, {from: b, to: a, rate: 1 /h}"
    )
    shares = {path.states: path.share for path in ways(model, 1.0).paths}
    # Nine of ten restarts fail again from b, so nine of ten failures come that way.
    assert shares[2, 1, 2] == pytest.approx(9 / 10)
    assert shares[0, 2] == pytest.approx(1 / 10)


def test_where_failure_is_for_good_the_shares_are_those_of_first_failures() -> None:
    model = chain("{from: a, to: d, rate: 1 /h}, {from: a, to: b, rate: 3 /h}, {from: b, to: d, rate: 5 /h}")
    found = ways(model, 1.0)
    assert found.basis == "first failures"
    assert found.total.value == pytest.approx(1)
    assert {path.states: path.share for path in found.paths} == pytest.approx({(0, 1, 2): 3 / 4, (0, 2): 1 / 4})


def test_the_most_frequent_ways_come_first_and_the_lower_bound_holds(checkout: Path) -> None:
    found = ways(read(checkout / "specs" / "dialysis_water.yaml"), 0.9999)
    shares = [path.share for path in found.paths]
    assert shares == sorted(shares, reverse=True)
    assert found.covered == pytest.approx(np.sum(shares))
    assert found.least is not None
    assert found.least <= found.covered
    few = found.first(0.9, 100)
    assert len(few.paths) < len(found.paths)
    assert few.covered >= 0.9
    assert few.covered - few.paths[-1].share < 0.9


def test_a_limit_on_the_number_of_ways_is_told_as_falling_short(checkout: Path) -> None:
    found = ways(read(checkout / "specs" / "dialysis_water.yaml")).first(0.95, 1)
    assert len(found.paths) == 1
    assert found.exhausted


def test_a_plant_that_cannot_fail_or_has_tests_has_no_ways(checkout: Path) -> None:
    safe = chain("{from: a, to: b, rate: 1 /h}, {from: b, to: a, rate: 1 /h}")
    with pytest.raises(IllPosed, match="no way leads"):
        ways(safe)
    with pytest.raises(IllPosed, match="without tests"):
        ways(read(checkout / "specs" / "road_tunnel_fans.yaml"))


def test_a_share_may_be_a_fraction(checkout: Path) -> None:
    model = read(checkout / "specs" / "harbour_lock.yaml")
    assert len(failure_paths(model, build_space(model), Fraction(1, 2)).paths) == 1
