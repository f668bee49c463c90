"""Counts, order, names and scale: what may not change a number, and what must."""

from fractions import Fraction
from math import comb

import pytest

from tests.attacks.truth import Chain, holds
from tests.cli.program import Program, Told

SAME = (
    "unreliability",
    "unavailability",
    "steady_state_unavailability",
    "mean_time_to_first_failure",
    "failures_per_year",
    "mean_down_time",
    "expected_failures",
    "hazard_rate",
)


def same_numbers(one: Told, other: Told, measures: tuple[str, ...] = SAME, factor: float = 1.0) -> None:
    for measure in measures:
        first, second = one.result(measure), other.result(measure)
        assert second["value"] == pytest.approx(first["value"] * factor, rel=1e-12), measure


# --- attack 22: a unit in two groups

IN_TWO = """
units: {{lamp: {{failure_rate: 1e-3 /h, repair_time: 10 h}}{second}}}
groups:
  left: {{members: [{{unit: lamp, count: 2}}], redundancy: active}}
  right: {{members: [{{unit: {right}, count: 2}}], redundancy: active}}
system: {{any_of: [left, right]}}
mission: {{time: 100 h}}
"""


def test_a_unit_in_two_groups_stands_for_different_items(program: Program) -> None:
    together = program.solve(IN_TWO.format(second="", right="lamp"))
    apart = program.solve(
        IN_TWO.format(second=", lantern: {failure_rate: 1e-3 /h, repair_time: 10 h}", right="lantern")
    )
    same_numbers(together, apart)
    # Four independent items, down while all four are failed: one pair of them is not counted twice.
    assert holds(together.result("steady_state_unavailability"), Fraction(1, 101) ** 4)


def test_items_of_a_unit_in_two_groups_are_counted_together_for_the_unit(program: Program) -> None:
    told = program.solve(
        IN_TWO.format(second="", right="lamp") + "targets: [{id: T, measure: mean_units_failed, of: lamp, at_most: 1},"
        " {id: A, measure: availability, of: lamp, at_least: 0.5}]\n"
    )
    assert holds(told.result("mean_units_failed", of="lamp"), Fraction(4, 101))
    # Four items are not up or down as one.
    assert told.verdicts == {"T": "met", "A": "undecided"}
    assert told.result("availability", of="lamp")["reason"]


def test_where_to_start_failed_has_to_be_said_for_a_unit_in_two_groups(program: Program) -> None:
    spec = IN_TWO.format(second="", right="lamp")
    (line,) = program.refused(spec + "initial: {lamp: {failed: 1}}\n")
    assert "left.lamp" in line
    told = program.solve(spec + "initial: {left.lamp: {failed: 1}}\n", "--at", "0 h")
    assert told.value("mean_units_failed", at_hours=0) == 1


def test_a_unit_in_two_crew_pools_is_refused(program: Program) -> None:
    spec = IN_TWO.format(second="", right="lamp")
    lines = program.refused(spec + "crews: {a: {size: 1, repairs: [lamp]}, b: {size: 1, repairs: [lamp]}}\n")
    assert len(lines) == 1


# --- attack 23: k > n, k = 0


@pytest.mark.parametrize("required", ["0", "-1", "3", "1.5", "two", "50 %"])
def test_a_number_of_required_units_that_cannot_be_is_refused(program: Program, required: str) -> None:
    (line,) = program.refused(
        "units: {lamp: {failure_rate: 1e-3 /h}}\n"
        f"groups: {{g: {{members: [{{unit: lamp, count: 2}}], required: {required}, redundancy: active}}}}\nsystem: g\n"
    )
    assert "groups.g.required" in line


@pytest.mark.parametrize("at_least", ["0", "4", "-1"])
def test_a_criterion_that_cannot_be_is_refused(program: Program, at_least: str) -> None:
    (line,) = program.refused(
        "units: {a: {failure_rate: 1 /y}, b: {failure_rate: 1 /y}, c: {failure_rate: 1 /y}}\n"
        f"system: {{at_least: {at_least}, of: [a, b, c]}}\n"
    )
    assert "system.at_least" in line


@pytest.mark.parametrize(("required", "down"), [(1, 3), (2, 2), (3, 1)])
def test_k_of_n_counts_from_one_to_all(program: Program, required: int, down: int) -> None:
    told = program.solve(
        "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}\ngroups: {g: {members: [{unit: lamp, count: 3}], "
        f"required: {required}, redundancy: active}}}}\nsystem: g\n"
    )
    q = Fraction(1, 101)
    exact = sum(comb(3, failed) * q**failed * (1 - q) ** (3 - failed) for failed in range(down, 4))
    assert holds(told.result("steady_state_unavailability"), exact)


# --- attack 27: forty units

FORTY = """
units: {lamp: {failure_rate: 1e-3 /h, repair_time: 10 h}}
groups: {light: {members: [{unit: lamp, count: 40}], required: 36, redundancy: active}}
crews: {fitters: {size: 2, repairs: [lamp]}}
system: light
mission: {time: 100 h}
"""


def test_forty_alike_are_forty_one_states(program: Program) -> None:
    found = program.solve(FORTY).json
    assert (found["states"], found["transitions"]) == (41, 80)


def test_forty_alike_with_two_crews_have_the_shares_of_their_queue(program: Program) -> None:
    told = program.solve(FORTY)
    weights = [Fraction(1)]
    for failed in range(40):
        weights.append(weights[-1] * (40 - failed) * Fraction(1, 1000) / (min(failed + 1, 2) * Fraction(1, 10)))
    total = sum(weights)
    assert holds(told.result("steady_state_unavailability"), sum(weights[5:]) / total)
    assert holds(told.result("mean_units_failed"), sum(n * weight for n, weight in enumerate(weights)) / total)
    assert holds(told.result("failures_per_year"), 8760 * weights[4] * 36 / 1000 / total)
    assert holds(told.result("crew_utilisation"), sum(min(n, 2) * w for n, w in enumerate(weights)) / total / 2)


def test_forty_alike_in_series_fail_forty_times_as_often(program: Program) -> None:
    told = program.solve(FORTY.replace("required: 36", "required: 40"))
    assert holds(told.result("mean_time_to_first_failure"), Fraction(25))


@pytest.mark.parametrize("count", [300, 3000])
def test_hundreds_alike_keep_their_multiples(program: Program, count: int) -> None:
    told = program("check", program.file(FORTY.replace("count: 40", f"count: {count}")), "--json")
    assert (told.json["states"], told.json["transitions"]) == (count + 1, 2 * count)


@pytest.mark.long
def test_a_legal_number_of_units_is_no_internal_error(program: Program) -> None:
    told = program("check", program.file(FORTY.replace("count: 40", "count: 33000")), "--json")
    assert told.status in (0, 3), told.err.splitlines()[-1]


# --- attack 32: a crew of zero, a crew larger than the units


@pytest.mark.parametrize("size", ["0", "-1", "1.5", "many"])
def test_a_crew_that_cannot_be_is_refused(program: Program, size: str) -> None:
    (line,) = program.refused(FORTY.replace("size: 2", f"size: {size}"))
    assert "crews.fitters.size" in line


def test_a_crew_larger_than_the_units_is_noted_and_works_like_one_for_each(program: Program) -> None:
    pair = FORTY.replace("count: 40", "count: 2").replace("required: 36", "required: 1")
    large = program.solve(pair.replace("size: 2", "size: 7"))
    enough = program.solve(pair)
    same_numbers(large, enough)
    assert any("a size of 7 for 2 units" in warning for warning in large.json["warnings"])
    assert not any("size" in warning for warning in enough.json["warnings"])
    assert large.value("waiting_for_crew") == 0
    # Two of seven can ever be at work.
    assert large.value("crew_utilisation") == pytest.approx(enough.value("crew_utilisation") * 2 / 7, rel=1e-12)


def test_a_crew_short_of_one_makes_repairs_wait(program: Program) -> None:
    pair = FORTY.replace("count: 40", "count: 2").replace("required: 36", "required: 1")
    told = program.solve(pair.replace("size: 2", "size: 1"))
    truth = Chain({(0, 1): "2/1000", (1, 0): "1/10", (1, 2): "1/1000", (2, 1): "1/10"})
    assert holds(told.result("steady_state_unavailability"), truth.stationary()[2])
    assert holds(told.result("waiting_for_crew"), truth.stationary()[2])


# --- attack 35: units reordered, names changed

PLANT = """
parameters: {{{rate}: 2e-4 /h}}
units:
  {pump}: {{failure_rate: {rate}, repair_time: 20 h, start_failure: 3 %}}
  {valve}: {{failure_rate: 5e-5 /h, repair_time: 8 h}}
  {motor}: {{failure_rate: 1e-4 /h, repair_time: 12 h}}
groups:
  {feed}:
    members: [{{unit: {pump}, count: 2}}]
    redundancy: cold_standby
    switchover: {{coverage: 0.9, uncovered: {{outcome: manual_takeover, time: 1 h}}}}
  {drain}: {{members: [{{unit: {valve}, count: 2}}, {motor}], required: 2, redundancy: active}}
crews: {{{crew}: {{size: 1, repairs: [{motor}, {pump}, {valve}]}}}}
system: {{all_of: [{feed}, {drain}]}}
mission: {{time: 1000 h}}
"""
NAMES = ("pump", "valve", "motor", "feed", "drain", "crew", "rate")


def plant(**names: str) -> str:
    return PLANT.format(**{**{name: name for name in NAMES}, **names})


@pytest.mark.parametrize(
    "names",
    [
        {"pump": "zz", "valve": "aa", "motor": "mm"},
        {"pump": "motor", "motor": "valve", "valve": "pump"},
        {"feed": "zz_last", "drain": "aa_first", "crew": "0", "rate": "lambda"},
        {"pump": "'on duty'", "valve": "'all good'", "feed": "failed", "drain": "up"},
        {"pump": "насос", "feed": "給水", "rate": "λ"},
    ],
    ids=["sorted otherwise", "names exchanged", "groups", "names like words of the program", "other scripts"],
)
def test_names_do_not_change_a_number(program: Program, names: dict[str, str]) -> None:
    told, plain = program.solve(plant(**names)), program.solve(plant())
    assert (told.json["states"], told.json["transitions"]) == (plain.json["states"], plain.json["transitions"])
    assert [each["measure"] for each in told.json["results"]] == [each["measure"] for each in plain.json["results"]]
    for one, other in zip(told.json["results"], plain.json["results"], strict=True):
        assert one["value"] == pytest.approx(other["value"], rel=1e-12), one["measure"]


def test_the_order_of_units_groups_and_criteria_does_not_change_a_number(program: Program) -> None:
    lines = plant().splitlines()
    units = lines[lines.index("units:") + 1 : lines.index("groups:")]
    reordered = "\n".join([*lines[: lines.index("units:") + 1], *reversed(units), *lines[lines.index("groups:") :]])
    reordered = reordered.replace("all_of: [feed, drain]", "all_of: [drain, feed]")
    reordered = reordered.replace("[{unit: valve, count: 2}, motor]", "[motor, {unit: valve, count: 2}]")
    told, plain = program.solve(reordered), program.solve(plant())
    assert reordered.splitlines() != plant().splitlines()
    assert told.json["spec_sha256"] != plain.json["spec_sha256"]
    same_numbers(told, plain)
    same_numbers(told, plain, ("repairs_per_year", "starts_per_year", "crew_utilisation", "time_without_redundancy"))


def test_the_order_of_repairs_does_change_a_number(program: Program) -> None:
    # Otherwise the tests above could not fail.
    other = plant().replace("[motor, pump, valve]", "[valve, pump, motor]")
    assert program.solve(other).value("mean_down_time") != pytest.approx(
        program.solve(plant()).value("mean_down_time"), rel=1e-6
    )


def test_states_of_a_written_chain_in_any_order_give_the_same_numbers(program: Program) -> None:
    states = ["a: {up: true, initial: true}", "b: {up: true}", "c: {up: false}"]
    arrows = ["{from: a, to: b, rate: 1e-3 /h}", "{from: b, to: a, rate: 1e-1 /h}", "{from: b, to: c, rate: 1e-3 /h}"]
    arrows.append("{from: c, to: b, rate: 1e-1 /h}")

    def chain(states: list[str], arrows: list[str]) -> str:
        return f"states: {{{', '.join(states)}}}\ntransitions: [{', '.join(arrows)}]\nmission: {{time: 100 h}}\n"

    same_numbers(program.solve(chain(states, arrows)), program.solve(chain(states[::-1], arrows[::-1])))


# --- attack 36: one unit split into two halves in series

WHOLE = "units: {pump: {failure_rate: 2e-3 /h}}\n"
HALVES = "units: {top: {failure_rate: 1e-3 /h}, bottom: {failure_rate: 1e-3 /h}}\n"
FAR = "mission: {time: 300 h}\n"


def test_two_halves_in_series_are_as_reliable_as_the_whole(program: Program) -> None:
    whole = program.solve(WHOLE + "system: pump\n" + FAR)
    halves = program.solve(HALVES + "system: {all_of: [top, bottom]}\n" + FAR)
    same_numbers(whole, halves, ("reliability", "unreliability", "mean_time_to_first_failure", "hazard_rate"))
    grouped = program.solve(
        "units: {half: {failure_rate: 1e-3 /h}}\n"
        "groups: {g: {members: [{unit: half, count: 2}], required: 2}}\nsystem: g\n" + FAR
    )
    same_numbers(whole, grouped, ("reliability", "unreliability", "mean_time_to_first_failure", "hazard_rate"))


@pytest.mark.parametrize("redundancy", ["active", "hot_standby", "cold_standby", "warm_standby, dormancy_factor: 0.3"])
@pytest.mark.parametrize("coverage", ["1", "0.8"])
def test_a_train_of_two_halves_is_as_reliable_as_the_whole(program: Program, redundancy: str, coverage: str) -> None:
    more = f"redundancy: {redundancy}, switchover: {{coverage: {coverage}, uncovered: {{outcome: lost}}}}"
    whole = program.solve(WHOLE + f"groups: {{g: {{members: [{{unit: pump, count: 2}}], {more}}}}}\nsystem: g\n" + FAR)
    halves = program.solve(
        HALVES + "groups:\n  first: {members: [top, bottom], required: 2}\n"
        f"  second: {{members: [top, bottom], required: 2}}\n  g: {{members: [first, second], {more}}}\nsystem: g\n"
        + FAR
    )
    measures = ("unreliability", "mean_time_to_first_failure", "hazard_rate")
    same_numbers(whole, halves, measures)


def test_a_whole_and_halves_that_are_not_half_are_told_apart(program: Program) -> None:
    whole = program.solve(WHOLE + "system: pump\n" + FAR).value("reliability")
    uneven = program.solve(HALVES.replace("1e-3", "1.1e-3") + "system: {all_of: [top, bottom]}\n" + FAR)
    assert uneven.value("reliability") != pytest.approx(whole, rel=1e-6)


# --- attack 37: rates times ten, times divided by ten


def test_a_plant_ten_times_as_fast_gives_the_same_answers_ten_times_as_soon(program: Program) -> None:
    fast = (
        plant()
        .replace("2e-4 /h", "2e-3 /h")
        .replace("5e-5 /h", "5e-4 /h")
        .replace("1e-4 /h", "1e-3 /h")
        .replace("20 h", "2 h")
        .replace("8 h", "0.8 h")
        .replace("12 h", "1.2 h")
        .replace("time: 1 h", "time: 0.1 h")
        .replace("1000 h", "100 h")
    )
    one, ten = program.solve(plant()), program.solve(fast)
    shares = ("unreliability", "unavailability", "steady_state_unavailability", "expected_failures", "crew_utilisation")
    same_numbers(one, ten, (*shares, "downtime_per_year", "gain_over_single_unit", "mean_units_failed"))
    same_numbers(one, ten, ("mean_time_to_first_failure", "mean_up_time", "mean_down_time"), factor=0.1)
    same_numbers(one, ten, ("failures_per_year", "hazard_rate", "repairs_per_year", "mean_failure_rate"), factor=10)


def test_the_unit_of_time_in_which_a_spec_is_written_does_not_matter(program: Program) -> None:
    in_minutes = (
        plant()
        .replace("20 h", "1200 min")
        .replace("8 h", "28800 s")
        .replace("12 h", "0.5 d")
        .replace("2e-4 /h", "200 per million hours")
        .replace("1000 h", "60_000 min")
    )
    one, other = program.solve(plant()), program.solve(in_minutes)
    assert one.json["results"] == other.json["results"]
