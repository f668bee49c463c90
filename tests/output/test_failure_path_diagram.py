"""The picture of the ways to failure: what is drawn, what is left in one box, what it says of itself."""

import re
from pathlib import Path

import pytest

from markov.errors import UsageError
from markov.evaluation import build_space
from markov.model import Model
from markov.output.draw_model import draw_model, share_of
from markov.output.failure_paths import path_diagram, percent
from markov.spec import read


@pytest.fixture
def dialysis(checkout: Path) -> Model:
    return read(checkout / "specs" / "dialysis_water.yaml")


def test_every_state_is_on_a_way_or_in_the_one_box_for_the_rest(dialysis: Model) -> None:
    space = build_space(dialysis)
    diagram = path_diagram(dialysis, space)
    rest = [node for node in diagram.nodes if node.condition == "mixed"]
    assert len(rest) == 1
    drawn = [node.number for node in diagram.nodes if node.condition != "mixed"]
    assert sorted([*drawn, *rest[0].holds]) == list(range(space.size))


def test_the_share_covered_the_bound_and_the_ways_are_told(dialysis: Model) -> None:
    diagram = path_diagram(dialysis, build_space(dialysis))
    told = " ".join(diagram.remarks)
    assert re.search(r"Together they make 96\.9% of the failure frequency, .*proven: at least 96\.9%", told)
    assert "6→10→14: 19.7%" in told
    assert any("all others: 3.14%" in arrow.label for arrow in diagram.arrows)
    assert "restorations among them" in told


def test_the_shares_at_the_down_states_add_up_to_what_is_covered(dialysis: Model) -> None:
    diagram = path_diagram(dialysis, build_space(dialysis))
    shares = [
        float(line.split("%")[0]) for node in diagram.nodes for line in node.lines if line.endswith("% of failures")
    ]
    assert sum(shares) == pytest.approx(96.9, abs=0.1)


def test_only_symbols_of_arrows_drawn_are_explained(dialysis: Model) -> None:
    diagram = path_diagram(dialysis, build_space(dialysis), 0.5)
    assert {entry.symbol for entry in diagram.legend} == {"pump_failures", "l2(pumps)", "takeover_coverage"}


def test_fewer_ways_than_asked_for_are_told(dialysis: Model) -> None:
    diagram = path_diagram(dialysis, build_space(dialysis), most=1)
    assert any("95% was asked for, more ways than can be drawn" in remark for remark in diagram.remarks)


def test_a_share_is_read_with_or_without_a_percent_sign() -> None:
    assert share_of("95%") == share_of("95 %") == share_of("0.95")
    for wrong in ("95", "0", "-1%", "0.5 h", "many", float("nan")):
        with pytest.raises(UsageError, match="expected a share above 0"):
            share_of(wrong)


def test_almost_all_is_never_told_as_all() -> None:
    assert percent(0.999999) == "99.9999%"
    assert percent(1 - 1e-12) == "more than 99.999999%"
    assert percent(1.0) == "100%"
    assert percent(0.048) == "4.8%"


def test_ways_are_drawn_into_files(tmp_path: Path, dialysis: Model) -> None:
    first = draw_model(dialysis, tmp_path / "a.svg", paths="95%", engine="own")
    second = draw_model(dialysis, tmp_path / "b.svg", paths="95%", engine="own")
    assert first.path.read_bytes() == second.path.read_bytes()
    assert "all others" in first.path.read_text(encoding="utf-8")
