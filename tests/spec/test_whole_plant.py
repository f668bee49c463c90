"""A spec that uses every mapping of the language is read."""

from pathlib import Path

import yaml

from markov.spec.reference import PARTS

TEXT = (Path(__file__).parent / "whole_plant.yaml").read_text(encoding="utf-8")


def test_everything_is_read(read):
    model = read(TEXT)
    assert model.is_scheduled
    assert [mode.name for mode in model.units["sensor"].modes()] == ["needless", "silent"]
    assert {name: level.exact for name, level in model.levels.items()} == {"full": 1, "degraded": 0.5}
    assert model.restoration.time.exact == 72
    assert model.demand.rate.exact * 8760 == 2
    (noted,) = model.warnings
    assert "`coverage` and `failure_on_demand` are two chances" in noted


def test_every_key_of_a_plant_is_used_somewhere():
    plain = yaml.safe_load(TEXT)
    used = set()

    def note(node):
        for key, value in node.items() if isinstance(node, dict) else ():
            used.add(str(key))
            note(value)
        for value in node if isinstance(node, list) else ():
            note(value)

    note(plain)
    headings = ("Spares pool", "Test:", "Common cause", "Demand", "Phase", "Restoration", "Switch:", "Failure mode")
    for heading, part in PARTS:
        if heading.startswith(headings):
            assert set(part.all_keys()) - used <= {"rate"}, heading
