"""A state diagram on sheets of a given size: whole where it fits, else folded or over numbered pages, always at 8 pt.

An arrow stands on the page of the state that it leaves; where it leads to a state of another page, a reference with a
broken outline names that page.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from markov.errors import DrawingError
from markov.output.composition import compose
from markov.output.diagram import DiagramNode, LegendEntry, StateDiagram
from markov.output.engines import TIME_LIMIT, Engine, place_boxes
from markov.output.folding import fold_by_level
from markov.output.legend_page import legend_picture
from markov.output.picture import Picture
from markov.output.placement import place_by_layers
from markov.output.skeleton import build_skeleton

STATE_LIMIT = 200
"""States that one sheet may hold; a larger diagram is folded by level."""
ARROW_LIMIT = 1000
"""Arrows that one sheet may hold; a diagram with more is folded by level."""
SPLIT_UP_TO = 40
"""States up to which several pages are preferred to folding."""
PAGES_WANTED = 6
"""Pages up to which they are preferred to folding."""
_BOXES_WANTED = 40
_COLUMNS_WANTED = 8
_LEVELS_APART = 2
"""Levels from the first that keep columns of their own when a diagram is folded, even if that takes more pages."""
_WIDEST_TRIED = 60
"""States that are tried on one page at most."""
_POINTS_PER_MILLIMETRE = 72 / 25.4


@dataclass(frozen=True)
class Paper:
    """Sizes in millimetres, width and height, that a picture may have; it fits if it fits one of them."""

    name: str
    sizes: tuple[tuple[float, float], ...]

    def holds(self, picture: Picture) -> bool:
        """Tell whether a picture fits."""
        return any(
            picture.width <= width * _POINTS_PER_MILLIMETRE and picture.height <= height * _POINTS_PER_MILLIMETRE
            for width, height in self.sizes
        )


#: A4 upright or sideways, with margins of 12 mm.
A4 = Paper("A4", ((186.0, 273.0), (273.0, 186.0)))
#: What a document leaves to a picture with its caption on a page of A4, upright or sideways.
IN_TEXT = Paper("A4 with a caption", ((178.0, 232.0), (265.0, 138.0)))


@dataclass(frozen=True)
class Sheets:
    """Pictures in the order of their pages, the engine that placed most boxes, and what the reader should know."""

    pictures: tuple[Picture, ...]
    engine: Engine
    notes: tuple[str, ...]
    is_folded: bool = False


def lay_out(
    diagram: StateDiagram,
    paper: Paper | None = A4,
    *,
    whole: bool = False,
    engine: Engine | None = None,
    time_limit: float = TIME_LIMIT,
) -> Sheets:
    """Return a diagram as pictures.

    Parameters
    ----------
    diagram : StateDiagram
    paper : Paper or None
        What every picture has to fit; None for one sheet of whatever size.
    whole : bool
        Whether every state is drawn by itself, over as many pages as that takes.
    engine, time_limit
        As for `place_boxes`.

    Raises
    ------
    DrawingError
        The named engine failed, or what is drawn cannot be made to fit.
    """
    desk = _Desk(engine, time_limit)
    states, arrows = len(diagram.nodes), len(diagram.arrows)
    is_small = states <= STATE_LIMIT and arrows <= ARROW_LIMIT
    if paper is None:
        drawable, notes = (diagram, ()) if is_small or whole else _folded(diagram)
        return desk.sheets((desk.picture(drawable),), notes, is_folded=drawable is not diagram)
    if is_small:
        picture = desk.picture(diagram)
        if paper.holds(picture):
            return desk.sheets((picture,))
    if whole or states <= SPLIT_UP_TO:
        pages = desk.split(diagram, paper)
        if whole or len(pages) <= PAGES_WANTED or any(node.holds for node in diagram.nodes):
            return desk.sheets(pages, (f"{states} states on {len(pages)} pages of {paper.name}",))
    if any(node.holds for node in diagram.nodes):
        raise DrawingError(_too_wide(states, arrows))
    return desk.folded(diagram, paper)


class _Desk:
    """Makes pictures with one engine and remembers what it said."""

    def __init__(self, engine: Engine | None, time_limit: float) -> None:
        self._engine, self._limit = engine, time_limit
        self._used: list[Engine] = []
        self._notes: dict[str, None] = {}

    def sheets(self, pictures: Sequence[Picture], notes: tuple[str, ...] = (), *, is_folded: bool = False) -> Sheets:
        """Return finished pictures with what was noted."""
        engine = max(self._used, key=self._used.count) if self._used else "own"
        return Sheets(tuple(pictures), engine, (*self._notes, *notes), is_folded)

    def picture(self, diagram: StateDiagram) -> Picture:
        """Draw one diagram at its natural size."""
        skeleton = build_skeleton(diagram)
        placed = place_boxes(skeleton, engine=self._engine, time_limit=self._limit)
        self._used.append(placed.engine)
        self._notes.update(dict.fromkeys(placed.notes))
        return compose(diagram, skeleton, placed.heights)

    def page(self, diagram: StateDiagram, paper: Paper) -> Picture:
        """Draw one page by the engine; by the own method, which found it to fit, where the engine takes more room."""
        found = self.picture(diagram)
        return found if paper.holds(found) else _sketch(diagram)

    def split(self, diagram: StateDiagram, paper: Paper) -> tuple[Picture, ...]:
        """Draw a diagram over several pages, its symbols on a page of their own where they take much room."""
        bare = replace(diagram, legend=())
        order = sorted(diagram.nodes, key=lambda node: (node.level, node.number))
        chunks: list[list[DiagramNode]] = []
        place = 0
        while place < len(order):
            count = self._most_that_fit(bare, order[place:], paper)
            chunks.append(order[place : place + count])
            place += count
        page_of = {node.number: page for page, chunk in enumerate(chunks, 1) for node in chunk}
        last = len(chunks)
        closing = self.page(_page(diagram, chunks[-1], page_of, _where(last, last, last)), paper)
        if paper.holds(closing):
            pages = (_page(bare, chunk, page_of, _where(page, last, last)) for page, chunk in enumerate(chunks[:-1], 1))
            return (*(self.page(each, paper) for each in pages), closing)
        legends = _legend_pages(diagram, paper, last)
        total = last + len(legends)
        pages = (_page(bare, chunk, page_of, _where(page, total, last + 1)) for page, chunk in enumerate(chunks, 1))
        return (*(self.page(each, paper) for each in pages), *legends)

    def _most_that_fit(self, diagram: StateDiagram, order: list[DiagramNode], paper: Paper) -> int:
        """Return how many of the next states go on one page: at least one."""
        low, high = 1, min(len(order), _WIDEST_TRIED) + 1
        step = 8
        while low + 1 < high:
            tried = min(low + step, high - 1) if step else (low + high) // 2
            page = _page(diagram, order[:tried], {}, "page 888 of 888")
            if paper.holds(_sketch(page)):
                low = tried
            else:
                high, step = tried, 0
        return low

    def folded(self, diagram: StateDiagram, paper: Paper) -> Sheets:
        """Fold a diagram into as many boxes as fit one sheet, its symbols on further ones where needed."""
        most = max(node.level for node in diagram.nodes)
        widest = min(most, _COLUMNS_WANTED - 1)
        for last in range(widest, -1, -1):
            folded = fold_by_level(diagram, last=last)
            if last and len(folded.nodes) > _BOXES_WANTED:
                continue
            note = _fold_note(diagram, folded)
            if paper.holds(_sketch(folded)):
                return self.sheets((self.page(folded, paper),), (note,), is_folded=True)
            bare = replace(folded, legend=())
            if last == 0 or paper.holds(_sketch(bare)):
                legends = _legend_pages(folded, paper, 1)
                return self.sheets((self.page(bare, paper), *legends), (note,), is_folded=True)
            if last <= _LEVELS_APART:
                pages = self.split(folded, paper)
                return self.sheets(pages, (f"{note}, on {len(pages)} pages",), is_folded=True)
        raise AssertionError("one column is the last resort")


def _sketch(diagram: StateDiagram) -> Picture:
    """Draw one diagram by the own method, which is quick: what fits so is made to fit."""
    skeleton = build_skeleton(diagram)
    return compose(diagram, skeleton, place_by_layers(skeleton))


def _folded(diagram: StateDiagram) -> tuple[StateDiagram, tuple[str, ...]]:
    """Return a diagram folded into few boxes, for one sheet, with a note on that."""
    if any(node.holds for node in diagram.nodes):
        raise DrawingError(_too_wide(len(diagram.nodes), len(diagram.arrows)))
    band = 1
    folded = fold_by_level(diagram, band=band)
    while _is_wide(folded) and band <= max(node.level for node in diagram.nodes):
        band += 1
        folded = fold_by_level(diagram, band=band)
    return folded, (_fold_note(diagram, folded),)


def _too_wide(boxes: int, arrows: int) -> str:
    return (
        f"a folded diagram of {boxes} boxes and {arrows} arrows; one sheet holds {STATE_LIMIT} and {ARROW_LIMIT}, "
        f"pages {SPLIT_UP_TO} boxes: fold into wider bands of levels"
    )


def _fold_note(diagram: StateDiagram, folded: StateDiagram) -> str:
    return (
        f"{len(diagram.nodes)} states and {len(diagram.arrows)} arrows: more than can be read in one picture, "
        f"folded into {len(folded.nodes)} boxes by level"
    )


def _is_wide(folded: StateDiagram) -> bool:
    columns = len({node.level for node in folded.nodes})
    return len(folded.nodes) > _BOXES_WANTED or columns > _COLUMNS_WANTED


def _page(diagram: StateDiagram, chunk: Sequence[DiagramNode], page_of: dict[int, int], where: str) -> StateDiagram:
    """Return the diagram of one page: its states, the arrows out of them, references to states of other pages."""
    here = {node.number for node in chunk}
    arrows = tuple(arrow for arrow in diagram.arrows if arrow.source in here)
    beyond = {arrow.target for arrow in arrows} - here
    references = tuple(
        replace(
            node,
            lines=node.lines[:1] if node.holds else (),
            initial=False,
            final=False,
            elsewhere=page_of.get(node.number, 888),
        )
        for node in diagram.nodes
        if node.number in beyond
    )
    return replace(
        diagram,
        nodes=(*sorted(chunk, key=lambda node: node.number), *references),
        arrows=arrows,
        subtitle=(*diagram.subtitle, where),
        is_page=True,
    )


def _where(page: int, total: int, symbols: int) -> str:
    elsewhere = "" if symbols == page else f"; symbols on page {symbols}"
    return f"page {page} of {total}; an arrow stands on the page of the state that it leaves{elsewhere}"


def _legend_pages(diagram: StateDiagram, paper: Paper, before: int) -> tuple[Picture, ...]:
    """Return the symbols on as many pages as they take; none where there are none."""
    chunks: list[tuple[LegendEntry, ...]] = []
    rest = diagram.legend
    while rest:
        count = len(rest)
        while count > 1 and not paper.holds(legend_picture(diagram, rest[:count], "page 888 of 888")):
            count = max(1, count * 2 // 3)
        chunks.append(rest[:count])
        rest = rest[count:]
    total = before + len(chunks)
    return tuple(
        legend_picture(diagram, chunk, f"page {before + number} of {total}: symbols")
        for number, chunk in enumerate(chunks, 1)
    )
