"""The HTML page: one file, nothing fetched, every name as it is."""

import base64
import dataclasses
import re
from html.parser import HTMLParser
from itertools import pairwise

import pytest

from markov.documents.html import write_html
from markov.documents.tree import Document, Figure, Paragraph, Row, Section, Span, Table, plain
from markov.errors import DrawingError, UsageError
from markov.output.lettering import legible
from tests.documents.sample import HOSTILE, hostile_table, picture, sample, transitions

VOID = {"meta", "input", "col", "img", "wbr", "br", "link"}


class Page(HTMLParser):
    """Reads a page strictly: what is opened is closed in order, and an identity is used once."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[tuple[str, dict[str, str | None]]] = []
        self.found: list[tuple[str, dict[str, str | None]]] = []
        self.cells: list[str] = []
        self.words: dict[str, list[str]] = {}
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        names = [name for name, _ in attrs]
        assert len(names) == len(set(names)), f"an attribute twice in <{tag}>"
        self.found.append((tag, dict(attrs)))
        if tag in VOID:
            return
        self.open.append((tag, dict(attrs)))
        self.words.setdefault(tag, []).append("")
        if tag in ("td", "th"):
            self.cells.append("")

    def handle_endtag(self, tag: str) -> None:
        assert self.open[-1][0] == tag, f"</{tag}> closes <{self.open[-1][0]}>"
        self.open.pop()

    def handle_data(self, data: str) -> None:
        for tag in {tag for tag, _ in self.open}:
            self.words[tag][-1] += data
        if any(tag in ("td", "th") for tag, _ in self.open):
            self.cells[-1] += data

    def attributes(self, name: str) -> list[str]:
        return [attrs[name] or "" for _, attrs in self.found if name in attrs]


@pytest.fixture(scope="module")
def text() -> str:
    return write_html(sample(states=6))


@pytest.fixture(scope="module")
def page(text: str) -> Page:
    return Page(text)


def test_every_tag_is_closed_in_order_and_every_identity_is_used_once(page: Page) -> None:
    identities = page.attributes("id")
    assert len(identities) > 20
    assert len(identities) == len(set(identities))


def test_every_link_leads_to_a_place_in_the_page(page: Page) -> None:
    links = page.attributes("href")
    assert len(links) > 20
    assert {link.removeprefix("#") for link in links} <= set(page.attributes("id"))


def test_nothing_is_fetched_from_outside(text: str, page: Page) -> None:
    assert "default-src 'none'" in text
    sources = page.attributes("src")
    assert sources
    assert all(source.startswith("data:image/svg+xml;base64,") for source in sources)
    assert not [tag for tag, _ in page.found if tag in ("link", "iframe", "object", "embed", "base")]
    outside_pictures = re.sub(r"data:[^\"]*", "", text)
    assert "http" not in outside_pictures.replace("http-equiv", "")
    assert "@import" not in text


def test_the_only_script_is_the_one_that_the_policy_names(text: str, page: Page) -> None:
    assert [tag for tag, _ in page.found].count("script") == 1
    assert not [name for _, attrs in page.found for name in attrs if name.startswith("on")]


@pytest.mark.parametrize("kind", HOSTILE)
def test_hostile_names_come_out_as_they_are(kind: str, page: Page) -> None:
    at = page.cells.index(kind)
    assert page.cells[at + 1 : at + 3] == [legible(HOSTILE[kind])] * 2


@pytest.mark.parametrize("kind", HOSTILE)
def test_hostile_names_come_out_as_they_are_wherever_text_stands(kind: str) -> None:
    name = HOSTILE[kind]
    figure = dataclasses.replace(picture(), caption=name, alt=name)
    table = dataclasses.replace(hostile_table(), caption=name)
    page = Page(write_html(Document(name, ((name, name),), (Section(name, (Paragraph(plain(name)), figure, table)),))))
    shown = legible(name)
    assert page.words["h1"] == page.words["dt"] == page.words["dd"] == [shown]
    assert page.words["title"][0] == shown
    assert page.words["h2"][1] == f"1{shown}"
    assert page.words["p"] == [shown]
    assert page.words["figcaption"] == [f"Figure 1{shown}"]
    assert page.words["caption"] == [f"Table 1{shown}"]
    assert shown in page.attributes("aria-label")


def test_right_to_left_names_stand_apart_from_what_is_around_them(text: str) -> None:
    assert "<bdi>משאבה 3 (ראשית)</bdi> up" in text


def test_headings_go_down_without_a_gap(page: Page) -> None:
    levels = [int(tag[1]) for tag, _ in page.found if re.fullmatch("h[1-6]", tag)]
    assert levels[0] == 1
    assert all(after <= before + 1 for before, after in pairwise(levels))


def test_tables_tell_which_cells_are_headings(page: Page) -> None:
    scopes = [attrs.get("scope") for tag, attrs in page.found if tag == "th"]
    assert set(scopes) == {"col", "row"}
    assert [tag for tag, _ in page.found].count("caption") == [tag for tag, _ in page.found].count("table") == 3


def test_pictures_say_what_they_show(page: Page) -> None:
    assert page.attributes("alt") == ["A box with words"]
    assert 'States & arrows: "all good" <first>' in page.attributes("aria-label")


def test_a_state_in_the_picture_is_a_link_to_its_row(page: Page) -> None:
    targets = [attrs for tag, attrs in page.found if tag == "a" and "data-target" in attrs]
    assert [attrs["href"] for attrs in targets] == [f"#state-{n}" for n in range(1, 7)]
    assert targets[2]["aria-label"] == "3 up"


def test_a_part_that_leads_nowhere_is_plain() -> None:
    page = Page(write_html(Document("Title", (), (picture(3),))))
    assert page.attributes("data-target") == []


def test_two_pictures_with_the_same_identities_do_not_clash() -> None:
    one = dataclasses.replace(picture(), svg=picture().svg.replace("<path", '<path id="box"', 1))
    page = Page(write_html(Document("Title", (), (one, dataclasses.replace(one, anchor="")))))
    assert [identity for identity in page.attributes("id") if identity.endswith("box")] == ["f1-box", "f2-box"]


@pytest.mark.parametrize(
    "bad",
    [
        "<script>alert(1)</script>",
        "<style>* {color: red}</style>",
        '<rect onclick="alert(1)"/>',
        '<rect href="#x"/>',
        '<rect fill="url(#x)"/>',
        "<foreignObject/>",
        "<unclosed>",
    ],
)
def test_a_picture_to_click_holds_shapes_and_words_alone(bad: str) -> None:
    figure = dataclasses.replace(picture(), svg=picture().svg.replace("</svg>", f"{bad}</svg>"))
    with pytest.raises(DrawingError):
        write_html(Document("Title", (), (figure,)))


def test_a_picture_without_parts_to_click_stands_apart_whatever_it_holds() -> None:
    svg = '<svg xmlns="http://www.w3.org/2000/svg"><style>* {color: red}</style></svg>'
    figure = Figure("plot", "Plot", "a plot", svg, b"", b"", 10.0, 10.0)
    page = Page(write_html(Document("Title", (), (figure,))))
    source = page.attributes("src")[0].removeprefix("data:image/svg+xml;base64,")
    assert base64.b64decode(source).decode() == svg


def test_verdicts_are_told_apart_by_more_than_colour(page: Page) -> None:
    looks = [attrs["class"] for _, attrs in page.found if (attrs.get("class") or "").startswith("verdict")]
    assert looks == ["verdict met", "verdict missed", "verdict undecided", "verdict cannot-occur"]


def test_decimal_points_stand_below_each_other() -> None:
    page = Page(write_html(Document("Title", (), (transitions(12),))))
    values = [cell for cell in page.cells if re.fullmatch(r"\s*[\d.]+(e-4)?", cell) and "." in cell]
    assert len(values) == 24
    assert len({value.index(".") for value in values}) == 1


def test_the_same_document_gives_the_same_bytes(text: str) -> None:
    assert write_html(sample(states=6)) == text


def test_three_hundred_states_stay_below_three_megabytes() -> None:
    assert len(write_html(sample(states=300)).encode()) < 3e6


def test_an_anchor_used_twice_is_refused() -> None:
    rows = (Row((plain("1"),), "here"), Row((plain("2"),), "here"))
    table = dataclasses.replace(hostile_table(), columns=hostile_table().columns[:1], rows=rows)
    with pytest.raises(UsageError, match="used twice"):
        write_html(Document("Title", (), (table,)))


def test_an_anchor_with_markup_is_refused() -> None:
    with pytest.raises(UsageError, match="anchor"):
        write_html(Document("Title", (), (Section("Heading", (), anchor='a"><script>'),)))


def test_a_link_without_text_says_what_it_leads_to() -> None:
    blocks = (
        Paragraph((Span("", "link", "names"), Span(" "), Span("", "link", "deep"))),
        Section("One", (Section("Two", (hostile_table(),), anchor="deep"),)),
    )
    page = Page(write_html(Document("Title", (), blocks)))
    assert page.words["p"] == ["Table 1 Section 1.1"]


def test_an_empty_document_and_an_empty_table_are_pages_too() -> None:
    empty = Table("none", "Nothing", hostile_table().columns, ())
    assert Page(write_html(Document("Title", (), (empty,)))).words["caption"] == ["Table 1Nothing"]
