"""The JSON Schema of a study file, for editors that complete and check TOML."""

from typing import Any

from detune.brief.read import BY_KIND, LISTS, REPEATED, REQUIRED, SINGLE, TEXTS, YES_NO


def study_schema() -> dict[str, Any]:
    """Return the JSON Schema (2020-12) of a study file."""
    definitions: dict[str, Any] = {}
    properties: dict[str, Any] = {name: {"type": "string"} for name in TEXTS}
    properties |= {name: {"type": "boolean"} for name in YES_NO}

    def reference(cls: Any) -> dict[str, str]:
        schema = cls.model_json_schema(ref_template="#/$defs/{model}")
        definitions.update(schema.pop("$defs", {}))
        definitions[cls.__name__] = schema
        return {"$ref": f"#/$defs/{cls.__name__}"}

    for name, single in SINGLE.items():
        properties[name] = reference(single)
    for name, repeated in REPEATED.items():
        properties[name] = {"type": "array", "items": reference(repeated)}
    for name, kinds in BY_KIND.items():
        options = []
        for kind, cls in kinds.items():
            options.append(reference(cls))
            definitions[cls.__name__]["properties"]["kind"] = {"const": kind}
            definitions[cls.__name__].setdefault("required", []).append("kind")
        properties[name] = {"type": "array", "items": {"oneOf": options}}
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "detune study",
        "type": "object",
        "properties": properties,
        "required": [name for name in REQUIRED if name not in LISTS],
        # A study that sizes its parts may stand before there is a parts list.
        "anyOf": [{"required": list(LISTS)}, {"required": ["sizing"]}],
        "additionalProperties": False,
        "$defs": definitions,
    }
