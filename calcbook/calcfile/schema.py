"""The JSON Schema of the calculation file, for editors: made from the one description of the file.

It says what may stand where. What a text means (a unit, a symbol, a card) only the reader itself knows, so a
file that fits the schema may still have faults.
"""

from __future__ import annotations

from calcbook.calcfile import descriptions as described
from calcbook.documents import Description, Key

DRAFT = "https://json-schema.org/draft/2020-12/schema"

Schema = dict[str, object]

# An editor reads 62 as a number, 2026-11-20 as a date and no as a truth value; the reader takes them as text.
_ONE_VALUE: Schema = {"type": ["string", "number", "boolean"]}
_FIGURE_MEANING = "a symbol of the givens, a number with its unit, or {value: …, source: …}"


def json_schema() -> Schema:
    """The schema of a calculation file (draft 2020-12): keys, choices and what must be there, with meanings."""
    schema = _mapping(described.FILE)
    return {"$schema": DRAFT, "title": "calculation file", **schema}


def _mapping(description: Description, seen: tuple[str, ...] = ()) -> Schema:
    """A mapping with its keys; ``seen`` names the descriptions it stands in, for one that holds itself."""
    keys = description.keys
    inner = (*seen, description.name)
    schema: Schema = {
        "type": "object",
        "properties": {key.name: _key(key, inner) for key in keys},
        "additionalProperties": _key(description.free, inner) if description.free is not None else False,
    }
    if description.meaning:
        schema["description"] = description.meaning
    required = [key.name for key in keys if key.required]
    if required:
        schema["required"] = required
    return schema


def _key(key: Key, seen: tuple[str, ...]) -> Schema:
    return {**_value(key, seen), "description": key.meaning}


def _value(key: Key, seen: tuple[str, ...]) -> Schema:
    """What may stand as the value of a key; a heading without lines and a text not yet known may be empty."""
    inner = key.described()
    if key.kind == "choice":
        return {"enum": list(key.choices)}
    if key.kind == "flag":
        return {"enum": ["yes", "no", True, False]}
    if key.kind == "date":
        return {"type": "string", "format": "date"}
    if key.kind == "list":
        return {
            "type": "array",
            "items": _mapping(inner, seen) if inner is not None and _fresh(inner, seen) else {},
        }
    if key.kind == "mapping":
        mapping: Schema = _mapping(inner, seen) if inner is not None else {"type": "object"}
        return mapping if key.required else {**mapping, "type": ["object", "null"]}
    if key.kind == "node":
        return _node(key, inner, seen)
    if key.kind == "prose" and not key.required:
        return {"type": ["string", "number", "boolean", "null"]}
    return dict(_ONE_VALUE)


def _fresh(description: Description, seen: tuple[str, ...]) -> bool:
    """Terms may hold terms side by side, and those no further ones."""
    return seen.count(description.name) < 2


def _node(key: Key, inner: Description | None, seen: tuple[str, ...]) -> Schema:
    """A value that is one text or, where the description says so, a mapping or a list."""
    if inner is None:
        return {"type": ["string", "number", "boolean", "object", "array"]}
    figure = inner in (described.SOURCED, described.FLOW)
    return {
        "anyOf": [dict(_ONE_VALUE), _mapping(inner, seen)],
        **({"title": _FIGURE_MEANING} if figure else {}),
    }
