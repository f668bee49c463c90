"""The program as its users call it: arguments in; exit status, standard output, standard error out."""

from __future__ import annotations

import io
import json
import os
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from markov.cli import main


@dataclass(frozen=True)
class Told:
    """What one call left behind."""

    status: int
    out: str
    err: str

    @property
    def json(self) -> dict[str, Any]:
        return json.loads(self.out, parse_constant=_refuse)

    def result(self, measure: str, *, of: str | None = None, at_hours: float | None = None) -> dict[str, Any]:
        """The one entry of a measure in the JSON object."""
        (found,) = (
            each
            for each in self.json["results"]
            if each["measure"] == measure and each["of"] == of and (at_hours is None or each["at_hours"] == at_hours)
        )
        return found

    def value(self, measure: str, *, of: str | None = None, at_hours: float | None = None) -> Any:
        return self.result(measure, of=of, at_hours=at_hours)["value"]

    @property
    def verdicts(self) -> dict[str, str]:
        return {each["id"]: each["verdict"] for each in self.json["targets"]}


def _refuse(constant: str) -> float:
    raise ValueError(f"{constant} is not JSON")


@dataclass(frozen=True)
class Program:
    """Calls the program inside of this process, in a folder of its own."""

    folder: Path
    capsys: pytest.CaptureFixture[str]
    monkeypatch: pytest.MonkeyPatch

    def __call__(self, *arguments: str | os.PathLike[str], stdin: str | None = None) -> Told:
        if stdin is not None:
            self.monkeypatch.setattr("sys.stdin", io.TextIOWrapper(io.BytesIO(stdin.encode()), encoding="utf-8"))
        self.capsys.readouterr()
        status = main([os.fspath(argument) for argument in arguments])
        out, err = self.capsys.readouterr()
        return Told(status, out, err)

    def file(self, text: str, name: str = "plant.yaml") -> Path:
        """Write a spec."""
        path = self.folder / name
        path.write_text(text, encoding="utf-8")
        return path

    def solve(self, text: str, *options: str) -> Told:
        """Solve the text of a spec, as JSON."""
        return self("solve", self.file(text), "--json", *options)

    def table(self, text: str, *options: str) -> Told:
        """Solve the text of a spec, as tables."""
        return self("solve", self.file(text), *options)

    def refused(self, text: str) -> list[str]:
        """Solve the text of a spec that is at fault: status 2, nothing on standard output; return what is told."""
        told = self.solve(text)
        assert told.status == 2, told.err
        assert told.out == ""
        lines = told.err.splitlines()
        assert lines == sorted(lines, key=_place)
        return lines


def _place(line: str) -> tuple[int, int]:
    where, *_ = line.split(": ")
    _, row, column = where.rsplit(":", 2)
    return int(row), int(column)
