"""Every text the program can show, taken from its source, and the texts that docs/messages.md explains.

A text is a string literal with at least two words, wherever it stands in the code: a message cannot be added in a way
that this does not see. The parts of an f-string or of a sum that are filled in are written ‹so›; their names are for
the reader only and are not compared. Literals joined by the compiler or by + are one text. Left out are docstrings,
the meanings of fields and kinds (docs/formats.md, docs/record.md), help texts (docs/commands/), labels of the drawing
(modules that only what imports matplotlib needs) and what NOT_SHOWN and OTHER_PAGES name with their reason.

In the page a section names its modules in a comment, `<!-- from adjust/units.py adjust/sigmas.py -->`; below it every
bullet begins with one or several texts in backticks, then a dash, then what they mean and what to do.
"""

from __future__ import annotations

import ast
import functools
import re
from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from tests.docs.blocks import ROOT

PAGE = ROOT / "docs" / "messages.md"
HOLE = "‹›"

OTHER_PAGES = {
    "adjust/book/schema.py": "meanings of keys and columns: docs/formats.md",
    "adjust/record/keys.py": "meanings of the record's keys: docs/record.md",
    "adjust/record/judged_keys.py": "meanings of the record's keys: docs/record.md",
    "adjust/record/format_pages.py": "the text of docs/formats.md itself",
    "adjust/record/schemas.py": "titles of the JSON Schemas",
    **dict.fromkeys(
        (
            *(
                f"adjust/record/page{part}.py"
                for part in ("", "_checks", "_close", "_cover", "_readings", "_results", "_rows", "_summary", "_words")
            ),
            *(f"adjust/record/live_{part}.py" for part in ("labels", "marks", "plan", "scene", "texts")),
            *(f"adjust/record/picture{part}.py" for part in ("s", "_svg", "_readings", "_network", "_closures")),
        ),
        "markup, and words of the record looked up; what the page says itself is in adjust/record/page/texts.toml",
    ),
}
"""Modules whose texts are no messages, with the reason."""

NOT_SHOWN = {
    "module ‹› has no attribute ‹›": "for programmers",
    "not a file of the record: ‹›": "for programmers",
    '<th scope="col">‹›</th>': "markup of the notebook",
    '<tr><th scope="row">‹›</th>‹›</tr>': "markup of the notebook",
    "sd east m": "header of a data frame",
    "sd north m": "header of a data frame",
    "sd height m": "header of a data frame",
    "invalid value": "the TOML reader's words, recognised and replaced",
    "cannot overwrite a value": "the TOML reader's words, recognised and replaced",
    "cannot declare": "the TOML reader's words, recognised and replaced",
    "unterminated string": "the TOML reader's words, recognised and replaced",
    "invalid date": "the TOML reader's words, recognised and replaced",
    "with everything released nothing is contradicted": "an assertion, for programmers",
    "no inverse": "caught and replaced by sentences about stations",
    "east, north": "a choice of a key, not a message",
    "shift east": "name of a freedom inside the program",
    "shift north": "name of a freedom inside the program",
    "the job": "value of the key `of` in parameters: docs/record.md",
    "back distance": "name of a reading inside the program",
    "shortest-path-tree candidates, reduced modulo two": "name of a method inside the program",
    "(?:tp|cp|t|c|turn|change)?[ ._-]*\\d+[a-z]?": "a pattern of names",
}
"""Texts that nobody sees as a message, with the reason."""

SAYS = ("cli", "record/build", "record/summary", "record/csv_tables", "record/folder", "record/starter")
"""What prints and writes words: a module that one of these imports is no mere drawing."""

_SILENT_CALLS = ("Field", "Kind", "_keys")
_SILENT_KEYWORDS = ("help", "description", "epilog", "metavar", "meaning")


@dataclass(frozen=True)
class Text:
    """A text of the program: where it stands, and the text with its holes named."""

    module: str
    line: int
    named: str

    @property
    def plain(self) -> str:
        """The text as it is compared."""
        return plain(self.named)


def plain(text: str) -> str:
    """The text with nameless holes, neighbours joined, without spaces around it."""
    return re.sub(f"({HOLE})+", HOLE, re.sub("‹[^›]*›", HOLE, " ".join(text.split())))


def _is_message(text: str) -> bool:
    words = re.findall(r"[^\W\d_]{2,}", re.sub("‹[^›]*›", " ", text))
    return " " in text.strip() and (len(words) >= 2 or bool(re.match("[A-Za-z]{4,}: ‹", text)))


def _named(node: ast.expr) -> str | None:
    """Text of a literal, f-string or sum with one in it; None for other expressions."""
    if isinstance(node, ast.Constant):
        return node.value if isinstance(node.value, str) else None
    if isinstance(node, ast.JoinedStr):
        return "".join(_named(v) or "" if isinstance(v, ast.Constant) else f"‹{_hole(v)}›" for v in node.values)
    if isinstance(node, ast.BinOp) and isinstance(node.op, ast.Add):
        sides = [_named(node.left), _named(node.right)]
        if sides != [None, None]:
            return "".join(
                f"‹{_hole(n)}›" if t is None else t for t, n in zip(sides, (node.left, node.right), strict=True)
            )
    return None


def _hole(node: ast.expr) -> str:
    """A name for what is filled in: the last name of the expression."""
    names = [n.attr if isinstance(n, ast.Attribute) else n.id for n in ast.walk(node)
             if isinstance(n, ast.Attribute | ast.Name)]  # fmt: skip
    return names[0].replace("_", " ").strip() if names else "text"


def _texts(node: ast.AST) -> Iterator[tuple[int, str]]:
    for child in ast.iter_child_nodes(node):
        if isinstance(child, ast.Expr) and isinstance(child.value, ast.Constant):
            continue  # a docstring
        if isinstance(child, ast.Call) and isinstance(child.func, ast.Name) and child.func.id in _SILENT_CALLS:
            continue
        if isinstance(child, ast.keyword) and child.arg in _SILENT_KEYWORDS:
            continue
        named = _named(child) if isinstance(child, ast.expr) else None
        if named is None:
            yield from _texts(child)
            continue
        yield child.lineno, named
        for hole in ast.walk(child):
            if isinstance(hole, ast.FormattedValue) or (isinstance(hole, ast.BinOp) and named is not None):
                inner = [hole] if isinstance(hole, ast.FormattedValue) else [
                    side for side in (hole.left, hole.right) if _named(side) is None]  # fmt: skip
                for one in inner:
                    yield from _texts(one)


def drawn() -> set[str]:
    """Modules whose texts stand in drawings only: those with matplotlib, and what nothing but these imports."""
    imports = {path.relative_to(ROOT).as_posix(): _imports(path) for path in (ROOT / "adjust" / "record").glob("*.py")}
    imports["adjust/cli.py"] = set()

    def reached(found: set[str]) -> set[str]:
        while more := {m for one in found for m in imports.get(one, ()) if m in imports} - found:
            found = found | more
        return found

    draws = {module for module, names in imports.items() if "matplotlib" in names}
    return reached(draws) - reached({f"adjust/{name}.py" for name in SAYS})


def _imports(path: Path) -> set[str]:
    """Modules of adjust as files, and packages by their first name, that a module imports anywhere."""
    found = set()
    for node in ast.walk(ast.parse(path.read_text("utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name.split(".")[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            found |= {node.module.split(".")[0], node.module.replace(".", "/") + ".py"}
            found |= {f"{node.module.replace('.', '/')}/{alias.name}.py" for alias in node.names}
    return found


@functools.cache
def in_code() -> list[Text]:
    """Every message of the program, in the order of the modules and lines, each once a module."""
    found: dict[tuple[str, str], Text] = {}
    silent = drawn() | set(OTHER_PAGES)
    for path in sorted((ROOT / "adjust").rglob("*.py")):
        module = path.relative_to(ROOT).as_posix()
        if module in silent:
            continue
        for line, named in _texts(ast.parse(path.read_text("utf-8"))):
            text = Text(module, line, " ".join(named.split()))
            if _is_message(named) and text.plain not in NOT_SHOWN:
                found.setdefault((module, text.plain), text)
    return list(found.values())


@dataclass(frozen=True)
class Section:
    """A section of the page: its title, its modules, and line number by text."""

    title: str
    modules: tuple[str, ...]
    texts: dict[str, int]


def in_page() -> list[Section]:
    """The sections of docs/messages.md that name modules."""
    sections: list[Section] = []
    title, lines = "", PAGE.read_text("utf-8").split("\n")
    for number, line in enumerate(lines, 1):
        if line.startswith("#"):
            title = line.lstrip("# ")
        elif found := re.fullmatch(r"<!-- from (.+) -->", line):
            sections.append(Section(title, tuple(found[1].split()), {}))
        elif line.startswith("- `") and sections:
            spans = re.findall(r"`([^`]+)`", _bullet(lines, number - 1).split(" — ")[0])
            sections[-1].texts.update({plain(span): number for span in spans if _is_message(span)})
    return sections


def _bullet(lines: list[str], first: int) -> str:
    """A bullet with the lines that continue it."""
    last = first + 1
    while last < len(lines) and re.match(r"  +[^ -]", lines[last]):
        last += 1
    return " ".join(line.strip() for line in lines[first:last])


def differences() -> list[str]:
    """One line for every text that stands only in the code or only in the page, with what to do."""
    sections, code = in_page(), in_code()
    of_module = {module: section for section in sections for module in section.modules}
    out = []
    by_section = defaultdict(set)
    for text in code:
        section = of_module.get(text.module)
        if section:
            by_section[section.title].add(text.plain)
        if not section or text.plain not in section.texts:
            where = f'under "{section.title}"' if section else "under a section whose comment names this module"
            out.append(f"{text.module}:{text.line}: not in docs/messages.md; add {where}:  - `{text.named}` — meaning")
    for section in sections:
        for text, line in section.texts.items():
            if text not in by_section[section.title]:
                out.append(
                    f"docs/messages.md:{line}: `{text}` stands in none of {', '.join(section.modules)}: remove it"
                )
    return out
