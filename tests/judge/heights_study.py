"""Study: height closures by zenith angles on random nets: agreement, false alarms, and one target height not applied.

    python -m tests.judge.heights_study 200

The nets and the independent computation are those of tests.judge.rising; every error in them is simulated.
"""

from __future__ import annotations

import re
import sys
import tempfile
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np

import adjust
from adjust.judge.closures import NOT_MET, Closure, closures
from tests.judge import rising

SAID = re.compile(r"the (target|instrument) height at (P\d)(?: seen from (P\d))? was perhaps not applied")


def read(net: rising.Net, values: list[float]) -> tuple[adjust.Job, list[float]]:
    """The job of a net, and the values as booked."""
    with tempfile.TemporaryDirectory() as folder:
        booked = rising.write(net, values, Path(folder))
        return adjust.read(folder), booked


def agreement(seed: int) -> tuple[float, float, int]:
    """Largest difference of misclosures (metres) and of standard deviations (of themselves); number of closures."""
    rng = np.random.default_rng(seed)
    net = rising.random_net(rng)
    job, values = read(net, rising.noisy(rng, net))
    network, rows = job.network, job.network.rows
    w_away, sd_away, number = 0.0, 0.0, 0
    for one in closures(job):
        if not one.kind.startswith("height"):
            continue
        ids = [network.blocks[rows.block[r]].name(int(rows.row[r])) for r in one.rows]
        walk = rising.walked(net, [network.stations.names[i] for i in one.stations], ids)
        w_away = max(w_away, abs(one.misclosure["height"] - rising.misclosure(net, values, walk)))
        sd_away = max(sd_away, abs(one.sd["height"] / rising.deviation(net, values, walk) - 1))
        number += 1
    return w_away, sd_away, number


def alarms(seed: int) -> bool:
    """Whether anything fails in a sound net."""
    rng = np.random.default_rng(seed)
    net = rising.random_net(rng)
    return any(one.verdict == NOT_MET for one in closures(read(net, rising.noisy(rng, net))[0]))


def slip(seed: int) -> str:
    """What is said when the target height of one way of a line is not in the book."""
    rng = np.random.default_rng(seed)
    net = rising.random_net(rng)
    ways = sorted({(one.at, one.to) for one in net.readings if one.table == rising.ZENITH})
    values = rising.noisy(rng, net)
    at, to = ways[int(rng.integers(len(ways)))]
    net.readings = [replace(one, target=0.0) if (one.at, one.to) == (at, to) else one for one in net.readings]
    failing: list[Closure] = [one for one in closures(read(net, values)[0]) if one.verdict == NOT_MET]
    if not failing:
        return "nothing fails"
    said = {found.groups() for one in failing for found in SAID.finditer(one.sentence)}
    if not said:
        return "silent"
    right = ("target", f"P{to}", f"P{at}") in said
    return ("right, alone" if len(said) == 1 else "right, among others") if right else "elsewhere"


def main() -> None:
    """Run all three and print the figures."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    w, sd, number = zip(*(agreement(seed) for seed in range(count)), strict=True)
    print(
        f"{count} nets, {sum(number)} closures: height {max(w):.1e} m, standard deviations {max(sd):.1e} of themselves"
    )
    print(f"{count} sound nets: something fails in {sum(alarms(1000 + seed) for seed in range(count))}")
    print(f"{count} nets with a target height not applied: {dict(Counter(slip(2000 + seed) for seed in range(count)))}")


if __name__ == "__main__":
    main()
