"""What changed between two specs is told in full, the verdicts first."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from markov.documents.changes import compare
from markov.documents.changes_words import changes_json, changes_text
from markov.documents.revision import Changes
from markov.documents.spec_lines import lines_in
from markov.model import Model

LOCK = """\
title: Lock
reference: {revision: A}
parameters:
  wear: {value: 200 per million hours, source: log book}
  cover: 0.95
units:
  drive: {failure_rate: wear, repair_time: 24 h, start_failure: 2 %}
groups:
  gate:
    members: [{unit: drive, count: 2}]
    required: 1
    redundancy: cold_standby
    switchover: {coverage: cover, uncovered: {outcome: manual_takeover, time: 0.75 h}}
crews:
  fitters: {size: 1, repairs: [drive]}
system: gate
mission: {time: 1 y}
targets:
  - {id: L-1, measure: steady_state_availability, at_least: 0.9998}
  - {id: L-2, measure: failures_per_year, at_most: 0.10}
"""

BY_HAND = """\
title: Lock by hand
states:
  fine: {up: true, initial: true}
  one left: {up: true}
  stuck: {up: false}
  none: {up: false}
transitions:
  - {from: fine, to: one left, rate: 0.0002 /h * 0.95 * 0.98}
  - {from: fine, to: none, rate: 0.0002 /h * 0.95 * 0.02}
  - {from: fine, to: stuck, rate: 0.0002 /h * 0.05}
  - {from: one left, to: none, rate: 0.0002 /h}
  - {from: one left, to: fine, mean_time: 24 h}
  - {from: none, to: one left, mean_time: 24 h}
  - {from: stuck, to: one left, rate: 0.98 / 0.75 h}
  - {from: stuck, to: none, rate: 0.02 / 0.75 h}
  - {from: stuck, to: fine, mean_time: 24 h}
mission: {time: 1 y}
targets:
  - {id: L-1, measure: steady_state_availability, at_least: 0.9998}
  - {id: L-2, measure: failures_per_year, at_most: 0.10}
"""

Read = Callable[[str], Model]
Compared = Callable[[str, str], Changes]


@pytest.fixture
def between(read: Read) -> Compared:
    """Hold two texts against each other."""

    def of(old: str, new: str) -> Changes:
        return compare(read(old), read(new), old_lines=lines_in(old), new_lines=lines_in(new))

    return of


def test_the_same_spec_says_that_nothing_changed(between: Compared) -> None:
    found = between(LOCK, LOCK)
    assert found.nothing_changed
    assert found.exit_status == 0
    assert "Nothing changed: the specs are the same to the last byte." in changes_text(found)


def test_values_written_differently_are_no_change(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("24 h", "1 d").replace("2 %", "0.02"))
    assert found.nothing_changed
    assert found.exit_status == 0
    assert {(key.words, key.same_value) for key in found.keys} == {
        ("units.drive.repair_time", True),
        ("units.drive.start_failure", True),
    }
    assert "written differently and mean the same" in changes_text(found)


def test_a_moved_entry_is_no_change(between: Compared) -> None:
    moved = LOCK.replace("  - {id: L-1, measure: steady_state_availability, at_least: 0.9998}\n", "") + (
        "  - {id: L-1, measure: steady_state_availability, at_least: 0.9998}\n"
    )
    found = between(LOCK, moved)
    assert found.nothing_changed
    assert not found.keys


def test_a_flipped_verdict_comes_first_and_sets_the_exit_status(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("200 per million", "140 per million"))
    assert [(each.id, each.turn) for each in found.verdicts] == [("L-2", "flipped"), ("L-1", "kept")]
    assert found.exit_status == 1
    told = changes_text(found)
    assert "1 verdict flipped: L-2 from missed to met" in told
    assert told.index("Verdicts") < told.index("Results") < told.index("Parameters") < told.index("Arrows")


def test_a_changed_parameter_shows_value_source_line_and_the_arrows_that_follow(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("200 per million hours, source: log book", "150 per million hours"))
    (change,) = found.parameters
    assert (change.name, change.fate, change.ratio) == ("wear", "changed", 0.75)
    assert (change.old_source, change.new_source) == ("log book", "unsupported")
    assert (change.line_old, change.line_new) == (4, 4)
    assert all(each.keeps_formula and each.moved == ("wear",) for each in found.arrows)
    assert len(found.arrows) == 4
    assert "4 arrows keep their formulas and follow wear" in changes_text(found)


def test_a_change_of_source_alone_changes_no_result(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("log book", "hearsay"))
    assert not found.nothing_changed
    assert not found.results
    assert not found.arrows
    assert "source: log book → hearsay" in changes_text(found)


def test_each_of_several_changes_is_tried_alone(between: Compared) -> None:
    new = LOCK.replace("200 per million", "160 per million").replace("cover: 0.95", "cover: 0.96")
    flip = between(LOCK, new).verdicts[0]
    assert flip.id == "L-2"
    assert flip.turn == "flipped"
    alone = {each.change: each for each in flip.alone}
    assert set(alone) == {"parameters.wear", "parameters.cover"}
    for change, (before, after) in {
        "parameters.wear": ("200 per million", "160 per million"),
        "parameters.cover": ("cover: 0.95", "cover: 0.96"),
    }.items():
        only = between(LOCK, LOCK.replace(before, after)).verdicts
        target = next(each for each in only if each.id == "L-2").new
        assert target is not None
        assert (alone[change].value, alone[change].verdict) == (target.result.value, target.verdict)


def test_a_loosened_limit_is_called_so(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("at_most: 0.10", "at_most: 0.20"))
    flip = found.verdicts[0]
    assert (flip.id, flip.turn, flip.old_limit_verdict) == ("L-2", "flipped", "missed")
    assert not found.results
    assert "under the old limit the new value would be missed" in changes_text(found)


def test_a_target_that_is_gone_is_not_passed_over(between: Compared) -> None:
    without = LOCK.replace("  - {id: L-2, measure: failures_per_year, at_most: 0.10}\n", "")
    found = between(LOCK, without)
    assert found.verdicts[0].turn == "removed"
    assert found.exit_status == 3
    assert "L-2: gone" in changes_text(found)
    assert between(without, LOCK).exit_status == 0


def test_a_verdict_that_becomes_undecided_is_status_3(between: Compared) -> None:
    decided = LOCK.replace("failures_per_year, at_most: 0.10", "reliability, at: 100 h, at_least: 0.5")
    endless = (
        LOCK.replace("failures_per_year, at_most: 0.10", "mean_up_time, at_least: 1 h")
        .replace(", repair_time: 24 h", "")
        .replace("crews:\n  fitters: {size: 1, repairs: [drive]}\n", "")
    )
    found = between(decided, endless)
    assert {each.id: each.turn for each in found.verdicts}["L-2"] == "unsettled"


def test_a_second_fitter_changes_one_arrow_and_its_formula(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("size: 1", "size: 2"))
    (arrow,) = found.arrows
    assert (arrow.old_formula, arrow.new_formula, arrow.relative) == ("μ(drive)", "2·μ(drive)", 1.0)
    assert [key.words for key in found.keys] == ["crews.fitters.size"]
    assert [key.line_new for key in found.keys] == [15]


def test_a_third_drive_brings_states_and_arrows(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("count: 2", "count: 3"))
    assert found.only_new
    assert any(each.fate == "added" for each in found.arrows)
    assert "groups.gate.members: unit drive, count 2 → unit drive, count 3" in changes_text(found)


def test_a_choice_that_is_now_said_leaves_the_unsaid(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("repair_time: 24 h", "repair_time: 24 h, logistic_delay: 0 h"))
    assert [each.split(":")[0] for each in found.assumptions.removed] == ["units.drive.logistic_delay"]
    assert not found.assumptions.added
    assert not found.results


def test_a_new_name_is_told_as_a_new_name(between: Compared) -> None:
    new = LOCK.replace("  drive: {", "  motor: {").replace("unit: drive", "unit: motor").replace("[drive]", "[motor]")
    found = between(LOCK, new)
    assert [(key.words, key.new) for key in found.keys if key.renamed] == [("units.drive", "motor")]
    assert not found.results
    assert not found.arrows
    assert not found.only_old
    assert not found.only_new
    assert not found.assumptions
    assert {pair.basis for pair in found.pairs} == {"all rates"}
    assert "units.drive: now called motor, otherwise the same" in changes_text(found)


def test_a_year_of_another_length_is_seen_in_values_written_as_before(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("parameters:", "year: 8766 h\nparameters:"))
    keys = {key.words: key for key in found.keys}
    assert keys["mission.time"].old == keys["mission.time"].new == "1 y"
    assert not keys["mission.time"].same_value
    assert "written as before and worth something else" in changes_text(found)


def test_a_right_hand_written_chain_agrees_with_the_generated_one(between: Compared) -> None:
    for pair in ((BY_HAND, LOCK), (LOCK, BY_HAND)):
        found = between(*pair)
        assert found.nothing_changed
        assert found.exit_status == 0
        assert len(found.pairs) == 4
        assert "Nothing differs" in changes_text(found)
    names = {pair.old[0][1]: pair.new[0][1] for pair in between(BY_HAND, LOCK).pairs}
    assert names == {
        "fine": "drive: 1 on duty + 1 waiting",
        "one left": "drive: 1 on duty + 1 failed",
        "stuck": "drive: 1 waiting + 1 failed, uncovered",
        "none": "drive: 2 failed",
    }


@pytest.mark.parametrize(
    ("right", "wrong", "ends"),
    [
        ("0.0002 /h * 0.05", "0.0002 /h * 0.5", ("fine", "stuck")),
        (
            "from: one left, to: none, rate: 0.0002 /h",
            "from: one left, to: none, rate: 0.0004 /h",
            ("one left", "none"),
        ),
        ("  - {from: stuck, to: fine, mean_time: 24 h}\n", "", ("stuck", "fine")),
    ],
)
def test_a_mistake_in_a_hand_written_chain_is_the_only_arrow_told(
    between: Compared, right: str, wrong: str, ends: tuple[str, str]
) -> None:
    assert right in BY_HAND
    found = between(LOCK, BY_HAND.replace(right, wrong))
    assert found.exit_status == 1
    assert not found.only_old
    assert not found.only_new
    (arrow,) = found.arrows
    called = {pair.old[0][1]: pair.new[0][1] for pair in found.pairs}
    told = (arrow.source_name, arrow.target_name)
    assert (tuple(called[name] for name in told) if arrow.fate == "removed" else told) == ends


def test_a_state_marked_up_by_mistake_is_told(between: Compared) -> None:
    found = between(LOCK, BY_HAND.replace("stuck: {up: false}", "stuck: {up: true}"))
    assert found.exit_status == 1
    (pair,) = [pair for pair in found.pairs if pair.differences]
    assert pair.new[0][1] == "stuck"
    assert pair.differences == ("down before, up now",)
    assert not found.arrows


def test_a_forgotten_state_is_listed_without_a_partner(between: Compared) -> None:
    lines = [line for line in BY_HAND.splitlines() if "stuck" not in line]
    found = between(LOCK, "\n".join(lines) + "\n")
    assert [name for _, name in found.only_old] == ["drive: 1 waiting + 1 failed, uncovered"]
    assert not found.only_new
    assert found.exit_status == 1


def test_arrows_of_phases_are_compared_phase_by_phase(checkout: Path, between: Compared) -> None:
    text = (checkout / "specs" / "polar_telescope_cooling.yaml").read_text(encoding="utf-8")
    found = between(text, text.replace("summer_load: {value: 1.2", "summer_load: {value: 1.3"))
    assert found.arrows
    assert {each.phases for each in found.arrows} == {("summer",)}
    assert all(each.moved == ("summer_load",) for each in found.arrows)
    assert any("fixed instants" in note for note in found.notes)


def test_json_holds_everything_and_agrees_with_the_verdict(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("200 per million", "140 per million"))
    told = json.loads(changes_json(found))
    assert told["exit_status"] == 1
    assert told["nothing_changed"] is False
    assert told["verdicts"][0]["turn"] == "flipped"
    assert len(told["results"]) == len(found.results)
    assert len(told["arrows"]) == len(found.arrows)
    failures = next(each for each in told["results"] if each["measure"] == "failures_per_year")
    assert failures["trend"] == "better"
    assert failures["old"]["lower"] <= failures["old"]["value"] <= failures["old"]["upper"]


def test_the_same_bytes_on_a_rerun(between: Compared) -> None:
    new = LOCK.replace("count: 2", "count: 3").replace("0.95", "0.9")
    assert changes_text(between(LOCK, new)) == changes_text(between(LOCK, new))
    assert changes_json(between(LOCK, new)) == changes_json(between(LOCK, new))


def test_hostile_names_come_out_whole_and_on_their_line(between: Compared) -> None:
    name = "=cmd|' /C'!A0 <b>&$_x שלום" + "é" * 90
    new = LOCK.replace("  drive: {", f'  "{name}": {{').replace("unit: drive", f'unit: "{name}"')
    found = between(LOCK, new.replace("[drive]", f'["{name}"]').replace("0.95", "0.9"))
    told = changes_text(found)
    assert name in told.replace("\n      ", " ").replace("\n    ", " ")
    assert all(character.isprintable() or character == "\n" for character in told)
    assert any(each["new"] == name for each in json.loads(changes_json(found))["keys"])


def test_text_that_would_steer_a_terminal_is_spelled_out(between: Compared) -> None:
    found = between(LOCK, LOCK.replace("source: log book", 'source: "a\\u202eb\\nc"'))
    assert "a\\u202eb\\nc" in changes_text(found)
