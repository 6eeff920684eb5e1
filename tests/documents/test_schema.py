"""JSON Schema of the four kinds of file, validated by an independent implementation of the standard (jsonschema)."""

from __future__ import annotations

import re
from pathlib import Path

import jsonschema
import pytest

from loopsim.documents.nodes import Mapping, Node, Sequence, compose
from loopsim.documents.schema import json_schema
from loopsim.documents.shapes import KINDS
from loopsim.documents.source import read_source, source_from
from loopsim.errors import InputError, Problems

HERE = Path(__file__).parent
SKETCHES = sorted((HERE / "sketches" / "blocks").glob("*.yaml"))


def plain(node: Node) -> object:
    """Plain data, plain scalars typed as the core schema of YAML 1.2 (section 10.3) has it."""
    if isinstance(node, Mapping):
        return {entry.key.text: plain(entry.value) for entry in node}
    if isinstance(node, Sequence):
        return [plain(item) for item in node.items]
    if not node.plain:
        return node.text
    if node.text in ("true", "false"):
        return node.text == "true"
    if node.text in ("", "null", "~"):
        return None
    if re.fullmatch(r"[-+]?[0-9]+", node.text):
        return int(node.text)
    return float(node.text) if re.fullmatch(r"[-+]?(\.\d+|\d+(\.\d*)?)([eE][-+]?\d+)?", node.text) else node.text


def data(text: str) -> object:
    return plain(compose(source_from(text.encode(), "file.yaml"), Problems()))


def validator(kind: str) -> jsonschema.Draft202012Validator:
    return jsonschema.Draft202012Validator(json_schema(kind))


@pytest.mark.parametrize("kind", KINDS)
def test_each_schema_is_a_schema(kind: str) -> None:
    jsonschema.Draft202012Validator.check_schema(json_schema(kind))


@pytest.mark.parametrize("path", SKETCHES, ids=lambda path: path.stem)
def test_every_sketch_validates(path: Path) -> None:
    validator("block").validate(plain(compose(read_source(path), Problems())))


@pytest.mark.parametrize(("kind", "file"), [("plant", "plant"), ("strategy", "feedback"), ("scenario", "scenario")])
def test_plants_strategies_and_scenarios_validate(kind: str, file: str) -> None:
    validator(kind).validate(plain(compose(read_source(HERE / "example" / f"{file}.yaml"), Problems())))


@pytest.mark.parametrize(
    ("kind", "text"),
    [
        ("block", "block: a\nparameter: {}\n"),
        ("block", "block: a\nparameters: {V: {unit: m, abvoe: 0}}\n"),
        ("block", "block: a\ninputs: {q: {about: flow}}\n"),
        ("block", "about: a\n"),
        ("plant", "plant: a\nblocks: {tank: heated_tank}\n"),
        ("plant", "plant: a\nset: {a: 1}\n"),
        ("plant", "plant: a\nformat: 2\n"),
        ("plant", "plant: a\nwires: [a => b]\n"),
        ("scenario", "scenario: a\nplant: p.yaml\nlasts: 1 h\n"),
        ("scenario", "scenario: a\nplant: p.yaml\nstrategies: {}\nlasts: 1 h\n"),
        ("scenario", "scenario: a\nplant: p.yaml\nstrategies: {n: []}\nlasts: 1 h\nevents: [{at: 1 h, stpe: a}]\n"),
        ("scenario", "scenario: a\nplant: p.yaml\nstrategies: {n: []}\nlasts: 1 h\naccept: [{signal: a}]\n"),
        ("scenario", "scenario: a\nplant: p.yaml\nstrategies: {n: []}\nlasts: 1 h\nseed: -1\n"),
    ],
)
def test_what_is_wrong_does_not_validate(kind: str, text: str) -> None:
    assert not validator(kind).is_valid(data(text))


def descriptions(schema: object) -> list[str]:
    """The properties of a schema that have no description."""
    if not isinstance(schema, dict):
        return [name for item in schema for name in descriptions(item)] if isinstance(schema, list) else []
    bare = [name for name, one in schema.get("properties", {}).items() if not one.get("description")]
    return bare + [name for one in schema.values() for name in descriptions(one)]


@pytest.mark.parametrize("kind", KINDS)
def test_every_key_is_described(kind: str) -> None:
    assert descriptions(json_schema(kind)) == []


def test_an_unknown_kind() -> None:
    with pytest.raises(InputError, match="'plnt' is not a kind of file\n    did you mean 'plant'"):
        json_schema("plnt")
