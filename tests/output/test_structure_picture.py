"""The picture of what must deliver: every name, every rule, squares for items, one picture whatever the nesting."""

import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

from markov.model import Model
from markov.output.page_writer import page_bytes
from markov.output.picture import INK, PAPER, Picture, Shape, Words
from markov.output.structure_picture import structure_picture
from markov.output.svg_writer import svg_text
from markov.spec import read, read_text

STATION = """
title: Pumping station
units:
  pump: {failure_rate: 50 per million hours, repair_time: 24 h}
  mains: {failure_rate: 100 per million hours}
  diesel: {failure_rate: 800 per million hours}
  gate: {failure_rate: 5 per million hours}
  alarm: {failure_rate: 5 per million hours}
groups:
  pumps: {members: [{unit: pump, count: 3}], required: 2, redundancy: cold_standby}
  supply: {members: [mains, {unit: diesel, count: 2}], required: 1, redundancy: cold_standby}
crews: {fitters: {size: 1, repairs: [pump]}}
system: {all_of: [pumps, {any_of: [supply, {at_least: 2, of: [gate, alarm, supply]}]}]}
"""


def pictured(text: str) -> Picture:
    picture = structure_picture(read_text(text, "spec"))
    assert picture is not None
    return picture


def words_of(picture: Picture) -> list[str]:
    return [mark.text for mark in picture.marks if isinstance(mark, Words)]


def squares(picture: Picture) -> list[str]:
    """Return the fill of every small square of items."""
    return [mark.fill or "" for mark in picture.marks if isinstance(mark, Shape) and mark.width == 0.9]


def test_every_criterion_says_in_words_how_many_are_needed() -> None:
    words = words_of(pictured(STATION))
    assert [word for word in words if "these" in word] == [
        "all of these",
        "any one of these 2",
        "at least 2 of these 3",
    ]


def test_groups_and_units_stand_with_members_and_what_they_need() -> None:
    words = words_of(pictured(STATION))
    assert {"pumps", "supply", "gate", "alarm", "3 × pump", "mains", "2 × diesel"} <= set(words)
    assert "needs 2 of 3, cold standby" in words
    assert "repaired by fitters (1)" in words
    assert words.count("supply") == 2


def test_full_squares_carry_duty_and_open_ones_wait() -> None:
    text = (
        "units: {a: {failure_rate: 1 /h}}\ngroups: {g: {members: [{unit: a, count: 3}], required: 2, redundancy: R}}\n"
    )
    cold = pictured(f"{text.replace('redundancy: R', 'redundancy: cold_standby')}system: g\n")
    assert squares(cold) == [INK, INK, PAPER, INK, PAPER]  # the last two are the key
    active = pictured(f"{text.replace('redundancy: R', 'redundancy: active')}system: g\n")
    assert squares(active) == [INK, INK, INK, INK]


def test_a_chain_written_by_hand_has_none(checkout: Path) -> None:
    assert structure_picture(read(checkout / "specs" / "ferry_ramp_control.yaml")) is None


def test_the_alternative_text_tells_the_whole_criterion() -> None:
    assert pictured(STATION).description == (
        "all of these: pumps (2 of 3), (any one of these 2: supply (1 of 3), "
        "(at least 2 of these 3: gate, alarm, supply (1 of 3)))."
    )


def test_criteria_that_differ_between_phases_are_both_drawn() -> None:
    text = (
        "units: {a: {failure_rate: 1e-4 /h}, b: {failure_rate: 1e-4 /h}}\nsystem: {any_of: [a, b]}\n"
        "phases: [{name: idle, duration: 10 h}, {name: busy, duration: 5 h, system: {all_of: [a, b]}, repeat: true}]\n"
    )
    words = words_of(pictured(text))
    assert {"in idle", "in busy", "all of these", "any one of these 2"} <= set(words)


def test_it_fits_the_width_of_a_page_and_keeps_words_inside(checkout: Path) -> None:
    from markov.output.lettering import text_width

    for model in (read_text(STATION, "spec"), *(read(path) for path in sorted((checkout / "specs").glob("*.yaml")))):
        picture = structure_picture(model)
        if picture is None:
            continue
        assert picture.width <= 505
        for mark in picture.marks:
            if isinstance(mark, Words):
                assert mark.size >= 8.0
                assert mark.x + text_width(mark.text, mark.size, bold=mark.bold) <= picture.width
                assert 0 < mark.y < picture.height


@pytest.mark.parametrize("name", ["a|b<c>&d", "\\alpha{$x$}", "=1+1", "水泵站", "x" * 120])
def test_hostile_names_come_out_right_and_the_same_on_a_rerun(name: str) -> None:
    model = Model.from_mapping({"units": {name: {"failure_rate": "1 /h"}}, "system": name})
    picture = structure_picture(model)
    assert picture is not None
    svg = svg_text(picture)
    drawn = "".join(
        element.text or "" for element in ET.fromstring(svg.encode()).iter("{http://www.w3.org/2000/svg}text")
    )
    assert name in drawn
    again = structure_picture(model)
    assert again is not None
    assert svg_text(again) == svg
    assert page_bytes(again, "pdf")[0] == page_bytes(picture, "pdf")[0]
