"""Physical lines of the keys of a TOML file, which the standard parser does not tell.

The file has already been accepted by tomllib, so a light scan is enough: it follows table headers and top-level keys,
and steps over multi-line strings and arrays.
"""

from __future__ import annotations

import re

_HEADER = re.compile(r"\s*\[\[?\s*([^\]]+?)\s*\]\]?\s*(#.*)?$")
_KEY = re.compile(
    r"""\s*((?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')(?:\s*\.\s*(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*'))*)\s*=(.*)""", re.S
)
_STRING = re.compile(r'"""(?:\\.|[^\\])*?"""|\'\'\'.*?\'\'\'|"(?:\\.|[^"\\\n])*"|\'[^\'\n]*\'|#[^\n]*', re.S)


def key_lines(text: str) -> dict[str, int]:
    """Line of every key by its dotted path; blocks of an array of tables are numbered: book.0.file."""
    lines = text.split("\n")
    found: dict[str, int] = {}
    counts: dict[str, int] = {}
    prefix, i = "", 0
    while i < len(lines):
        start, statement = i, lines[i]
        while _open(statement) and i + 1 < len(lines):
            i += 1
            statement += "\n" + lines[i]
        i += 1
        header = _HEADER.match(statement)
        if header:
            name = _plain(header[1])
            top, _, rest = name.partition(".")
            if statement.lstrip().startswith("[["):
                counts[name] = counts.get(name, -1) + 1
                name = f"{name}.{counts[name]}"
            elif rest and top in counts:  # [book.units] belongs to the last [[book]]
                name = f"{top}.{counts[top]}.{rest}"
            prefix = name + "."
            found.setdefault(name, start + 1)
            found.setdefault(top, start + 1)
            continue
        key = _KEY.match(statement)
        if key:
            found.setdefault(prefix + _plain(key[1]), start + 1)
    return found


def _plain(path: str) -> str:
    return ".".join(part.strip().strip("\"'") for part in path.split("."))


def _open(statement: str) -> bool:
    """Whether a bracket or a multi-line string is still open at the end of the statement."""
    rest = _STRING.sub("", statement)
    if '"""' in rest or "'''" in rest:
        return True
    return rest.count("[") + rest.count("{") > rest.count("]") + rest.count("}")


def line_of(lines: dict[str, int], path: str) -> int:
    """Line of a path or of the nearest part of it above; 1 where nothing of it is written."""
    while path:
        if path in lines:
            return lines[path]
        path = path.rpartition(".")[0]
    return 1
