"""The plan of the page as inline SVG."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from adjust.record.shown import Entry


def plan_svg(record: Entry, texts: Mapping[str, Any]) -> str:
    """The plan of a record with its ``texts``; '' where there is none."""
    return ""
