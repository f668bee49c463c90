"""A large diagram folds into boxes whose rates are sums, and nothing goes missing."""

from __future__ import annotations

import re

import pytest

from markov.errors import UsageError
from markov.output.diagram import DiagramArrow, DiagramNode, StateDiagram
from markov.output.folding import fold_by_level, ranges
from tests.output.test_diagram import interlocking, plant


def test_every_state_is_in_exactly_one_box() -> None:
    diagram = plant(4, 3, 2)
    held = [number for node in fold_by_level(diagram, band=2).nodes for number in (node.holds or (node.number,))]
    assert sorted(held) == [node.number for node in diagram.nodes]


def test_a_box_holds_one_condition_and_one_band_of_levels() -> None:
    diagram = plant(4, 3, 2)
    known = {node.number: node for node in diagram.nodes}
    for box in fold_by_level(diagram, band=3).nodes:
        held = [known[number] for number in (box.holds or (box.number,))]
        assert {node.condition for node in held} == {box.condition}
        assert len({node.level // 3 for node in held}) == 1


def test_equal_units_fold_into_the_exact_rates_of_the_counted_chain() -> None:
    # Two units told apart, three states by number of failures: 2·λ then λ, one repair rate each.
    nodes = (
        DiagramNode(0, ("both good",), "up", initial=True),
        DiagramNode(1, ("A failed",), "degraded", level=1),
        DiagramNode(2, ("B failed",), "degraded", level=1),
        DiagramNode(3, ("both failed",), "down", level=2),
    )
    arrows = (
        DiagramArrow(0, 1, "λ", "fault"),
        DiagramArrow(0, 2, "λ", "fault"),
        DiagramArrow(1, 3, "λ", "fault"),
        DiagramArrow(2, 3, "λ", "fault"),
        DiagramArrow(1, 0, "μ", "restoration"),
        DiagramArrow(2, 0, "μ", "restoration"),
        DiagramArrow(3, 1, "μ", "restoration"),
        DiagramArrow(3, 2, "μ", "restoration"),
    )
    folded = fold_by_level(StateDiagram("pair", nodes, arrows))
    assert [(box.number, box.holds) for box in folded.nodes] == [(0, ()), (1, (1, 2)), (3, ())]
    rates = {(arrow.source, arrow.target): arrow.label for arrow in folded.arrows}
    assert rates == {(0, 1): "2·(λ)", (1, 3): "λ", (1, 0): "μ", (3, 1): "2·(μ)"}


def test_rates_that_differ_inside_a_box_are_not_passed_off_as_one() -> None:
    nodes = (
        DiagramNode(0, (), "up", initial=True),
        DiagramNode(1, (), "degraded", level=1),
        DiagramNode(2, (), "degraded", level=1),
        DiagramNode(3, (), "down", level=2),
    )
    arrows = (DiagramArrow(0, 1, "a", "fault"), DiagramArrow(0, 2, "b", "fault"), DiagramArrow(1, 3, "b", "fault"))
    folded = fold_by_level(StateDiagram("unequal", nodes, arrows))
    rates = {(arrow.source, arrow.target): arrow.label for arrow in folded.arrows}
    assert rates == {(0, 1): "a + b", (1, 3): "by state: 0 or b"}


def test_many_different_rates_are_counted() -> None:
    labels = [arrow.label for arrow in fold_by_level(plant(4, 3, 2), band=3).arrows]
    assert any(re.fullmatch(r"\d+ arrows, \d+ sums", label) for label in labels)


def test_final_states_and_initial_states_have_boxes_of_their_own() -> None:
    folded = fold_by_level(interlocking(), band=4)
    assert [(box.number, box.holds, box.initial, box.final) for box in folded.nodes] == [
        (0, (), True, False),
        (1, (1, 2), False, False),
        (3, (3, 4), False, True),
    ]


def test_the_picture_says_that_it_is_folded_and_counts_what_is_inside() -> None:
    diagram = plant(4, 3, 2)
    folded = fold_by_level(diagram, band=2)
    (remark,) = folded.remarks
    assert (
        f"Folded: {len(diagram.nodes)} states and {len(diagram.arrows)} arrows in {len(folded.nodes)} boxes" in remark
    )
    inside = [
        int(match[1]) for box in folded.nodes for line in box.lines if (match := re.match(r"(\d+) arrows? in", line))
    ]
    outside = re.search(r"the other (\d+) are gathered", remark)
    assert outside is not None
    assert sum(inside) + int(outside[1]) == len(diagram.arrows)
    assert all(any(line.startswith("states ") for line in box.lines) for box in folded.nodes if box.holds)


def test_a_column_of_several_levels_says_which() -> None:
    folded = fold_by_level(plant(4, 3), band=3)
    assert {(box.level, box.top_level) for box in folded.nodes} == {(0, 2), (3, 5), (6, 7)}


def test_a_folded_diagram_is_not_folded_again() -> None:
    with pytest.raises(UsageError, match="folded already"):
        fold_by_level(fold_by_level(plant(4, 3)))


def test_a_band_below_one_is_refused() -> None:
    with pytest.raises(UsageError, match="band of 0"):
        fold_by_level(plant(1, 1), band=0)


def test_runs_of_numbers_are_drawn_together() -> None:
    assert ranges([9, 1, 2, 3, 7]) == "1–3, 7, 9"
