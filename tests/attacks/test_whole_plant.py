"""What an assessor tries on a whole plant: causes, hidden faults, tests, phases, spares, deferral, loads, switches."""

from fractions import Fraction
from math import exp

import mpmath
import pytest

from tests.attacks.test_structure import same_numbers
from tests.attacks.truth import DIGITS, Chain, holds
from tests.cli.program import Program

SHARES = ("unreliability", "unavailability", "mean_unavailability", "steady_state_unavailability", "mean_units_failed")
COUNTS = ("failures_per_year", "repairs_per_year", "starts_per_year", "pfh")
TIMES = ("mean_time_to_first_failure", "mean_down_time")

# A pair that waits and hides faults beside a pair from one store: most of the language in 100 states or so.
PLANT = """
units:
  {pump}: {{failure_rate: {pump_rate} /h, repair_time: {t20} h, detected: 60 %, start_failure: 3 %, capacity: 60 %}}
  {fan}: {{failure_rate: {fan_rate} /h}}
groups:
  {feed}:
    members: [{{unit: {pump}, count: 2}}]
    redundancy: warm_standby
    dormancy_factor: 0.5
    switchover: {{coverage: 0.9, uncovered: {{outcome: manual_takeover, time: {t1} h}}}}
  {air}: {{members: [{{unit: {fan}, count: 2}}], redundancy: active, load_sharing: {{2: 1, 1: 1.5}}}}
crews: {{{crew}: {{size: 1, repairs: [{pump}]}}}}
spares: {{{store}: {{for: {fan}, stock: 1, lead_time: {t50} h, swap_time: {t2} h, order: when_failed}}}}
tests: {{{proof}: {{of: {pump}, interval: {t100} h}}}}
common_causes:
  {water}: {{members: {feed}, beta: 10 %}}
  {dust}: {{members: {fan}, greek_letters: [0.2]}}
phases:
  - {{name: {day}, duration: {t150} h, rate_factors: {{{pump}: 2}}}}
  - {{name: {night}, duration: {t50} h, repair: false, repeat: true}}
system: {{all_of: [{feed}, {air}]}}
mission: {{time: {t250} h}}
"""
NAMES = ("pump", "fan", "feed", "air", "crew", "store", "proof", "water", "dust", "day", "night")


def plant(*, speed: Fraction = Fraction(1), **names: str) -> str:
    times = {f"t{hours}": float(hours / speed) for hours in (1, 2, 20, 50, 100, 150, 250)}
    rates = {"pump_rate": float(speed / 500), "fan_rate": float(speed / 1000)}
    return PLANT.format(**times, **rates, **{**{name: name for name in NAMES}, **names})


# --- attack 6: a key of repair on what is never repaired


def test_a_rule_of_repair_for_units_that_are_never_repaired_is_noted(program: Program) -> None:
    spec = "units: {{lamp: {{failure_rate: 1e-3 /h{more}}}}}\nsystem: lamp\n"
    (line,) = program.refused(spec.format(more=", mean_time_between_failures: 1000 h"))
    assert "mean_time_between_failures" in line
    for key in ("repair_success: 0.9", "repair_stages: 3", "logistic_delay: 5 h"):
        told = program("solve", program.file(spec.format(more=f", {key}")), "--json")
        noted = told.status == 0 and any(key.split(":")[0] in each for each in told.json["warnings"])
        refused = told.status == 2 and key.split(":")[0] in told.err
        assert noted or refused, key


# --- attack 11: what nothing uses


def test_a_parameter_used_only_by_the_whole_plant_is_used(program: Program) -> None:
    keys = {
        "common_causes: {c: {members: lamp, beta: shared}}": "shared: 0.1",
        "tests: {t: {of: lamp, interval: every}}": "every: 100 h",
        "spares: {s: {for: lamp, stock: 1, lead_time: order}}": "order: 100 h",
        "phases: [{name: x, duration: 10 h, rate_factors: {lamp: harsh}}, {name: y}]": "harsh: 2",
        "demand: {rate: calls}": "calls: 1 /y",
        "restoration: {time: back}": "back: 5 h",
        "levels: {half: least}": "least: 50 %",
    }
    spec = (
        "units: {lamp: {failure_rate: 1e-3 /h, repair_time: 5 h, detected: 90 %}}\n"
        "groups: {g: {members: [{unit: lamp, count: 2}], redundancy: active}}\nsystem: g\n"
    )
    proof = "tests: {t: {of: lamp, interval: 100 h}}\n"
    for key, parameter in keys.items():
        rest = spec if key.startswith("tests") else spec + proof
        used = program.solve(f"{rest}{key}\nparameters: {{{parameter}}}\n")
        assert not any("nothing uses" in each for each in used.json["warnings"]), key
        unused = program.solve(f"{rest}parameters: {{{parameter}}}\n")
        name = parameter.split(":")[0]
        assert f"parameters.{name}: nothing uses this parameter." in unused.json["warnings"]


def test_a_store_and_a_test_of_what_serves_nowhere_are_noted(program: Program) -> None:
    spec = "units: {lamp: {failure_rate: 1e-3 /h}, horn: {failure_rate: 1e-3 /h, detected: 0}}\nsystem: lamp\n"
    told = program.solve(spec + "tests: {t: {of: horn, interval: 10 h}}\n")
    assert any("tests.t" in each and "horn" in each for each in told.json["warnings"])
    told = program.solve(spec + "spares: {s: {for: horn, stock: 1, lead_time: 10 h}}\n")
    assert any("horn" in each for each in told.json["warnings"])


# --- attack 12: coverage and refusals of the switch together


def test_coverage_and_refusal_are_two_chances_and_noted(program: Program) -> None:
    spec = (
        "units: {{lamp: {{failure_rate: 1e-3 /h}}}}\n"
        "groups: {{g: {{members: [{{unit: lamp, count: 2}}], redundancy: cold_standby, switchover: {{{how}}}}}}}\n"
        "system: g\n"
    )
    both = program.solve(spec.format(how="coverage: 0.9, switch: {failure_on_demand: 0.2}"))
    # The second lamp serves only where the fault is covered and the switch obeys.
    assert holds(both.result("mean_time_to_first_failure"), 1000 * (1 + Fraction(9, 10) * Fraction(8, 10)))
    assert any("coverage" in each and "failure_on_demand" in each for each in both.json["warnings"])
    for how in ("coverage: 0.72", "switch: {failure_on_demand: 0.28}"):
        one = program.solve(spec.format(how=how))
        assert one.value("mean_time_to_first_failure") == pytest.approx(1720, rel=1e-12)
        assert not any("failure_on_demand" in each for each in one.json["warnings"])


# --- attack 21: a group inside itself, and what trains do not know yet


def test_a_group_inside_itself_is_refused_also_where_a_cause_or_a_phase_names_it(program: Program) -> None:
    spec = (
        "units: {lamp: {failure_rate: 1e-3 /h}}\n"
        "groups: {a: {members: [lamp, b], redundancy: active}, b: {members: [lamp, a], redundancy: active}}\n"
        "system: a\n"
    )
    for more in (
        "common_causes: {c: {members: a, beta: 0.1}}",
        "phases: [{name: p, duration: 1 h, system: b}, {name: q}]",
    ):
        lines = program.refused(spec + more + "\n")
        assert any("groups.a" in line or "groups.b" in line for line in lines)


# --- attack 24: shares that sum to 0.999


@pytest.mark.parametrize(
    ("mode", "alpha"),
    [("0.3, 0.699", "0.9, 0.09, 0.009"), ("0.5, 0.501", "0.9, 0.1, 0.001"), ("0.5, 0.5", "0.9, 0.09, 0.01")],
)
def test_shares_have_to_sum_to_one_exactly(program: Program, mode: str, alpha: str) -> None:
    one, other = mode.split(", ")
    spec = (
        f"units: {{lamp: {{failure_rate: 1e-3 /h, failure_modes: {{a: {{share: {one}}}, b: {{share: {other}}}}}}}}}\n"
        "groups: {g: {members: [{unit: lamp, count: 3}], redundancy: active}}\nsystem: g\n"
        f"common_causes: {{c: {{members: g, alpha_factors: [{alpha}], testing: staggered}}}}\n"
    )
    if mode == "0.5, 0.5":
        assert program.solve(spec).status == 0
        return
    lines = program.refused(spec)
    assert len(lines) == 2
    assert "units.lamp.failure_modes" in lines[0]
    assert "sum to exactly 1" in lines[0]
    assert "common_causes.c.alpha_factors" in lines[1]
    assert "sum to exactly 1" in lines[1]


# --- attack 25: β out of range, a cause of one; attack 26: unequal rates

TRIO = """
units: {{lamp: {{failure_rate: 1e-3 /h, repair_time: 10 h}}, horn: {{failure_rate: 4e-3 /h, repair_time: 10 h}}}}
groups: {{g: {{members: [{{unit: lamp, count: 2}}, horn], redundancy: active}}}}
common_causes: {{c: {{members: {members}, {keys}}}}}
system: g
"""


@pytest.mark.parametrize("beta", ["-0.1", "1.1", "10", "101 %", ".nan", "true", "1 h", "0.1 /h", "null"])
def test_beta_out_of_range_is_refused(program: Program, beta: str) -> None:
    for key in ("beta", "beta_detected"):
        more = "" if key == "beta" else "beta: 0.1, "
        (line,) = program.refused(TRIO.format(members="lamp", keys=f"{more}{key}: {beta}"))
        assert f"common_causes.c.{key}" in line


def test_a_common_cause_of_one_is_refused(program: Program) -> None:
    for members in ("horn", "g.horn", "[horn]"):
        (line,) = program.refused(TRIO.format(members=members, keys="beta: 0.1"))
        assert "common_causes.c.members" in line


def test_a_cause_across_unequal_rates_has_to_say_whose(program: Program) -> None:
    (line,) = program.refused(TRIO.format(members="g", keys="beta: 0.1"))
    assert "common_causes.c" in line
    assert "basis" in line
    one = program.solve(TRIO.format(members="g", keys="beta: 0.1, basis: lowest"))
    other = program.solve(TRIO.format(members="g", keys="beta: 0.1, rate: 1e-3 /h"))
    same_numbers(one, other, ("steady_state_unavailability", "failures_per_year", "repairs_per_year"))


def test_causes_may_not_take_more_than_the_rate_of_a_unit(program: Program) -> None:
    (line,) = program.refused(TRIO.format(members="g", keys="beta: 0.5, rate: 3e-3 /h"))
    assert "lamp" in line
    assert program.solve(TRIO.format(members="g", keys="beta: 0.5, rate: 2e-3 /h")).status == 0


def test_beta_of_nothing_and_of_all(program: Program) -> None:
    none = program.solve(TRIO.format(members="lamp", keys="beta: 0"))
    assert any("common_causes.c" in each for each in none.json["warnings"])
    q, p = Fraction(1, 101), Fraction(4, 104)
    assert holds(none.result("steady_state_unavailability"), q * q * p)
    every = program.solve(TRIO.format(members="lamp", keys="beta: 100 %"))
    rates = {(0, 2): "1/1000", (1, 2): "1/1000", (1, 0): "1/10", (2, 1): "2/10"}
    assert holds(every.result("steady_state_unavailability"), Chain(rates).stationary()[2] * p)


# --- attack 33: an interval longer than the mission; attack 34: a visit at a phase boundary

HIDING = """
units: {{lamp: {{failure_rate: 1e-4 /h, repair_time: 0 h, detected: 0}}}}
tests: {{t: {{of: lamp, interval: {interval}}}}}
system: lamp
mission: {{time: 1000 h}}
"""


def test_a_test_after_the_mission_is_noted_and_changes_nothing_before(program: Program) -> None:
    late, never = program.solve(HIDING.format(interval="1001 h")), program.solve(HIDING.format(interval="5000 h"))
    same_numbers(late, never, ("unreliability", "unavailability", "mean_unavailability", "expected_failures"))
    for told in (late, never):
        assert any("longer than the mission" in each for each in told.json["warnings"])
        assert told.value("unavailability") == pytest.approx(1 - exp(-0.1), rel=1e-12)
    # In the long run it does: the mean of 1 - exp(-λt) over the interval.
    with mpmath.workdps(DIGITS):
        for told, hours in ((late, 1001), (never, 5000)):
            x = mpmath.mpf(hours) / 10000
            assert holds(told.result("pfd_average"), 1 + mpmath.expm1(-x) / x)


def test_a_test_at_the_end_of_the_mission_has_taken_place(program: Program) -> None:
    told = program.solve(HIDING.format(interval="1000 h"))
    assert not any("longer than the mission" in each for each in told.json["warnings"])
    assert told.value("unavailability") == 0


VISITED = """
units: {{lamp: {{failure_rate: 1e-2 /h, repair_time: 5 h}}}}
groups: {{g: {{members: [{{unit: lamp, count: 1}}], repair_when: {{visits_every: {visits} h}}}}}}
phases:
  - {{name: away, duration: 100 h, repair: false}}
  - {{name: there, duration: 100 h, repeat: true}}
system: g
mission: {{time: 400 h}}
"""


def test_a_visit_at_a_phase_boundary_falls_into_the_phase_that_begins(program: Program) -> None:
    """At 100 h crews work again, then the visit releases what is failed; at 200 h they stop before it is released."""
    told = program.solve(VISITED.format(visits=100), "--at", "105 h", "--at", "205 h", "--at", "305 h")
    # Good at 100 h: exp(-1).  From then on repair of what was failed at the visit goes on, what fails later waits.
    decay, mended = mpmath.mpf("0.01"), mpmath.mpf("0.2")
    failed = 1 - mpmath.exp(-1)

    def good_after(good: mpmath.mpf, released: mpmath.mpf, hours: int) -> mpmath.mpf:
        turned = mended * (mpmath.exp(-decay * hours) - mpmath.exp(-mended * hours)) / (mended - decay)
        return good * mpmath.exp(-decay * hours) + released * turned

    assert told.value("availability", at_hours=105) == pytest.approx(
        float(good_after(1 - failed, failed, 5)), rel=1e-11
    )
    good = good_after(1 - failed, failed, 100)
    # Whoever is failed at 200 h is released by that visit and waits for the crew, which is back at 300 h.
    late = good * mpmath.exp(-1)
    assert told.value("availability", at_hours=205) == pytest.approx(float(good * mpmath.exp(-decay * 5)), rel=1e-11)
    assert told.value("availability", at_hours=305) == pytest.approx(float(good_after(late, 1 - late, 5)), rel=1e-11)


def test_a_failure_by_the_criterion_of_the_next_phase_is_counted_at_the_boundary(program: Program) -> None:
    told = program.solve(
        "units: {lamp: {failure_rate: 1e-2 /h}}\n"
        "groups: {g: {members: [{unit: lamp, count: 2}], redundancy: active}}\n"
        "phases: [{name: easy, duration: 10 h}, {name: hard, required: {g: 2}}]\nsystem: g\nmission: {time: 10 h}\n",
        "--at",
        "9.999999999999 h",
    )
    before, here = (1 - exp(-0.1)) ** 2, 1 - exp(-0.2)
    assert told.value("unreliability", at_hours=10) == pytest.approx(here, rel=1e-12)
    assert told.value("expected_failures", at_hours=10) == pytest.approx(here, rel=1e-12)
    assert told.value("unreliability", at_hours=9.999999999999) == pytest.approx(before, rel=1e-9)


# --- attack 35: reordered, renamed


def test_names_do_not_change_a_number_of_a_whole_plant(program: Program) -> None:
    plain = program.solve(plant())
    other = program.solve(
        plant(pump="zz", fan="'on'", feed="'no'", air="'1'", proof="aa", water="воздух", day="z", night="a")
    )
    assert (other.json["states"], other.json["transitions"]) == (plain.json["states"], plain.json["transitions"])
    same_numbers(other, plain, (*SHARES, *COUNTS, *TIMES, "spares_per_year", "tests_per_year", "crew_utilisation"))


def test_the_order_of_the_text_does_not_change_a_number_of_a_whole_plant(program: Program) -> None:
    plain = plant()
    lines = plain.strip().splitlines()
    heads = [number for number, line in enumerate(lines) if not line.startswith(" ")]
    blocks = [lines[begin:end] for begin, end in zip(heads, [*heads[1:], len(lines)], strict=True)]
    blocks = [[head, *(reversed(rest) if head in ("units:", "common_causes:") else rest)] for head, *rest in blocks]
    turned = "\n".join(line for block in reversed(blocks) for line in block) + "\n"
    turned = turned.replace("all_of: [feed, air]", "all_of: [air, feed]")
    assert turned.index("system:") < turned.index("units:")
    same_numbers(program.solve(turned), program.solve(plain), (*SHARES, *COUNTS, *TIMES, "spares_per_year"))


# --- attack 36: one unit split into two halves in series, and other ways to write the same plant


def test_two_halves_in_series_with_hidden_faults_are_the_whole(program: Program) -> None:
    tail = "tests: {t: {of: %s, interval: 300 h}}\nsystem: %s\nmission: {time: 1000 h}\n"
    kind = "{failure_rate: %s /h, detected: 40 %%, repair_time: 0 h}"
    whole = program.solve("units: {a: " + kind % "2e-3" + "}\n" + tail % ("a", "a"))
    halves = program.solve(
        f"units: {{a: {kind % '1e-3'}, b: {kind % '1e-3'}}}\n" + tail % ("[a, b]", "{all_of: [a, b]}")
    )
    measures = ("unreliability", "unavailability", "steady_state_unavailability", "mean_time_to_first_failure", "pfh")
    same_numbers(whole, halves, measures)


def test_one_mode_split_into_two_alike_is_the_same_mode(program: Program) -> None:
    one = "failure_modes: {a: {share: 1, detected: 30 %}}"
    two = "failure_modes: {a: {share: 0.4, detected: 30 %}, b: {share: 0.6, detected: 30 %}}"
    spec = (
        "units: {{lamp: {{failure_rate: 1e-3 /h, repair_time: 10 h, {modes}}}}}\n"
        "groups: {{g: {{members: [{{unit: lamp, count: 3}}], required: 2, redundancy: active}}}}\n"
        "tests: {{t: {{of: lamp, interval: 200 h}}}}\ncommon_causes: {{c: {{members: g, beta: 10 %}}}}\n"
        "system: g\nmission: {{time: 500 h}}\n"
    )
    same_numbers(program.solve(spec.format(modes=one)), program.solve(spec.format(modes=two)), (*SHARES, *TIMES, "pfh"))


def test_one_phase_split_into_two_alike_is_the_same_phase(program: Program) -> None:
    split = plant().replace(
        "- {name: day, duration: 150.0 h,",
        "- {name: dawn, duration: 60 h, rate_factors: {pump: 2}}\n  - {name: day, duration: 90 h,",
    )
    assert "dawn" in split
    same_numbers(program.solve(split), program.solve(plant()), (*SHARES, *COUNTS, *TIMES))


def test_letters_factors_and_beta_that_mean_the_same_give_the_same(program: Program) -> None:
    # A pair with β = 0.2: its letters, and its factors by either way of testing.
    same = ("beta: 0.2", "greek_letters: [0.2]", "alpha_factors: [0.8, 0.2], testing: staggered")
    # Of the events of a pair α₂ = β ÷ (2 − β) strike both.
    same = (*same, "alpha_factors: [1 - 1/9, 1/9], testing: simultaneous")
    told = [program.solve(TRIO.format(members="lamp", keys=keys)) for keys in same]
    for each in told[1:]:
        same_numbers(each, told[0], ("steady_state_unavailability", "failures_per_year", "repairs_per_year"))


# --- attack 37: rates times ten, times divided by ten


def test_a_whole_plant_ten_times_as_fast_gives_the_same_answers(program: Program) -> None:
    one, ten = program.solve(plant()), program.solve(plant(speed=Fraction(10)))
    same_numbers(one, ten, (*SHARES, "mean_capacity", "crew_utilisation", "gain_over_single_unit", "pfd_peak"))
    same_numbers(one, ten, (*COUNTS, "spares_per_year", "tests_per_year"), factor=10)
    same_numbers(one, ten, TIMES, factor=0.1)


# --- attack 38: a better part that worsens the result, its cause named

SELF_TEST = """
units: {{u: {{failure_rate: 1e-4 /h, repair_time: 20 h, detected: {detected}}}}}
groups: {{g: {{members: [{{unit: u, count: {count}}}], redundancy: active, coverage: 0.9}}}}
tests: {{t: {{of: u, interval: 500 h}}}}
system: g
mission: {{time: 1000 h}}
"""


def test_a_better_self_test_that_worsens_the_result_is_confirmed_with_its_cause(program: Program) -> None:
    """A fault that is noticed draws coverage and may stop all; one that is not only takes its own unit away."""
    half, all_seen = (program.solve(SELF_TEST.format(detected=share, count=3)) for share in ("50 %", "100 %"))
    for measure in ("steady_state_unavailability", "unreliability"):
        assert all_seen.value(measure) > half.value(measure)
    section = half.json["redundancy"]
    assert section["cause"] == {"long_run": "imperfect_coverage", "mission": "imperfect_coverage"}
    hidden, coverage = (
        {each["dependence"]: each for each in section["effects"]}[key]
        for key in ("hidden_faults", "imperfect_coverage")
    )
    for when, measure in (("long_run", "steady_state_unavailability"), ("mission", "unreliability")):
        # Made perfect alone, detection costs; its factor is that of the two specs.
        assert hidden["factor"][when]["upper"] < 1 < coverage["factor"][when]["lower"]
        assert hidden["factor"][when]["value"] == pytest.approx(
            half.value(measure) / all_seen.value(measure), rel=1e-11
        )
    # With a pair the better part is better: the worsening is no artefact of the comparison.
    pair = program.solve(SELF_TEST.format(detected="50 %", count=2))
    assert pair.value("steady_state_unavailability") > program.solve(SELF_TEST.format(detected="100 %", count=2)).value(
        "steady_state_unavailability"
    )


# --- hostile values in the keys of the whole plant

HOSTILE = """
units:
  u: {{failure_rate: 1e-3 /h, repair_time: 10 h, detected: 0.5{unit}}}
  w: {{failure_rate: 1e-3 /h}}
groups:
  g:
    members: [{{unit: u, count: 2}}]
    redundancy: hot_standby{group}
  h: {{members: [{{unit: w, count: 2}}], redundancy: active}}
tests: {{t: {{of: u, interval: 100 h{test}}}}}
spares: {{s: {{for: w, stock: 1, lead_time: 10 h{spares}}}}}
{top}
system: {{all_of: [g, h]}}
mission: {{time: 100 h}}
"""


def hostile(**keys: str) -> str:
    return HOSTILE.format(**{**dict.fromkeys(("unit", "group", "test", "spares", "top"), ""), **keys})


def test_the_hostile_plant_is_sound_by_itself(program: Program) -> None:
    assert program.solve(hostile()).status == 0


PLACES = {
    "units.u.repair_success": ("unit", ", repair_success: {}"),
    "units.u.cost": ("unit", ", cost: {}"),
    "units.u.mass": ("unit", ", mass: {}"),
    "units.u.power": ("unit", ", power: {}"),
    "units.u.failure_modes.a.share": ("unit", ", failure_modes: {{a: {{share: {}}}}}"),
    "groups.g.load_sharing.1": ("group", "\n    load_sharing: {{1: {}}}"),
    "groups.g.load_sharing.exponent": ("group", "\n    load_sharing: {{exponent: {}}}"),
    "groups.g.repair_when.failed": ("group", "\n    repair_when: {{failed: {}}}"),
    "groups.g.switchover.switch.failure_on_demand": (
        "group",
        "\n    switchover: {{switch: {{failure_on_demand: {}}}}}",
    ),
    "tests.t.coverage": ("test", ", coverage: {}"),
    "tests.t.left_out": ("test", ", left_out: {}"),
    "tests.t.causes_failure": ("test", ", causes_failure: {}"),
    "spares.s.batch": ("spares", ", batch: {}"),
    "common_causes.c.beta": ("top", "common_causes: {{c: {{members: g, beta: {}}}}}"),
    "phases#1.rate_factors.u": ("top", "phases: [{{name: x, duration: 9 h, rate_factors: {{u: {}}}}}, {{name: y}}]"),
    "phases#1.required.g": ("top", "phases: [{{name: x, duration: 9 h, required: {{g: {}}}}}, {{name: y}}]"),
    "initial.u.failed": ("top", "initial: {{u: {{failed: {}}}}}"),
    "initial.u.hidden": ("top", "initial: {{u: {{hidden: {}}}}}"),
    "levels.l": ("top", "levels: {{l: {}}}"),
}
TIMED = {
    "tests.t.first_at": ("test", ", first_at: {}"),
    "tests.t.duration": ("test", ", duration: {}"),
    "spares.s.swap_time": ("spares", ", swap_time: {}"),
    "groups.g.repair_when.visits_every": ("group", "\n    repair_when: {{visits_every: {}}}"),
    "groups.g.switchover.switch.failure_rate": ("group", "\n    switchover: {{switch: {{failure_rate: {}}}}}"),
    "restoration.time": ("top", "restoration: {{time: {}}}"),
    "demand.rate": ("top", "demand: {{rate: {}}}"),
    "phases#1.duration": ("top", "phases: [{{name: x, duration: {}}}, {{name: y}}]"),
}


@pytest.mark.parametrize("value", ["-1", ".nan", ".inf", "true", "null", "1 h", "010", "1,5", "[]"])
@pytest.mark.parametrize("place", PLACES)
def test_a_hostile_number_is_refused_at_its_place(program: Program, place: str, value: str) -> None:
    where, text = PLACES[place]
    lines = program.refused(hostile(**{where: text.format(f"'{value}'" if value == "1,5" else value)}))
    assert any(f": {place}" in line for line in lines), lines


@pytest.mark.parametrize("value", ["5", "-1 h", "-1 /h", ".nan", "true", "null", "1 furlong", "[]"])
@pytest.mark.parametrize("place", TIMED)
def test_a_hostile_time_or_rate_is_refused_at_its_place(program: Program, place: str, value: str) -> None:
    where, text = TIMED[place]
    lines = program.refused(hostile(**{where: text.format(value)}))
    assert any(f": {place}" in line for line in lines), lines


@pytest.mark.parametrize(
    "place", ["tests.t.first_at", "groups.g.repair_when.visits_every", "restoration.time", "phases#1.duration"]
)
def test_an_instant_or_interval_of_zero_is_refused(program: Program, place: str) -> None:
    where, text = TIMED[place]
    (line,) = program.refused(hostile(**{where: text.format("0 h")}))
    assert f": {place}" in line
    assert "zero" in line


@pytest.mark.parametrize(
    ("keys", "place"),
    [
        ({"spares": ", batch: 1_000_000"}, "spares.s.batch"),
        ({"group": "\n    repair_when: {failed: 1e6}"}, "groups.g.repair_when.failed"),
        ({"group": "\n    load_sharing: {exponent: 1e6}"}, "groups.g.load_sharing.exponent"),
        ({"top": "initial: {u: {failed: 1_000_000}}"}, "initial.u.failed"),
        ({"top": "phases: [{name: x, duration: 9 h, required: {g: 1e6}}, {name: y}]"}, "phases#1.required.g"),
        ({"spares": ", swap_time: {mean: 1 h, standard_deviation: 1e-3 h}"}, "spares.s.swap_time.standard_deviation"),
        ({"test": ", duration: 100 h"}, "tests.t.duration"),
        ({"test": ", duration: 1e6 h"}, "tests.t.duration"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_a_million_is_refused_where_it_cannot_be(program: Program, keys: dict[str, str], place: str) -> None:
    (line,) = program.refused(hostile(**keys))
    assert f": {place}" in line


# --- faults of the program that these attacks found


def test_a_phase_may_name_a_unit_that_the_system_does_not(program: Program) -> None:
    told = program.solve(
        "units: {a: {failure_rate: 1e-3 /h, repair_time: 10 h}, b: {failure_rate: 1e-3 /h, repair_time: 10 h}}\n"
        "system: a\n"
        "phases: [{name: x, duration: 9 h, system: {all_of: [a, b]}}, {name: y, duration: 9 h, repeat: true}]\n"
    )
    assert told.status == 0, told.err.splitlines()[-1]


def test_independent_groups_are_not_combined_where_phases_have_criteria_of_their_own(program: Program) -> None:
    told = program.solve(
        "units: {a: {failure_rate: 1e-3 /h, repair_time: 10 h}, b: {failure_rate: 1e-3 /h, repair_time: 10 h}}\n"
        "groups: {ga: {members: [{unit: a, count: 2}], redundancy: active},"
        " gb: {members: [{unit: b, count: 2}], redundancy: active}}\nsystem: {any_of: [ga, gb]}\n"
        "phases: [{name: x, duration: 10 h, system: gb}, {name: y, duration: 10 h, system: ga, repeat: true}]\n"
    )
    found = told.result("gain_over_independent_blocks")
    assert found["value"] is None
    assert "criteria of their own" in found["reason"]


def test_the_geometric_mean_counts_each_member(program: Program) -> None:
    """Two lamps and a horn have a mean of 0.001 times the cube root of 4, as one kind or as two that are alike."""
    spec = TRIO.format(members="g", keys="beta: 0.1, basis: geometric_mean")
    counted = program.solve(spec)
    named = program.solve(
        spec.replace("units: {", "units: {other: {failure_rate: 1e-3 /h, repair_time: 10 h}, ").replace(
            "{unit: lamp, count: 2}", "lamp, other"
        )
    )
    given = program.solve(TRIO.format(members="g", keys=f"beta: 0.1, rate: {1e-3 * 4 ** (1 / 3)!r} /h"))
    assert named.value("failures_per_year") == pytest.approx(given.value("failures_per_year"), rel=1e-12)
    assert counted.value("failures_per_year") == pytest.approx(named.value("failures_per_year"), rel=1e-12)
