"""Markdown that shows every name as it is."""

from __future__ import annotations

import pytest
from markdown_it import MarkdownIt
from markdown_it.token import Token

from markov.documents.markdown import write_markdown
from markov.documents.tree import Column, Document, Items, Paragraph, Row, Section, Span, Table, plain
from markov.output.lettering import legible
from tests.documents.sample import HOSTILE, sample


def tokens(document: Document) -> list[Token]:
    text = write_markdown(document)["report.md"].decode()
    return MarkdownIt("commonmark").enable(["table", "strikethrough"]).parse(text)


def shown(token: Token) -> str:
    """What a reader sees of a run of text."""
    return "".join(
        each.content for each in token.children or () if each.type in ("text", "code_inline", "text_special")
    )


def inline(document: Document) -> list[str]:
    return [shown(token) for token in tokens(document) if token.type == "inline"]


def squeezed(text: str) -> str:
    return " ".join(text.split())


def tags(document: Document) -> set[str]:
    """HTML that a reader would run: nothing but empty anchors is meant to be there."""
    found = set()
    for token in tokens(document):
        for each in (token, *(token.children or ())):
            if each.type in ("html_inline", "html_block"):
                found.add(each.content.strip())
    return found


def one_table(name: str) -> Document:
    row = Row((plain(name), (Span(name, "code"),), (Span(name, "strong"),)))
    columns = (Column("Plain"), Column("Code"), Column("Strong"))
    return Document("T", (), (Table("t", "Names", columns, (row,)),))


@pytest.mark.parametrize("name", HOSTILE.values(), ids=HOSTILE.keys())
def test_a_hostile_name_in_a_table_is_shown_as_it_is(name: str) -> None:
    cells = inline(one_table(name))[-3:]
    assert [squeezed(cell) for cell in cells] == [squeezed(legible(name))] * 3
    assert not tags(one_table(name)) - {""}


@pytest.mark.parametrize("name", HOSTILE.values(), ids=HOSTILE.keys())
def test_a_hostile_name_begins_a_paragraph_an_item_and_a_heading(name: str) -> None:
    document = Document(name, ((name, name),), (Section(name, (Paragraph(plain(name)), Items((plain(name),)))),))
    found = inline(document)
    want = squeezed(legible(name))
    assert [squeezed(found[0]), squeezed(found[2]).removeprefix("1 ")] == [want, want]
    assert [squeezed(text) for text in found[3:]] == [want, want]
    kinds = [token.type for token in tokens(document)]
    assert kinds.count("heading_open") == 2
    assert kinds.count("list_item_open") == 2
    assert not {"blockquote_open", "fence", "code_block", "hr", "ordered_list_open"} & set(kinds)


@pytest.mark.parametrize(
    "text", ["1. first", "2) second", "- third", "+ fourth", "=== five", "--- six", "    seven", "> 8"]
)
def test_text_that_looks_like_a_list_stays_a_paragraph(text: str) -> None:
    document = Document("T", (), (Paragraph(plain(text)),))
    kinds = [token.type for token in tokens(document)]
    assert kinds == ["heading_open", "inline", "heading_close", "paragraph_open", "inline", "paragraph_close"]
    assert squeezed(inline(document)[1]) == squeezed(text)


def test_the_whole_sample_has_its_tables_links_and_pictures() -> None:
    document = sample()
    files = write_markdown(document, name="plant")
    text = files["plant.md"].decode()
    assert sorted(files) == ["plant-course.svg", "plant-states.svg", "plant.md"]
    assert "](plant-states.svg)" in text
    assert "[Table 2](#transitions)" in text
    kinds = [token.type for token in tokens(document)]
    assert kinds.count("table_open") == len(list(document.tables()))
    assert kinds.count("tr_open") == sum(len(table.rows) + 1 for table in document.tables())
    assert all(tag.startswith('<a id="') or tag == "</a>" for tag in tags(document))
    for target in ("transitions", "state-3", "assumption-2"):
        assert f'<a id="{target}"></a>' in text


def test_the_same_document_gives_the_same_bytes() -> None:
    assert write_markdown(sample()) == write_markdown(sample())
