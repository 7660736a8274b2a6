"""JSON Schemas (draft 2020-12) of job.toml and record.json, made from the tables of keys."""

from __future__ import annotations

from typing import Any

from adjust.book import schema as book
from adjust.fields import Field
from adjust.record.keys import RECORD

DRAFT = "https://json-schema.org/draft/2020-12/schema"

_PLAIN: dict[str, dict[str, Any]] = {
    "text": {"type": "string"},
    "number": {"type": "number"},
    "integer": {"type": "integer"},
    "flag": {"type": "boolean"},
    "texts": {"type": "array", "items": {"type": "string"}},
    "numbers": {"type": "array", "items": {"type": "number"}},
    "matrix": {"type": "array", "items": {"type": "array", "items": {"type": ["number", "null"]}}},
}


def record_schema() -> dict[str, Any]:
    """The schema of record.json: every key required, no other allowed."""
    definitions = {name: _record_object(fields) for name, fields in RECORD.items() if name}
    return {"$schema": DRAFT, "title": "Brasscap record.json", **_record_object(RECORD[""]), "$defs": definitions}


def _record_object(fields: tuple[Field, ...]) -> dict[str, Any]:
    return {
        "type": "object",
        "properties": {f.name: _record_value(f) | {"description": f.meaning} for f in fields},
        "required": [f.name for f in fields],
        "additionalProperties": False,
    }


def _record_value(field: Field) -> dict[str, Any]:
    kind, _, name = field.type.partition(" ")
    nullable = kind.endswith("?")
    kind = kind.removesuffix("?")
    if kind == "object":
        value: dict[str, Any] = {"type": "object"} if name == "any" else {"$ref": f"#/$defs/{name}"}
    elif kind == "list":
        value = {"type": "array"} if name == "any" else {"type": "array", "items": {"$ref": f"#/$defs/{name}"}}
    else:
        value = dict(_PLAIN[kind])
    return {"anyOf": [value, {"type": "null"}]} if nullable else value


def job_schema() -> dict[str, Any]:
    """The schema of job.toml as JSON; keys that are not in the table are faults."""
    sections = {name: _job_object(fields) for name, fields in book.SECTIONS.items()}
    for section in ("book", "instruments.*"):
        for key in {"weather", "zero_weather"} & set(sections[section]["properties"]):
            sections[section]["properties"][key] = sections["weather"]
    book_units = _job_object(book.BOOK_UNITS)
    sections["book"]["properties"]["units"] = book_units
    sections["book"]["properties"]["kind"]["enum"] = list(book.table_names())
    top = sections.pop("")
    top["properties"] |= {
        "units": sections["units"],
        "frame": sections["frame"],
        "datum": sections["datum"],
        "tests": sections["tests"],
        "tolerance": sections["tolerance"],
        "weather": sections["weather"],
        "rejection": sections["rejection"],
        "reflectors": {"type": "object", "additionalProperties": sections["reflectors.*"]},
        "drawing": sections["drawing"],
        "record": sections["record"],
        "instruments": {"type": "object", "additionalProperties": sections["instruments.*"]},
        "book": {"type": "array", "items": sections["book"]},
    }
    return {"$schema": DRAFT, "title": "Brasscap job.toml", **top, "required": ["units"]}


def _job_object(fields: tuple[Field, ...]) -> dict[str, Any]:
    out: dict[str, Any] = {
        "type": "object",
        "properties": {f.name: _job_value(f) | {"description": f.meaning} for f in fields},
        "additionalProperties": False,
    }
    required = [f.name for f in fields if f.required]
    return out | ({"required": required} if required else {})


def _job_value(field: Field) -> dict[str, Any]:
    if field.type == "number":
        low = {"exclusiveMinimum": field.above} if field.above is not None else {}
        return {"type": "number", **low}
    if field.type in ("length", "estimate", "temperature", "pressure", "humidity", "ppm"):
        return {"type": ["number", "string"]}
    if field.type == "lengths":
        return {"type": ["number", "string", "object"], "additionalProperties": {"type": ["number", "string"]}}
    if field.type == "list":
        return {
            "type": "array",
            "items": {"type": "string", **({"enum": list(field.choices)} if field.choices else {})},
        }
    if field.type in ("precision", "allowance", "rules"):
        return {"type": ["string", "array"], "items": {"type": "string"}}
    return {"type": "string", **({"enum": list(field.choices)} if field.choices else {})}
