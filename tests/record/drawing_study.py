"""Seconds and sizes of the drawing of a large network: python -m tests.record.drawing_study [FOLDER]

A braced grid of 3,025 stations with 8,856 readings, every line with a relative ellipse; invented figures. Processor
seconds, because a machine may be busy with other things. With FOLDER the three files are written there to look at.
"""

from __future__ import annotations

import math
import sys
import time
from pathlib import Path

from adjust.record.drawing import drawing_pdf, drawing_png, drawing_svg
from tests.record.samples import Record, grid_record

SIDE = 55


def large_record() -> Record:
    """The grid with statistics and relative ellipses of every line."""
    record = grid_record(SIDE)
    for i, one in enumerate(record["observations"]):
        one.update(statistic=2.2 * math.sin(i * i), suspect=False)
        e = {"semi_major": 0.003 + 0.001 * math.sin(i), "semi_minor": 0.002, "azimuth": 1.0}
        record["lines"].append({"from": one["from"], "to": one["to"], "ellipse_confidence": e})
    return record


def main(arguments: list[str]) -> None:
    """Print a row a file."""
    record = large_record()
    print(f"{len(record['stations'])} stations, {len(record['observations'])} readings")
    for form, make in (("svg", drawing_svg), ("png", drawing_png), ("pdf", drawing_pdf)):
        start = time.process_time()
        data = make(record)
        print(f"drawing.{form}  {time.process_time() - start:5.1f} s  {len(data) / 1e6:5.2f} MB")
        if arguments:
            (Path(arguments[0]) / f"drawing.{form}").write_bytes(data)


if __name__ == "__main__":
    main(sys.argv[1:])
