"""JSON Schema of the four kinds of file, for editors; made from the shapes alone."""

from __future__ import annotations

from loopsim.documents.shapes import KINDS, Holds, Leaf, ListOf, Named, OneOf, Shape
from loopsim.errors import fail, nearest

DRAFT = "https://json-schema.org/draft/2020-12/schema"


def json_schema(kind: str) -> dict[str, object]:
    """The JSON Schema (draft 2020-12) of a kind of file: block, plant, strategy or scenario. Raises `InputError`."""
    if kind not in KINDS:
        raise fail(f"'{kind}' is not a kind of file", None, nearest(kind, KINDS, "kinds"))
    return {"$schema": DRAFT, "title": f"loopsim {kind}", **_schema(KINDS[kind])}


def _schema(holds: Holds) -> dict[str, object]:
    match holds:
        case Leaf(title, schema):
            return {"description": title, **schema}
        case ListOf(of, fewest):
            return {"type": "array", "items": _schema(of), **({"minItems": fewest} if fewest else {})}
        case Named(of, fewest):
            schema = {"type": "object", "additionalProperties": _entry(of)}
            return {**schema, **({"minProperties": fewest} if fewest else {})}
        case OneOf(of):
            return {"anyOf": [_schema(one) for one in of]}
        case Shape():
            return _mapping(holds)


def _entry(of: Holds) -> dict[str, object]:
    """An entry of a section may be `none` (it takes out what `like` brought), or empty where nothing is needed."""
    if not isinstance(of, Shape):
        return _schema(of)
    empty: list[dict[str, object]] = [] if any(key.needed for key in of.keys) else [{"type": "null"}]
    return {"anyOf": [_schema(of), {"const": "none"}, *empty]}


def _mapping(shape: Shape) -> dict[str, object]:
    properties = {key.name: {**_schema(key.holds), "description": key.about} for key in shape.keys}
    needed = [key.name for key in shape.keys if key.needed]
    schema: dict[str, object] = {"type": "object", "properties": properties}
    schema["additionalProperties"] = _schema(shape.more) if shape.more else False
    return {**schema, "required": needed} if needed else schema
