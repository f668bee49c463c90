"""The engineer's wing: what a spec says, as frozen values that have been checked.

Conventions of this room: quantities are `markov.quantities.Quantity` (hours, per hour, plain; exact).  A key that a
spec leaves unsaid is None, or its default with the key absent from ``model_fields_set``; effective values are
properties.
"""

from __future__ import annotations

from markov.model.content import InitialFaults, Placement
from markov.model.crews import Crew
from markov.model.groups import TIMED_OUTCOMES, Group, Member, Outcome, Redundancy, Switchover, Uncovered, WhileDown
from markov.model.handwritten import State, Transition
from markov.model.parameters import Parameter, Uncertainty
from markov.model.schema import json_schema
from markov.model.success import AllOf, AnyOf, AtLeast, Named, Success, names
from markov.model.targets import Mission, Target
from markov.model.units import Unit
from markov.model.whole import Model

__all__ = [
    "TIMED_OUTCOMES",
    "AllOf",
    "AnyOf",
    "AtLeast",
    "Crew",
    "Group",
    "InitialFaults",
    "Member",
    "Mission",
    "Model",
    "Named",
    "Outcome",
    "Parameter",
    "Placement",
    "Redundancy",
    "State",
    "Success",
    "Switchover",
    "Target",
    "Transition",
    "Uncertainty",
    "Uncovered",
    "Unit",
    "WhileDown",
    "json_schema",
    "names",
]
