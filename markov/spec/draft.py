"""A first spec to start from, with comments that explain it."""

from __future__ import annotations

_DRAFT = """\
# A first spec: replace the names and the numbers with those of your plant, and try
#     markov check THIS_FILE      what is wrong, what is unsaid
#     markov solve THIS_FILE      the measures, and the verdict on each target
#     markov draw THIS_FILE states.svg
# specs/README.md lists every key.  All values below are invented.

title: Greenhouse night heating
reference: {document: GH-01, revision: A, author: your name}

# Named values, each with its source.  A value without a source is marked in every document.
# Rates and times carry their unit of measure: 20 per million hours, 5e-6 /h, 2 /y, 50 FIT; 30 min, 8 h, 2 d.
parameters:
  burner_failures: {value: 150 per million hours, source: invented, uncertainty: {error_factor: 3}}
  takeover_coverage: {value: 97 %, source: invented}

# What can fail.  Without repair_time (or repair_rate) a unit is never repaired.
units:
  burner: {failure_rate: burner_failures, repair_time: 12 h, start_failure: 1 %}
  pump: {mean_time_to_failure: 4 y, repair_time: 6 h, logistic_delay: 1 d}

# What stands in for what.  The first members carry duty, the others wait in rank order.
groups:
  heat:
    members: [{unit: burner, count: 2}]
    required: 1
    redundancy: cold_standby          # or active, hot_standby, warm_standby (with dormancy_factor)
    switchover:
      coverage: takeover_coverage     # chance that a fault on duty is noticed and duty passes on by itself
      time: 5 min                     # mean time of a takeover; nothing is delivered meanwhile
      uncovered: {outcome: manual_takeover, time: 40 min}
  circulation:
    members: [{unit: pump, count: 2}]
    required: 1
    redundancy: active

# Who repairs.  One gardener for everything; burners first.
crews:
  gardener: {size: 1, repairs: [burner, pump]}

# The system is up while all of these are up.
system: {all_of: [heat, circulation]}

mission: {time: 1 y}

# What is asked for.  at_least and at_most carry the unit of the measure.
targets:
  - {id: HEAT-1, measure: steady_state_availability, at_least: 99.9 %}
  - {id: HEAT-2, measure: failures_per_year, at_most: 0.2}
  - {id: HEAT-3, measure: mean_down_time, at_most: 8 h}
"""


def draft_text() -> str:
    """Return the text of a first spec, in order and ready to be solved."""
    return _DRAFT
