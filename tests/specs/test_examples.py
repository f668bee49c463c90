"""Every spec in specs/ is an example and a test: it prints what it printed when it was last read through."""

import importlib.util
import json
from pathlib import Path

import pytest

import markov
from markov.cli import main

ROOT = Path(__file__).resolve().parent.parent.parent
SPECS = sorted((ROOT / "specs").glob("*.yaml"))


def _renew():
    spec = importlib.util.spec_from_file_location("renew", Path(__file__).with_name("renew.py"))
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


renew = _renew()


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.stem)
def test_an_example_prints_what_is_expected(path: Path) -> None:
    expected = (renew.EXPECTED / f"{path.stem}.txt").read_text(encoding="utf-8")
    assert renew.told(path) == expected


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.stem)
def test_every_number_of_an_example_is_proven_to_twelve_digits(path: Path) -> None:
    solution = markov.solve(path)
    assert solution.results
    for result in solution.results:
        assert result.value is not None, (result.measure, result.reason)
        assert result.lower <= result.value <= result.upper
        assert result.upper - result.lower <= 1e-12 * abs(result.value), result


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.stem)
def test_an_example_has_one_target_met_and_one_missed(path: Path) -> None:
    verdicts = {target.verdict for target in markov.solve(path).targets}
    assert "met" in verdicts
    assert "missed" in verdicts


def test_nothing_expected_is_left_over() -> None:
    assert {path.stem for path in renew.EXPECTED.glob("*.txt")} == {path.stem for path in SPECS}


def test_the_lock_gives_the_values_worked_out_by_hand(capsys: pytest.CaptureFixture[str]) -> None:
    # Four states by hand: duty and standby; duty and failed; uncovered; both failed (own derivation, printed digits).
    status = main(["solve", str(ROOT / "specs" / "harbour_lock.yaml"), "--json"])
    found = json.loads(capsys.readouterr().out)
    value = {each["measure"]: each["value"] for each in found["results"]}
    assert status == 1
    assert (found["states"], found["transitions"]) == (4, 9)
    assert f"{value['steady_state_availability']:.9f}" == "0.999874485"
    assert f"{value['failures_per_year']:.6f}" == "0.128652"
    assert f"{value['mean_time_to_first_failure']:.1f}" == "68378.6"
    assert f"{value['mean_down_time']:.5f}" == "8.54640"
    assert [target["verdict"] for target in found["targets"]] == ["met", "missed"]


def _interlocking(coverage: str, channels: int) -> float:
    text = (ROOT / "specs" / "mountain_interlocking.yaml").read_text(encoding="utf-8")
    text = text.replace("value: 0.9999,", f"value: {coverage},").replace("count: 3", f"count: {channels}")
    from markov.spec import read_text

    return markov.solve(read_text(text, "variant")).result("failure_frequency").value


def test_a_fourth_channel_makes_the_interlocking_worse() -> None:
    # 3.8e-13, 3.0e-9 and 4.0e-9 per hour: common practice of the trade, no source.
    assert f"{_interlocking('1', 3):.1e}" == "3.8e-13"
    assert f"{_interlocking('0.9999', 3):.1e}" == "3.0e-09"
    assert f"{_interlocking('0.9999', 4):.1e}" == "4.0e-09"
    assert _interlocking("0.99999", 3) < 1e-9 < _interlocking("0.9999", 3)
