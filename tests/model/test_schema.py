"""The JSON Schema follows the model, so that editors complete what the reader reads."""

import json
import re

import pytest

from markov.measures import MEASURES
from markov.model import json_schema
from markov.spec.reference import PARTS

SCHEMA = json_schema()


def definition(name):
    node = SCHEMA if name == "Content" else SCHEMA["$defs"][name]
    return node if "properties" in node else next(form for form in node["anyOf"] if "properties" in form)


def nodes(node):
    if isinstance(node, dict):
        yield node
        for each in node.values():
            yield from nodes(each)
    elif isinstance(node, list):
        for each in node:
            yield from nodes(each)


@pytest.mark.parametrize("part", [part for _, part in PARTS], ids=lambda part: part.__name__)
def test_every_key_is_described(part):
    properties = definition(part.__name__)["properties"]
    assert list(properties) == list(part.all_keys())
    assert all(len(each["description"]) > 5 for each in properties.values())


@pytest.mark.parametrize("part", [part for _, part in PARTS], ids=lambda part: part.__name__)
def test_unknown_keys_are_marked(part):
    assert definition(part.__name__)["additionalProperties"] is False


def test_required_keys_are_marked():
    assert definition("Crew")["required"] == ["size", "repairs"]
    assert definition("Unit")["oneOf"] == [{"required": ["failure_rate"]}, {"required": ["mean_time_to_failure"]}]


def test_references_lead_somewhere():
    references = {node["$ref"] for node in nodes(SCHEMA) if isinstance(node.get("$ref"), str)}
    assert "#/$defs/Success" in references
    assert all(reference.removeprefix("#/$defs/") in SCHEMA["$defs"] for reference in references)


def test_choices_are_listed():
    assert definition("Group")["properties"]["redundancy"]["enum"] == [
        "active",
        "hot_standby",
        "warm_standby",
        "cold_standby",
    ]
    assert definition("Target")["properties"]["measure"]["enum"] == list(MEASURES)


def test_defaults_are_listed():
    group = definition("Group")["properties"]
    assert group["required"]["default"] == 1
    assert group["return_to_preferred"]["default"] is False
    assert definition("Content")["properties"]["year"]["default"] == "8760 h"


def test_null_is_never_offered():
    assert not any(
        node.get("type") == "null" or ("default" in node and node["default"] is None) for node in nodes(SCHEMA)
    )


def test_patterns_know_the_number_traps():
    pattern = re.compile(definition("Unit")["properties"]["failure_rate"]["pattern"])
    assert all(pattern.search(text) for text in ("5e-6 /h", "50 FIT", "1 / repair", "0.5 /y", "(a + b)"))
    assert not any(pattern.search(text) for text in ("010 /h", "1,5 /h", "1:30 /h", "  "))


def test_schema_is_plain_json_and_the_same_each_time():
    assert json.dumps(SCHEMA) == json.dumps(json_schema())
    assert "x-markov" not in json.dumps(SCHEMA)
    assert "unsaid" not in json.dumps(SCHEMA)
