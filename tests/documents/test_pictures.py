"""Pictures as figures: every form of each, sizes that a page holds, states to click, none where there is none."""

import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

from markov.documents.inline_svg import inline
from markov.documents.pages import SIDEWAYS_HEIGHT_MM, SIDEWAYS_MM, UPRIGHT_HEIGHT_MM, UPRIGHT_MM
from markov.documents.pictures import path_figures, plot_figures, state_figures, structure_figure
from markov.documents.tree import Figure
from markov.evaluation import build_space, solve_model
from markov.model import Model
from markov.spec import read, read_text


def every_figure(model: Model) -> list[Figure]:
    space = build_space(model)
    structure = structure_figure(model)
    figures = [*state_figures(model, space, engine="own"), *path_figures(model, space, engine="own")]
    figures += plot_figures(model, solve_model(model), space)
    return figures if structure is None else [structure, *figures]


@pytest.mark.parametrize("name", ["harbour_lock", "polar_telescope_cooling", "ferry_ramp_control"])
def test_every_figure_fits_its_page_in_every_form(checkout: Path, name: str) -> None:
    figures = every_figure(read(checkout / "specs" / f"{name}.yaml"))
    assert len({figure.name for figure in figures}) == len({figure.anchor for figure in figures}) == len(figures)
    for figure in figures:
        assert ET.fromstring(figure.svg.encode()).tag == "{http://www.w3.org/2000/svg}svg"
        assert figure.png.startswith(b"\x89PNG")
        assert figure.pdf.startswith(b"%PDF")
        assert figure.alt
        assert figure.caption
        upright = figure.width_mm <= UPRIGHT_MM + 0.5 and figure.height_mm <= UPRIGHT_HEIGHT_MM
        sideways = figure.width_mm <= SIDEWAYS_MM and figure.height_mm <= SIDEWAYS_HEIGHT_MM
        assert upright or sideways, figure.name


def test_the_lock_has_each_kind_of_figure(checkout: Path) -> None:
    names = [figure.name for figure in every_figure(read(checkout / "specs" / "harbour_lock.yaml"))]
    assert names == [
        "structure",
        "states",
        "ways",
        "plot-reliability",
        "plot-unreliability",
        "plot-dependences",
        "plot-ways",
    ]


def test_a_plant_with_tests_has_the_saw_tooth_and_no_ways() -> None:
    valve = "{failure_rate: 1e-5 /h, repair_time: 8 h, detected: 0 %}"
    text = f"units: {{valve: {valve}}}\ntests: {{trial: {{of: valve, interval: 1 y}}}}\nsystem: valve\n"
    names = [figure.name for figure in every_figure(read_text(text, "spec"))]
    assert "plot-cycle" in names
    assert not any("ways" in name for name in names)


def test_states_can_be_clicked_in_a_page(checkout: Path) -> None:
    model = read(checkout / "specs" / "harbour_lock.yaml")
    (figure,) = state_figures(model, build_space(model), engine="own")
    targets = {f"state-{number}": f"state {number}" for number in range(4)}
    drawn = inline(figure.svg, prefix="f-", alt=figure.alt, style="", targets=targets)
    assert drawn is not None
    assert all(f'<a href="#{target}"' in drawn for target in targets)


def test_figures_are_the_same_on_a_rerun(checkout: Path) -> None:
    model = read(checkout / "specs" / "harbour_lock.yaml")
    assert every_figure(model) == every_figure(model)
