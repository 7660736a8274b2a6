"""Tables for notebooks: plain HTML with the caution, everything escaped."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from html import escape

from adjust.caution import CAUTION_SHORT


def html_table(caption: str, head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """A captioned table whose first column names the row, followed by the caution."""
    top = "".join(f'<th scope="col">{escape(h)}</th>' for h in head)
    body = "".join(
        f'<tr><th scope="row">{escape(row[0])}</th>' + "".join(f"<td>{escape(cell)}</td>" for cell in row[1:]) + "</tr>"
        for row in rows
    )
    return (
        f"<table><caption>{escape(caption)}</caption><thead><tr>{top}</tr></thead><tbody>{body}</tbody></table>"
        f"<p>{escape(CAUTION_SHORT)}</p>"
    )


def cell(x: float | None, places: int = 4) -> str:
    """A number with fixed places; empty for None and NaN."""
    return "" if x is None or x != x else f"{x:.{places}f}"
