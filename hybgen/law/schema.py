"""The JSON Schema of the law file, made from the table of keys, for editors."""

from __future__ import annotations

from typing import Any, assert_never

from hybgen.law import shape

_SCALAR: dict[str, Any] = {"type": ["string", "number", "boolean"]}


def schema() -> dict[str, Any]:
    """The schema (draft 2020-12). YAML 1.2 scalars may arrive as strings, numbers or booleans."""
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "hybgen law file",
        **_of(shape.LAW),
        "$defs": {"expression": _expression(), "values": _values()},
    }


def _of(kind: shape.Kind) -> dict[str, Any]:
    match kind:
        case shape.Text():
            return {"type": ["string", "number", "boolean", "null"]}
        case shape.Word():
            return {"enum": list(kind.words)}
        case shape.Flag():
            return {"type": "boolean"}
        case shape.Whole():
            return {"type": "integer", "minimum": 1, "exclusiveMaximum": 10**9}
        case shape.Value():
            return {"$ref": "#/$defs/values"} if kind.deep else dict(_SCALAR)
        case shape.Pair():
            return {"type": "array", "minItems": 2, "maxItems": 2, "items": dict(_SCALAR)}
        case shape.Words():
            return {"type": "array", "items": dict(_SCALAR)}
        case shape.Expression():
            return {"$ref": "#/$defs/expression"}
        case shape.Later():
            return {"not": {}}
        case shape.Named():
            cut = {"patternProperties": {shape.PIECE: {"not": {"enum": [None, ""]}}}}
            return {"type": ["object", "null"], "additionalProperties": _of(kind.item), "allOf": [cut]}
        case shape.Listed():
            return {"type": "array", "items": _of(kind.item)}
        case shape.Either():
            return {"if": {"type": "object"}, "then": _of(kind.full), "else": _of(kind.short)}
        case shape.Record():
            return _record(kind)
        case _:
            assert_never(kind)


def _record(kind: shape.Record) -> dict[str, Any]:
    found: dict[str, Any] = {
        "type": "object",
        "additionalProperties": False,
        "properties": {n: {"description": f.about, **_of(f.kind)} for n, f in kind.fields.items()},
    }
    if required := [n for n, f in kind.fields.items() if f.required]:
        found["required"] = required
    if needs := {n: list(f.needs) for n, f in kind.fields.items() if f.needs}:
        found["dependentRequired"] = needs
    excludes: dict[str, Any] = {
        n: {"properties": {other: {"not": {}} for other in f.excludes}} for n, f in kind.fields.items() if f.excludes
    }
    if excludes:
        found["dependentSchemas"] = excludes
    return found


def _values() -> dict[str, Any]:
    row = {"type": "array", "minItems": 1, "items": dict(_SCALAR)}
    return {"anyOf": [dict(_SCALAR), {"type": "array", "minItems": 1, "items": {"anyOf": [dict(_SCALAR), row]}}]}


def _expression() -> dict[str, Any]:
    own = {"$ref": "#/$defs/expression"}
    case = {
        "type": "object",
        "additionalProperties": False,
        "required": ["when", "is"],
        "properties": {"when": own, "is": own},
    }
    last = {
        "type": "object",
        "additionalProperties": False,
        "required": ["otherwise"],
        "properties": {"otherwise": own},
    }
    cases = {"type": "array", "minItems": 1, "items": {"anyOf": [case, last]}, "contains": last, "maxContains": 1}
    scalar = {"type": ["string", "number", "boolean", "null"]}
    return {"anyOf": [scalar, {"type": "array", "items": {"allOf": [own, {"not": {"type": "object"}}]}}, cases]}


__all__ = ["schema"]
