"""The engineer's wing: what a spec says, as frozen values that have been checked.

Conventions of this room: quantities are `markov.quantities.Quantity` (hours, per hour, plain; exact).  A key that a
spec leaves unsaid is None, or its default with the key absent from ``model_fields_set``; effective values are
properties.
"""

from __future__ import annotations

from markov.model.common_causes import CommonCause
from markov.model.crews import Crew
from markov.model.deferral import RepairAtFailed, RepairAtVisits
from markov.model.demand import Demand
from markov.model.durations import SpreadTime, TimeShape
from markov.model.failure_modes import FailureMode, Mode
from markov.model.groups import Group, Member, Redundancy, WhileDown
from markov.model.handwritten import State, Transition
from markov.model.loads import LoadSharing
from markov.model.parameters import Parameter, Uncertainty
from markov.model.phases import Phase
from markov.model.proof_tests import ProofTest
from markov.model.restoration import Restoration
from markov.model.schema import json_schema
from markov.model.spares import SparesPool
from markov.model.starts import InitialFaults, Placement
from markov.model.success import AllOf, AnyOf, AtLeast, Named, Success, names
from markov.model.switchovers import TIMED_OUTCOMES, Outcome, Switch, Switchover, Uncovered
from markov.model.targets import Mission, Target
from markov.model.units import Unit
from markov.model.whole import Model

__all__ = [
    "TIMED_OUTCOMES",
    "AllOf",
    "AnyOf",
    "AtLeast",
    "CommonCause",
    "Crew",
    "Demand",
    "FailureMode",
    "Group",
    "InitialFaults",
    "LoadSharing",
    "Member",
    "Mission",
    "Mode",
    "Model",
    "Named",
    "Outcome",
    "Parameter",
    "Phase",
    "Placement",
    "ProofTest",
    "Redundancy",
    "RepairAtFailed",
    "RepairAtVisits",
    "Restoration",
    "SparesPool",
    "SpreadTime",
    "State",
    "Success",
    "Switch",
    "Switchover",
    "Target",
    "TimeShape",
    "Transition",
    "Uncertainty",
    "Uncovered",
    "Unit",
    "WhileDown",
    "json_schema",
    "names",
]
