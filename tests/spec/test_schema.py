"""The JSON Schema of specs: current, and of one mind with the reader on keys and forms."""

import json
import re
from typing import Any

import yaml

from runner.resources import folder
from runner.spec.schema import DIALECT, spec_schema
from tests.scenes.spec_text import TEXT

TYPES: dict[str, Any] = {
    "object": dict,
    "array": list,
    "string": str,
    "boolean": bool,
    "number": (int, float),
    "integer": int,
}


def _fits(node: Any, schema: Any, root: dict[str, Any]) -> bool:
    """Tell whether data fit a schema; knows the keywords that `spec_schema` uses (JSON Schema 2020-12, core)."""
    if "$ref" in schema:
        return _fits(node, root["$defs"][schema["$ref"].rsplit("/", 1)[-1]], root)
    kinds = schema.get("type", [])
    kinds = [kinds] if isinstance(kinds, str) else kinds
    if kinds and not any(isinstance(node, TYPES[kind]) for kind in kinds):
        return False
    if "anyOf" in schema and not any(_fits(node, one, root) for one in schema["anyOf"]):
        return False
    if "enum" in schema and node not in schema["enum"]:
        return False
    if isinstance(node, str) and "pattern" in schema and not re.search(schema["pattern"], node):
        return False
    if isinstance(node, list) and "items" in schema:
        return all(_fits(item, schema["items"], root) for item in node)
    if isinstance(node, dict):
        known, others = schema.get("properties", {}), schema.get("additionalProperties", True)
        if any(key not in node for key in schema.get("required", [])):
            return False
        return all(
            _fits(value, known[key], root)
            if key in known
            else others is True or (others and _fits(value, others, root))
            for key, value in node.items()
        )
    return True


def test_the_file_beside_the_specs_is_current() -> None:
    """specs/probatum-spec.schema.json is what `probatum schema` prints."""
    kept = (folder("specs") / "probatum-spec.schema.json").read_text(encoding="utf-8")

    assert kept == json.dumps(spec_schema(), indent=2, ensure_ascii=False) + "\n"


def test_ready_specs_fit_the_schema() -> None:
    """Every ready spec and the spec of the tests fit the schema, typos in their keys do not."""
    schema = spec_schema()
    texts = [path.read_text(encoding="utf-8") for path in folder("specs").glob("*.yaml")] + [TEXT]
    assert len(texts) > 1

    for text in texts:
        data = yaml.safe_load(text)
        assert _fits(data, schema, schema)
        assert not _fits({**data, "camra": {}}, schema, schema)
        assert not _fits({**data, "camera": {**data["camera"], "bit_depht": "12 bit"}}, schema, schema)
        assert not _fits({**data, "camera": {**data["camera"], "bit_depth": 12}}, schema, schema)


def test_every_key_is_described() -> None:
    """Each key of each mapping has its sentence, and nothing of the validating library's form is left."""
    schema = spec_schema()

    for part in (schema, *schema["$defs"].values()):
        for key, value in part["properties"].items():
            assert value.get("description") or "$ref" in value, key
    assert schema["$schema"] == DIALECT
    assert "null" not in json.dumps(schema)
