"""The program in a folder of its own."""

from pathlib import Path

import pytest

from tests.cli.program import Program


@pytest.fixture
def program(tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Program:
    monkeypatch.chdir(tmp_path)
    return Program(tmp_path, capsys, monkeypatch)
