"""Every solver of linear questions, forced by lowering the limits of the others."""

from __future__ import annotations

import pytest

from markov.chain import dense, elimination


@pytest.fixture(params=["elimination", "dense", "sweeps"])
def linear_solver(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> str:
    if request.param != "elimination":
        monkeypatch.setattr(elimination, "LARGEST_ELIMINATION", 0)
    if request.param == "sweeps":
        monkeypatch.setattr(dense, "LARGEST_DENSE", 0)
    return str(request.param)
