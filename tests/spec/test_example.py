"""A whole spec is read as it is meant."""

from fractions import Fraction
from hashlib import sha256

LOCK = """\
title: Harbour lock gate drive
reference: {document: HL-07, revision: B, author: invented}      # optional; goes on every document
parameters:
  drive_failures:
    value: 200 per million hours
    source: invented for this example         # no source: every document marks the value "unsupported"
    uncertainty: {error_factor: 3}
  takeover_coverage: 0.95                     # short form
units:
  drive: {failure_rate: drive_failures, repair_time: 24 h, start_failure: 2 %}
groups:
  gate_drive:
    members: [{unit: drive, count: 2}]        # ranked
    required: 1
    redundancy: cold_standby
    switchover: {coverage: takeover_coverage, uncovered: {outcome: manual_takeover, time: 0.75 h}}
    return_to_preferred: false
crews:
  fitters: {size: 1, repairs: [drive]}
system: gate_drive
mission: {time: 1 y}
targets:
  - {id: LOCK-1, measure: steady_state_availability, at_least: 0.9998}
  - {id: LOCK-2, measure: failures_per_year, at_most: 0.10}
"""


def test_lock_is_read_whole(read):
    model = read(LOCK)
    drive, group = model.units["drive"], model.groups["gate_drive"]
    assert model.title == "Harbour lock gate drive"
    assert model.reference == {"document": "HL-07", "revision": "B", "author": "invented"}
    assert model.parameters["drive_failures"].uncertainty.error_factor.exact == 3
    assert model.parameters["takeover_coverage"].source is None
    assert drive.failure.name == "drive_failures"
    assert drive.failure_hourly == Fraction(1, 5000)
    assert drive.repair_hourly == Fraction(1, 24)
    assert drive.start_failure.exact == Fraction(1, 50)
    assert (group.size, group.duty_places, group.is_active, group.dormancy) == (2, 1, False, 0)
    assert [each.exact for each in group.coverage_list] == [Fraction(19, 20)]
    assert (group.outcome, group.outcome_time.exact) == ("manual_takeover", Fraction(3, 4))
    assert group.is_said("return_to_preferred")
    assert model.crews["fitters"].order == ("drive",)
    assert model.named_in_system == ("gate_drive",)
    assert model.mission.time.exact == 8760
    assert [(target.id, target.limit) for target in model.targets] == [
        ("LOCK-1", Fraction(4999, 5000)),
        ("LOCK-2", Fraction(1, 10)),
    ]
    assert model.warnings == ("Unsupported, as no `source` is given: `takeover_coverage`.",)
    assert model.sha256 == sha256(LOCK.encode()).hexdigest()


def test_order_of_keys_and_style_do_not_matter(read):
    block = LOCK.replace("{size: 1, repairs: [drive]}", "\n    repairs:\n      - drive\n    size: '1'")
    assert read(block).crews == read(LOCK).crews
