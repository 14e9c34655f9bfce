"""The JSON Schema for editors: good files fit it, and it refuses what the reader refuses by shape."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path

import pytest

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.schema import DRAFT, json_schema
from calcbook.documents import Mapping, Node, Scalar, read_file

CASES = Path(__file__).resolve().parents[1] / "cases"
GOOD = sorted((CASES / "ok").glob("*.yaml"))


def plain(node: Node) -> object:
    """A tree as an editor sees it, every scalar a text."""
    if isinstance(node, Scalar):
        return None if node.is_empty else node.text
    if isinstance(node, Mapping):
        return {key.text: plain(value) for key, value in node.entries}
    return [plain(item) for item in node.items]


def misfits(value: object, schema: dict, where: str = "") -> Iterator[str]:
    """The places where a value does not fit a schema of the keywords that ``json_schema`` uses."""
    assert set(schema) <= {
        *(
            "$schema",
            "title",
            "description",
            "type",
            "properties",
            "additionalProperties",
            "required",
            "items",
        ),
        *("enum", "anyOf", "format"),
    }
    if "anyOf" in schema and all(any(misfits(value, one, where)) for one in schema["anyOf"]):
        yield f"{where}: fits none of several"
    if "enum" in schema and value not in schema["enum"]:
        yield f"{where}: no choice"
    kinds = schema.get("type", ["object", "array", "string"])
    kind = "object" if isinstance(value, dict) else "array" if isinstance(value, list) else "string"
    kind = "null" if value is None else kind
    if kind not in kinds:
        yield f"{where}: {kind}"
    elif isinstance(value, dict):
        yield from misfits_of_mapping(value, schema, where)
    elif isinstance(value, list):
        for index, item in enumerate(value):
            yield from misfits(item, schema.get("items", {}), f"{where}/{index}")


def misfits_of_mapping(value: dict, schema: dict, where: str) -> Iterator[str]:
    known = schema.get("properties", {})
    others = schema.get("additionalProperties", True)
    yield from (f"{where}: lacks {name}" for name in schema.get("required", ()) if name not in value)
    for name, item in value.items():
        if name in known:
            yield from misfits(item, known[name], f"{where}/{name}")
        elif others is False:
            yield f"{where}: unknown {name}"
        elif isinstance(others, dict):
            yield from misfits(item, others, f"{where}/{name}")


@pytest.mark.parametrize("path", GOOD, ids=lambda path: path.stem)
def test_a_good_file_fits(path: Path) -> None:
    assert list(misfits(plain(read_file(path).root), json_schema())) == []


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("key-unknown", "/calculation: unknown client"),
        ("key-missing", "/calculation: lacks title"),
        ("mapping-expected", "/givens/d_i: string"),
        ("choice-unknown", "/geometry/shape: no choice"),
        ("list-expected", "/resistances: object"),
        ("value-not-text", "/calculation/title: array"),
        ("verification-incomplete", None),
    ],
)
def test_a_file_of_another_shape_does_not_fit(name: str, expected: str | None) -> None:
    found = list(misfits(plain(read_file(CASES / "bad" / f"{name}.yaml").root), json_schema()))
    if expected is None:
        assert found == []  # what a text means is the reader's business
    else:
        assert expected in found


def test_the_schema_is_json_and_names_its_draft() -> None:
    schema = json_schema()
    assert json.loads(json.dumps(schema)) == schema
    assert schema["$schema"] == DRAFT


def test_every_key_stands_in_the_schema_with_its_meaning() -> None:
    properties = json_schema()["properties"]
    assert isinstance(properties, dict)
    available = {key.name: key.meaning for key in described.FILE.keys}
    assert {name: entry["description"] for name, entry in properties.items()} == available
