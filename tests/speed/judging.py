"""Time of judging a network of 300 stations with five blunders completely, as a ratio to one plain adjustment.

    python tests/speed/judging.py [RUNS]

A plain adjustment is the solution of the same job (``adjust.solve``: starts, iterations, free stage), without any test.
The judgement is everything that the record says: tests, several blunders with the true adjustments that they need,
their log, separability, control, common effects, variance components, chains, unchecked readings, closures, and the
record itself as a dictionary. The two are run in turn in one process.
"""

from __future__ import annotations

import statistics
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

import adjust
from adjust.book.job import Job
from adjust.record.build import build
from tests.judge.blunders_study import shifted
from tests.networks import random_job

STATIONS, BLUNDERS, SIZE = 300, 5, 5.0


def job_with_blunders(folder: Path) -> tuple[Job, list[str]]:
    """The job and the readings that are wrong."""
    rng = np.random.default_rng(5)
    random_job(rng, folder, STATIONS, ("distances", "directions", "levelled_lengths"), "weighted")
    job = adjust.read(folder)
    clean = adjust.assess(adjust.solve(job))
    rows = rng.choice(np.flatnonzero(clean.reliability.checked_share > 0.2), BLUNDERS, replace=False)
    amounts = SIZE * clean.smallest_detectable[rows] * rng.choice([-1, 1], BLUNDERS)
    return shifted(job, rows, amounts), [clean.ids[r] for r in rows]


def main() -> None:
    """Print the ratios."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 3
    with tempfile.TemporaryDirectory() as place:
        job, wrong = job_with_blunders(Path(place))
        ratios, times = [], []
        for _ in range(runs):
            begin = time.perf_counter()
            solution = adjust.solve(job)
            middle = time.perf_counter()
            record = build(adjust.assess(solution))
            end = time.perf_counter()
            ratios.append((end - middle) / (middle - begin))
            times.append((end - middle, middle - begin))
            found = {s["observation"] for s in record["suspects"] if s["at_job_level"]}
            print(f"{len(found & set(wrong))} of {BLUNDERS} blunders found, {len(found - set(wrong))} others")
        a, b = (statistics.median(column) for column in zip(*times, strict=True))
        print(f"{STATIONS} stations, {len(job.network.rows)} readings: judgement / adjustment "
              f"{statistics.median(ratios):.2f} ({min(ratios):.2f} to {max(ratios):.2f}), "
              f"medians {a:.2f} and {b:.2f} s")  # fmt: skip


if __name__ == "__main__":
    main()
