"""Spares are kept for kinds of unit that can draw them."""

import pytest

SPEC = """\
units:
  pump: {failure_rate: 1 /y}
  motor: {failure_rate: 1 /y, repair_time: 3 d}
  lamp: {failure_rate: 1 /y, repair_time: 0 h}
groups: {water: {members: [{unit: pump, count: 2}, motor], redundancy: hot_standby}}
system: {all_of: [water, lamp]}
spares:
  shelf: {%s}
"""


def test_pool_is_read_whole(read):
    model = read(
        SPEC % "for: [pump, motor], stock: 3, lead_time: 3 weeks, swap_time: 2 h, order: when_failed, batch: 2"
    )
    pool = model.spares["shelf"]
    assert (pool.for_, pool.stock, pool.order, pool.batch) == (("pump", "motor"), 3, "when_failed", 2)
    assert (pool.lead_time.exact, pool.swap_time.exact) == (504, 2)
    assert model.pool_of_spares("motor") == "shelf"
    assert model.pool_of_spares("lamp") is None


def test_defaults_of_a_pool(read):
    pool = read(SPEC % "for: pump, stock: 1, lead_time: 1 week").spares["shelf"]
    assert (pool.for_, pool.order, pool.batch, pool.swap_time) == (("pump",), "when_drawn", 1, None)
    assert not pool.is_said("order")


@pytest.mark.parametrize(
    ("pool", "found"),
    [
        ("stock: 1, lead_time: 1 d", "`for` is missing"),
        ("for: pump, lead_time: 1 d", "`stock` is missing"),
        ("for: pump, stock: 1", "`lead_time` is missing"),
        ("for: pump, stock: 0, lead_time: 1 d", "out of range"),
        ("for: [], stock: 1, lead_time: 1 d", "an empty list"),
        ("for: pmp, stock: 1, lead_time: 1 d", "`pmp` is not known"),
        ("for: [pump, pmp], stock: 1, lead_time: 1 d", "`pmp` is not known"),
        ("for: water, stock: 1, lead_time: 1 d", "`water` is a group"),
        ("for: lamp, stock: 1, lead_time: 1 d", "renewed at once"),
        ("for: [pump, pump], stock: 1, lead_time: 1 d", "`pump` stands twice"),
        ("for: pump, stock: 1, lead_time: 0 h", "is zero"),
        ("for: pump, stock: 1, lead_time: 1 d, order: never", "no choice"),
        ("for: pump, stock: 1, lead_time: 1 d, batch: 0", "out of range"),
        ("for: pump, stock: 1, lead_time: 1 d, batch: 2", "none would ever be placed"),
        ("of: pump, stock: 1, lead_time: 1 d", "`of` is not a key here"),
    ],
)
def test_unsound_pools_are_refused(problems, pool, found):
    told = problems(SPEC % pool)
    assert any(found in problem.found for problem in told)
    assert all(problem.line == 8 for problem in told)


def test_kind_has_one_pool(told):
    text = SPEC % "for: pump, stock: 1, lead_time: 1 d" + "  other: {for: [motor, pump], stock: 1, lead_time: 1 d}\n"
    problem = told(text)
    assert "`pump` has spares in `shelf`, too" in problem.found
    assert (problem.line, problem.column) == (9, 24)


def test_unit_outside_of_the_system_may_draw_spares(read):
    text = SPEC.replace("all_of: [water, lamp]", "all_of: [lamp]") % "for: motor, stock: 1, lead_time: 1 d"
    assert any("only loads a crew or draws spares" in warning for warning in read(text).warnings)


def test_a_stock_without_measure_is_refused(told):
    assert told(SPEC % "for: pump, stock: 1001, lead_time: 1 d").expected == "at most 1,000"


def test_spares_may_stand_before_a_crew_as_units_do(read):
    text = SPEC % "for: motor, stock: 2, lead_time: 1 d" + "crews: {fitters: {size: %d, repairs: [motor]}}\n"
    assert not any("a size of" in warning for warning in read(text % 3).warnings)
    assert any("a size of 4 for 3 units" in warning for warning in read(text % 4).warnings)
