"""What the README shows is what happens."""

import os
import re
import shutil
from pathlib import Path

import pytest

import markov
from markov.cli import app, main
from markov.spec import read_text


@pytest.fixture
def readme(checkout: Path) -> str:
    return (checkout / "README.md").read_text(encoding="utf-8")


def blocks(text: str, language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```", text, flags=re.S | re.M)


def test_the_first_spec_solves(readme: str) -> None:
    (spec,) = blocks(readme, "yaml")
    solution = markov.solve(read_text(spec, "README.md"))
    assert [target.verdict for target in solution.targets] == ["met", "met"]


def test_the_python_of_the_readme_runs(
    readme: str, checkout: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    (code,) = blocks(readme, "python")
    shutil.copytree(checkout / "specs", tmp_path / "specs")
    monkeypatch.chdir(tmp_path)
    exec(compile(code, "README.md", "exec"), {})
    told = capsys.readouterr().out.splitlines()
    value, lower, upper = map(float, told[0].split())
    assert lower <= value <= upper
    assert told[1].startswith("LOCK-1 met")


def test_the_output_shown_is_the_output(readme: str, checkout: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (shown,) = blocks(readme, "text")
    main(["solve", os.fspath(checkout / "specs" / "harbour_lock.yaml")])
    printed = [line.rstrip() for line in capsys.readouterr().out.splitlines()]
    printed = [re.sub(r"± \S+", "± …", line).rstrip() for line in printed]
    for line in shown.splitlines():
        if line.strip() not in ("", "…"):
            assert line.rstrip() in printed


def test_every_command_of_the_readme_exists_and_the_other_way_round(readme: str) -> None:
    named = set(re.findall(r"^\| `markov (\w+)", readme, flags=re.M))
    assert named == set(app.commands)


def test_links_lead_somewhere(readme: str, checkout: Path) -> None:
    for link in re.findall(r"\]\(([^)#]+)\)", readme):
        assert (checkout / link).exists(), link
