"""The plan of the page as inline SVG."""

from __future__ import annotations

from adjust.record.shown import Entry


def plan_svg(record: Entry) -> str:
    """The plan of a record; '' where there is none."""
    return ""
