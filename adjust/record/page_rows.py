"""Rows of a table as markup, written here and not in a template: large jobs have a hundred thousand cells.

Everything that comes from a record is escaped, quotes too, so that it can stand in text and in attributes.
"""

from __future__ import annotations

from html import escape

from adjust.record.page_blocks import Cell, Grid, Row


def rows_markup(grid: Grid) -> str:
    """The rows of a table; the first cell of each is its head."""
    return "\n".join(_row(row, grid.sortable) for row in grid.rows)


def _row(row: Row, sortable: bool) -> str:
    given = {**row.attributes, **({"class": row.classes} if row.classes else {})}
    first, *rest = row.cells
    cells = [f'<th scope="row"{_attributes(first, sortable)}>{_inner(first)}</th>']
    cells += [f"<td{_attributes(cell, sortable)}>{_inner(cell)}</td>" for cell in rest]
    attributes = "".join(f' {key}="{escape(value)}"' for key, value in given.items())
    return f"<tr{attributes}>{''.join(cells)}</tr>"


def _attributes(cell: Cell, sortable: bool) -> str:
    classes = [cell.kind] if cell.kind in ("number", "code") else []
    classes += ["long"] if cell.long else []
    out = f' class="{" ".join(classes)}"' if classes else ""
    return out + (f' data-value="{cell.value!r}"' if sortable and cell.value is not None else "")


def _inner(cell: Cell) -> str:
    """The text, kept apart from its surroundings' direction where it is a name, with its sign and its link."""
    out = escape(cell.text)
    out = f"<bdi>{out}</bdi>" if cell.kind == "name" and out else out
    out = f'<span class="verdict {escape(cell.mark)}">{out}</span>' if cell.mark else out
    return f'<a href="#{escape(cell.link)}">{out}</a>' if cell.link else out
