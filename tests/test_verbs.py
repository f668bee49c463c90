"""The public verbs from Python, as the command line has them."""

from fractions import Fraction
from pathlib import Path

import pytest

import markov


@pytest.fixture
def lock(checkout: Path) -> Path:
    return checkout / "specs" / "harbour_lock.yaml"


def test_a_file_a_path_and_a_model_give_the_same_solution(lock: Path) -> None:
    solutions = [markov.solve(source) for source in (str(lock), lock, markov.read(lock))]
    assert solutions[0].results == solutions[1].results == solutions[2].results
    assert solutions[0].exit_status == 1
    assert isinstance(solutions[0], markov.Solution)


def test_times_are_text_with_a_unit_or_hours(lock: Path) -> None:
    solution = markov.solve(lock, at=["2 d", 48, 48.0, Fraction(48), "3 h"])
    asked = {result.at_hours for result in solution.results if result.measure == "unreliability"}
    assert asked == {8760, 48, 3}
    assert solution.result("unreliability", at_hours=48).value > solution.result("unreliability", at_hours=3).value


@pytest.mark.parametrize(
    ("time", "why"),
    [("48", "not a time"), ("1 /h", "not a time"), ("soon", "soon"), (-1, "not negative"), (float("inf"), "finite")],
)
def test_a_time_that_is_none_is_refused(lock: Path, time: object, why: str) -> None:
    with pytest.raises(markov.UsageError, match=why):
        markov.solve(lock, at=[time])


def test_a_result_that_is_not_there_is_a_key_error(lock: Path) -> None:
    solution = markov.solve(lock)
    with pytest.raises(KeyError, match="no result 'pressure' of the system"):
        solution.result("pressure")
    with pytest.raises(KeyError):
        solution.result("unreliability", at_hours=1)


def test_check_solves_nothing_and_tells_the_size(lock: Path) -> None:
    found = markov.check(lock)
    assert (found.size.states, found.size.transitions, found.size.is_exact) == (4, 9, True)
    assert not hasattr(found, "results")


def test_draw_and_draft_never_write_over_a_file(lock: Path, tmp_path: Path) -> None:
    spec = markov.draft(tmp_path / "plant.yaml")
    assert markov.solve(spec).targets
    picture = markov.draw(lock, tmp_path / "lock.svg").path
    before = (spec.read_bytes(), picture.read_bytes())
    for write in (lambda: markov.draft(spec), lambda: markov.draw(lock, picture)):
        with pytest.raises(markov.UsageError, match="exists"):
            write()
    assert (spec.read_bytes(), picture.read_bytes()) == before
    markov.draw(lock, picture, overwrite=True)
    assert picture.read_bytes() == before[1]  # the same bytes on a rerun


def test_a_draft_into_a_folder_that_is_not_there_says_so(tmp_path: Path) -> None:
    with pytest.raises(markov.UsageError, match="no folder"):
        markov.draft(tmp_path / "nowhere" / "plant.yaml")


def test_a_solution_shows_itself_in_a_notebook(lock: Path) -> None:
    html = markov.solve(lock)._repr_html_()
    assert html.count("<table>") == 5  # targets, results; gains, what limits them, costs
    assert "LOCK-2" in html
    assert "licensed practice" in html
