"""What does a moved mark look like, with and without the stage on the readings alone?

python docs/decisions/0006-readings-alone-before-control.py     from the folder of the checkout
"""

from __future__ import annotations

import shutil
import tempfile
from pathlib import Path

import adjust

JOB = Path(__file__).parents[2] / "networks" / "access-road"
BOOKED = "M3,1497.6423,1932.4130,0.0030,0.0030,weighted"
"""Row of the mark; it is held here, at the place that the readings give it."""

print("M3 of the access road held, its north wrong by | readings alone | on control | suspects | marks that disagree")
for millimetres in (0, 10, 20, 30, 50):
    with tempfile.TemporaryDirectory() as folder:
        job = Path(folder) / "job"
        shutil.copytree(JOB, job, ignore=shutil.ignore_patterns("record"))
        control = (job / "control.csv").read_text("utf-8")
        assert BOOKED in control
        held = f"M3,1497.6428,{1932.4193 + millimetres / 1000:.4f},,,held"
        (job / "control.csv").write_text(control.replace(BOOKED, held), encoding="utf-8")
        found = adjust.assess(adjust.solve(adjust.read(job)))
        marks = ", ".join(dict.fromkeys(m.station for m in found.control if m.verdict == "disagrees")) or "none"
        print(f"{millimetres:3d} mm | {found.overall_free[-1].verdict} | {found.overall[-1].verdict} | "
              f"{len(found.blame)} | {marks}")  # fmt: skip
