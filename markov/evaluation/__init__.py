"""The bridge: the only room that sees both wings, the engineer's and the mathematician's.

A model becomes questions (`questions`), a chain answers them (`answers`), simpler arrangements are solved beside it
(`gains`, `combining`), targets are judged (`verdicts`), what the spec left open is told (`unsaid`); `solving` puts it
together.
"""

from markov.evaluation.sizing import check_model
from markov.evaluation.solving import build_space, solve_model

__all__ = ["build_space", "check_model", "solve_model"]
