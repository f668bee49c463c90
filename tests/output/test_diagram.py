"""The values of a state diagram refuse what cannot be drawn, and the example plants that other tests draw."""

from __future__ import annotations

from itertools import product

import pytest

from markov.errors import UsageError
from markov.output.diagram import DiagramArrow, DiagramNode, LegendEntry, StateDiagram


def lock_gate() -> StateDiagram:
    """Two drives in cold standby with imperfect takeover, in four states."""
    return StateDiagram(
        title="Harbour lock gate drive",
        nodes=(
            DiagramNode(0, ("duty and standby",), "up", initial=True, level=0),
            DiagramNode(1, ("duty, one in repair",), "degraded", level=1),
            DiagramNode(2, ("waiting for the keeper",), "down", level=1),
            DiagramNode(3, ("both failed",), "down", level=2),
        ),
        arrows=(
            DiagramArrow(0, 1, "λ·c·(1−q)", "fault"),
            DiagramArrow(0, 2, "λ·(1−c)", "fault"),
            DiagramArrow(0, 3, "λ·c·q", "fault"),
            DiagramArrow(1, 0, "μ", "restoration"),
            DiagramArrow(1, 3, "λ", "fault"),
            DiagramArrow(2, 1, "(1−q)/T", "restoration"),
            DiagramArrow(2, 3, "q/T", "fault"),
            DiagramArrow(2, 0, "μ", "restoration"),
            DiagramArrow(3, 1, "μ", "restoration"),
        ),
        subtitle=("Document HL-07, revision B", "spec 3f9a1c0d2b7e"),
        legend=(LegendEntry("λ", "failure rate of a drive", "2·10⁻⁴ /h"), LegendEntry("q", "start failure", "2 %")),
        alt_text="Four states of a lock gate drive",
    )


def interlocking() -> StateDiagram:
    """Three channels whose down states are never left, in five states."""
    return StateDiagram(
        title="Mountain railway interlocking",
        nodes=(
            DiagramNode(0, ("three good",), "up", initial=True),
            DiagramNode(1, ("two good",), "degraded", level=1),
            DiagramNode(2, ("one good",), "degraded", level=2),
            DiagramNode(3, ("uncovered",), "down", final=True, level=2),
            DiagramNode(4, ("none good",), "down", final=True, level=3),
        ),
        arrows=(
            DiagramArrow(0, 1, "3·λ·c", "fault"),
            DiagramArrow(0, 3, "3·λ·(1−c)", "fault"),
            DiagramArrow(1, 2, "2·λ·c", "fault"),
            DiagramArrow(1, 3, "2·λ·(1−c)", "fault"),
            DiagramArrow(2, 4, "λ", "fault"),
            DiagramArrow(0, 4, "β·λ", "fault"),
            DiagramArrow(0, 4, "λ(supply)", "fault"),
            DiagramArrow(1, 0, "μ", "restoration"),
            DiagramArrow(2, 1, "2·μ", "restoration"),
        ),
    )


def plant(*counts: int) -> StateDiagram:
    """Kinds of units with independent faults and repairs, down when a kind is used up."""
    states = sorted(product(*(range(count + 1) for count in counts)), key=lambda state: (sum(state), state))
    number = {state: place for place, state in enumerate(states)}
    nodes: list[DiagramNode] = []
    arrows: list[DiagramArrow] = []
    for state in states:
        lost = any(failed == count for failed, count in zip(state, counts, strict=True))
        nodes.append(
            DiagramNode(
                number[state],
                tuple(f"kind {kind}: {failed} failed" for kind, failed in enumerate(state)),
                "down" if lost else "degraded" if any(state) else "up",
                initial=not any(state),
                level=sum(state),
            )
        )
        for kind, count in enumerate(counts):
            if state[kind] < count:
                after = (*state[:kind], state[kind] + 1, *state[kind + 1 :])
                arrows.append(DiagramArrow(number[state], number[after], f"{count - state[kind]}·λ{kind}", "fault"))
                arrows.append(DiagramArrow(number[after], number[state], f"μ{kind}", "restoration"))
    return StateDiagram(f"{len(nodes)} states", tuple(nodes), tuple(arrows))


UP = DiagramNode(0, ("good",), "up", initial=True)
DOWN = DiagramNode(1, ("failed",), "down", level=1)


def test_a_self_loop_is_refused() -> None:
    with pytest.raises(UsageError, match="no self-loops"):
        DiagramArrow(3, 3, "λ", "fault")


def test_an_unknown_kind_of_arrow_is_refused_with_the_known_ones() -> None:
    with pytest.raises(UsageError, match="fault, restoration"):
        DiagramArrow(0, 1, "λ", "repair")  # type: ignore[arg-type]


def test_an_unknown_condition_is_refused_with_the_known_ones() -> None:
    with pytest.raises(UsageError, match="up, degraded, down"):
        DiagramNode(0, (), "broken")  # type: ignore[arg-type]


def test_levels_count_from_zero_upwards() -> None:
    with pytest.raises(UsageError, match="level -1"):
        DiagramNode(0, (), "up", level=-1)
    with pytest.raises(UsageError, match="top level 2"):
        DiagramNode(0, (), "up", level=3, top_level=2)


def test_a_diagram_needs_a_state() -> None:
    with pytest.raises(UsageError, match="no state"):
        StateDiagram("empty", (), ())


def test_a_diagram_needs_an_initial_state() -> None:
    with pytest.raises(UsageError, match="initial"):
        StateDiagram("no start", (DOWN,), ())


def test_a_state_number_used_twice_is_refused() -> None:
    with pytest.raises(UsageError, match="number 0 is used twice"):
        StateDiagram("twice", (UP, DiagramNode(0, (), "down", level=1)), ())


def test_an_arrow_to_a_missing_state_is_refused() -> None:
    with pytest.raises(UsageError, match="no state 7"):
        StateDiagram("lost", (UP, DOWN), (DiagramArrow(0, 7, "λ", "fault"),))


def test_an_arrow_out_of_a_final_state_is_refused() -> None:
    final = DiagramNode(1, (), "down", final=True, level=1)
    with pytest.raises(UsageError, match="leads out of a final state"):
        StateDiagram("final", (UP, final), (DiagramArrow(1, 0, "μ", "restoration"),))


def test_the_alternative_text_counts_what_is_drawn_unless_it_is_given() -> None:
    said = interlocking().described()
    assert "5 states (1 up, 2 degraded, 2 down, 2 of them final)" in said
    assert "7 fault arrows and 2 restoration arrows" in said
    assert lock_gate().described() == "Four states of a lock gate drive"
