"""What a part of record.html is made of: facts, tables, paragraphs, lists, figures. The templates lay these out.

Every text here is text, never markup: the templates escape it. Only ``Figure.svg`` is markup, written by this package.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cache
from pathlib import Path
from typing import Any, ClassVar

from adjust.record.shown import plain

FOLDER = Path(__file__).parent / "page"
"""Templates, style, scripts and the catalogue of texts."""
NAME_MOST, TEXT_MOST = 60, 400
"""Characters of a name, and of a cell's text, that a table shows; the files hold all."""
WORD_MOST = 24
"""Characters of a word that a column of a printed page has room for."""


@dataclass(frozen=True)
class Cell:
    """One cell: its text, and the raw number to sort by."""

    text: str
    value: float | None = None
    kind: str = ""
    """number (right-aligned), name (kept apart from the direction of its surroundings), code, or ''."""
    mark: str = ""
    """Class of a verdict or role; its sign is drawn beside the text, so that colour is never alone."""
    link: str = ""
    """Fragment that the cell leads to."""

    @property
    def long(self) -> bool:
        """Whether it may break anywhere: a word too long for a column, or words beside a figure."""
        most = max(map(len, self.text.split()), default=0)
        return most > WORD_MOST or (self.kind == "number" and len(self.text) > WORD_MOST)


@dataclass(frozen=True)
class Column:
    """Head of a column; ``number``: its figures stand right."""

    head: str
    unit: str = ""
    number: bool = False


@dataclass(frozen=True)
class Row:
    """Cells and attributes of one row."""

    cells: tuple[Cell, ...]
    attributes: Mapping[str, str] = field(default_factory=dict)
    classes: str = ""


@dataclass(frozen=True)
class Grid:
    """A table; ``sortable`` ones get sorting and a filter from the script."""

    form: ClassVar[str] = "grid"
    key: str
    caption: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    sortable: bool = False
    filter_label: str = ""
    note: str = ""
    folded: bool = False
    """In a part that can be folded away."""


@dataclass(frozen=True)
class Facts:
    """Labels with what is said under each; None: not supplied."""

    form: ClassVar[str] = "facts"
    rows: tuple[tuple[str, tuple[str, ...] | None], ...]


@dataclass(frozen=True)
class Words:
    """Paragraphs."""

    form: ClassVar[str] = "words"
    texts: tuple[str, ...]
    classes: str = ""


@dataclass(frozen=True)
class Items:
    """A list of sentences under a lead."""

    form: ClassVar[str] = "items"
    texts: tuple[str, ...]
    lead: str = ""


@dataclass(frozen=True)
class Commands:
    """Lines to type."""

    form: ClassVar[str] = "commands"
    lines: tuple[str, ...]


@dataclass(frozen=True)
class Heading:
    """A heading inside a part."""

    form: ClassVar[str] = "heading"
    text: str


@dataclass(frozen=True)
class Seal:
    """Space for seal and signature."""

    form: ClassVar[str] = "seal"
    label: str


@dataclass(frozen=True)
class Figure:
    """A drawing in SVG with what it shows in words; ``id`` where the script looks for it."""

    form: ClassVar[str] = "figure"
    svg: str
    title: str
    words: str
    id: str = ""


Block = Grid | Facts | Words | Items | Commands | Heading | Seal | Figure


@dataclass(frozen=True)
class Part:
    """One of the sixteen parts of the record; without blocks it says that nothing is supplied."""

    key: str
    number: int
    title: str
    blocks: tuple[Block, ...]


class Texts:
    """The catalogue of the page's texts by dotted key; what is filled in is named."""

    def __init__(self, tree: Mapping[str, Any]) -> None:
        self.tree = tree

    def __call__(self, key: str, /, **values: object) -> str:
        """The text of a key, filled in."""
        text = self.branch(key)
        if not isinstance(text, str):
            raise KeyError(key)
        return text.format(**values) if values else text

    def branch(self, key: str) -> Any:
        """Whatever stands under a key."""
        value: Any = self.tree
        for step in key.split("."):
            value = value[step]
        return value

    def word(self, section: str, key: object) -> str:
        """A word of the record as the page says it; a word that the catalogue lacks stays as it is."""
        if key is None:
            return ""
        return str(self.branch(section).get(str(key), plain(key, TEXT_MOST)))

    def counted(self, key: str, n: int, **values: object) -> str:
        """A text with a number, in the form for one or for several."""
        return self(f"{key}.{'one' if n == 1 else 'many'}", n=n, **values)


@cache
def catalogue() -> Texts:
    """The English texts."""
    return Texts(tomllib.loads((FOLDER / "texts.toml").read_text("utf-8")))


def slim(grid: Grid) -> Grid:
    """The table without columns in which every cell is empty; the first stays."""
    kept = [k for k in range(len(grid.columns)) if not k or any(row.cells[k].text for row in grid.rows)]
    if len(kept) == len(grid.columns):
        return grid
    rows = tuple(replace(row, cells=tuple(row.cells[k] for k in kept)) for row in grid.rows)
    return replace(grid, columns=tuple(grid.columns[k] for k in kept), rows=rows)


def name_cell(name: object, link: str = "") -> Cell:
    """A station or any other name."""
    return Cell(plain(name, NAME_MOST), kind="name", link=link)


def text_cell(text: object, mark: str = "") -> Cell:
    """Words."""
    return Cell(plain(text, TEXT_MOST), kind="name", mark=mark)


def number_cell(text: str, value: float | None = None) -> Cell:
    """A figure, with the raw one behind it for sorting."""
    return Cell(text, value, "number")


def paragraphs(text: object) -> tuple[str, ...] | None:
    """A text of the surveyor by its blank lines, signs without a shape written out; None where there is none."""
    if text is None or not str(text).strip():
        return None
    parts = (" ".join(one.split()) for one in re.split(r"\n\s*\n", str(text)))
    return tuple(plain(one, 10 * len(one)) for one in parts if one)


def facts(rows: Iterable[tuple[str, object]]) -> Facts:
    """Facts from labels and texts."""
    return Facts(tuple((label, paragraphs(text)) for label, text in rows))


def columns(texts: Texts, section: str, heads: Sequence[tuple[str, str, bool]]) -> tuple[Column, ...]:
    """Columns from keys of the catalogue, units, and whether they hold figures."""
    return tuple(Column(texts(f"{section}.{key}"), unit, number) for key, unit, number in heads)
