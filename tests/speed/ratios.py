"""Whole-process times as ratios to a named alternative, the two run in turn; not a test.

    python tests/speed/ratios.py [RUNS]

prints for each pair the median of the ratios, and their smallest and largest. Run it on a quiet machine; the ratios
hold when the machine's speed drifts, single times do not.
"""

from __future__ import annotations

import math
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

PYTHON = sys.executable
BRASSCAP = str(Path(PYTHON).with_name("brasscap"))
IMPORTS = [PYTHON, "-c", "import scipy.sparse.linalg, scipy.special"]


def small_job(folder: Path, stations: int = 20) -> Path:
    """A braced plane network of ``stations`` with exact readings in two rows."""
    places = {f"P{i}": (100.0 * (i // 2), 80.0 * (i % 2) + 3.0 * (i % 3)) for i in range(stations)}
    names = list(places)
    folder.mkdir(parents=True)
    (folder / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "deg"\n[instruments.i]\ndistance = "2 mm"\ndirection = "2 sec"\n'
    )
    control = "".join(f"{n},{places[n][0]},{places[n][1]}\n" for n in names[:2])
    (folder / "control.csv").write_text("station,east,north\n" + control)
    distances, directions = ["from,to,distance"], ["at,to,direction"]
    for i, a in enumerate(names):
        for j, b in enumerate(names):
            if i != j and abs(i - j) <= 3:
                de, dn = places[b][0] - places[a][0], places[b][1] - places[a][1]
                directions.append(f"{a},{b},{math.degrees(math.atan2(de, dn)) % 360!r}")
                if i < j:
                    distances.append(f"{a},{b},{math.hypot(de, dn)!r}")
    (folder / "distances.csv").write_text("\n".join(distances) + "\n")
    (folder / "directions.csv").write_text("\n".join(directions) + "\n")
    return folder


def seconds(command: list[str]) -> float:
    """Wall time of one run."""
    begin = time.perf_counter()
    subprocess.run(command, stdout=subprocess.DEVNULL, check=True)
    return time.perf_counter() - begin


def ratio(name: str, command: list[str], other: list[str], runs: int) -> None:
    """Print the ratio of the two commands, run in turn."""
    seconds(command), seconds(other)
    pairs = [(seconds(command), seconds(other)) for _ in range(runs)]
    ratios = sorted(a / b for a, b in pairs)
    a, b = (statistics.median(p[k] for p in pairs) for k in (0, 1))
    middle = statistics.median(ratios)
    print(
        f"{name:<58} {middle:5.2f}  ({ratios[0]:.2f} to {ratios[-1]:.2f})  medians {a * 1000:.0f} and {b * 1000:.0f} ms"
    )


def main() -> None:
    """Time the pairs."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 15
    with tempfile.TemporaryDirectory() as place:
        job = str(small_job(Path(place) / "job"))
        ratio("brasscap --help / python -c pass", [BRASSCAP, "--help"], [PYTHON, "-c", "pass"], runs)
        adjust = [BRASSCAP, "adjust", "--json", job]
        ratio("adjust --json, 20 stations / import scipy.sparse.linalg, .special", adjust, IMPORTS, runs)


if __name__ == "__main__":
    main()
