"""Pictures of the page as inline SVG."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from adjust.record.shown import Entry


@dataclass(frozen=True)
class Picture:
    """One picture: a complete inline SVG, its title, and one sentence saying what it shows."""

    key: str
    title: str
    svg: str
    words: str


def pictures(record: Entry, texts: Mapping[str, Any] | None = None) -> tuple[Picture, ...]:
    """The pictures of a record; kinds with nothing to show are left out."""
    return ()
