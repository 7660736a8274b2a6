"""docs/formats.md as text, made from the tables of keys and columns so that it cannot drift from the reader.

`python -m adjust.record.format_pages DOCS` writes the page and the two JSON Schemas into the folder DOCS.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Iterable
from pathlib import Path

from adjust.book import schema
from adjust.book.rules import CONFIDENCES, SUBJECTS, built_in, built_in_rule
from adjust.caution import CAUTION
from adjust.fields import Field
from adjust.kinds import TABLES
from adjust.record.schemas import job_schema, record_schema
from adjust.units import ANGLES, LENGTHS

TYPES = {
    "text": "text", "station": "station name", "choice": "one of", "number": "number", "length": "length",
    "circle": "angle from 0 to below a full circle", "bearing": "quadrant bearing", "sd": "standard deviation",
    "precision": "error model", "allowance": "allowance", "rules": "rule and class",
    "course": "quadrant bearing or azimuth", "zenith": "zenith angle", "elevation": "elevation angle with its sign",
    "estimate": "number, or number +- standard deviation",
    "temperature": "temperature", "pressure": "air pressure", "humidity": "relative humidity",
    "ppm": "parts per million", "wavelength": "wavelength with its unit", "air": "table of weather",
    "lengths": "length, or a table of lengths by page",
    "ratio": "scale", "times": "how many times larger",
    "date": "date", "list": "list of names", "table": "table",
}  # fmt: skip

HEAD = f"""# Formats

Made from the program's own tables by `python -m adjust.record.format_pages docs`; do not edit.

A job is a folder with `job.toml` ([TOML 1.0](https://toml.io/en/v1.0.0)) and tables in CSV (RFC 4180, UTF-8, a header
row; `#` begins a comment line; comma, semicolon or tab is recognised). Tables lie inside the job folder. With no
`[[book]]` block every `KIND.csv` in the folder is read as that kind; otherwise only the tables that are named.
Nothing is ever written to the inputs.

> {CAUTION}

## Values

- **Units** are declared once; a value may carry its own unit: `1.2 km`, `154.2 ft`.
  Lengths: {", ".join(f"`{u}`" for u in LENGTHS)}. Angles: {", ".join(f"`{u}`" for u in ANGLES)}.
- **Angles** under `dms`: `123 45 56.7`, `123:45:56.7`, `123°45'56.7"`, `123-45-56.7`; minutes and seconds below
  60. A lone decimal is a fault, because `45.3015` could be two angles. `packed` is ddd.mmss: `123.45567`.
- **Bearings**: `N 45 30 15 E`, `N45°30'15"E`, `due N`.
- **Standard deviations** in a column `sd` are in the table's length unit (levelled, distances), in seconds for `dms`,
  `deg`, `packed` and `mil`, in milligon for `gon`, or carry their own unit.
- **Error models**: `"1.5 mm + 2 ppm"` adds linearly; `["1.5 mm", "2 ppm"]` is the root of the sum of squares;
  `"1.2 mm*sqrt(km)"` and `"0.4 mm*sqrt(setup)"` for levelling. An angle has two pointings: sqrt(2) times a direction.
- **Allowances** of misclosures: `"12 mm*sqrt(km)"`, `"5 mm*sqrt(setup)"`, `"10 sec*sqrt(n)"` with n angles, `"1:10000"`
  of the length, sums with ` + `; of a list the smallest counts. [The rules](rules.md) that come with the program.
- **Names** are any text without control characters, compared exactly. Names that look alike are warned about.
- An observation's `id` is the given one, else `FILE:LINE` (the physical line where its row begins).
"""

FAULTS = """## Faults

All faults come at once on standard error, one a line, and nothing is written (exit code 2):

<!-- form -->
```text
FILE:LINE: column NAME: "what was found": what to do
```

Exit codes: 0 done; 1 done, but a test failed, a suspect stands at the job's level, control disagrees with the
readings (a mark, one of several, or all by a common scale), or something does not close or meet its limit; 2 could
not be done; 70 internal error; 130 interrupted. Every message is explained in [messages](messages.md).

What comes out is explained in [the record, key by key](record.md).
"""


def formats_page() -> str:
    """The whole page."""
    parts = [HEAD, "## job.toml\n"]
    titles = {
        "": "Top of the file",
        "instruments.*": "[instruments.NAME]",
        "reflectors.*": "[reflectors.NAME]",
        "book": "[[book]]",
    }
    for name, fields in schema.SECTIONS.items():
        parts.append(f"### {titles.get(name, f'[{name}]')}\n\n{_table(fields, 'key')}")
    parts.append("## Tables\n")
    for table in schema.table_names():
        fields = schema.columns_of(table)
        if table in TABLES:
            fields = fields[: -len(schema.OBSERVATION)]
            meaning = TABLES[table].meaning
            about = f"{meaning[0].upper()}{meaning[1:]}. Also the common columns below."
            parts.append(f"### {table}\n\n{about}\n\n{_table(fields, 'column')}")
        else:
            parts.append(f"### {table}\n\n{_table(fields, 'column')}")
    parts.append(f"### Columns that every table of observations may have\n\n{_table(schema.OBSERVATION, 'column')}")
    parts.append(FAULTS)
    return "\n".join(parts)


RULES_HEAD = """# Closure rules

Made from `adjust/rules/*.toml` by `python -m adjust.record.format_pages docs`; do not edit.

Name a rule and its class in job.toml, `[tolerance] rule = "NAME: CLASS"`, or a list of such. Rules change: each says
its edition, and how sure its figures are. To meet a rule here is arithmetic on these readings by that edition; local
rules may be stricter. A rule of your own is a file of the same form in the job folder:

<!-- file our-office.toml -->
```toml
title = "Our office's rule for building sites"
body = "Tarnel Weir survey office"
edition = "2026"

[[limit]]
class = "site"
of = "level loops"
formula = "10 mm*sqrt(km)"
section = "2"
```

A limit is of: OF.
"""


def rules_page() -> str:
    """docs/rules.md: every rule that comes with the program."""
    parts = [RULES_HEAD.replace("OF", ", ".join(f"`{of}`" for of in SUBJECTS))]
    for name in built_in():
        rule = built_in_rule(name)
        note = f" Note: {rule.note}." if rule.note else ""
        parts.append(f"## {name}\n\n{rule.title}. {rule.body}, edition {rule.edition}.{note}\n")
        rows = ["| class | of | allowed | how sure |", "|---|---|---|---|"]
        rows += [f"| {c} | {x.of} | {x.allowance.text} | {CONFIDENCES[x.confidence]} |" for c, x in rule.limits]
        parts.append("\n".join(rows) + "\n")
    return "\n".join(parts)


def _table(fields: Iterable[Field], first: str) -> str:
    rows = [f"| {first} | what | meaning |", "|---|---|---|"]
    for f in fields:
        what = TYPES[f.type] if not f.choices else " ".join(f"`{c}`" for c in f.choices)
        what = f"list of {what}" if f.type == "list" and f.choices else what
        notes = [f.meaning] + (["**required**"] if f.required else [])
        if f.default is not None:
            notes.append(f"default `{f.default}`")
        rows.append(f"| `{f.name}` | {what} | {'; '.join(notes)} |")
    return "\n".join(rows) + "\n"


def pages() -> dict[str, str]:
    """Every generated file of docs by name."""
    return {
        "formats.md": formats_page(),
        "rules.md": rules_page(),
        "job.schema.json": json.dumps(job_schema(), indent=1) + "\n",
        "record.schema.json": json.dumps(record_schema(), indent=1) + "\n",
    }


if __name__ == "__main__":
    for file, text in pages().items():
        (Path(sys.argv[1]) / file).write_text(text, encoding="utf-8")
