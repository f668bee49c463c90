"""Every spec in specs/ is an example and a test: it prints what it printed when it was last read through."""

import importlib.util
import json
from functools import cache
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


@cache
def solution(path: Path) -> markov.Solution:
    return markov.solve(path)


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.stem)
def test_an_example_prints_what_is_expected(path: Path) -> None:
    expected = (renew.EXPECTED / f"{path.stem}.txt").read_text(encoding="utf-8")
    assert renew.told(solution(path)) == expected


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.stem)
def test_every_number_of_an_example_is_proven_to_twelve_digits(path: Path) -> None:
    results = solution(path).results
    assert results
    for result in results:
        assert result.value is not None, (result.measure, result.reason)
        assert result.lower <= result.value <= result.upper
        assert result.upper - result.lower <= 1e-12 * abs(result.value), result


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.stem)
def test_an_example_has_one_target_met_and_one_missed(path: Path) -> None:
    verdicts = {target.verdict for target in solution(path).targets}
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
