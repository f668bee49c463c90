"""Placed boxes stand in columns by level, apart from each other, with lines that bend little."""

from __future__ import annotations

from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from markov.output.diagram import ArrowKind, DiagramArrow, DiagramNode, StateDiagram
from markov.output.placement import distance, line_ends, place_by_layers, straightened, untangled
from markov.output.skeleton import Skeleton, build_skeleton
from tests.output.test_diagram import interlocking, lock_gate, plant

PLANTS = [lock_gate(), interlocking(), plant(3, 2), plant(4, 2, 1)]


@st.composite
def diagrams(draw: st.DrawFn) -> StateDiagram:
    levels = draw(st.lists(st.integers(0, 5), min_size=1, max_size=9))
    nodes = tuple(DiagramNode(n, (f"state {n}",), "up", initial=n == 0, level=at) for n, at in enumerate(levels))
    numbers = st.integers(0, len(levels) - 1)
    kinds: st.SearchStrategy[ArrowKind] = st.sampled_from(("fault", "restoration"))
    labels = st.sampled_from(["λ", "", "2·λ(drive)·c·(1−q) + 3·λ(a very long name of a unit)"])
    drawn = draw(st.lists(st.tuples(numbers, numbers, labels, kinds), max_size=25))
    return StateDiagram("any", nodes, tuple(DiagramArrow(*arrow) for arrow in drawn if arrow[0] != arrow[1]))


def overlaps(skeleton: Skeleton, heights: tuple[float, ...]) -> list[tuple[int, int]]:
    found = []
    for column in skeleton.columns:
        order = sorted(column, key=lambda box: heights[box])
        for upper, lower in pairwise(order):
            if heights[lower] - heights[upper] < distance(skeleton, upper, lower) - 1e-6:
                found.append((upper, lower))
    return found


@given(diagrams())
def test_no_box_overlaps_another_whatever_the_chain(diagram: StateDiagram) -> None:
    skeleton = build_skeleton(diagram)
    assert overlaps(skeleton, place_by_layers(skeleton)) == []


@given(diagrams())
def test_every_arrow_has_a_route_and_every_formula_a_box(diagram: StateDiagram) -> None:
    skeleton = build_skeleton(diagram)
    expected = {(arrow.source, arrow.target, arrow.kind) for arrow in diagram.arrows}
    routed = set()
    for route in skeleton.routes:
        source, target = route.boxes[0], route.boxes[-1]
        routed.add((target, source, route.kind) if route.leftward else (source, target, route.kind))
    assert routed == expected
    assert len(skeleton.routes) == len(expected)
    for arrow in diagram.arrows:
        texts = [" ".join(skeleton.boxes[box].formula) for route in skeleton.routes for box in route.boxes]
        assert any(arrow.label.replace(" ", "") in text.replace(" ", "") for text in texts)


@given(diagrams())
def test_columns_follow_the_number_of_failed_units(diagram: StateDiagram) -> None:
    skeleton = build_skeleton(diagram)
    levels = sorted({node.level for node in diagram.nodes})
    for place, node in enumerate(diagram.nodes):
        assert skeleton.boxes[place].column == 2 * levels.index(node.level) + 1
    assert all(skeleton.boxes[link.right].column - skeleton.boxes[link.left].column == 1 for link in skeleton.links)


def test_faults_run_to_the_right_and_restorations_back_to_the_left() -> None:
    skeleton = build_skeleton(plant(3, 2))
    assert {(route.kind, route.leftward) for route in skeleton.routes} == {("fault", False), ("restoration", True)}


def test_arrows_within_a_level_turn_in_the_gap_beside_it() -> None:
    skeleton = build_skeleton(lock_gate())
    (turning,) = [route for route in skeleton.routes if route.turn != "none"]
    assert (turning.boxes[0], turning.boxes[-1], turning.turn) == (2, 1, "left")


def test_parallel_arrows_are_one_line_with_the_sum_of_their_formulas() -> None:
    skeleton = build_skeleton(interlocking())
    formulas = [skeleton.boxes[box].formula for route in skeleton.routes for box in route.boxes]
    assert ("β·λ", "+ λ(supply)") in formulas


@pytest.mark.parametrize("diagram", PLANTS, ids=lambda diagram: diagram.title)
def test_ends_at_a_state_are_apart_and_clear_of_its_corners(diagram: StateDiagram) -> None:
    skeleton = build_skeleton(diagram)
    heights = place_by_layers(skeleton)
    ends: dict[tuple[int, str], list[float]] = {}
    for link, (left, right) in zip(skeleton.links, line_ends(skeleton, heights), strict=True):
        ends.setdefault((link.left, "right side"), []).append(left)
        ends.setdefault((link.right, "left side"), []).append(right)
    for (box, _), offsets in ends.items():
        if skeleton.boxes[box].node is None:
            continue
        assert max(abs(offset) for offset in offsets) <= skeleton.boxes[box].height / 2 - 7.0
        assert all(second - first > 5.0 for first, second in pairwise(sorted(offsets)))


def test_a_chain_is_drawn_without_crossing() -> None:
    count = 6
    nodes = tuple(DiagramNode(n, (), "up", initial=n == 0, level=n) for n in range(count))
    arrows = tuple(DiagramArrow(n, n + 1, "λ", "fault") for n in range(count - 1))
    skeleton = build_skeleton(StateDiagram("chain", nodes, arrows))
    heights = place_by_layers(skeleton)
    assert heights == pytest.approx([heights[0]] * len(heights))


def test_twisted_states_are_untwisted() -> None:
    nodes = [DiagramNode(0, (), "up", initial=True, level=0), DiagramNode(1, (), "up", level=0)]
    nodes += [DiagramNode(2, (), "down", level=1), DiagramNode(3, (), "down", level=1)]
    arrows = (DiagramArrow(0, 3, "a", "fault"), DiagramArrow(1, 2, "b", "fault"))
    heights = place_by_layers(build_skeleton(StateDiagram("twisted", tuple(nodes), arrows)))
    assert (heights[0] < heights[1]) == (heights[3] < heights[2])


def test_straightening_keeps_the_states_where_they_stand() -> None:
    skeleton = build_skeleton(plant(3, 2))
    before = place_by_layers(skeleton)
    after = straightened(skeleton, before, keep_states=True)
    states = [number for number, box in enumerate(skeleton.boxes) if box.node is not None]
    shift = after[states[0]] - before[states[0]]
    assert [after[n] - before[n] for n in states] == pytest.approx([shift] * len(states), abs=0.01)


def test_an_arrow_and_its_counterpart_stay_together() -> None:
    skeleton = build_skeleton(plant(1, 1))
    heights = list(place_by_layers(skeleton))
    gap = sorted(skeleton.columns[2], key=lambda box: heights[box])
    heights[gap[1]], heights[gap[2]] = heights[gap[2]], heights[gap[1]]  # parts both pairs, lines cross
    mended = untangled(skeleton, heights)
    assert sorted(gap, key=lambda box: mended[box]) == gap
