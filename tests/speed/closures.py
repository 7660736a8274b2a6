"""Time of finding all closures of a level net of 5,000 stations as a ratio to one adjustment, the two run in turn.

    python tests/speed/closures.py [RUNS]

An adjustment is the solution alone, without tests and precision. Two nets: lines with bench marks along them between
junctions, as levelling nets are; and a grid in which every station is a junction of four, the hardest for loops. One
process, one job read before.
"""

from __future__ import annotations

import statistics
import sys
import tempfile
import time
from itertools import pairwise
from pathlib import Path

import numpy as np

import adjust
from adjust.judge.closures import closures

STATIONS = 5000


def level_net(folder: Path, junctions: int, between: int, rng: np.random.Generator) -> adjust.Job:
    """A jittered square grid of junctions with up to ``between`` bench marks on each line, cut at STATIONS."""
    place = {(i, j): k for k, (i, j) in enumerate(np.ndindex(junctions, junctions))}
    lines, count = [], len(place)
    for (i, j), k in place.items():
        for to in ((i + 1, j), (i, j + 1)):
            if to not in place or rng.random() < 0.1:
                continue
            middle = min(int(rng.integers(0, between + 1)), STATIONS - count)
            chain = [k, *range(count, count + middle), place[to]]
            count += middle
            lines += [(a, b, float(rng.uniform(200, 1500))) for a, b in pairwise(chain)]
    used = sorted({end for a, b, _ in lines for end in (a, b)})
    height = dict(zip(used, rng.uniform(0, 100, len(used)), strict=True))
    folder.mkdir(parents=True)
    (folder / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "deg"\n[instruments.level]\nlevelling = "1 mm*sqrt(km)"\n'
    )
    (folder / "control.csv").write_text(f"station,height\nP{used[0]},{height[used[0]]:.4f}\n")
    rows = [f"P{a},P{b},{height[b] - height[a] + rng.normal(0, 5e-4):.5f},{length:.0f}" for a, b, length in lines]
    (folder / "levelled.csv").write_text("from,to,rise,length\n" + "\n".join(rows) + "\n")
    return adjust.read(folder)


def main() -> None:
    """Print the ratios."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 5
    with tempfile.TemporaryDirectory() as place:
        for name, junctions, between in (("lines between junctions", 27, 8), ("grid of junctions", 71, 0)):
            job = level_net(Path(place) / name, junctions, between, np.random.default_rng(5))
            ratios, times = [], []
            for _ in range(runs):
                begin = time.perf_counter()
                adjust.solve(job)
                middle = time.perf_counter()
                found = closures(job)
                end = time.perf_counter()
                ratios.append((end - middle) / (middle - begin))
                times.append((end - middle, middle - begin))
            a, b = (statistics.median(column) for column in zip(*times, strict=True))
            print(f"{name}: {len(job.network.stations)} stations, {len(job.network.rows)} lines, "
                  f"{len(found)} closures: closures / adjustment {statistics.median(ratios):.2f} "
                  f"({min(ratios):.2f} to {max(ratios):.2f}), medians {a:.2f} and {b:.2f} s")  # fmt: skip


if __name__ == "__main__":
    main()
