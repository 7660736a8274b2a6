"""Networks in space without starting coordinates against scipy on independently written equations.

    python -m tests.solver.any_space [COUNT] [FIRST] [--large] [--blunder]

makes COUNT random networks of 5 to 9 stations (--large: 6 to 60), five mixtures of slope distances, zenith angles,
directions, ground lengths and levelled lines (tests/solver/space.py), held, weighted and free, takes their starting
coordinates away, adjusts them, and compares coordinates and v'Pv with scipy.optimize.least_squares on those equations
from near the truth; a free network is compared where it lies. A network that is refused must be refused rightly: the
equations then have a free movement, or a second solution fits as well. With --blunder one reading has a gross error of
any size, and what counts is whether the adjustment settles, or else which reading the refusal names, and whether scipy
from near the truth ends with one station under another.
"""

from __future__ import annotations

import shutil
import sys
import tempfile
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np
from scipy.special import chdtri

import adjust
from adjust.errors import BrasscapError
from adjust.graph.starts import find_start
from tests.solver.space import CONTROL, MIXTURES, Space, random_space, reference, smallest, write

SEED = 20261203
COORDINATES_M, SQUARE_SUM = 1e-6, 1e-6


def case(number: int, large: bool = False) -> Space:
    """The network of a number."""
    rng = np.random.default_rng([SEED, number])
    return random_space(
        rng,
        n=int(rng.integers(6, 61)) if large else 0,
        control=CONTROL[number // len(MIXTURES) % len(CONTROL)],
        mixture=MIXTURES[number % len(MIXTURES)],
    )


def with_blunder(space: Space, number: int) -> str:
    """A gross error of 0.1 m to 100 km in a length or a rise, or of any angle, in one reading; returns its place."""
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
    return f"{kind}.csv:{space.rows.kind[:r].count(kind) + 2} "


def outcome(number: int, folder: Path, large: bool = False, blunder: bool = False) -> tuple[str, float, str]:
    """What happened; the largest difference of coordinates in metres; the words of a refusal."""
    space = case(number, large)
    place = with_blunder(space, number) if blunder else ""
    job = write(space, folder)
    toml = (job / "job.toml").read_text()
    (job / "job.toml").write_text(toml.replace('[[book]]\nfile = "stations.csv"\n', ""))
    (job / "stations.csv").unlink()
    read = adjust.read(job)
    try:
        solution = adjust.solve(read)
    except BrasscapError as refusal:
        text = "; ".join(refusal.sentences)
        twofold = "fit" in text and "equally" in text
        if blunder:
            what = "two solutions" if twofold else "culprit named" if place in text else "culprit not named"
            return f"refused, {what}", 0.0, f"{place}: {text}"
        if twofold:
            return ("refused, two solutions" if both_fit(space, read) else "refused wrongly"), 0.0, text
        return ("refused wrongly" if smallest(space) > 1e-7 else "refused rightly"), 0.0, text
    if blunder:
        return "settled", 0.0, ""
    got = solution.positions[[solution.network.stations.index[name] for name in space.names]]
    free = not (space.known.any() or space.sd.any())
    xyz, _, square_sum = reference(moved(space, got), got) if free else reference(space)
    off = float(np.abs(got - xyz).max())
    good = off < COORDINATES_M and abs(solution.total.square_sum - square_sum) < SQUARE_SUM * square_sum
    return ("agrees" if good else "differs"), off, ""


def falls(number: int, large: bool) -> bool:
    """Whether scipy too, from near the truth, pulls a sighted station to within a metre of the plumb line.

    There the sight loses its direction, and v'Pv has no least value: it falls as long as the station comes nearer.
    """
    space = case(number, large)
    with_blunder(space, number)
    free = not (space.known.any() or space.sd.any())
    xyz = reference(space, space.start if free else None)[0]
    sights = np.array([e for e, kind in zip(space.rows.ends, space.rows.kind, strict=True) if kind == "direction"])
    return float(np.hypot(*(xyz[sights[:, 1], :2] - xyz[sights[:, 0], :2]).T).min()) < 1.0


def moved(space: Space, to: np.ndarray) -> Space:
    """The network with its starting coordinates, near the truth, shifted, turned and raised to lie at ``to`` (n, 3)."""
    a, b = (xyz[:, 0] + 1j * xyz[:, 1] for xyz in (space.start, to))
    turn = np.vdot(a - a.mean(), b - b.mean())
    z = b.mean() + (a - a.mean()) * turn / abs(turn)
    height = space.start[:, 2] + (to[:, 2] - space.start[:, 2]).mean()
    return replace(space, start=np.column_stack([z.real, z.imag, height]))


def both_fit(space: Space, job: adjust.Job) -> bool:
    """Whether there are solutions from both of the places that the refusal tells of, and they differ."""
    start = find_start(job.network)
    order = [job.network.stations.index[name] for name in space.names]
    limit = chdtri(max(1, len(space.rows.value) - 1), 1e-6)
    found = []
    for plane in (start.positions[:, :2], *start.mirrors):
        xyz = np.column_stack([plane, start.positions[:, 2]])[order]
        free = not (space.known.any() or space.sd.any())
        fitted, _, square_sum = reference(replace(space, start=xyz), xyz if free else None)
        if square_sum < limit:
            found.append(fitted)
    return len(found) > 1 and float(np.abs(found[1] - found[0]).max()) > 0.01


def main() -> None:
    """Run the study and print its table."""
    numbers = [int(a) for a in sys.argv[1:] if a.isdigit()]
    count, first = (numbers + [300, 0][len(numbers) :])[:2]
    tally: Counter[str] = Counter()
    by: dict[str, Counter[str]] = {}
    worst = 0.0
    with tempfile.TemporaryDirectory() as place:
        for number in range(first, first + count):
            folder = Path(place) / str(number)
            what, off, text = outcome(number, folder, "--large" in sys.argv, "--blunder" in sys.argv)
            if what == "refused, culprit named" and falls(number, "--large" in sys.argv):
                what += ", scipy has a station under another"
            tally[what] += 1
            sort = f"{MIXTURES[number % len(MIXTURES)]}, {CONTROL[number // len(MIXTURES) % len(CONTROL)]}"
            by.setdefault(sort, Counter())[what] += 1
            worst = max(worst, off if what == "agrees" else 0.0)
            if what not in ("agrees", "settled"):
                print(f"network {number} ({sort}): {what} {off:.1e} {text[:300]}", flush=True)
            shutil.rmtree(folder, ignore_errors=True)
    print(f"{count} networks in space, seed {SEED}: " + ", ".join(f"{n} {what}" for what, n in tally.most_common()))
    for sort, counts in by.items():
        print(f"  {sort}: " + ", ".join(f"{n} {what}" for what, n in counts.most_common()))
    print(f"  largest difference of coordinates where they agree: {worst:.1e} m")


if __name__ == "__main__":
    main()
