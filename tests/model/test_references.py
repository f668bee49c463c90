"""What the parts of a spec say about each other has to fit."""

import pytest

from markov.model import AllOf, AnyOf, AtLeast, Named, names

PLANT = """\
units:
  pump: {failure_rate: 1e-4 /h, repair_time: 24 h}
  valve: {failure_rate: 1e-5 /h, repair_time: 24 h}
  fan: {failure_rate: 1e-5 /h}
groups:
  water: {members: [{unit: pump, count: 2}], redundancy: cold_standby}
  spare_water: {members: [{unit: pump, count: 3}], redundancy: active}
"""


def test_criteria_nest(read):
    system = read(PLANT + "system: {all_of: [valve, {any_of: [water, {at_least: 2, of: [fan, water, fan]}]}]}").system
    assert system == AllOf(
        (Named("valve"), AnyOf((Named("water"), AtLeast(2, (Named("fan"), Named("water"), Named("fan"))))))
    )
    assert names(system) == ("valve", "water", "fan")


@pytest.mark.parametrize(
    ("system", "found"),
    [
        ("watr", "`watr` is not known"),
        ("{all_of: [valve, {any_of: [watr]}]}", "`watr` is not known"),
        ("{all_of: []}", "an empty list"),
        ("{all_of: valve}", "`valve` stands here"),
        ("[water, valve]", "a list stands here"),
        ("{}", "an empty mapping"),
        ("{and: [water, valve]}", "`and` does not belong here"),
        ("{all_of: [water], any_of: [valve]}", "`any_of` does not belong here"),
        ("{at_least: 3, of: [water, valve]}", "at least 3 of 2"),
        ("{at_least: 0, of: [water, valve]}", "out of range"),
        ("{at_least: 1}", "`of` is missing"),
        ("''", "nothing is written here"),
    ],
)
def test_unsound_criteria_are_refused(told, system, found):
    problem = told(f"{PLANT}system: {system}\n")
    assert found in problem.found
    assert problem.line == 8


def test_system_has_to_be_said(told):
    problem = told(PLANT)
    assert "`system` is missing" in problem.found
    assert (problem.line, problem.column) == (1, 1)


def test_units_have_to_be_said(problems):
    assert any("`units` is missing" in problem.found for problem in problems("title: empty"))


def test_misspelt_top_key_is_not_missing_as_well(told):
    assert told(f"{PLANT}sytem: water\n").fix == "write `system`"


CREWED = PLANT + "system: {all_of: [water, valve]}\ncrews:\n"


def test_crew_serves_by_priority_or_in_the_order_of_the_list(read):
    crews = read(
        f"{CREWED}  a: {{size: 1, repairs: [pump]}}\n  b: {{size: 2, repairs: [fan, valve], priority: [valve, fan]}}\n"
    ).crews
    assert crews["a"].order == ("pump",)
    assert crews["b"].order == ("valve", "fan")
    assert not crews["a"].is_said("preemptive")


@pytest.mark.parametrize(
    ("crew", "found"),
    [
        ("{size: 0, repairs: [pump]}", "out of range"),
        ("{repairs: [pump]}", "`size` is missing"),
        ("{size: 1}", "`repairs` is missing"),
        ("{size: 1, repairs: []}", "an empty list"),
        ("{size: 1, repairs: [pmp]}", "`pmp` is not known"),
        ("{size: 1, repairs: [water]}", "`water` is a group"),
        ("{size: 1, repairs: [pump, pump]}", "stands twice"),
        ("{size: 1, repairs: [pump, valve], priority: [pump]}", "`valve` left out"),
        ("{size: 1, repairs: [pump], priority: [pump, valve]}", "not among `repairs`"),
        ("{size: 1, repairs: [pump, valve], priority: [pump, valve, pump]}", "stands twice"),
        ("{size: 1, repairs: [pump], preemptive: sometimes}", "neither"),
        ("{size: 1, repairs: [pump], queue: random}", "no choice"),
    ],
)
def test_unsound_crews_are_refused(told, crew, found):
    problem = told(f"{CREWED}  fitters: {crew}\n")
    assert found in problem.found
    assert problem.line == 10


def test_unit_in_two_pools_is_refused(told):
    problem = told(f"{CREWED}  a: {{size: 1, repairs: [pump]}}\n  b: {{size: 1, repairs: [valve, pump]}}\n")
    assert "`pump` is repaired by `a`, too" in problem.found
    assert (problem.line, problem.column) == (11, 33)


def test_standby_rate_needs_standbys(problems, read):
    base = PLANT + "while_down: standby_rate\nsystem: "
    assert read(base + "water").while_down == "standby_rate"
    found = " ".join(problem.found for problem in problems(base + "{all_of: [water, spare_water, valve]}"))
    assert "active group `spare_water`" in found
    assert "single unit `valve`" in found


def test_active_group_may_opt_out_of_standby_rate(read):
    text = PLANT.replace("redundancy: active", "redundancy: active, while_down: stop")
    assert read(text + "while_down: standby_rate\nsystem: {all_of: [water, spare_water]}").while_down == "standby_rate"


INITIAL = PLANT + "system: {all_of: [water, spare_water, valve]}\ninitial: "


def test_hidden_faults_at_the_start(read):
    text = INITIAL.replace("valve: {failure_rate: 1e-5 /h,", "valve: {failure_rate: 1e-5 /h, detected: 0,")
    assert read(text + "{valve: hidden}").initial["valve"].hidden == 1
    assert read(text + "{valve: {hidden: 1}}").initial["valve"].failed == 0


def test_hidden_faults_count_with_the_known_ones(told):
    text = INITIAL.replace("valve: {failure_rate: 1e-5 /h,", "valve: {failure_rate: 1e-5 /h, detected: 0,")
    assert "2 failed of 1, hidden faults included" in told(text + "{valve: {failed: 1, hidden: 1}}").found


def test_crew_may_finish_what_it_has_begun(read):
    crew = read(f"{CREWED}  a: {{size: 1, repairs: [pump, valve], preemptive: false, queue: first_come}}\n").crews["a"]
    assert crew.preemptive is False
    assert crew.queue == "first_come"


def test_units_failed_at_the_start(read):
    initial = read(INITIAL + "{valve: failed, water.pump: {failed: 1}, spare_water.pump: {failed: 3}}").initial
    assert {key: faults.failed for key, faults in initial.items()} == {
        "valve": 1,
        "water.pump": 1,
        "spare_water.pump": 3,
    }


@pytest.mark.parametrize(
    ("initial", "found"),
    [
        ("{pump: failed}", "serves in several places"),
        ("{water.pump: {failed: 3}}", "3 failed of 2"),
        ("{water.valve: failed}", "not known"),
        ("{vlave: failed}", "not known"),
        ("{valve: broken}", "`broken` stands here"),
        ("{valve: hidden}", "all known at once"),
        ("{water.pump: {failed: 1, hidden: 0}, valve: {hidden: 1 h}}", "not a whole number"),
        ("{valve: {}}", "`failed` or `hidden` is missing"),
        ("{valve: {failed: 1 h}}", "not a whole number"),
    ],
)
def test_unsound_starts_are_refused(told, initial, found):
    assert found in told(INITIAL + initial).found


def test_places_of_items(read):
    model = read(PLANT + "system: {all_of: [water, valve, fan]}")
    assert [(place.key, place.count) for place in model.placements] == [
        ("water.pump", 2),
        ("spare_water.pump", 3),
        ("valve", 1),
        ("fan", 1),
    ]


def test_keys_of_later_versions_are_refused_by_name(told):
    problem = told(f"{PLANT}system: water\nvariants: {{}}\n")
    assert "`variants` is not built yet" in problem.found
    assert (problem.line, problem.column) == (9, 1)


@pytest.mark.parametrize("key", ["spares", "tests", "common_causes", "demand", "phases", "restoration", "initial"])
def test_keys_of_plants_do_not_stand_beside_a_hand_written_chain(problems, key):
    text = f"states: {{a: {{up: true, initial: true}}}}\n{key}: {{}}\n"
    assert any(f"`{key}` beside a hand-written chain" in problem.found for problem in problems(text))


@pytest.mark.parametrize("year", ["0 h", "1 y", "8760", "12 months", "1 /h", "long"])
def test_length_of_the_year_is_a_time_above_zero(told, year):
    assert told(f"year: {year}\n{PLANT}system: water\n").line == 1


def test_length_of_the_year_changes_years(read):
    model = read(f"year: 365.25 d\n{PLANT}system: water\nmission: {{time: 1 y}}\n")
    assert model.year_hours == 8766
    assert model.mission.time.exact == 8766


def test_the_word_failed_means_one_item(read):
    assert read(INITIAL + "{water.pump: failed}").initial["water.pump"].failed == 1
