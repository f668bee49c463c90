"""States and transitions: the rules that turn a model into its exact chain.

Conventions of this room
------------------------
n states, a transitions, m columns of a frontier.  A state of an island is a column of small whole numbers (`layout`);
an event acts on many columns at once (`branching`, `faults`, `takeover`, `outage`, `repair`); a chart holds what every
event does to every state of one island (`chart`); the chain of the system is looked up from the charts (`generation`)
and the crews act last (`crews`).
"""

from markov.states.arrows import ArrowKind, ArrowKinds
from markov.states.explicit import ExplicitSpace, take
from markov.states.generated import GeneratedSpace, Prepared, generate, generate_prepared, prepare
from markov.states.plan import Plan, Pool, island_names, plan
from markov.states.regime import Regime
from markov.states.space import Arrows, StateSpace
from markov.states.structure import structure

__all__ = [
    "ArrowKind",
    "ArrowKinds",
    "Arrows",
    "ExplicitSpace",
    "GeneratedSpace",
    "Plan",
    "Pool",
    "Prepared",
    "Regime",
    "StateSpace",
    "generate",
    "generate_prepared",
    "island_names",
    "plan",
    "prepare",
    "structure",
    "take",
]
