"""Study: networks with two or three gross errors that do not settle, and whether the right readings are named.

    python -m tests.judge.unsettled_study [COUNT [ERRORS]]

Random networks of ``tests.networks`` (6 to 16 stations, weakly braced: 20 to 65 % of the readings are kept; distances,
directions, angles, azimuths; held, weighted, free) without starting coordinates get ERRORS gross errors each: 10, 100,
1,000 m or 20 times the length, or an angle turned by half a circle, the other way round, or by any amount more. Those
that are refused because they do not settle are counted: *all*: every wrong reading is named and no other; *some*: wrong
ones only, though not every one; *others too*: all wrong ones, and sound ones beside; *mixed*: some of both; *none*.
"""

from __future__ import annotations

import sys
import tempfile
from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

import adjust
from adjust.book.job import Job
from adjust.errors import NotConverged, Unsolvable
from adjust.kinds import KINDS
from adjust.network import NEW, Block, Network
from tests.graph.starts_study import MIXES, _thinned
from tests.networks import random_job

SEED = 20261203
LEAST = 0.2


@dataclass(frozen=True)
class Wrong:
    """A job with gross errors and the names of its wrong readings."""

    job: Job
    names: tuple[str, ...]
    what: str


def case(number: int, errors: int, folder: Path) -> Wrong:
    """The network of a number with so many gross errors, from a book in a folder."""
    rng = np.random.default_rng([SEED, number])
    mix = MIXES[rng.integers(len(MIXES) - 1)]  # the last has levels only
    control = str(rng.choice(["held", "weighted", "free"]))
    n = int(rng.integers(6, 17))
    job = adjust.read(random_job(rng, folder / str(number), n, mix, control).folder)
    stations = job.network.stations
    start = np.where(stations.role == NEW, np.nan, stations.start)
    network = replace(job.network, stations=replace(stations, start=start))
    network = _thinned(network, rng, float(rng.uniform(LEAST, LEAST + 0.45)))
    network, names = spoilt(network, rng, errors)
    return Wrong(replace(job, network=network), names, f"{'+'.join(mix)} {control} {n}")


def spoilt(network: Network, rng: np.random.Generator, errors: int) -> tuple[Network, tuple[str, ...]]:
    """So many readings in the plane made grossly wrong, and their names."""
    places = [(b, i) for b, block in enumerate(network.blocks) for i in range(len(block))
              if not KINDS[block.kind].from_control and KINDS[block.kind].says != "rise"]  # fmt: skip
    chosen = [places[k] for k in rng.choice(len(places), errors, replace=False)]
    blocks = list(network.blocks)
    for b, i in chosen:
        blocks[b] = _wrong(blocks[b], i, rng)
    return replace(network, blocks=tuple(blocks)), tuple(network.blocks[b].name(i) for b, i in chosen)


def _wrong(block: Block, i: int, rng: np.random.Generator) -> Block:
    values = block.values.copy()
    old = float(values[i, 0])
    if KINDS[block.kind].dimension == "angle":
        any_angle = float(rng.uniform(0.2, 2 * np.pi - 0.2))
        values[i, 0] = float(rng.choice([old + np.pi, -old, old + any_angle])) % (2 * np.pi)
    else:
        values[i, 0] = abs(old + float(rng.choice([-10, 10, 100, 1000, 20 * old])))
    return replace(block, values=values)


def grade(wrong: Wrong, sentences: list[str]) -> str:
    """How well the sentences name the wrong readings: a reading is named where it is called with its value."""
    network = wrong.job.network
    text = " ".join(sentences)
    named = {block.name(i) for block in network.blocks for i in range(len(block)) if f"{block.name(i)} (" in text}
    right = named & set(wrong.names)
    if not right:
        return "none"
    if named <= set(wrong.names):
        return "all" if len(right) == len(wrong.names) else "some"
    return "others too" if len(right) == len(wrong.names) else "mixed"


def outcome(number: int, errors: int, folder: Path) -> tuple[str, str]:
    """settled, refused for another reason, or 'not settled: GRADE'; and the sentences."""
    wrong = case(number, errors, folder)
    try:
        adjust.solve(wrong.job)
    except Unsolvable as refusal:
        return "refused as unfixed", "; ".join(refusal.sentences)
    except NotConverged as refusal:
        told = f"{wrong.what}, wrong {', '.join(wrong.names)}: {'; '.join(refusal.sentences)}"
        return f"not settled: {grade(wrong, refusal.sentences)}", told
    return "settled", ""


def main(count: int, errors: int) -> None:
    """Run the study and print its table."""
    tally: Counter[str] = Counter()
    for number in range(count):
        with tempfile.TemporaryDirectory() as folder:
            what, told = outcome(number, errors, Path(folder))
        tally[what] += 1
        if what.startswith("not settled"):
            print(f"network {number} {what}: {told}", flush=True)
    print(f"{count} networks, {errors} errors each, seed {SEED}: "
          + ", ".join(f"{n} {what}" for what, n in sorted(tally.items())))  # fmt: skip


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 300, int(sys.argv[2]) if len(sys.argv) > 2 else 2)
