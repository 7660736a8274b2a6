"""drawing.svg, drawing.pdf and drawing.png: the network on one sheet, its residuals on further pages of the pdf.

The same record gives the same bytes: matplotlib's own defaults whatever the user's settings, its bundled fonts, a
fixed salt for the ids, no date. pyplot takes no part, so nothing outside is changed.

The svg and the first page of the pdf are the sheet on paper, at a scale that is true there. The png is the same
drawing laid out for a screen: 108 mm wide, so that its smallest type is still read where 360 pixels show all of it.
"""

from __future__ import annotations

import contextlib
import io
import warnings
from collections.abc import Iterator
from typing import Any

from adjust.caution import CAUTION
from adjust.record.charts import order_pages, residual_pages
from adjust.record.level_view import draw_levels
from adjust.record.panel import Panel, View, title_of
from adjust.record.paper import SCREEN, Layout, has_heights, is_plan, layout_of, lying, screen
from adjust.record.plan_view import draw_plan
from adjust.record.sheet import Sheet
from adjust.record.shown import Entry

DOTS = {SCREEN: 254}
"""Dots an inch of the png: 1080 pixels on 108 mm."""


def draw(record: Entry) -> dict[str, bytes]:
    """The drawing's files by name, from the record alone."""
    with _own_settings():
        sheets = pages(record)
        svg, pdf = _svg(sheets[0], record), _pdf(sheets, record)
    return {"drawing.svg": svg, "drawing.png": drawing_png(record), "drawing.pdf": pdf}


def drawing_svg(record: Entry) -> bytes:
    """The sheet as svg."""
    with _own_settings():
        return _svg(compose(record, layout_of(record)), record)


def drawing_pdf(record: Entry) -> bytes:
    """All pages as pdf; its text can be searched."""
    with _own_settings():
        return _pdf(pages(record), record)


def _svg(sheet: Sheet, record: Entry) -> bytes:
    about = {"Date": None, "Creator": "Brasscap", "Title": title_of(record), "Description": CAUTION}
    return _saved(sheet, "svg", about)


def _pdf(sheets: list[Sheet], record: Entry) -> bytes:
    from matplotlib.backends.backend_pdf import PdfPages

    stream = io.BytesIO()
    about = {"CreationDate": None, "ModDate": None, "Creator": "Brasscap", "Title": title_of(record),
             "Subject": CAUTION}  # fmt: skip
    with PdfPages(stream, metadata=about) as file:
        for sheet in sheets:
            file.savefig(sheet.figure)
    return stream.getvalue()


def drawing_png(record: Entry, layout: Layout | None = None) -> bytes:
    """The drawing laid out for a screen; or another ``layout`` at 160 dots an inch."""
    with _own_settings():
        about = {"Software": "Brasscap", "Title": title_of(record), "Description": CAUTION}
        chosen = layout or screen(record)
        return _saved(compose(record, chosen), "png", about, dpi=DOTS.get(chosen.name, 160))


def pages(record: Entry) -> list[Sheet]:
    """The sheets of the pdf: the drawing; heights, where a plan does not show them; residuals; the book in order."""
    layout = layout_of(record)
    sheets = [compose(record, layout)]
    if is_plan(record) and has_heights(record):
        sheets.append(compose(record, lying(layout.name), heights=True))
    return [*sheets, *residual_pages(record, layout), *order_pages(record, layout)]


def compose(record: Entry, layout: Layout, heights: bool = False) -> Sheet:
    """One sheet: the plan, or the schematic of the heights, with its panel."""
    sheet = Sheet(layout.width, layout.height)
    Panel(sheet, record, layout).fill(_view(sheet, record, layout, heights))
    return sheet


def _view(sheet: Sheet, record: Entry, layout: Layout, heights: bool) -> View | None:
    left, bottom, right, top = layout.frame
    sheet.polygon([(left, bottom), (right, bottom), (right, top), (left, top)], "frame", linewidth=1.0)
    if is_plan(record) and not heights:
        return draw_plan(sheet, record, layout)
    if any(one["height"] is not None for one in record["stations"]):
        return draw_levels(sheet, record, layout)
    sheet.text(((left + right) / 2, (bottom + top) / 2), "No station has coordinates.", 10, ha="center")
    return None


@contextlib.contextmanager
def _own_settings() -> Iterator[None]:
    """matplotlib as it is shipped, with what makes the bytes the same each time; the user's settings come back."""
    import matplotlib as mpl

    with mpl.rc_context(), warnings.catch_warnings():
        mpl.rcdefaults()
        mpl.rcParams.update({"svg.hashsalt": "brasscap", "svg.fonttype": "path", "pdf.fonttype": 3})
        yield


def _saved(sheet: Sheet, form: str, about: dict[str, Any], **more: Any) -> bytes:
    stream = io.BytesIO()
    sheet.figure.savefig(stream, format=form, metadata=about, **more)
    return stream.getvalue()
