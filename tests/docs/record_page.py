"""The key tables of docs/record.md: key, type and meaning from adjust/record/keys.py, the rest written by hand.

A table stands between `<!-- keys SECTION -->` and `<!-- end -->` (`record` is the record itself). Its columns unit,
"null where" and "how" belong to the page; everything before them is made from the program's own table, so that the two
cannot disagree. `python -m tests.docs.refresh` adds new keys and takes away old ones.
"""

from __future__ import annotations

import re

from adjust.fields import Field
from adjust.record.keys import RECORD
from tests.docs.blocks import ROOT

PAGE = ROOT / "docs" / "record.md"
HEAD = ["| key | type | meaning | unit | null where | how |", "|---|---|---|---|---|---|"]
_TABLE = re.compile(r"(<!-- keys (\w+) -->\n)(.*?)(<!-- end -->)", re.S)
_NUMBERS = ("number", "numbers", "matrix")


def section_name(section: str) -> str:
    """The name of a section in the page's marks."""
    return section or "record"


def notes(text: str) -> dict[tuple[str, str], list[str]]:
    """Unit, "null where" and "how" by section and key, as they stand in the page."""
    found = {}
    for _, section, table, _ in _TABLE.findall(text):
        for line in table.splitlines()[2:]:
            cells = [cell.strip() for cell in re.split(r"(?<!\\)\|", line)[1:-1]]
            found[section, cells[0].strip("`")] = [*cells[3:], "", "", ""][:3]
    return found


def refreshed(text: str) -> str:
    """The page with its tables as adjust/record/keys.py has the keys now."""
    written = notes(text)
    sections = {section_name(name): fields for name, fields in RECORD.items()}

    def table(found: re.Match[str]) -> str:
        section = found[2]
        rows = [_row(f, written.get((section, f.name), ["", "", ""])) for f in sections.get(section, ())]
        return "\n".join([found[1].rstrip(), *HEAD, *rows, found[4]])

    return _TABLE.sub(table, text)


def _row(field: Field, own: list[str]) -> str:
    return " | ".join([f"| `{field.name}`", field.type, field.meaning, *own]) + " |"


def gaps(text: str | None = None) -> list[str]:
    """One line for every section or note that is missing, or that no key has any more."""
    text = PAGE.read_text("utf-8") if text is None else text
    written, out = notes(text), []
    shown = [section for _, section, _, _ in _TABLE.findall(text)]
    for name, fields in RECORD.items():
        section = section_name(name)
        if shown.count(section) != 1:
            out.append(f"docs/record.md: {shown.count(section)} tables `<!-- keys {section} -->`; it needs one")
            continue
        for f in fields:
            unit, null, _ = written.get((section, f.name), ["", "", ""])
            out += [f"docs/record.md: {section}.{f.name} {why}" for why in _lacking(f, unit, null)]
    out += [f"docs/record.md: section {s} is not in adjust/record/keys.py; remove it" for s in shown if s not in
            {section_name(name) for name in RECORD}]  # fmt: skip
    return out


def _lacking(field: Field, unit: str, null: str) -> list[str]:
    """What a person has to write for a key."""
    why, nullable = [], "?" in field.type or field.type == "matrix"
    if field.type.rstrip("?") in _NUMBERS and not unit:
        why.append("has no unit; write 1 for a pure number")
    if nullable != bool(null):
        why.append("can be null: write where" if nullable else "is never null: empty the column")
    return why
