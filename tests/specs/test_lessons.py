"""Every demonstration plant teaches what specs/README.md says of it, in numbers."""

import math
from functools import cache

import pytest

from markov import Solution
from tests.specs.plants import mapping, solved, verdicts


def value(solution: Solution, measure: str) -> float:
    found = solution.result(measure).value
    assert found is not None
    return found


def target(solution: Solution, name: str) -> float:
    (found,) = (each.result.value for each in solution.targets if each.id == name)
    assert found is not None
    return found


# ------------------------------------------------------------------------------------------------- harbour lock


@cache
def lock(fitters: int = 1) -> Solution:
    keys = mapping("harbour_lock_drives")
    keys["crews"]["fitters"]["size"] = fitters
    return solved(keys)


def test_the_lock_is_available_enough_and_fails_too_often() -> None:
    assert verdicts(lock()) == {"LOCK-1": "met", "LOCK-2": "missed"}


def test_a_second_fitter_halves_the_downtime_of_the_lock_and_leaves_its_failures() -> None:
    one, two = lock(1), lock(2)
    assert value(one, "downtime_per_year") == pytest.approx(1.910101, rel=1e-6)
    assert value(two, "downtime_per_year") / value(one, "downtime_per_year") == pytest.approx(0.531, abs=5e-4)
    assert value(two, "failures_per_year") / value(one, "failures_per_year") == pytest.approx(1, abs=1e-4)
    assert verdicts(two) == verdicts(one)


def test_a_second_fitter_does_the_same_for_the_gate_alone() -> None:
    keys = mapping("harbour_lock")
    one = solved(keys)
    keys["crews"]["fitters"]["size"] = 2
    two = solved(keys)
    assert value(two, "downtime_per_year") / value(one, "downtime_per_year") == pytest.approx(0.529, abs=5e-4)
    assert value(two, "failures_per_year") / value(one, "failures_per_year") == pytest.approx(1, abs=1e-4)


def test_what_costs_failures_at_the_lock_is_the_takeover() -> None:
    keys = mapping("harbour_lock_drives")
    keys["parameters"]["takeover_coverage"]["value"] = "99 %"
    better = solved(keys)
    assert verdicts(better) == {"LOCK-1": "met", "LOCK-2": "met"}
    assert value(better, "downtime_per_year") > 0.9 * value(lock(), "downtime_per_year")


def test_the_switch_of_the_lock_matters_once_nobody_tries_it_out() -> None:
    keys = mapping("harbour_lock_drives")
    del keys["tests"]
    never_tried = value(solved(keys), "failures_per_year")
    del keys["groups"]["gate"]["switchover"]["switch"]
    perfect = value(solved(keys), "failures_per_year")
    tried_monthly = value(lock(), "failures_per_year")
    assert tried_monthly / perfect == pytest.approx(1.013, abs=5e-4)
    assert never_tried / perfect == pytest.approx(1.187, abs=5e-4)


# -------------------------------------------------------------------------------------------- mountain interlocking


@cache
def interlocking(coverage: str, channels: int = 3) -> Solution:
    keys = mapping("mountain_interlocking")
    keys["parameters"]["coverage"]["value"] = coverage
    keys["groups"]["channels"]["members"][0]["count"] = channels
    return solved(keys)


def test_perfect_coverage_hides_how_much_coverage_matters_to_the_interlocking() -> None:
    # Birth and death by hand: one technician, rate λ × P(one good), P(one good) = 6 ρ² ÷ (1 + 3ρ + 6ρ² + 6ρ³).
    rate, ratio = 1e-5, 1e-5 * 8
    by_hand = rate * 6 * ratio**2 / (1 + 3 * ratio + 6 * ratio**2 + 6 * ratio**3)
    found = value(interlocking("1"), "failure_frequency")
    assert found == pytest.approx(by_hand, rel=1e-12)
    assert f"{found:.1e}" == "3.8e-13"


@pytest.mark.parametrize(("coverage", "verdict"), [("1", "met"), ("0.99999", "met"), ("0.9999", "missed")])
def test_coverage_decides_whether_the_interlocking_passes(coverage: str, verdict: str) -> None:
    assert verdicts(interlocking(coverage)) == {"IL-1": verdict, "IL-2": "met"}


def test_a_fourth_channel_makes_the_interlocking_worse_unless_coverage_is_perfect() -> None:
    three, four = (value(interlocking("0.9999", count), "failure_frequency") for count in (3, 4))
    assert (f"{three:.1e}", f"{four:.1e}") == ("3.0e-09", "4.0e-09")
    three, four = (value(interlocking("1", count), "failure_frequency") for count in (3, 4))
    assert four < 1e-3 * three


def test_the_chain_written_by_hand_is_the_generated_one() -> None:
    made, written = solved(mapping("mountain_interlocking")), solved(mapping("mountain_interlocking_by_hand"))
    assert (made.states, made.transitions) == (written.states, written.transitions) == (6, 12)
    for result in written.results:
        assert result.value is not None
        twin = made.result(result.measure, at_hours=result.at_hours)
        assert twin.value == pytest.approx(result.value, rel=1e-14, abs=0), result.measure


@cache
def modes(required: int = 2, shared_causes: str = "2 %") -> Solution:
    keys = mapping("mountain_interlocking_modes")
    keys["groups"]["channels"]["required"] = required
    keys["parameters"]["shared_causes"]["value"] = shared_causes
    return solved(keys)


def test_fewer_channels_needed_trade_danger_for_needless_stops() -> None:
    needless = [value(modes(required), "spurious_failures_per_year") for required in (1, 2, 3)]
    danger = [value(modes(required), "pfd_average") for required in (1, 2, 3)]
    assert needless == sorted(needless, reverse=True)
    assert danger == sorted(danger)
    assert needless[0] / needless[1] == pytest.approx(145.3, abs=0.1)
    assert danger[2] / danger[1] == pytest.approx(124.8, abs=0.1)


def test_a_shared_cause_eats_what_the_third_channel_gains() -> None:
    assert value(modes(2, "0 %"), "pfd_average") / value(modes(1, "0 %"), "pfd_average") > 1900
    assert value(modes(2), "pfd_average") / value(modes(1), "pfd_average") == pytest.approx(1.247, abs=1e-3)
    assert verdicts(modes()) == {"IM-1": "met", "IM-2": "missed"}
    assert verdicts(modes(2, "0 %")) == {"IM-1": "met", "IM-2": "met"}


# ------------------------------------------------------------------------------------------------- smoke fans


@cache
def fans(trial_finds: str = "90 %", shared_causes: str = "2 %") -> Solution:
    keys = mapping("road_tunnel_fans")
    keys["parameters"]["trial_finds"]["value"] = trial_finds
    keys["parameters"]["shared_causes"]["value"] = shared_causes
    return solved(keys)


def test_the_first_test_interval_alone_would_have_passed_the_fans() -> None:
    found = fans()
    assert verdicts(found) == {"FAN-1": "met", "FAN-2": "missed"}
    assert target(found, "FAN-1") == pytest.approx(4.406e-4, rel=1e-4)
    assert target(found, "FAN-2") == pytest.approx(1.2372e-3, rel=1e-4)
    limits = {each.limit for each in found.targets}
    assert len(limits) == 1


def test_a_trial_run_that_found_everything_would_make_the_first_interval_speak_for_all() -> None:
    found = fans(trial_finds="100 %")
    assert verdicts(found) == {"FAN-1": "met", "FAN-2": "met"}
    assert target(found, "FAN-2") / target(found, "FAN-1") == pytest.approx(1.055, abs=1e-3)


def test_the_first_interval_without_shared_causes_by_hand() -> None:
    # Mean over the interval of the chance that three or more of six are failed.  Every fault stays to its end but those
    # that are noticed, which take 36 h: those add little.
    hidden, interval, steps = 10e-6 * 0.7, 4380, 20000

    def down(time: float) -> float:
        failed = -math.expm1(-hidden * time)
        return sum(math.comb(6, k) * failed**k * (1 - failed) ** (6 - k) for k in range(3, 7))

    by_hand = math.fsum(down((step + 0.5) * interval / steps) for step in range(steps)) / steps
    assert by_hand < target(fans(shared_causes="0 %"), "FAN-1") < 1.05 * by_hand


# ---------------------------------------------------------------------------------------------- dialysis water


@cache
def water(order: str = "when_failed") -> Solution:
    keys = mapping("dialysis_water")
    keys["spares"]["store"]["order"] = order
    return solved(keys)


def test_when_a_spare_is_ordered_decides_for_the_dialysis_water() -> None:
    failed, drawn = water("when_failed"), water("when_drawn")
    assert verdicts(failed) == {"DW-1": "met", "DW-2": "met", "DW-3": "missed"}
    assert verdicts(drawn) == {"DW-1": "missed", "DW-2": "missed", "DW-3": "missed"}
    assert value(failed, "steady_state_unavailability") == pytest.approx(5.507e-5, rel=1e-3)
    assert value(drawn, "steady_state_unavailability") == pytest.approx(3.3826e-4, rel=1e-3)


def test_a_fourth_pump_without_a_spare_is_worse_than_three_with_one() -> None:
    # Without a stock each failed pump is ordered for itself: the delivery, then the exchange.
    keys = mapping("dialysis_water")
    del keys["spares"]
    keys["units"]["pump"].update(logistic_delay="delivery", repair_time="exchange")
    keys["groups"]["pumps"]["members"][0]["count"] = 4
    four, three = solved(keys), water()
    assert verdicts(four)["DW-1"] == "missed"
    assert value(four, "steady_state_unavailability") / value(three, "steady_state_unavailability") == pytest.approx(
        1.182, abs=1e-3
    )
    assert value(four, "failures_per_year") > value(three, "failures_per_year")
    assert value(four, "repairs_per_year") / value(three, "repairs_per_year") == pytest.approx(1.183, abs=1e-3)


def test_a_fourth_pump_would_win_if_it_did_not_wear_while_it_waits() -> None:
    keys = mapping("dialysis_water")
    keys["groups"]["pumps"]["redundancy"] = "cold_standby"
    del keys["groups"]["pumps"]["dormancy_factor"]
    three = value(solved(keys), "steady_state_unavailability")
    del keys["spares"]
    keys["units"]["pump"].update(logistic_delay="delivery", repair_time="exchange")
    keys["groups"]["pumps"]["members"][0]["count"] = 4
    assert value(solved(keys), "steady_state_unavailability") < three


# -------------------------------------------------------------------------------------------- telescope cooling


@cache
def cooling(coverage: str = "98 %", compressors: int = 3) -> Solution:
    keys = mapping("polar_telescope_cooling")
    keys["parameters"]["coverage"]["value"] = coverage
    keys["groups"]["cooling"]["members"][0]["count"] = compressors
    return solved(keys)


def through_winter(coverage: float, compressors: int) -> float:
    """Poisson by hand: each fault before the last is survived if it is covered."""
    faults = 125e-6 * 244 * 24
    return math.exp(-faults) * sum((coverage * faults) ** k / math.factorial(k) for k in range(compressors))


def test_a_value_that_rounds_to_its_target_misses_it() -> None:
    found = cooling()
    assert verdicts(found) == {"PT-1": "missed", "PT-2": "met"}
    assert target(found, "PT-1") == pytest.approx(through_winter(0.98, 3), rel=1e-14)
    assert f"{target(found, 'PT-1'):.4f}" == "0.9497"
    assert f"{target(found, 'PT-1'):.2f}" == "0.95"


@pytest.mark.parametrize("compressors", range(2, 11))
def test_no_number_of_compressors_reaches_the_target_at_coverage_nine_in_ten(compressors: int) -> None:
    found = cooling("90 %", compressors)
    bound = math.exp(-0.1 * 125e-6 * 244 * 24)
    assert target(found, "PT-1") == pytest.approx(through_winter(0.9, compressors), rel=1e-14)
    assert target(found, "PT-1") < bound < 0.95
    assert verdicts(found)["PT-1"] == "missed"


def test_a_fourth_compressor_is_enough_at_the_coverage_of_the_spec() -> None:
    assert verdicts(cooling(compressors=4)) == {"PT-1": "met", "PT-2": "met"}


def test_only_the_visit_keeps_the_telescope_going() -> None:
    keys = mapping("polar_telescope_cooling")
    keys["phases"][1]["repair"] = False
    assert value(solved(keys), "steady_state_availability") == 0.0


def test_nobody_is_at_work_at_the_telescope_in_winter() -> None:
    # A repair takes a technician 3 d of work, whatever comes between.
    keys = mapping("polar_telescope_cooling")
    keys["targets"].append({"id": "x", "measure": "crew_utilisation", "of": "technician", "at_most": 1})
    found = solved(keys)
    assert target(found, "x") == pytest.approx(value(found, "repairs_per_year") * 72 / 8760, rel=1e-9)
