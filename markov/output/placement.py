"""The height at which each box of a skeleton stands, by the project's own layered method.

Conventions: y grows downwards, in points; a position is the centre of a box; `orders` gives the boxes of each column
from top to bottom.
"""

from __future__ import annotations

from bisect import bisect_right, insort
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

from markov.output.skeleton import PORT_MARGIN, Skeleton

_ORDER_SWEEPS = 24
_HEIGHT_SWEEPS = 60
_TURN_SPREAD = 3.5
"""Half the distance between the two ends of a turning line at its formula."""
_PORT_PITCH_WIDEST = 13.0

Orders = list[list[int]]


def place_by_layers(skeleton: Skeleton) -> tuple[float, ...]:
    """Return the height of the centre of every box.

    Notes
    -----
    Method: order within the columns by repeated barycentres of the neighbours, keeping the order with the fewest
    crossings (K. Sugiyama, S. Tagawa, M. Toda, Methods for visual understanding of hierarchical system structures,
    1981; cited from memory); then heights by least squares of the vertical run of all lines, column by column, under
    the least distances between boxes, each column solved exactly as an isotonic regression.
    """
    orders = _ordered(skeleton)
    heights = [0.0] * len(skeleton.boxes)
    for order in orders:
        y = -sum(skeleton.boxes[box].height for box in order) / 2
        for box in order:
            heights[box] = y + skeleton.boxes[box].height / 2
            y += skeleton.boxes[box].height
    return straightened(skeleton, heights, keep_states=False)


def straightened(skeleton: Skeleton, heights: Sequence[float], *, keep_states: bool) -> tuple[float, ...]:
    """Return heights that keep the order in every column, leave the least distances and run the lines straight.

    With `keep_states` the states stay where `heights` puts them, as far as the least distances allow.
    """
    result = list(heights)
    orders = [sorted(column, key=lambda box: (heights[box], box)) for column in skeleton.columns]
    offsets = line_ends(skeleton, heights)
    pulls: list[list[tuple[int, float, float]]] = [[] for _ in skeleton.boxes]
    for number, link in enumerate(skeleton.links):
        left, right = offsets[number]
        weight = _weight(skeleton, link.left, link.right)
        pulls[link.left].append((link.right, right - left, weight))
        pulls[link.right].append((link.left, left - right, weight))
    forward = [order for order in orders if order]
    for sweep in range(_HEIGHT_SWEEPS):
        for order in forward if sweep % 2 == 0 else reversed(forward):
            wanted: list[float] = []
            weights: list[float] = []
            for box in order:
                if keep_states and skeleton.boxes[box].node is not None:
                    wanted.append(heights[box])
                    weights.append(1e6)
                elif pulls[box]:
                    total = sum(weight for _, _, weight in pulls[box])
                    mean = sum(weight * (result[other] + shift) for other, shift, weight in pulls[box]) / total
                    wanted.append(mean)
                    weights.append(total)
                else:
                    wanted.append(result[box])
                    weights.append(1e-3)
            for box, y in zip(order, _spread(skeleton, order, wanted, weights), strict=True):
                result[box] = y
    top = min(y - box.height / 2 for y, box in zip(result, skeleton.boxes, strict=True))
    return tuple(y - top for y in result)


def untangled(skeleton: Skeleton, heights: Sequence[float]) -> tuple[float, ...]:
    """Return heights with the formulas of each gap in the order of the states they join, unless lines would cross more.

    An engine that counts crossings alone may part an arrow from its counterpart; the mean of the ends keeps them
    together.
    """
    left, right = _neighbours(skeleton)
    result = list(heights)
    orders: Orders = [sorted(column, key=lambda box: (heights[box], box)) for column in skeleton.columns]
    for column in range(0, len(orders), 2):
        before, crossings = orders[column], _crossings(orders, right)

        def middle(box: int) -> float:
            ends = [result[other] for other in (*left[box], *right[box])]
            return sum(ends) / len(ends)

        orders[column] = sorted(before, key=lambda box: (middle(box), box))
        if _crossings(orders, right) > crossings:
            orders[column] = before
        for box, height in zip(orders[column], sorted(heights[box] for box in before), strict=True):
            result[box] = height
    return tuple(result)


def line_ends(skeleton: Skeleton, heights: Sequence[float]) -> list[tuple[float, float]]:
    """Return for every link where it meets its left and its right box, as the distance below the centre of the box.

    Ends on one side of a state are spread evenly in the order of the other ends, so that they do not cross at the box.
    """
    ends = [[0.0, 0.0] for _ in skeleton.links]
    sides: dict[tuple[int, int], list[int]] = defaultdict(list)
    for number, link in enumerate(skeleton.links):
        sides[link.left, 0].append(number)
        sides[link.right, 1].append(number)
    for (box, end), numbers in sides.items():
        if len(numbers) == 1:
            continue
        others = {
            number: skeleton.links[number].right if end == 0 else skeleton.links[number].left for number in numbers
        }
        numbers = sorted(numbers, key=lambda number: (heights[others[number]], others[number], number))
        if skeleton.boxes[box].node is None:
            half = _TURN_SPREAD
        else:
            pitch = min((skeleton.boxes[box].height - 2 * PORT_MARGIN) / (len(numbers) - 1), _PORT_PITCH_WIDEST)
            half = pitch * (len(numbers) - 1) / 2
        for place, number in enumerate(numbers):
            ends[number][end] = -half + 2 * half * place / (len(numbers) - 1)
    return [(left, right) for left, right in ends]


def distance(skeleton: Skeleton, upper: int, lower: int) -> float:
    """Return the least distance between the centres of two boxes that follow each other in a column."""
    first, second = skeleton.boxes[upper], skeleton.boxes[lower]
    states = (first.node is not None) + (second.node is not None)
    return (first.height + second.height) / 2 + (3.0, 7.0, 16.0)[states]


def _weight(skeleton: Skeleton, left: int, right: int) -> float:
    """Return how much a line strives to be straight: the more, the less there is at its ends to explain a bend."""
    plain = sum(not skeleton.boxes[box].formula and skeleton.boxes[box].node is None for box in (left, right))
    return (1.0, 3.0, 20.0)[plain]


@dataclass
class _Block:
    """Boxes that have been pushed together, at the weighted mean of what they want."""

    total: float
    weight: float
    count: int

    @property
    def mean(self) -> float:
        return self.total / self.weight


def _spread(skeleton: Skeleton, order: Sequence[int], wanted: Sequence[float], weights: Sequence[float]) -> list[float]:
    """Return the heights nearest to `wanted` (weighted least squares) that keep the order and the least distances.

    With the distances taken out, the order alone is left: pool adjacent violators gives the exact minimum.
    """
    shifts = [0.0]
    for upper, lower in pairwise(order):
        shifts.append(shifts[-1] + distance(skeleton, upper, lower))
    blocks: list[_Block] = []
    for y, shift, weight in zip(wanted, shifts, weights, strict=True):
        block = _Block((y - shift) * weight, weight, 1)
        while blocks and blocks[-1].mean >= block.mean:
            before = blocks.pop()
            block = _Block(before.total + block.total, before.weight + block.weight, before.count + block.count)
        blocks.append(block)
    means = [block.mean for block in blocks for _ in range(block.count)]
    return [mean + shift for mean, shift in zip(means, shifts, strict=True)]


def _ordered(skeleton: Skeleton) -> Orders:
    left, right = _neighbours(skeleton)
    orders = _first_orders(skeleton, left)
    best, fewest = [list(order) for order in orders], _crossings(orders, right)
    for sweep in range(_ORDER_SWEEPS):
        rightward = sweep % 2 == 0
        neighbours = left if rightward else right
        for order in orders if rightward else reversed(orders):
            _sort_by_barycentre(order, neighbours, orders, skeleton)
        _swap_neighbours(orders, left, right, skeleton)
        crossings = _crossings(orders, right)
        if crossings < fewest:
            best, fewest = [list(order) for order in orders], crossings
        if fewest == 0:
            break
    return best


def _neighbours(skeleton: Skeleton) -> tuple[list[list[int]], list[list[int]]]:
    """Return for every box those it is joined to on its left, and those on its right."""
    left: list[list[int]] = [[] for _ in skeleton.boxes]
    right: list[list[int]] = [[] for _ in skeleton.boxes]
    for link in skeleton.links:
        right[link.left].append(link.right)
        left[link.right].append(link.left)
    return left, right


def _first_orders(skeleton: Skeleton, left: list[list[int]]) -> Orders:
    """Return the columns in the order of the numbers, other boxes below the states whose lines they carry."""
    orders: Orders = []
    place: dict[int, float] = {}
    for column in skeleton.columns:
        known = {box: [place[other] for other in left[box] if other in place] for box in column}
        order = sorted(column, key=lambda box: (sum(known[box]) / len(known[box]) if known[box] else 0.0, box))
        orders.append(order)
        place.update({box: float(index) for index, box in enumerate(order)})
    return orders


def _sort_by_barycentre(order: list[int], neighbours: list[list[int]], orders: Orders, skeleton: Skeleton) -> None:
    place = {box: index for held in _beside(order, orders, skeleton) for index, box in enumerate(held)}
    own = {box: float(index) for index, box in enumerate(order)}

    def barycentre(box: int) -> float:
        places = [place[other] for other in neighbours[box]]
        return sum(places) / len(places) if places else own[box]

    keys = {box: barycentre(box) for box in order}
    order.sort(key=lambda box: (keys[box], own[box]))


def _beside(order: list[int], orders: Orders, skeleton: Skeleton) -> list[list[int]]:
    if not order:
        return []
    column = skeleton.boxes[order[0]].column
    return [orders[other] for other in (column - 1, column + 1) if 0 <= other < len(orders)]


def _swap_neighbours(orders: Orders, left: list[list[int]], right: list[list[int]], skeleton: Skeleton) -> None:
    """Swap boxes that follow each other wherever that removes a crossing."""
    for order in orders:
        place = {box: index for held in _beside(order, orders, skeleton) for index, box in enumerate(held)}
        sides = {box: (sorted(place[o] for o in left[box]), sorted(place[o] for o in right[box])) for box in order}
        for index in range(len(order) - 1):
            upper, lower = sides[order[index]], sides[order[index + 1]]
            now = sum(_pairs_crossed(a, b) for a, b in zip(upper, lower, strict=True))
            swapped = sum(_pairs_crossed(b, a) for a, b in zip(upper, lower, strict=True))
            if swapped < now:
                order[index], order[index + 1] = order[index + 1], order[index]


def _pairs_crossed(upper: list[int], lower: list[int]) -> int:
    return sum(bisect_right(lower, place - 1) for place in upper)


def _crossings(orders: Orders, right: list[list[int]]) -> int:
    total = 0
    for order, following in pairwise(orders):
        place = {box: index for index, box in enumerate(following)}
        seen: list[int] = []
        for box in order:
            ends = sorted(place[other] for other in right[box])
            total += sum(len(seen) - bisect_right(seen, end) for end in ends)
            for end in ends:
                insort(seen, end)
    return total
