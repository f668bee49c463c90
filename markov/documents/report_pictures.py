"""Which pictures a report holds, and where."""

from __future__ import annotations

from markov.documents.chains import ReportedChain
from markov.documents.pictures import path_figures, plot_figures, state_figures, structure_figure
from markov.documents.tree import Figure
from markov.model import Model
from markov.results import Solution
from markov.states import StateSpace

#: States of a chain beyond which its dominant ways to failure are shown beside its state diagram.
_SEEN_AT_ONCE = 12


def structure_figures(model: Model) -> tuple[Figure, ...]:
    """Return the picture of what must deliver; none for a chain written by hand."""
    figure = structure_figure(model)
    return () if figure is None else (figure,)


def result_figures(model: Model, solution: Solution, space: StateSpace | None) -> tuple[Figure, ...]:
    """Return the pictures of results, over time and by contribution.

    Parameters
    ----------
    model : Model
    solution : Solution
    space : StateSpace or None
        The chain of the whole plant; None where it was solved in parts: then there are none.
    """
    return () if space is None else plot_figures(model, solution, space)


def chain_figures(model: Model, chain: ReportedChain) -> tuple[Figure, ...]:
    """Return the state diagram of a chain and, where it is large, the ways to failure, as far as they can be drawn."""
    space, suffix = chain.space, chain.suffix
    states = state_figures(model, space, called=chain.called, suffix=suffix)
    if space.size <= _SEEN_AT_ONCE or chain.number:
        return states
    return (*states, *path_figures(model, space, called=chain.called, suffix=suffix))
