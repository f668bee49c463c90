"""The JSON Schema of a spec, for editors that complete keys and mark mistakes while one types."""

from __future__ import annotations

from typing import Any

from markov.model.content import Content
from markov.model.durations import SPREAD_MARK, SpreadTime
from markov.model.groups import Member
from markov.model.parameters import Parameter
from markov.model.part import Part
from markov.model.readers import Reads, ReadsName
from markov.model.starts import InitialFaults
from markov.model.success import SCHEMA_MARK, schema_of_success

_NOTHING = {"type": "null"}
#: Definitions that the validation library cannot know, with what stands in their place.
_MARKED = {"Success": SCHEMA_MARK, SpreadTime.__name__: SPREAD_MARK}
_DIALECT = "https://json-schema.org/draft/2020-12/schema"


def json_schema() -> dict[str, Any]:
    """Return the JSON Schema of a spec.

    An editor with a YAML language server uses it through a first line such as
    ``# yaml-language-server: $schema=markov-spec.schema.json``.
    """
    schema = _completed(Content.model_json_schema(by_alias=True))
    assert isinstance(schema, dict)  # the schema of a mapping is one
    definitions = schema.setdefault("$defs", {})
    definitions["Success"] = schema_of_success()
    definitions[SpreadTime.__name__] = _completed(SpreadTime.model_json_schema(by_alias=True))
    short: dict[type[Part], dict[str, Any]] = {
        Parameter: Reads("number").json_schema(),
        Member: ReadsName().json_schema(),
        InitialFaults: {"enum": ["failed", "hidden"]},
    }
    for kind, form in short.items():
        whole = definitions.pop(kind.__name__)
        definitions[kind.__name__] = {"description": whole.get("description", ""), "anyOf": [form, whole]}
    return {"$schema": _DIALECT, "title": "markov spec", **{k: v for k, v in schema.items() if k != "title"}}


def _completed(node: Any) -> Any:
    """Put in what the validation library cannot know: the criterion, and what is meant where a key is left out."""
    if isinstance(node, list):
        return [_completed(each) for each in node]
    if not isinstance(node, dict):
        return node
    for name, mark in _MARKED.items():
        if all(node.get(key) == value for key, value in mark.items()):
            node = {key: value for key, value in node.items() if key not in mark}
            node["$ref"] = f"#/$defs/{name}"
    out: dict[str, Any] = {}
    for key, value in node.items():
        if key == "unsaid":
            continue
        if key == "default" and value is None:
            continue  # left out is not the same as null
        out[key] = _completed(value)
    if _NOTHING in out.get("anyOf", ()):
        forms = [form for form in out.pop("anyOf") if form != _NOTHING]
        out |= forms[0] if len(forms) == 1 else {"anyOf": forms}
    if "unsaid" in node:
        out["description"] = f"{out['description']} Left out: {node['unsaid']}."
    out.pop("title", None) if "description" in out and "properties" not in out else None
    return out
