"""A diagram as a file: whole or not at all, the same bytes again, every name as it was written."""

from __future__ import annotations

import os
import re
import struct
import xml.etree.ElementTree as ET
import zlib
from pathlib import Path

import pytest

from markov.errors import DrawingError, UsageError
from markov.output import page_writer, svg_writer
from markov.output.diagram import DiagramArrow, DiagramNode, LegendEntry, StateDiagram
from markov.output.drawing import ENDINGS, write_diagram
from markov.output.page_writer import page_bytes
from markov.output.paging import STATE_LIMIT
from markov.output.picture import PAPER, Picture, Shape, Words, rectangle
from tests.output.test_diagram import interlocking, lock_gate, plant

SVG = "{http://www.w3.org/2000/svg}"
HOSTILE = [
    "A|B",
    "<b>x</b>",
    "{y}",
    "R&D",
    "&lt;",
    'say "no"',
    "back\\slash\\n",
    "$x_1^2$",
    "насос № 2",
    "a]]>b",
    "=1+1",
]


def texts(path: Path) -> list[str]:
    return [element.text or "" for element in ET.parse(path).getroot().iter(f"{SVG}text")]


def named(name: str) -> StateDiagram:
    """A diagram that bears one name everywhere."""
    return StateDiagram(
        title=name,
        nodes=(
            DiagramNode(0, (name,), "up", initial=True),
            DiagramNode(1, (name,), "down", level=1),
        ),
        arrows=(DiagramArrow(0, 1, f"λ({name})", "fault"), DiagramArrow(1, 0, name, "restoration")),
        subtitle=(name,),
        legend=(LegendEntry(name, name, name),),
        alt_text=name,
    )


@pytest.mark.parametrize("ending", ENDINGS)
def test_a_rerun_gives_the_same_bytes(tmp_path: Path, ending: str) -> None:
    first, second = tmp_path / f"first{ending}", tmp_path / f"second{ending}"
    write_diagram(lock_gate(), first)
    write_diagram(lock_gate(), second)
    assert first.read_bytes() == second.read_bytes()


@pytest.mark.parametrize("ending", ENDINGS)
def test_an_existing_file_is_kept_unless_asked(tmp_path: Path, ending: str) -> None:
    path = tmp_path / f"lock{ending}"
    path.write_text("mine")
    with pytest.raises(UsageError, match="exists already"):
        write_diagram(lock_gate(), path, engine="own")
    assert path.read_text() == "mine"
    write_diagram(lock_gate(), path, engine="own", overwrite=True)
    assert path.read_bytes() != b"mine"
    assert os.listdir(tmp_path) == [path.name]


def test_a_file_that_appears_while_drawing_is_kept(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "lock.svg"
    content = svg_writer.svg_text

    def slow(picture: Picture) -> str:
        path.write_text("someone else's")
        return content(picture)

    monkeypatch.setattr(svg_writer, "svg_text", slow)
    with pytest.raises(UsageError, match="exists already"):
        write_diagram(lock_gate(), path, engine="own")
    assert path.read_text() == "someone else's"
    assert os.listdir(tmp_path) == ["lock.svg"]


def test_a_file_system_without_links_is_served_too(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(source: object, target: object) -> None:
        raise OSError("links are not supported")

    monkeypatch.setattr(os, "link", refuse)
    write_diagram(lock_gate(), tmp_path / "lock.svg", engine="own")
    assert os.listdir(tmp_path) == ["lock.svg"]


def test_a_failure_to_store_leaves_nothing_behind(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(handle: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(DrawingError, match="No space left"):
        write_diagram(lock_gate(), tmp_path / "lock.svg", engine="own")
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize("name", ["lock", "lock.jpg", "lock.svg.txt"])
def test_an_unknown_ending_is_refused_with_the_four_known_ones(tmp_path: Path, name: str) -> None:
    with pytest.raises(UsageError, match=r"\.svg, \.pdf, \.png, \.dot"):
        write_diagram(lock_gate(), tmp_path / name)
    assert os.listdir(tmp_path) == []


def test_a_missing_folder_and_a_folder_as_file_are_refused(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="there is no folder"):
        write_diagram(lock_gate(), tmp_path / "none" / "lock.svg")
    (tmp_path / "lock.svg").mkdir()
    with pytest.raises(UsageError, match="is a folder"):
        write_diagram(lock_gate(), tmp_path / "lock.svg", overwrite=True)


def test_the_ending_may_be_in_capitals(tmp_path: Path) -> None:
    assert write_diagram(lock_gate(), tmp_path / "LOCK.SVG", engine="own").engine == "own"


def test_the_svg_shows_every_state_formula_symbol_and_reference(tmp_path: Path) -> None:
    write_diagram(lock_gate(), tmp_path / "lock.svg", engine="own")
    shown = texts(tmp_path / "lock.svg")
    for arrow in lock_gate().arrows:
        assert arrow.label in shown
    for wanted in ("0", "1", "2", "3", "up", "degraded", "down", "waiting for the keeper", "both failed", "initial"):
        assert wanted in shown
    for wanted in ("Document HL-07, revision B", "spec 3f9a1c0d2b7e", "failure rate of a drive", "2·10⁻⁴ /h", "2 %"):
        assert wanted in shown
    for wanted in ("fault", "restoration", "no unit failed", "1 unit failed", "2 units failed"):
        assert wanted in shown


def test_the_svg_speaks_to_readers_who_do_not_see_it(tmp_path: Path) -> None:
    write_diagram(lock_gate(), tmp_path / "lock.svg", engine="own")
    root = ET.parse(tmp_path / "lock.svg").getroot()
    title, described = root[0], root[1]
    assert root.get("role") == "img"
    assert root.get("aria-labelledby") == f"{title.get('id')} {described.get('id')}"
    assert (title.tag, title.text) == (f"{SVG}title", "Harbour lock gate drive")
    assert (described.tag, described.text) == (f"{SVG}desc", "Four states of a lock gate drive")


def test_two_diagrams_on_one_page_do_not_share_names(tmp_path: Path) -> None:
    names = set()
    for place, diagram in enumerate((lock_gate(), interlocking())):
        write_diagram(diagram, tmp_path / f"{place}.svg", engine="own")
        names.add(ET.parse(tmp_path / f"{place}.svg").getroot()[0].get("id"))
    assert len(names) == 2


def test_conditions_differ_by_outline_without_colour(tmp_path: Path) -> None:
    """Number of corners, width of the line, number of outlines: no two of the four are alike."""

    def outline(condition: str, final: bool) -> tuple[object, ...]:
        from markov.output.shapes import condition_outline

        shapes = condition_outline(condition, final, 0, 0, 80, 40)
        return (len(shapes), len(shapes[0].steps), shapes[0].width)

    looks = [outline(condition, final) for condition in ("up", "degraded", "down") for final in (False, True)]
    assert len(set(looks)) == 6


def test_final_states_say_so_in_words(tmp_path: Path) -> None:
    write_diagram(interlocking(), tmp_path / "rail.svg", engine="own")
    assert texts(tmp_path / "rail.svg").count("down, final") == 2


@pytest.mark.parametrize("diagram", [lock_gate(), interlocking(), plant(3, 2)], ids=lambda diagram: diagram.title)
def test_no_words_leave_the_sheet(tmp_path: Path, diagram: StateDiagram) -> None:
    from markov.output.lettering import text_width

    write_diagram(diagram, tmp_path / "all.svg", engine="own", paper=None)
    root = ET.parse(tmp_path / "all.svg").getroot()
    _, _, width, height = (float(number) for number in root.get("viewBox", "").split())
    for element in root.iter(f"{SVG}text"):
        wide = text_width(
            element.text or "", float(element.get("font-size", "0")), bold=element.get("font-weight") == "bold"
        )
        x = float(element.get("x", "nan")) - {"middle": wide / 2, "end": wide}.get(element.get("text-anchor", ""), 0.0)
        assert x >= 0
        assert x + wide <= width
        assert 0 < float(element.get("y", "nan")) < height


def test_all_words_have_at_least_eight_points(tmp_path: Path) -> None:
    one = write_diagram(plant(3, 2), tmp_path / "one.svg", engine="own", paper=None)
    several = write_diagram(plant(3, 2), tmp_path / "several.svg", engine="own")
    assert len(several.paths) > len(one.paths) == 1
    for path in (*one.paths, *several.paths):
        assert min(float(e.get("font-size", "0")) for e in ET.parse(path).getroot().iter(f"{SVG}text")) == 8.0


def test_the_page_that_the_picture_fits_is_named(tmp_path: Path) -> None:
    assert write_diagram(lock_gate(), tmp_path / "a.svg", engine="own").notes[-1].endswith("fits A4 upright")
    large = write_diagram(plant(4, 2, 1), tmp_path / "b.svg", engine="own", paper=None)
    assert "A4" not in large.notes[-1]
    long = write_diagram(plant(40), tmp_path / "c.svg", engine="own", paper=None)
    assert long.notes[-1].endswith("larger than A0")


@pytest.mark.parametrize("name", HOSTILE)
def test_svg_keeps_a_hostile_name(tmp_path: Path, name: str) -> None:
    write_diagram(named(name), tmp_path / "name.svg", engine="own")
    shown = texts(tmp_path / "name.svg")
    assert shown.count(name) == 8  # heading, subtitle, two states, restoration, three cells of the legend
    assert f"λ({name})" in shown
    root = ET.parse(tmp_path / "name.svg").getroot()
    assert (root[0].text, root[1].text) == (name, name)


@pytest.mark.parametrize("name", HOSTILE)
@pytest.mark.parametrize("form", ["pdf", "png"])
def test_pdf_and_png_take_a_hostile_name(tmp_path: Path, name: str, form: str) -> None:
    drawn = write_diagram(named(name), tmp_path / f"name.{form}", engine="own")
    assert all("no font" not in note for note in drawn.notes)


def test_dollar_signs_are_no_formula_in_pdf(tmp_path: Path) -> None:
    write_diagram(named("$x_1^2$"), tmp_path / "name.pdf", engine="own")
    content = (tmp_path / "name.pdf").read_bytes()
    assert b"DejaVuSans-Bold" in content
    assert b"Oblique" not in content  # in which a formula would be set


def read_dot_string(text: str) -> str:
    """Read a quoted label as Graphviz does: escapes of the language, then names of characters."""
    text = text.replace('\\"', '"')
    lines = re.sub(r"\\(.)", lambda match: {"n": "\n", "l": "\n"}.get(match[1], match[1]), text)
    return lines.replace("&amp;", "&")


@pytest.mark.parametrize("name", HOSTILE)
def test_dot_keeps_a_hostile_name(tmp_path: Path, name: str) -> None:
    write_diagram(named(name), tmp_path / "name.dot")
    source = (tmp_path / "name.dot").read_text(encoding="utf-8")
    labels = [read_dot_string(label) for label in re.findall(r'label="((?:[^"\\]|\\.)*)"', source)]
    assert f"0 · initial, up\n{name}" in labels
    assert f"λ({name})" in labels
    assert name in labels
    assert any(label.startswith(f"{name}\n{name}\nrounded") for label in labels)


def test_a_line_break_in_a_name_breaks_no_format(tmp_path: Path) -> None:
    for ending in ENDINGS:
        write_diagram(named("a\nb\x00\u202e"), tmp_path / f"name{ending}", engine="own")
    assert "a↵b\ufffd\ufffd" in texts(tmp_path / "name.svg")
    assert "a↵b\ufffd\ufffd" in (tmp_path / "name.dot").read_text(encoding="utf-8")


def test_dot_source_holds_every_arrow_in_its_direction_and_columns_by_level(tmp_path: Path) -> None:
    drawn = write_diagram(interlocking(), tmp_path / "rail.dot")
    source = (tmp_path / "rail.dot").read_text(encoding="utf-8")
    found = re.findall(r'^  s(\d+) -> s(\d+) \[style=(\w+).*label="(.*)"\];$', source, re.M)
    style = {"fault": "solid", "restoration": "dashed"}
    assert found == [(str(a.source), str(a.target), style[a.kind], a.label) for a in interlocking().arrows]
    assert "{ rank=same; level2; s2; s3; }" in source
    assert "level0 -> level1 -> level2 -> level3 [style=invis];" in source
    assert source.count("peripheries=2") == 2
    assert drawn.engine == "none"


def test_dot_source_is_never_folded(tmp_path: Path) -> None:
    diagram = plant(7, 6, 4)
    write_diagram(diagram, tmp_path / "large.dot")
    source = (tmp_path / "large.dot").read_text(encoding="utf-8")
    assert len(re.findall(r"^  s\d+ \[", source, re.M)) == len(diagram.nodes) > STATE_LIMIT


def test_beyond_the_limit_the_picture_is_folded_and_says_so(tmp_path: Path) -> None:
    diagram = plant(7, 6, 4)
    drawn = write_diagram(diagram, tmp_path / "large.svg", engine="own", paper=None)
    shown = " ".join(texts(tmp_path / "large.svg"))
    assert f"Folded: {len(diagram.nodes)} states" in shown
    assert any("folded into" in note for note in drawn.notes)
    counts = [int(count) for count in re.findall(r"(\d+) states (?:initial )?(?:up|degraded|down)", shown)]
    single = len(re.findall(r"(?<!\d)0 initial up", shown))
    assert sum(counts) + single == len(diagram.nodes)
    assert "Folded" in (ET.parse(tmp_path / "large.svg").getroot()[1].text or "")


def test_at_the_limit_nothing_is_folded(tmp_path: Path) -> None:
    count = STATE_LIMIT
    nodes = tuple(DiagramNode(n, (), "up", initial=n == 0, level=n % 20) for n in range(count))
    drawn = write_diagram(StateDiagram("limit", nodes, ()), tmp_path / "limit.svg", engine="own", paper=None)
    assert not any("folded" in note for note in drawn.notes)


def test_too_many_boxes_even_when_folded_are_refused(tmp_path: Path) -> None:
    nodes = tuple(DiagramNode(n, (), "up", initial=n == 0, holds=(n, n + 1000)) for n in range(STATE_LIMIT + 1))
    with pytest.raises(DrawingError, match="wider bands"):
        write_diagram(StateDiagram("wide", nodes, ()), tmp_path / "wide.svg")


def test_png_has_300_dots_per_inch_and_the_size_of_the_picture(tmp_path: Path) -> None:
    write_diagram(lock_gate(), tmp_path / "lock.png", engine="own")
    write_diagram(lock_gate(), tmp_path / "lock.svg", engine="own")
    content = (tmp_path / "lock.png").read_bytes()
    assert content[:8] == b"\x89PNG\r\n\x1a\n"
    width, height = struct.unpack(">II", content[16:24])
    place = content.index(b"pHYs")
    per_metre = struct.unpack(">II", content[place + 4 : place + 12])
    assert per_metre == (11811, 11811)  # 300 dots per inch of 0.0254 m
    _, _, wide, high = (float(n) for n in ET.parse(tmp_path / "lock.svg").getroot().get("viewBox", "").split())
    assert (width, height) == pytest.approx((wide * 300 / 72, high * 300 / 72), abs=1.5)
    assert b"Four states of a lock gate drive" in content


def test_pdf_keeps_words_as_text_in_embedded_fonts_and_bears_no_date(tmp_path: Path) -> None:
    write_diagram(lock_gate(), tmp_path / "lock.pdf", engine="own")
    content = (tmp_path / "lock.pdf").read_bytes()
    assert content.startswith(b"%PDF")
    assert content.rstrip().endswith(b"%%EOF")
    assert b"/FontFile2" in content
    assert b"/Type3" not in content
    assert b"DejaVuSans" in content
    assert b"CreationDate" not in content
    streams = [
        zlib.decompress(part)
        for part in re.findall(rb"FlateDecode[^>]*>>\s*stream\r?\n(.*?)\r?\nendstream", content, re.S)
    ]
    page = max(streams, key=lambda stream: stream.count(b"BT"))
    assert page.count(b"BT") >= 40  # a text object for each line of words


def test_the_users_own_plot_settings_change_nothing(tmp_path: Path) -> None:
    import matplotlib

    write_diagram(lock_gate(), tmp_path / "plain.png", engine="own")
    with matplotlib.rc_context({"savefig.bbox": "tight", "lines.antialiased": False, "patch.antialiased": False}):
        write_diagram(lock_gate(), tmp_path / "other.png", engine="own")
        assert matplotlib.rcParams["savefig.bbox"] == "tight"
    assert (tmp_path / "plain.png").read_bytes() == (tmp_path / "other.png").read_bytes()


def test_a_character_that_no_font_draws_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(page_writer._Fonts, "_fallbacks", lambda fonts: [])
    drawn = write_diagram(named("水"), tmp_path / "water.png", engine="own")
    assert "U+6C34" in drawn.notes[-1]
    assert ".svg" in drawn.notes[-1]


def test_another_font_of_the_machine_draws_what_the_usual_one_lacks() -> None:
    # U+2336 is in the STIX face that comes with matplotlib, and not in DejaVu Sans.
    marks = (Shape(rectangle(0, 0, 100, 40), fill=PAPER), Words(10, 25, "a⌶b", 12))
    content, notes = page_bytes(Picture(100, 40, marks, "t", "d"), "pdf")
    assert notes == ()
    assert b"STIX" in content


def test_a_png_beyond_the_format_is_refused_and_pdf_is_offered() -> None:
    with pytest.raises(DrawingError, match=r"\.pdf"):
        page_bytes(Picture(20000, 100, (), "long", ""), "png")
