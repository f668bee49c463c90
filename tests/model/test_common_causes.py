"""Common causes strike two units at least, and take no more than the rate there is."""

from fractions import Fraction
from math import comb

import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.model import CommonCause

SPEC = """\
units:
  fan: {failure_rate: 1e-4 /h}
  pump: {failure_rate: 4e-4 /h}
  lamp: {failure_rate: 1e-5 /h}
groups:
  air: {members: [{unit: fan, count: 3}], redundancy: active}
  water: {members: [{unit: pump, count: 2}], redundancy: cold_standby}
system: {all_of: [air, water, lamp]}
common_causes:
  storm: {%s}
"""


def test_cause_is_read_whole(read):
    model = read(SPEC % "members: [fan], beta: 5 %, beta_detected: 2 %, exposed: on_duty")
    cause = model.common_causes["storm"]
    assert (cause.beta.exact, cause.beta_detected.exact, cause.exposed) == (Fraction(1, 20), Fraction(1, 50), "on_duty")
    assert [place.key for place in model.placements_struck(cause)] == ["air.fan"]
    assert [model.causes_of(place) for place in model.placements] == [("storm",), (), ()]
    assert cause.shared_share(3) == Fraction(1, 20)
    assert cause.shared_share(3, detected=True) == Fraction(1, 50)


def test_groups_and_kinds_may_be_members(read):
    model = read(SPEC % "members: [air, pump, lamp], beta: 1 %, basis: lowest")
    assert [place.key for place in model.placements_struck(model.common_causes["storm"])] == [
        "air.fan",
        "water.pump",
        "lamp",
    ]


def test_greek_letters_by_hand(read):
    # Three units: sets of two have β(1 − γ)/2 of the rate each, the set of three βγ.
    cause = read(SPEC % "members: fan, greek_letters: [10 %, 30 %]").common_causes["storm"]
    assert cause.struck_shares(3) == {2: Fraction(7, 200), 3: Fraction(3, 100)}
    assert cause.shared_share(3) == Fraction(1, 10)


def test_alpha_factors_by_hand(read):
    keys = "members: fan, alpha_factors: [0.9, 0.06, 0.04], testing: "
    staggered = read(SPEC % (keys + "staggered")).common_causes["storm"]
    assert staggered.struck_shares(3) == {2: Fraction(3, 100), 3: Fraction(4, 100)}
    simultaneous = read(SPEC % (keys + "simultaneous")).common_causes["storm"]
    mean = Fraction(90 + 12 + 12, 100)
    assert simultaneous.struck_shares(3) == {2: Fraction(6, 100) / mean, 3: Fraction(12, 100) / mean}


@given(st.lists(st.integers(0, 20), min_size=1, max_size=5), st.sampled_from(["staggered", "simultaneous"]))
def test_shares_of_a_unit_add_up_to_its_rate(weights, testing):
    total = 1 + sum(weights)
    factors = [f"{1 + weights[0]} / {total}", *(f"{each} / {total}" for each in weights[1:])]
    cause = CommonCause.model_validate({"members": ["a"], "alpha_factors": factors, "testing": testing})
    size = len(factors)
    mean = sum(number * each.exact for number, each in enumerate(cause.alpha_factors, start=1))
    own = cause.alpha_factors[0].exact / (1 if testing == "staggered" else mean)
    shares = cause.struck_shares(size)
    assert own + sum(comb(size - 1, number - 1) * each for number, each in shares.items()) == 1
    assert cause.shared_share(size) == 1 - own


@pytest.mark.parametrize(
    ("keys", "found"),
    [
        ("beta: 5 %", "`members` is missing"),
        ("members: [], beta: 5 %", "an empty list"),
        ("members: fan", "`beta`, `greek_letters` or `alpha_factors` is missing"),
        ("members: fan, beta: 5 %, greek_letters: [0.1, 0.2]", "both stand here"),
        ("members: fan, beta: 5", "more than 1"),
        ("members: fan, beta: 101 %", "more than 1"),
        ("members: fan, beta: -5 %", "negative"),
        ("members: fan, beta: 5 %, beta_detected: 5", "more than 1"),
        ("members: fan, greek_letters: [0.1, 0.2], beta_detected: 5 %", "`beta_detected` without `beta`"),
        ("members: fan, alpha_factors: [0.9, 0.06, 0.04]", "`testing` is missing"),
        ("members: fan, beta: 5 %, testing: staggered", "`testing` without `alpha_factors`"),
        ("members: fan, alpha_factors: [0.9, 0.06, 0.039], testing: staggered", "the factors sum to 0.999"),
        ("members: fan, alpha_factors: [0.9, 0.1], testing: staggered", "2 factors for 3 units"),
        ("members: fan, greek_letters: [0.1]", "1 letter for 3 units"),
        ("members: lamp, beta: 5 %", "a common cause of 1 unit"),
        ("members: [fan, fan], beta: 5 %", "`fan` stands twice"),
        ("members: [fan, air], beta: 5 %", "`air` means units that `fan` means, too"),
        ("members: fn, beta: 5 %", "`fn` is not known"),
        ("members: [fan, pump], beta: 5 %", "unequal failure rates of `fan` and `pump`"),
        ("members: [fan, pump], beta: 5 %, basis: mean", "no choice"),
        ("members: [fan, pump], beta: 5 %, basis: lowest, rate: 1 /y", "both stand here"),
        ("members: [fan, pump], beta: 50 %, rate: 4e-4 /h", "takes 2 of the failure rate of `fan`"),
        ("members: fan, beta: 5 %, exposed: some", "no choice"),
        ("members: fan, share: 5 %", "`share` is not a key here"),
    ],
)
def test_unsound_causes_are_refused(problems, keys, found):
    told = problems(SPEC % keys)
    assert any(found in problem.found for problem in told)
    assert all(problem.line == 10 for problem in told)


def test_causes_on_one_unit_add_up(told, read):
    other = "  flood: {members: [air], beta: %s}\n"
    assert read(SPEC % "members: fan, beta: 60 %" + other % "40 %").common_causes["flood"].beta.exact == Fraction(2, 5)
    problem = told(SPEC % "members: fan, beta: 60 %" + other % "41 %")
    assert "`storm` and `flood` take 1.01 of the failure rate of `fan`" in problem.found
    assert problem.line == 11


def test_geometric_mean_is_between_the_rates(read, told):
    # √(1 · 4)-like basis: the mean of 3 fans and 2 pumps is above the fan's rate, so that beta = 1 takes too much.
    assert read(SPEC % "members: [fan, pump], beta: 50 %, basis: geometric_mean")
    assert "of the failure rate of `fan`" in told(SPEC % "members: [fan, pump], beta: 1, basis: geometric_mean").found


def test_a_share_of_all_of_equal_rates_by_their_mean_is_legal(read):
    text = SPEC.replace("4e-4 /h", "1e-4 /h") % "members: [fan, pump], beta: 1, basis: geometric_mean"
    assert read(text).common_causes["storm"].basis == "geometric_mean"
