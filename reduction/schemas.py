"""JSON Schemas of the YAML files, for editors, made from the one table of keys."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from reduction.contract import FILES, ID, Key
from reduction.drawingfile import CARRIES, FORMS
from reduction.units import QUANTITIES, UNITS, range_text, to_unit, units_of

Schema = dict[str, Any]

DIALECT = "https://json-schema.org/draft/2020-12/schema"
_FIGURES = r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)"
_NUMBER = rf"^\s*{_FIGURES}([eE][+-]?[0-9]+)?\s*$"
_SHORTHAND = rf"^\s*{_FIGURES}( ?\(([0-9]+\.?[0-9]*|\.[0-9]+)\))?([eE][+-]?[0-9]+)?\s*$"
_DATE = r"^[0-9]{4}-[0-9]{2}-[0-9]{2}([T ][0-9]{2}:[0-9]{2}(:[0-9]{2})?(Z|[+-][0-9]{2}:[0-9]{2})?)?$"
_TEXT: Schema = {"anyOf": [{"type": "string", "minLength": 1}, {"type": ["number", "boolean"]}]}


def schema(name: str) -> Schema:
    """JSON Schema, draft 2020-12, of `campaign`, `trap`, `species` or `session`.

    Editors read numbers where this package reads texts, so a schema takes both. What a schema cannot say, such as
    names of other files and keys that a log needs, the check says.
    """
    body = _mapping(FILES[name], strict=name != "session")
    return {
        "$schema": DIALECT,
        "$id": f"{name}.schema.json",
        "title": f"{name}.yaml" if name in ("campaign", "session") else f"{name} file",
        **body,
        "$defs": {
            "number": {"anyOf": [{"type": "number"}, {"type": "string", "pattern": _NUMBER}]},
            "quantity": _quantity_forms(),
        },
    }


def texts() -> dict[str, str]:
    """Text of each schema file by its name."""
    return {f"{name}.schema.json": json.dumps(schema(name), indent=2, ensure_ascii=True) + "\n" for name in FILES}


def write_schemas(folder: Path) -> None:
    """Write the schema files into a folder."""
    for name, text in texts().items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")


def _mapping(keys: tuple[Key, ...], *, strict: bool) -> Schema:
    """Schema of a mapping; without `strict` nothing is required, as `every_session` may give it."""
    properties: Schema = {}
    either: list[Schema] = []
    for key in keys:
        spellings = _spellings(key)
        properties |= {spelling: _value(key, unit, strict=strict) for spelling, unit in spellings.items()}
        if key.instead:
            either.append(_once([*spellings, key.instead], required=strict and key.required))
        elif len(spellings) > 1:
            either.append(_once(list(spellings), required=strict and key.required))
        elif strict and key.required:
            either.append({"required": list(spellings)})
    made: Schema = {"type": "object", "additionalProperties": False, "properties": properties}
    return made | ({"allOf": either} if either else {})


def _spellings(key: Key) -> dict[str, str]:
    """Every spelling of a key with the unit in it, the customary one first."""
    dimension = QUANTITIES[key.of].dimension if key.of else ""
    if not dimension:
        return {key.name: ""}
    customary = key.name[len(key.stem) + 1 :]
    others = [unit for unit in units_of(dimension) if unit != customary]
    return {f"{key.stem}_{unit}": unit for unit in (customary, *others)}


def _once(spellings: list[str], *, required: bool) -> Schema:
    one = [{"required": [spelling]} for spelling in spellings]
    if required:
        return {"oneOf": one}
    return {"oneOf": [*one, {"not": {"anyOf": one}}]}


def _value(key: Key, unit: str, *, strict: bool) -> Schema:
    made: Schema = {"description": _description(key, unit)}
    if key.kind == "mapping":
        return made | _empty_too(_mapping(key.keys, strict=strict and key.stem != "every_session"))
    if key.kind in ("quantity", "number"):
        made["$ref"] = f"#/$defs/{key.kind}"
        return made | _bounds(key, unit)
    if key.kind == "integer":
        low, high = (int(bound) for bound in key.bounds)
        return made | {"type": "integer", "minimum": low, "maximum": high, "default": int(key.default)}
    if key.kind == "word":
        numbers = [int(word) for word in key.words if word.lstrip("-").isdigit()]
        return made | {"enum": [*numbers, *key.words]}
    return made | _OTHERS[key.kind] | ({"default": key.default} if key.default else {})


def _empty_too(body: Schema) -> Schema:
    return {**body, "type": ["object", "null"]}


def _description(key: Key, unit: str) -> str:
    if not key.of:
        return key.about
    bounds = range_text(QUANTITIES[key.of], unit)
    return f"{key.about} In {unit}, {bounds}." if unit and "finite" in bounds else f"{key.about} {bounds.capitalize()}."


def _bounds(key: Key, unit: str) -> Schema:
    """Limits for what an editor reads as a bare number; the check holds them for every way of writing."""
    if not key.of:
        low, high = key.bounds
        return {"exclusiveMinimum": low, "exclusiveMaximum": high, "default": float(key.default)}
    kind = QUANTITIES[key.of]
    made: Schema = {}
    for end, word in ((kind.low, "exclusiveMinimum" if kind.above_low else "minimum"), (kind.high, "maximum")):
        if abs(end) != float("inf"):
            made[word] = float(f"{to_unit(end, unit) if unit in UNITS else end:.12g}")
    return made


def _quantity_forms() -> Schema:
    number = {"$ref": "#/$defs/number"}
    return {
        "description": "61.3(9), or 1.310(20)e4, or a bare number, which is exact; or a mapping.",
        "anyOf": [
            {"type": "number"},
            {"type": "string", "pattern": _SHORTHAND},
            {
                "type": "object",
                "additionalProperties": False,
                "properties": {
                    "value": {**number, "description": "Estimate."},
                    "u": {**number, "minimum": 0, "description": "Standard uncertainty."},
                    "dof": {**number, "exclusiveMinimum": 0, "description": "Degrees of freedom of u."},
                    "shape": {"enum": ["arcsine", "normal", "rectangular", "triangular"]},
                },
                "required": ["value"],
                "dependentRequired": {"dof": ["u"], "shape": ["u"]},
            },
            {
                "type": "object",
                "additionalProperties": False,
                "properties": {
                    "value": {**number, "description": "Estimate."},
                    "half_width": {**number, "exclusiveMinimum": 0, "description": "Half width of the shape."},
                    "shape": {"enum": ["arcsine", "rectangular", "triangular"]},
                },
                "required": ["value", "half_width", "shape"],
            },
        ],
    }


_ID: Schema = {"anyOf": [{"type": "string", "pattern": f"^{ID.pattern}$"}, {"type": "integer", "minimum": 0}]}
_COORDINATE: Schema = {
    "description": "mm: a number, a dimension, one with a minus, or a list of those that is summed.",
    "anyOf": [
        {"type": ["number", "string"]},
        {"type": "array", "minItems": 1, "items": {"type": ["number", "string"]}},
    ],
}
_PAIR: Schema = {"type": "array", "minItems": 2, "maxItems": 2, "items": _COORDINATE}
_ARC: Schema = {
    "type": "object",
    "additionalProperties": False,
    "properties": {"arc_to": _PAIR, "centre": _PAIR, "turning": {"enum": ["anticlockwise", "clockwise"]}},
    "required": ["arc_to", "centre", "turning"],
}
_YES: Schema = {"enum": ["no", "yes", False, True]}  # what editors make of no and yes
_CONDUCTOR: Schema = {
    "type": "object",
    "additionalProperties": False,
    "properties": {
        "carries": {"description": "What it is wired to.", "enum": list(CARRIES)},
        "mirrored": {"description": "Whether it has an image below the middle plane, dc above then below.", **_YES},
        "sheet": {"description": "Whether the outline is a thin sheet with a free edge.", **_YES},
        "outline": {
            "description": "Points (r, z), straight or by arcs, back to the first or from axis to axis.",
            "type": "array",
            "minItems": 2,
            "items": {"anyOf": [_PAIR, _ARC]},
        },
        "circle": {
            "description": "Round cross-section.",
            "type": "object",
            "additionalProperties": False,
            "properties": {"centre": _PAIR, "radius": _COORDINATE},
            "required": ["centre", "radius"],
        },
        "rectangle": {
            "description": "Square-edged cross-section.",
            "type": "object",
            "additionalProperties": False,
            "properties": {"r": _PAIR, "z": _PAIR},
            "required": ["r", "z"],
        },
    },
    "required": ["carries"],
    "oneOf": [{"required": [form]} for form in FORMS],
}
_REASONS: Schema = {"type": "object", "additionalProperties": {"type": "string", "minLength": 1}}
_OTHERS: dict[str, Schema] = {
    "text": _TEXT,
    "reason": {"type": "string", "minLength": 1},
    "id": _ID,
    "date": {"type": "string", "pattern": _DATE},
    "texts": {"type": "object", "propertyNames": {"pattern": f"^{ID.pattern}$"}, "additionalProperties": _TEXT},
    "names": _REASONS,
    "dimensions": {
        "type": ["object", "null"],
        "propertyNames": {"pattern": f"^{ID.pattern}$"},
        "additionalProperties": {"$ref": "#/$defs/quantity"},
    },
    "conductors": {
        "type": ["object", "null"],
        "propertyNames": {"pattern": f"^{ID.pattern}$"},
        "additionalProperties": _CONDUCTOR,
    },
    "sessions": {"anyOf": [{"const": "all"}, {"type": "array", "items": _ID, "minItems": 1, "uniqueItems": True}]},
}
