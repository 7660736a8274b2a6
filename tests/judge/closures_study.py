"""Study: closures against an independent computation on random traverses and level nets.

    python -m tests.judge.closures_study 500

Every traverse of tests.judge.closing is read from its folder, closed by the program, and compared with the complex
numbers there: misclosures and their standard deviations. Level nets are compared line by line; that their loops are
a basis of minimal total length is compared with networkx in tests/graph/test_cycles.py.
"""

from __future__ import annotations

import math
import sys
import tempfile
from itertools import pairwise
from pathlib import Path

import numpy as np

import adjust
from adjust.judge.closures import Closure, closures
from tests.judge.closing import SHAPES, Made, closed, deviations, level_net, random_traverse


def traverse(seed: int, folder: Path) -> tuple[Made, Closure]:
    """A random traverse and the program's closure of it."""
    made = random_traverse(np.random.default_rng(seed), SHAPES[seed % len(SHAPES)], folder)
    found = [one for one in closures(adjust.read(folder)) if "traverse" in one.kind]
    assert len(found) == 1, f"seed {seed}: {len(found)} traverses"
    return made, found[0]


def differences(made: Made, one: Closure) -> dict[str, float]:
    """Largest differences of angle (radians), linear (metres) and standard deviations (relative)."""
    w, z = closed(made, [reading.value for reading in made.readings])
    got = complex(one.misclosure["east"], one.misclosure["north"])
    assert math.isnan(w) == ("angle" not in one.misclosure)
    sd = deviations(made)
    return {
        "angle": 0.0 if math.isnan(w) else abs(one.misclosure["angle"] - w),
        "linear": abs(got - z),
        "sd": max(abs(one.sd[key] / sd[key] - 1) for key in one.sd if key in sd),
    }


def levels(seed: int, folder: Path) -> tuple[float, float, int]:
    """Largest differences of misclosures (metres) and standard deviations (relative) of a net; number of closures."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(4, 41))
    lines = level_net(rng, folder, n, known=int(rng.integers(0, 4)) if seed % 2 else 1)
    job = adjust.read(folder)
    names, known = job.network.stations.names, job.network.stations.known[:, 2]
    found = [one for one in closures(job) if "level" in one.kind]
    w_away, sd_away = 0.0, 0.0
    for one in found:
        w = 0.0 if one.kind == "level loop" else known[one.stations[0]] - known[one.stations[-1]]
        total = 0.0
        for row, (i, j) in zip(one.rows, pairwise(one.stations), strict=True):
            a, b, rise, metres = lines[row]
            assert (names[i], names[j]) in ((a, b), (b, a)), f"seed {seed}: a line that does not lead on"
            total += metres
            w += rise if names[i] == a else -rise
        assert one.length is not None
        assert abs(one.length - total) < 1e-9 * total
        w_away = max(w_away, abs(w - one.misclosure["height"]))
        sd_away = max(sd_away, abs(one.sd["height"] / (0.0012 * math.sqrt(total / 1000)) - 1))
    loops = [one for one in found if one.kind == "level loop"]
    assert len(loops) == independent(lines, loops) == len(lines) - n + 1, f"seed {seed}: not a basis"
    return w_away, sd_away, len(found)


def independent(lines: list[tuple[str, str, float, float]], loops: list[Closure]) -> int:
    """Rank modulo two of the loops as sets of lines."""
    rows = np.zeros((len(loops), len(lines)), dtype=np.int64)
    for k, one in enumerate(loops):
        rows[k, list(one.rows)] = 1
    rank = 0
    for column in range(len(lines)):
        below = np.flatnonzero(rows[rank:, column]) + rank
        if len(below):
            rows[[rank, below[0]]] = rows[[below[0], rank]]
            others = np.flatnonzero(rows[:, column])
            rows[others[others != rank]] ^= rows[rank]
            rank += 1
    return rank


def main() -> None:
    """Run both studies and print the largest differences."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    worst: dict[str, float] = {}
    with tempfile.TemporaryDirectory() as place:
        for seed in range(count):
            for key, size in differences(*traverse(seed, Path(place) / f"t{seed}")).items():
                worst[key] = max(worst.get(key, 0.0), size)
        print(f"{count} traverses: angle {worst['angle']:.1e} rad, linear {worst['linear']:.1e} m, "
              f"standard deviations {worst['sd']:.1e} of themselves")  # fmt: skip
        all_levels = [levels(seed, Path(place) / f"l{seed}") for seed in range(count)]
    w, sd, number = (list(column) for column in zip(*all_levels, strict=True))
    print(f"{count} level nets, {sum(number)} closures: height {max(w):.1e} m, standard deviations {max(sd):.1e} of "
          "themselves")  # fmt: skip


if __name__ == "__main__":
    main()
