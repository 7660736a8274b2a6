"""Level networks drawn by their lasting marks."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import adjust
from adjust.record.build import build
from adjust.record.lasting import between_marks
from adjust.record.net import pointed_lines

NETWORKS = Path(__file__).parents[2] / "networks"


def record_of(name: str) -> dict[str, Any]:
    return build(adjust.assess(adjust.solve(adjust.read(NETWORKS / name))))


def test_a_level_book_is_drawn_by_its_marks() -> None:
    """The demo: four lines over nine marks, two of them along the same five sections (networks/simulate_books.py)."""
    record = record_of("river-levels")
    drawn = between_marks(record)
    assert sorted(one["station"] for one in drawn["stations"]) == [
        "BM1", "BM4", "LB1", "LB2", "LB3", "RB1", "RB2", "RB3", "RB4"
    ]  # fmt: skip
    lines = sorted(tuple(sorted(pointed_lines(one)[0])) for one in drawn["observations"])
    right = [("BM1", "RB1"), ("RB1", "RB2"), ("RB2", "RB3"), ("RB3", "RB4"), ("BM4", "RB4")]
    left = [("BM1", "LB1"), ("LB1", "LB2"), ("LB2", "LB3"), ("BM4", "LB3"), ("LB2", "RB2")]
    assert lines == sorted([*right, *right, *left])


def test_a_suspect_stands_for_its_chain() -> None:
    record = record_of("river-levels")
    one = next(o for o in record["observations"] if "left-bank/TP" in str(o["from"]) + str(o["to"]))
    record["suspects"] = [{"observation": one["id"]}]
    assert one["id"] in {o["id"] for o in between_marks(record)["observations"]}


def test_without_change_points_nothing_changes() -> None:
    record = record_of("weir-levels")
    assert between_marks(record) is record
