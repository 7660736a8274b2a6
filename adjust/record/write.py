"""Write the whole record of a judged solution: everything is made in memory first, then swapped in at once."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from adjust.judge.assess import Judgement
from adjust.record.build import build, trimmed
from adjust.record.csv_tables import observations_csv, stations_csv
from adjust.record.drawing import draw
from adjust.record.folder import check_out, write_record
from adjust.record.json_text import json_bytes
from adjust.record.page import page_bytes


def write(judgement: Judgement, out: str | Path) -> Path:
    """Write record.json, the page, stations.csv, observations.csv and the drawing to the folder ``out``.

    Raises OutputError if ``out`` holds anything but a record of ours; nothing is changed then.
    """
    folder = Path(out)
    check_out(folder)
    write_record(record_files(build(judgement)), folder)
    return folder


def record_files(record: dict[str, Any]) -> dict[str, bytes]:
    """The files of a complete record by name."""
    return {
        "record.json": json_bytes(trimmed(record)),
        "record.html": page_bytes(record),
        "stations.csv": stations_csv(record).encode(),
        "observations.csv": observations_csv(record).encode(),
        **draw(record),
    }
