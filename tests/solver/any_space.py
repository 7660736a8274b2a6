"""Networks in space without starting coordinates against scipy on independently written equations.

    python -m tests.solver.any_space [COUNT] [--large] [--blunder]

makes COUNT random networks of 5 to 9 stations (--large: 6 to 60) of slope distances, zenith angles, directions, ground
lengths and levelled lines (tests/solver/space.py), takes their starting coordinates away, adjusts them, and compares
coordinates and v'Pv with scipy.optimize.least_squares on those equations from near the truth. With --blunder one
reading has a gross error of any size, and what counts is whether the adjustment settles.
"""

from __future__ import annotations

import shutil
import sys
import tempfile
from collections import Counter
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError
from tests.solver.space import Space, random_space, reference, write

SEED = 20261203
COORDINATES_M, SQUARE_SUM = 1e-6, 1e-6


def with_blunder(space: Space, number: int) -> None:
    """A gross error of 0.1 m to 100 km in a length or a rise, or of any angle, in one reading."""
    rng = np.random.default_rng([SEED, 1, number])
    r = int(rng.integers(len(space.rows.value)))
    kind, old = space.rows.kind[r], space.rows.value[r]
    if kind == "direction":
        new = (old + rng.uniform(0.01, 2 * np.pi - 0.01)) % (2 * np.pi)
    elif kind == "zenith_angle":
        new = rng.uniform(0.05, np.pi - 0.05)
    else:
        new = old + 10 ** rng.uniform(-1, 5)
    space.rows.value[r] = float(new)


def outcome(number: int, folder: Path, large: bool = False, blunder: bool = False) -> tuple[str, float, str]:
    """Agrees, differs, settled or refused; the largest difference of coordinates in metres; the words of a refusal."""
    rng = np.random.default_rng([SEED, number])
    space = random_space(rng, n=int(rng.integers(6, 61)) if large else 0)
    if blunder:
        with_blunder(space, number)
    job = write(space, folder)
    toml = (job / "job.toml").read_text()
    (job / "job.toml").write_text(toml.replace('[[book]]\nfile = "stations.csv"\n', ""))
    (job / "stations.csv").unlink()
    try:
        solution = adjust.solve(adjust.read(job))
    except BrasscapError as refusal:
        return "refused", 0.0, "; ".join(refusal.sentences)
    if blunder:
        return "settled", 0.0, ""
    xyz, _, square_sum = reference(space)
    got = solution.positions[[solution.network.stations.index[name] for name in space.names]]
    off = float(np.abs(got - xyz).max())
    good = off < COORDINATES_M and abs(solution.total.square_sum - square_sum) < SQUARE_SUM * square_sum
    return ("agrees" if good else "differs"), off, ""


def main() -> None:
    """Run the study and print its table."""
    count = next((int(a) for a in sys.argv[1:] if a.isdigit()), 300)
    tally: Counter[str] = Counter()
    worst = 0.0
    with tempfile.TemporaryDirectory() as place:
        for number in range(count):
            folder = Path(place) / str(number)
            what, off, text = outcome(number, folder, "--large" in sys.argv, "--blunder" in sys.argv)
            tally[what] += 1
            worst = max(worst, off if what == "agrees" else 0.0)
            if what not in ("agrees", "settled"):
                print(f"network {number}: {what} {off:.1e} {text[:300]}")
            shutil.rmtree(folder, ignore_errors=True)
    print(f"{count} networks in space, seed {SEED}: " + ", ".join(f"{n} {what}" for what, n in tally.most_common()))
    print(f"  largest difference of coordinates where they agree: {worst:.1e} m")


if __name__ == "__main__":
    main()
