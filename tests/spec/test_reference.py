"""The reference of the language says what the reader does."""

import re

import pytest

from markov import spec
from markov.measures import MEASURES
from markov.model.content import Content
from markov.spec.reference import PARTS, filled, key_tables, measure_table


@pytest.fixture
def page(checkout):
    return (checkout / "specs" / "README.md").read_text(encoding="utf-8")


def test_tables_of_the_reference_follow_the_model(page):
    assert filled(page) == page
    assert key_tables() in page
    assert measure_table() in page


def test_every_key_and_measure_is_in_the_tables():
    tables = key_tables()
    for _, part in PARTS:
        assert all(f"| `{key}` |" in tables for key in part.all_keys())
    assert all(f"| `{name}` |" in measure_table() for name in MEASURES)


def test_keys_of_later_versions_are_named(page):
    later = page[page.index("## Not built yet") :]
    unbuilt = {key for _, part in PARTS for key in part.unbuilt} | set(Content.unbuilt)
    assert {key for key in unbuilt if f"`{key}`" not in later} == set()


def test_specs_in_the_reference_are_read(page):
    examples = re.findall(r"```yaml\n(.*?)```", page, re.DOTALL)
    assert len(examples) == 3
    for example in examples:
        noted = [text for text in spec.read_text(example).warnings if not text.startswith("Unsupported")]
        assert tuple(noted) in ((), _NO_MISSION)


_NO_MISSION = ("No `mission`: measures that need a time are given only for times that are asked.",)


def test_python_in_the_reference_runs(page):
    (example,) = re.findall(r"```python\n(.*?)```", page, re.DOTALL)
    names: dict[str, object] = {}
    exec(example, names)
    assert names["same_keys"].units["lamp"].failure_hourly > 0


def test_chapters_are_linked(page):
    titles = re.findall(r"^## (.+)$", page, re.MULTILINE)
    links = re.findall(r"^\d+\. \[(.+)\]\(#(.+)\)$", page, re.MULTILINE)
    assert [title for title, _ in links] == titles
    for title, anchor in links:
        assert anchor == re.sub(r"[^\w -]", "", title.lower()).replace(" ", "-")
