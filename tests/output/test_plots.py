"""Plots: values where they belong, limits drawn in, teeth of tests, bars, the same bytes again."""

from fractions import Fraction
from pathlib import Path

import pytest

from markov.errors import IllPosed, UsageError
from markov.evaluation import solve_model
from markov.model import Model
from markov.output import axes
from markov.output.axes import Bar, Chart, Curve, Level, Stretch, bars_picture, chart_picture
from markov.output.draw_plot import SUBJECTS, draw_plot
from markov.output.page_writer import page_bytes
from markov.output.picture import Picture, Shape, Words
from markov.output.plots import PLOTS, Plots
from markov.output.svg_writer import svg_text
from markov.spec import read, read_text

TESTED = """
title: Tested valve
units: {valve: {failure_rate: 1e-5 /h, repair_time: 8 h, detected: 0 %}}
tests: {trial: {of: valve, interval: 1000 h}}
system: valve
mission: {time: 3000 h}
targets: [{id: V-1, measure: pfd_average, at_most: 1e-2}]
"""


def plots(text: str) -> Plots:
    model = read_text(text, "spec")
    return Plots(model, solve_model(model))


def words_of(picture: Picture) -> list[str]:
    return [mark.text for mark in picture.marks if isinstance(mark, Words)]


def drawn_charts(made: Plots, monkeypatch: pytest.MonkeyPatch, what: str) -> Chart:
    """Return the chart behind a plot."""
    found: list[Chart] = []

    def keep(chart: Chart) -> Picture:
        found.append(chart)
        return chart_picture(chart)

    monkeypatch.setattr("markov.output.plots.chart_picture", keep)
    assert PLOTS[what](made) is not None
    return found[0]


def test_reliability_runs_from_one_to_its_value_at_the_mission_time(monkeypatch: pytest.MonkeyPatch) -> None:
    made = plots("units: {a: {failure_rate: 1e-4 /h}}\nsystem: a\nmission: {time: 5000 h}\n")
    (curve,) = drawn_charts(made, monkeypatch, "reliability").curves
    assert curve.points[0] == (0.0, 1.0)
    assert curve.points[-1] == (5000.0, pytest.approx(0.6065306597126334))
    assert len(curve.points) == 33


def test_a_limit_on_reliability_stands_as_its_complement_on_the_logarithmic_axis(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    made = plots(
        "units: {a: {failure_rate: 1e-4 /h, repair_time: 4 h}}\nsystem: a\nmission: {time: 100 h}\n"
        "targets: [{id: A-1, measure: reliability, at_least: 0.9}, {id: A-2, measure: unavailability, at_most: 1e-3}]\n"
    )
    chart = drawn_charts(made, monkeypatch, "unreliability")
    assert chart.x_log
    assert chart.y_log
    assert [(level.tag, level.value, level.at) for level in chart.levels] == [
        ("A-1", pytest.approx(0.1), 100.0),
        ("A-2", pytest.approx(1e-3), 100.0),
    ]
    assert "A-1: reliability at 100 h at least 0.9, met" in words_of(chart_picture(chart))


def test_the_saw_tooth_drops_at_every_test(monkeypatch: pytest.MonkeyPatch) -> None:
    chart = drawn_charts(plots(TESTED), monkeypatch, "cycle")
    (curve,) = chart.curves
    assert curve.points[-1][0] == 1000.0
    times = [x for x, _ in curve.points]
    assert times == sorted(times)
    peak = max(y for _, y in curve.points)
    assert peak == pytest.approx(1e-5 * 1000, rel=0.01)
    assert curve.points[-2][0] < 1000.0
    assert {level.tag for level in chart.levels} == {"V-1", "mean"}


def test_around_tests_the_line_over_the_mission_has_every_tooth(monkeypatch: pytest.MonkeyPatch) -> None:
    down = drawn_charts(plots(TESTED), monkeypatch, "unreliability").curves[1]
    drops = sum(after < 0.5 * before for (_, before), (_, after) in zip(down.points, down.points[1:], strict=False))
    assert down.name == "unavailability"
    assert drops == 2  # at 1000 h and 2000 h; the third test is the end of the mission


def test_phases_are_shaded_with_their_names(checkout: Path) -> None:
    model = read(checkout / "specs" / "polar_telescope_cooling.yaml")
    found = Plots(model, solve_model(model)).saw_tooth()
    assert found is not None
    assert {"winter", "summer"} <= set(words_of(found.picture))
    assert found.caption.endswith("phases shaded")


def test_bars_tell_what_makes_the_unavailability(checkout: Path) -> None:
    model = read(checkout / "specs" / "harbour_lock.yaml")
    solution = solve_model(model)
    found = Plots(model, solution).dependences()
    assert found is not None
    assert solution.redundancy is not None
    effect = next(each for each in solution.redundancy.effects if each.dependence == "start_failures")
    assert effect.factor.long_run.value is not None
    share = 1 - 1 / effect.factor.long_run.value
    words = words_of(found.picture)
    assert words[words.index("start failures (drive)") + 1] == f"{100 * share:.3g}%"


def test_ways_to_failure_stand_as_bars_with_the_rest(checkout: Path) -> None:
    model = read(checkout / "specs" / "harbour_lock.yaml")
    found = Plots(model, solve_model(model)).ways()
    assert found is not None
    words = words_of(found.picture)
    assert {"0→3: drive: 1 waiting + 1 failed, uncovered", "67.8%", "all other ways"} <= set(words)


def test_what_cannot_be_plotted_is_told(tmp_path: Path) -> None:
    model = read_text("units: {a: {failure_rate: 1e-4 /h}}\nsystem: a\n", "spec")
    with pytest.raises(IllPosed, match="no tests, visits or phases"):
        draw_plot(model, tmp_path / "a.svg", what="cycle")
    with pytest.raises(UsageError, match="expected one of reliability"):
        draw_plot(model, tmp_path / "a.svg", what="pie")
    with pytest.raises(UsageError, match=r"expected one of \.svg"):
        draw_plot(model, tmp_path / "a.dot", what="reliability")
    assert not list(tmp_path.iterdir())


def test_every_subject_is_drawn_and_the_same_on_a_rerun(tmp_path: Path, checkout: Path) -> None:
    model = read(checkout / "specs" / "harbour_lock.yaml")
    for what in SUBJECTS:
        if what == "cycle":
            continue
        first = draw_plot(model, tmp_path / f"{what}-1.svg", what=what)
        second = draw_plot(model, tmp_path / f"{what}-2.svg", what=what)
        assert first.path.read_bytes() == second.path.read_bytes()


def chart(**changes: object) -> Chart:
    values: dict[str, object] = {"curves": (Curve("line", ((0.0, 1.0), (10.0, 2.0))),), "x_words": "x", "y_words": "y"}
    return Chart(title="Chart", **{**values, **changes})  # type: ignore[arg-type]


def test_points_stand_where_the_scales_put_them() -> None:
    picture = chart_picture(chart(y_zero=True))
    line = next(
        mark
        for mark in picture.marks
        if isinstance(mark, Shape) and mark.line == axes._LOOKS[0][0] and mark.width == 1.5
    )
    (x0, y0), (x1, y1) = line.steps[0].points[-1], line.steps[-1].points[-1]
    assert x1 > x0
    bottom = max(
        point[1]
        for mark in picture.marks
        if isinstance(mark, Shape) and mark.width == 0.9
        for step in mark.steps
        for point in step.points
    )
    assert bottom - y1 == pytest.approx(2 * (bottom - y0))


def test_zero_and_less_are_left_out_of_a_logarithmic_scale() -> None:
    curve = Curve("line", ((0.0, 0.0), (1.0, 1e-9), (10.0, 1e-3)))
    picture = chart_picture(chart(curves=(curve,), x_log=True, y_log=True))
    assert {"1e-09", "0.001", "1", "10"} <= set(words_of(picture))


@pytest.mark.parametrize("values", [(1e-30, 1e-3), (1.0, 1.0), (0.999999, 1.0), (1e7, 3e7), (1e-300, 1e-299)])
def test_any_range_has_ticks_that_differ(values: tuple[float, float]) -> None:
    for is_log in (False, True):
        picture = chart_picture(chart(curves=(Curve("line", ((1.0, values[0]), (2.0, values[1]))),), y_log=is_log))
        ticks = [mark.text for mark in picture.marks if isinstance(mark, Words) and mark.anchor == "end"]
        assert len(ticks) >= 2
        assert len(set(ticks)) == len(ticks)


def test_no_words_of_a_chart_leave_the_sheet() -> None:
    from markov.output.lettering import text_width

    levels = tuple(Level(1.0 + at / 100, f"T-{at}", f"T-{at}: a limit", 5.0) for at in range(5))
    picture = chart_picture(chart(levels=levels, stretches=(Stretch(0, 4, "first"), Stretch(4, 10, "second"))))
    for mark in picture.marks:
        if isinstance(mark, Words):
            wide = text_width(mark.text, mark.size, bold=mark.bold)
            left = mark.x - {"middle": wide / 2, "end": wide}.get(mark.anchor, 0.0)
            assert mark.size >= 8.0
            assert left >= 0
            assert left + wide <= picture.width
            assert 0 < mark.y < picture.height


def test_a_bar_is_as_long_as_its_share() -> None:
    picture = bars_picture(
        "Bars", "", (Bar("half", 0.5, "50%"), Bar("quarter", 0.25, "25%"), Bar("none", -0.1, "more")), ""
    )
    lengths = [
        mark.steps[1].points[0][0] - mark.steps[0].points[0][0]
        for mark in picture.marks
        if isinstance(mark, Shape) and mark.fill == "#8d96a1"
    ]
    assert len(lengths) == 2
    assert lengths[0] == pytest.approx(2 * lengths[1])


def test_charts_are_the_same_bytes_in_every_form() -> None:
    first, second = chart_picture(chart()), chart_picture(chart())
    assert svg_text(first) == svg_text(second)
    for form in ("pdf", "png"):
        assert page_bytes(first, form)[0] == page_bytes(second, form)[0]


def test_without_a_mission_a_year_is_plotted() -> None:
    model = Model.from_mapping({"year": "8766 h", "units": {"a": {"failure_rate": "1e-4 /h"}}, "system": "a"})
    assert Plots(model, solve_model(model)).horizon == Fraction(8766)
