"""Diagrams on pages: what fits, what is folded, what goes over numbered pages; nothing lost on the way."""

import re
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

from markov.evaluation import build_space
from markov.output.diagram import StateDiagram
from markov.output.drawing import write_diagram
from markov.output.graphml import graphml_text
from markov.output.paging import A4, IN_TEXT, Paper, lay_out
from markov.output.picture import Picture, Words
from markov.output.state_diagram import state_diagram
from markov.spec import read_text

SVG = "{http://www.w3.org/2000/svg}"


def unlike(count: int) -> StateDiagram:
    """The states of so many unlike units of which all but one are needed: two to the power of the number."""
    units = ", ".join(f"u{at}: {{failure_rate: {at + 2}e-5 /h, repair_time: {at + 4} h}}" for at in range(count))
    system = f"{{at_least: {count - 1}, of: [{', '.join(f'u{at}' for at in range(count))}]}}"
    model = read_text(f"title: Unlike units\nunits: {{{units}}}\nsystem: {system}\n", "spec")
    return state_diagram(model, build_space(model))


def words_of(picture: Picture) -> list[str]:
    return [mark.text for mark in picture.marks if isinstance(mark, Words)]


@pytest.mark.parametrize("paper", [A4, IN_TEXT], ids=lambda paper: paper.name)
@pytest.mark.parametrize("count", [2, 3, 5, 8])
def test_every_page_fits_its_paper(count: int, paper: Paper) -> None:
    for picture in lay_out(unlike(count), paper, engine="own").pictures:
        assert paper.holds(picture)
        assert min(mark.size for mark in picture.marks if isinstance(mark, Words)) == 8.0


def test_thirty_states_go_over_numbered_pages_with_every_state_once_in_full() -> None:
    diagram = unlike(5)
    sheets = lay_out(diagram, engine="own")
    total = len(sheets.pictures)
    assert 1 < total <= 6
    assert not sheets.is_folded
    drawn: list[str] = []
    for number, picture in enumerate(sheets.pictures, 1):
        words = words_of(picture)
        assert any(f"page {number} of {total}" in each for each in words)
        bold = [mark for mark in picture.marks if isinstance(mark, Words) and mark.bold and mark.text.isdecimal()]
        referred = [mark for mark in picture.marks if isinstance(mark, Words) and re.fullmatch(r"page \d+", mark.text)]
        aside = {mark.target for mark in referred}
        drawn += [mark.text for mark in bold if mark.target not in aside]
    assert sorted(map(int, drawn)) == [node.number for node in diagram.nodes]


def test_over_all_pages_every_arrow_stands_once() -> None:
    diagram = unlike(5)
    heads = 0
    for picture in lay_out(diagram, engine="own").pictures:
        heads += sum(word in {arrow.label for arrow in diagram.arrows} for word in words_of(picture) if "(" in word)
    symbols = len(diagram.legend)  # the legend repeats each symbol once
    assert heads == len(diagram.arrows) + symbols


def test_a_reference_names_the_page_on_which_the_state_stands() -> None:
    pictures = lay_out(unlike(5), engine="own").pictures
    home: dict[str, int] = {}
    referred: list[tuple[str, int]] = []
    for number, picture in enumerate(pictures, 1):
        pages = {
            mark.target: mark.text
            for mark in picture.marks
            if isinstance(mark, Words) and mark.text.startswith("page ")
        }
        targets = {mark.target for mark in picture.marks if mark.target}
        for target in targets:
            told = pages.get(target)
            if told is None:
                home[target] = number
            else:
                referred.append((target, int(told.split()[1])))
    assert referred
    assert all(home[target] == page for target, page in referred)


def test_a_large_chain_is_folded_and_keeps_its_first_columns_apart() -> None:
    sheets = lay_out(unlike(8), engine="own")
    assert sheets.is_folded
    words = [word for picture in sheets.pictures for word in words_of(picture)]
    assert {"no unit failed", "1 unit failed"} <= set(words)
    counted = [int(found.group(1)) for word in words if (found := re.fullmatch(r"(\d+) states", word))]
    pages = len(sheets.pictures)
    assert pages > 1 or sum(counted) + 1 == 256


def test_the_whole_is_drawn_when_asked_for_whatever_the_pages() -> None:
    sheets = lay_out(unlike(6), whole=True, engine="own")
    assert not sheets.is_folded
    targets = {mark.target for picture in sheets.pictures for mark in picture.marks if mark.target}
    assert targets == {f"state-{number}" for number in range(64)}


def test_one_sheet_is_as_large_as_it_has_to_be() -> None:
    sheets = lay_out(unlike(5), None, engine="own")
    assert len(sheets.pictures) == 1
    assert not A4.holds(sheets.pictures[0])


def test_pages_become_files_with_numbers_or_one_pdf(tmp_path: Path) -> None:
    drawn = write_diagram(unlike(5), tmp_path / "plant.svg", engine="own")
    assert [path.name for path in drawn.paths] == [f"plant-{number}.svg" for number in range(1, len(drawn.paths) + 1)]
    assert len(drawn.paths) > 1
    assert drawn.path == drawn.paths[0]
    pdf = write_diagram(unlike(5), tmp_path / "plant.pdf", engine="own")
    assert [path.name for path in pdf.paths] == ["plant.pdf"]
    content = (tmp_path / "plant.pdf").read_bytes()
    assert len(re.findall(rb"/Type /Page\b", content)) == len(drawn.paths)


@pytest.mark.parametrize("ending", ["svg", "pdf", "png"])
def test_pages_are_the_same_bytes_on_a_rerun(tmp_path: Path, ending: str) -> None:
    first = write_diagram(unlike(4), tmp_path / f"first.{ending}", engine="own")
    second = write_diagram(unlike(4), tmp_path / f"second.{ending}", engine="own")
    assert [path.read_bytes() for path in first.paths] == [path.read_bytes() for path in second.paths]


def test_the_marks_of_a_state_stand_together_and_name_it(tmp_path: Path) -> None:
    write_diagram(unlike(2), tmp_path / "plant.svg", engine="own")
    groups = [e for e in ET.parse(tmp_path / "plant.svg").getroot().iter(f"{SVG}g") if e.get("data-target")]
    assert [e.get("data-target") for e in groups] == ["state-0", "state-1", "state-2", "state-3"]
    assert "initial" in {e.text for e in groups[0].iter(f"{SVG}text")}


def test_graphml_comes_back_as_it_went() -> None:
    import networkx

    diagram = unlike(4)
    graph = networkx.parse_graphml(graphml_text(diagram), force_multigraph=True)
    assert graph.graph["title"] == diagram.title
    assert [
        (int(name), told["condition"], told["initial"], told["level"]) for name, told in graph.nodes(data=True)
    ] == [(node.number, node.condition, node.initial, node.level) for node in diagram.nodes]
    edges = sorted(
        (int(a), int(b), told["label"], told["kind"], told["value"]) for a, b, told in graph.edges(data=True)
    )
    assert edges == sorted(
        (arrow.source, arrow.target, arrow.label, arrow.kind, arrow.value[0]) for arrow in diagram.arrows if arrow.value
    )
    assert len(edges) == len(diagram.arrows)


def test_graphml_keeps_hostile_names() -> None:
    import networkx

    title = '<b>&amp; "x" | \x00 \\alpha =1+1 水 ]]>'
    model = read_text("units: {a: {failure_rate: 3 /h}}\nsystem: a\n", "spec")
    diagram = state_diagram(model, build_space(model))
    told = networkx.parse_graphml(graphml_text(StateDiagram(title, diagram.nodes, diagram.arrows)))
    assert told.graph["title"] == title.replace("\x00", "\N{REPLACEMENT CHARACTER}")
