"""Reads the sections of job.toml by their fields: the right type, a known key, else a fault with the cure."""

from __future__ import annotations

import datetime
import json
import re
from typing import Any

from adjust.allowances import Allowance, parse_allowance
from adjust.book.faults import Faults
from adjust.book.toml_lines import key_lines, line_of
from adjust.book.weather import AIR_TYPES
from adjust.errors import nearest
from adjust.fields import Field
from adjust.sigmas import Precision, parse_precision
from adjust.units import BadValue


def _shown(value: object) -> str:
    """A value as it is written in TOML, near enough to be found again."""
    return value if isinstance(value, str) else json.dumps(value, default=str, ensure_ascii=False)


class Reader:
    """The keys of job.toml, held against the schema; everything that cannot be meant becomes a fault."""

    def __init__(self, text: str, faults: Faults) -> None:
        self.faults = faults
        self.lines = key_lines(text)

    def fault(self, path: str, found: object, hint: str) -> None:
        """Note a fault of a key by its dotted path."""
        shown = re.sub(r"^book\.\d+", "book", path)  # the line tells which block
        self.faults.add("job.toml", line_of(self.lines, path), shown, _shown(found), hint)

    def section(
        self, path: str, given: object, fields: tuple[Field, ...], ignore: tuple[str, ...] = ()
    ) -> dict[str, Any]:
        """Values of a section by key, defaults where absent or wrong."""
        values = {f.name: f.default for f in fields}
        if not isinstance(given, dict):
            inline = path.startswith(("book.", "instruments.")) and path.count(".") > 1
            inside = 'length = "ft"' if path.endswith(".units") else 'temperature = "20 C", pressure = "950 hPa"'
            form = f"{path.rpartition('.')[2]} = {{ {inside} }}" if inline else f"[{path}]"
            self.fault(path, given, f"must be a table: {form}")
            return values
        known = {f.name: f for f in fields}
        for key, value in given.items():
            where = f"{path}.{key}" if path else key
            if key in known:
                values[key] = self.value(where, value, known[key])
            elif key not in ignore:
                self.fault(where, key, f"an unknown key; {nearest(key, [*known, *ignore])}")
        for f in fields:
            if f.required and f.name not in given:
                choices = " | ".join(f'"{c}"' for c in f.choices)
                self.fault(f"{path}.{f.name}", "", f"missing; write {f.name} = {choices} under [{path}]")
        return values

    def value(self, path: str, value: object, field: Field) -> Any:
        """One value in the type of its field, the default where it cannot be meant."""
        if field.type == "number":
            return self.number(path, value, field)
        if field.type == "date" and isinstance(value, datetime.date):
            return value.isoformat()
        if field.type == "list":
            if isinstance(value, list) and all(isinstance(v, str) for v in value):
                return self.chosen(path, value, field) if field.choices else value
            if field.choices:
                self.fault(path, value, f'must be a list: ["{field.choices[0]}", "{field.choices[1]}"]')
                return field.default
            self.fault(path, value, 'must be a list of station names: ["M1", "M2"]')
            return field.default
        if field.type in ("table", "air", "lengths"):
            return value
        if field.type in ("precision", "allowance"):
            return self.parsed(path, value, field)
        if field.type in AIR_TYPES and isinstance(value, int | float) and not isinstance(value, bool):
            return repr(value)
        if field.type == "rules":
            return self.rules(path, value)
        if field.type in ("length", "estimate") and isinstance(value, int | float) and not isinstance(value, bool):
            return repr(value)
        if not isinstance(value, str):
            date = field.type == "date"
            self.fault(path, value, "write a day like 2026-05-14" if date else "must be a text in quotes")
            return field.default
        if field.choices and value not in field.choices:
            self.fault(path, value, "use one of " + ", ".join(f'"{c}"' for c in field.choices))
            return field.default
        return value

    def chosen(self, path: str, value: list[str], field: Field) -> list[str]:
        """The entries that are known."""
        for one in value:
            if one not in field.choices:
                self.fault(path, one, f"an unknown word; {nearest(one, field.choices)}")
        return [one for one in value if one in field.choices]

    def number(self, path: str, value: object, field: Field) -> Any:
        """A number within its limits."""
        if isinstance(value, bool) or not isinstance(value, int | float):
            self.fault(path, value, "must be a number")
        elif field.above is not None and not value > field.above:
            self.fault(path, value, f"must be above {field.above:g}")
        elif path.startswith("tests.") and not value < 1:
            self.fault(path, value, "a probability; write it between 0 and 1, as in 0.05 for 5 per cent")
        elif not value < 1e300:
            self.fault(path, value, "must be a finite number")
        else:
            return float(value)
        return field.default

    def parsed(self, path: str, value: object, field: Field) -> Precision | Allowance | None:
        """An error model or an allowance."""
        try:
            return (parse_precision if field.type == "precision" else parse_allowance)(value, field.dimension)
        except BadValue as bad:
            self.fault(path, value, str(bad))
            return None

    def rules(self, path: str, value: object) -> tuple[str, ...]:
        """Rules with their classes, one or a list."""
        texts = [value] if isinstance(value, str) else value
        if isinstance(texts, list) and texts and all(isinstance(t, str) for t in texts):
            return tuple(texts)
        self.fault(path, value, 'must name a rule and its class: "usa-levelling-1984: third order"')
        return ()
