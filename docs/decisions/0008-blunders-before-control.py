"""What is blamed where readings are searched on control, and where they are searched alone first?

python docs/decisions/0008-blunders-before-control.py [DRAWS]     from the folder of the checkout
"""

from __future__ import annotations

import math
import sys
import tempfile
from dataclasses import replace
from itertools import combinations
from pathlib import Path

import numpy as np

import adjust
from adjust.judge.blunders import find_blunders
from adjust.judge.control import compare_control, yardstick
from adjust.judge.rows import rows_in, without_rows
from adjust.solver.solve import solve

PLACES = {"K1": (0, 0), "K2": (200, 0), "K3": (200, 150), "K4": (0, 150), "N1": (60, 50), "N2": (140, 50),
          "N3": (140, 100), "N4": (60, 100)}  # fmt: skip
MARKS = ("K1", "K2", "K3", "K4")
JOB = '[units]\nlength = "m"\nangle = "deg"\n[instruments.total-station]\ndistance = "2 mm"\n'
OFF_MM = 20
Blamed = set[str]


def job(seed: int, reach: float, moved: bool, wrong: bool) -> adjust.Job:
    """Four held marks, four new points, distances within reach but for marks; K3 moved to the east, K1-N1 too long."""
    draw = np.random.default_rng(seed)
    known = {m: (PLACES[m][0] + OFF_MM / 1000 * (moved and m == "K3"), PLACES[m][1]) for m in MARKS}
    rows = []
    for a, b in combinations(PLACES, 2):
        d = math.dist(PLACES[a], PLACES[b])
        if d <= reach and not (a in MARKS and b in MARKS):
            off = OFF_MM / 1000 * (wrong and (a, b) == ("K1", "N1"))
            rows.append(f"{a},{b},{d + draw.normal(0, 0.002) + off:.4f}\n")
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder)
        (path / "job.toml").write_text(JOB)
        (path / "control.csv").write_text(
            "station,east,north\n" + "".join(f"{m},{e:.4f},{n:.4f}\n" for m, (e, n) in known.items())
        )
        (path / "distances.csv").write_text("from,to,distance\n" + "".join(rows))
        return adjust.read(path)


def readings(solution: adjust.Solution, rows: tuple[int, ...]) -> Blamed:
    """Readings as K1-N1."""
    at, blocks = solution.network.rows, solution.network.blocks
    return {"-".join(solution.names[s] for s in blocks[at.block[r]].stations[at.row[r]]) for r in rows}


def on_control(one: adjust.Job) -> Blamed:
    """Readings found on the held marks, and marks that disagree without them."""
    solution = solve(one)
    judged = adjust.assess(solution)
    found = find_blunders(solution, judged.reliability, judged.tests)
    if found.rows:
        gone = rows_in(solution.network, one.network)[list(found.rows)]
        judged = adjust.assess(solve(replace(one, network=without_rows(one.network, gone))))
    clean = judged.solution
    report = compare_control(clean, judged.reliability, yardstick(clean, True), judged.tests)
    return readings(solution, found.rows) | set(report.released)


def alone_first(one: adjust.Job) -> Blamed:
    """The same as the program does it: readings alone first."""
    judged = adjust.assess(solve(one))
    return readings(judged.solution, judged.blunders.rows) | set(judged.control_report.released)


draws = int(sys.argv[1]) if len(sys.argv) > 1 else 40
print(f"seeds 0 to {draws - 1}; in each: exactly what is wrong is blamed / something sound is blamed")
print("distances | wrong | on control | readings alone first")
for reach in (400, 150, 125):
    for moved, wrong in ((True, False), (False, True), (True, True)):
        truth = {name for name, so in (("K3", moved), ("K1-N1", wrong)) if so}
        jobs = [job(seed, reach, moved, wrong) for seed in range(draws)]
        counts = []
        for way in (on_control, alone_first):
            blamed = [way(one) for one in jobs]
            counts.append(f"{sum(b == truth for b in blamed)} / {sum(bool(b - truth) for b in blamed)}")
        print(f"{len(jobs[0].network.rows)} | {' and '.join(sorted(truth))} | {counts[0]} | {counts[1]}")
