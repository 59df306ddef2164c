"""The JSON Schema of test specs, generated from their shapes."""

from typing import Any

from runner.spec.shapes import RootShape

DIALECT = "https://json-schema.org/draft/2020-12/schema"
INCLUDE = {"type": "string", "description": "Base file in this folder or below it; this spec is laid over it."}
REMOVE = {"const": True, "description": "In a spec with include: takes this away from the base."}


def spec_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of a spec file.

    It is somewhat wider than the reader: units, names and everything between keys are checked by `probatum check`
    alone. What a variant with `include` may leave out to its base is not required there.
    """
    schema: dict[str, Any] = _tidy(RootShape.model_json_schema(by_alias=True, mode="validation"))
    schema["properties"] = {**schema["properties"], "include": INCLUDE}
    required = schema.pop("required")
    schema["if"] = {"not": {"required": ["include"]}}
    schema["then"] = {"required": required}
    schema["$defs"]["FramesShape"]["type"] = ["object", "string"]  # the pattern alone stands for a mapping with it
    for name in ("LimitShape", "CaptureShape", "RegionShape"):
        schema["$defs"][name]["properties"]["remove"] = REMOVE
    return {"$schema": DIALECT, **schema}


def _tidy(node: Any) -> Any:
    """Leave out what the validating library adds: null alternatives of optional keys, null defaults, titles."""
    if isinstance(node, list):
        return [_tidy(item) for item in node]
    if not isinstance(node, dict):
        return node
    tidy = {
        key: {name: _tidy(value) for name, value in one.items()} if key in {"properties", "$defs"} else _tidy(one)
        for key, one in node.items()
        if not (key == "default" and one is None) and not (key == "title" and "Shape" not in str(one) and len(node) > 1)
    }
    choices = [choice for choice in tidy.get("anyOf", []) if choice != {"type": "null"}]
    if "anyOf" in tidy:
        del tidy["anyOf"]
        tidy |= choices[0] if len(choices) == 1 else {"anyOf": choices}
    return tidy
