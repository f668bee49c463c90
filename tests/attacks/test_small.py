"""Stiff chains and tiny answers against fractions and 150 digits."""

from fractions import Fraction

import mpmath
import pytest

from tests.attacks.truth import DIGITS, Chain, holds
from tests.cli.program import Program

# --- attack 13: rates that are twelve powers of ten apart

SECOND = Fraction(3600)


def stiff(redundancy: str) -> str:
    return (
        "units: {relay: {failure_rate: 3.6e-9 /h, repair_time: 1 s}}\n"
        f"groups: {{guard: {{members: [{{unit: relay, count: 2}}], redundancy: {redundancy}}}}}\n"
        "crews: {automat: {size: 1, repairs: [relay]}}\nsystem: guard\nmission: {time: 10 y}\n"
    )


@pytest.mark.parametrize(("redundancy", "exposed"), [("active", 2), ("hot_standby", 2), ("cold_standby", 1)])
def test_rates_twelve_powers_apart_keep_their_digits(program: Program, redundancy: str, exposed: int) -> None:
    slow = Fraction(36, 10**10)
    assert SECOND / slow == 10**12
    truth = Chain({(0, 1): exposed * slow, (1, 0): SECOND, (1, 2): slow, (2, 1): SECOND})
    told = program.solve(stiff(redundancy), "--at", "1 s", "--at", "1000 y")
    shares = truth.stationary()
    assert holds(told.result("steady_state_unavailability"), shares[2])
    assert holds(told.result("failures_per_year"), 8760 * shares[1] * slow)
    assert holds(told.result("mean_down_time"), 1 / SECOND)
    assert holds(told.result("mean_time_to_first_failure"), truth.mean_time_to({2}))
    for hours in (Fraction(1, 3600), 87600, 8760000):
        at = float(hours)
        assert holds(told.result("unreliability", at_hours=at), truth.at(hours, stopped={2})[2])
        assert holds(told.result("unavailability", at_hours=at), truth.at(hours)[2])


def test_a_written_chain_with_rates_twelve_powers_apart_keeps_its_digits(program: Program) -> None:
    told = program.solve(
        "states: {good: {up: true, initial: true}, masked: {up: true}, bad: {up: false}}\n"
        "transitions:\n  - {from: good, to: masked, rate: 1e-6 /h}\n  - {from: masked, to: good, rate: 1e6 /h}\n"
        "  - {from: masked, to: bad, rate: 1e-6 /h}\n  - {from: good, to: bad, rate: 1e-18 /h}\n"
        "  - {from: bad, to: good, rate: 1e-2 /h}\nmission: {time: 1 y}\n"
    )
    truth = Chain(
        {
            (0, 1): Fraction(1, 10**6),
            (1, 0): 10**6,
            (1, 2): Fraction(1, 10**6),
            (0, 2): Fraction(1, 10**18),
            (2, 0): "1/100",
        }
    )
    assert holds(told.result("unreliability"), truth.at(8760, stopped={2})[2])
    assert holds(told.result("steady_state_unavailability"), truth.stationary()[2])
    assert holds(told.result("mean_time_to_first_failure"), truth.mean_time_to({2}))


# --- attack 14: answers of 1e-15 to 1e-30


@pytest.mark.parametrize("units", [3, 4, 5, 6])
def test_tiny_unavailabilities_keep_their_digits(program: Program, units: int) -> None:
    told = program.solve(
        "units: {pump: {failure_rate: 1e-6 /h, repair_time: 10 h}}\n"
        f"groups: {{feed: {{members: [{{unit: pump, count: {units}}}], redundancy: active}}}}\nsystem: feed\n"
    )
    # Units with a crew each are independent: U = (λ / (λ + μ))^n.
    exact = Fraction(1, 10**5 + 1) ** units
    assert 1e-31 < exact < 1e-14
    assert holds(told.result("steady_state_unavailability"), exact)
    assert holds(told.result("failures_per_year"), 8760 * exact * units / 10)
    assert holds(told.result("downtime_per_year"), 8760 * exact)


@pytest.mark.parametrize("units", [3, 4, 5, 6])
def test_tiny_unreliabilities_keep_their_digits(program: Program, units: int) -> None:
    told = program.solve(
        "units: {pump: {failure_rate: 1e-6 /h}}\n"
        f"groups: {{feed: {{members: [{{unit: pump, count: {units}}}], redundancy: active}}}}\nsystem: feed\n"
        "mission: {time: 10 h}\n"
    )
    with mpmath.workdps(DIGITS):
        exact = (-mpmath.expm1(-mpmath.mpf(1) / 100000)) ** units
    assert 1e-31 < exact < 1e-14
    assert holds(told.result("unreliability"), exact)
    assert holds(told.result("expected_failures"), exact)
    assert holds(told.result("mean_failure_rate"), exact / 10)


@pytest.mark.parametrize("units", [3, 4, 5])
def test_a_tiny_chance_of_a_cold_chain_of_spares_keeps_its_digits(program: Program, units: int) -> None:
    told = program.solve(
        "units: {pump: {failure_rate: 1e-6 /h}}\n"
        f"groups: {{feed: {{members: [{{unit: pump, count: {units}}}], redundancy: cold_standby}}}}\nsystem: feed\n"
        "mission: {time: 10 h}\n"
    )
    # The n-th fault of a Poisson stream comes before t.
    with mpmath.workdps(DIGITS):
        exact = mpmath.gammainc(units, 0, mpmath.mpf(1) / 100000, regularized=True)
    assert holds(told.result("unreliability"), exact)


def test_a_target_far_below_one_is_judged_by_its_own_digits(program: Program) -> None:
    spec = (
        "units: {pump: {failure_rate: 1e-6 /h}}\n"
        "groups: {feed: {members: [{unit: pump, count: 5}], redundancy: active}}\nsystem: feed\nmission: {time: 10 h}\n"
        "targets:\n  - {id: below, measure: unreliability, at_most: 9.9997e-26}\n"
        "  - {id: above, measure: unreliability, at_most: 9.9998e-26}\n"
    )
    # (1 − exp(−1e-5))^5 = 9.99975…e-26
    assert program.solve(spec).verdicts == {"below": "missed", "above": "met"}


def test_a_reliability_near_one_and_its_complement_fit(program: Program) -> None:
    told = program.solve(
        "units: {pump: {failure_rate: 1e-6 /h}}\n"
        "groups: {feed: {members: [{unit: pump, count: 4}], redundancy: active}}\nsystem: feed\nmission: {time: 10 h}\n"
    )
    assert told.value("unreliability") == pytest.approx(1e-20, rel=1e-4)
    assert told.value("reliability") == 1.0
    assert told.result("reliability")["lower"] < 1


def test_tiny_numbers_are_printed_as_such(program: Program) -> None:
    out = program.table(
        "units: {pump: {failure_rate: 1e-6 /h}}\n"
        "groups: {feed: {members: [{unit: pump, count: 5}], redundancy: active}}\nsystem: feed\nmission: {time: 10 h}\n"
    ).out
    assert any(
        line.split()[0] == "unreliability," and "9.99975e-26" in line for line in out.splitlines() if line.strip()
    )
