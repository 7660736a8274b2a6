"""The pictures of the page, where people rather look than read: only those for which the record has data."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from adjust.record.live_scene import Scene, scene_of
from adjust.record.live_texts import Texts
from adjust.record.picture_closures import closure_picture, profile_picture
from adjust.record.picture_network import redundancy_picture, traverse_picture
from adjust.record.picture_readings import order_picture, residual_picture
from adjust.record.shown import Entry


@dataclass(frozen=True)
class Picture:
    """One picture: ``svg`` is a whole inline element, ``title`` and ``words`` are plain text, to be escaped."""

    key: str
    title: str
    svg: str
    words: str


def pictures(record: Entry, texts: Mapping[str, Any] | None = None) -> tuple[Picture, ...]:
    """The pictures of a record in reading order; ``texts`` of the catalogue (``pictures.*``), English where missing."""
    words, scene = Texts(texts), scene_of(record)
    made = {
        "closures": closure_picture(record, words),
        "traverse": traverse_picture(record, words),
        "residuals": residual_picture(record, words),
        "order": order_picture(record, words),
        "redundancy": _on_ground(record, scene, words),
        "profile": profile_picture(record, words),
    }
    return tuple(Picture(key, words(f"pictures.{key}_title"), *one) for key, one in made.items() if one)


def _on_ground(record: Entry, scene: Scene | None, words: Texts) -> tuple[str, str] | None:
    return None if scene is None else redundancy_picture(record, scene, words)
