"""Study: how many random networks start well, without and with one gross blunder.

    python -m tests.graph.starts_study 300 [first seed [least share of readings kept]] [--clean]

Every network of ``tests.networks`` (6 to 60 stations, kinds and control by lot, 0 to 45 % of the readings thinned out
unless told otherwise) is solved from the true coordinates and from the readings alone. *Same*: v'Pv agrees to 1e-6
of itself, all residuals to 1e-6 of the largest, and positions that do not hang on a free datum. Networks that do not
converge from the truth are counted apart: no start mends them. Mirror images that are said are checked by solving both.
A least share of 0.2 keeps 20 to 65 % of the readings: thin networks. --clean leaves out the gross errors.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

import adjust
import adjust.solver.solve as solving
from adjust.book.job import Job
from adjust.errors import NotConverged, Unsolvable
from adjust.graph.starts import Start, find_start
from adjust.kinds import KINDS
from adjust.network import NEW, Array, Block, Network
from adjust.solver.solution import Solution
from tests.networks import random_job

MIXES = (
    ("distances",), ("directions",), ("angles",), ("distances", "directions"), ("distances", "angles"),
    ("distances", "azimuths"), ("azimuths", "directions"), ("distances", "directions", "angles", "azimuths"),
    ("distances", "directions", "levelled_lengths"), ("angles", "azimuths"), ("levelled_lengths",),
)  # fmt: skip


@dataclass(frozen=True)
class Trial:
    """One network without starting coordinates, its true places, and what was done to it."""

    job: Job
    truth: Array
    what: str
    blunder: str = ""


def made(seed: int, blunder: bool, least: float = 0.55) -> Trial:
    """A random network; ``blunder``: one reading is grossly wrong; ``least``: share of readings kept at least."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(6, 61))
    mix = MIXES[rng.integers(len(MIXES))]
    control = str(rng.choice(["held", "weighted", "free"]))
    with tempfile.TemporaryDirectory() as folder:
        job_made = random_job(rng, Path(folder) / "job", n, mix, control)
        job = adjust.read(job_made.folder)
    truth = np.array([job_made.truth[job_made.names.index(name)] for name in job.network.stations.names])
    stations = job.network.stations
    start = np.where(stations.role == NEW, np.nan, stations.start)
    network = replace(job.network, stations=replace(stations, start=start))
    network = _thinned(network, rng, float(rng.uniform(least, least + 0.45)))
    what = ""
    if blunder:
        network, what = spoilt(network, rng)
    return Trial(replace(job, network=network), truth, f"{'+'.join(mix)} {control} {n}", what)


def _thinned(network: Network, rng: np.random.Generator, share: float) -> Network:
    blocks = []
    for block in network.blocks:
        keep = rng.random(len(block)) < share
        if KINDS[block.kind].from_control or keep.sum() < 2:
            keep[:] = True
        blocks.append(_rows(block, keep))
    return replace(network, blocks=tuple(blocks))


def _rows(block: Block, keep: Array) -> Block:
    ids = tuple(one for one, k in zip(block.ids, keep, strict=False) if k)
    precision = tuple(one for one, k in zip(block.precision, keep, strict=False) if k)
    return replace(
        block, stations=block.stations[keep], values=block.values[keep], sd=block.sd[keep], group=block.group[keep],
        held=block.held[keep], line=block.line[keep], ids=ids, precision=precision,
        walked=None if block.walked is None else block.walked[keep],
    )  # fmt: skip


def spoilt(network: Network, rng: np.random.Generator) -> tuple[Network, str]:
    """One reading wrong: by 1 mm to 1000 km, by any angle, turned the other way, or to another station."""
    count = [0 if KINDS[b.kind].from_control else len(b) for b in network.blocks]
    b = int(rng.choice(len(count), p=np.array(count) / sum(count)))
    block = network.blocks[b]
    row, kind = int(rng.integers(len(block))), KINDS[block.kind]
    values, stations = block.values.copy(), block.stations.copy()
    how = int(rng.integers(4))
    if how == 0 and len(network.stations) > stations.shape[1]:
        others = [i for i in range(len(network.stations)) if i not in stations[row]]
        stations[row, -1] = rng.choice(others)
        what = "another station"
    elif kind.dimension == "angle":
        size = 10 ** rng.uniform(-5, np.log10(np.pi))
        values[row, 0] = (-values[row, 0] if how == 1 else values[row, 0] + size) % (2 * np.pi)
        what = "turned the other way" if how == 1 else f"{size:.2g} rad"
    else:
        size = 10 ** rng.uniform(-3, 6)
        less = kind.says == "rise" or size < values[row, 0]
        values[row, 0] += -size if less and rng.random() < 0.5 else size
        what = f"{size:.2g} m"
    blocks = (*network.blocks[:b], replace(block, values=values, stations=stations), *network.blocks[b + 1 :])
    return replace(network, blocks=blocks), f"{block.kind} {block.name(row)}: {what}"


def solved(trial: Trial, places: Array | None) -> Solution | str:
    """The solution from given places (n, 3), else from the readings alone; or in a word why there is none."""

    def given(network: Network, plane_height: float | None = None) -> Start:
        found = find_start(network, plane_height)
        known = network.stations.start
        assert places is not None
        positions = np.where(np.isnan(known), places, known)
        asked = np.zeros((len(places), 2), dtype=bool)
        for part in solving.find_parts(network):
            asked |= part.nodes
        positions = np.where(asked[:, [0, 0, 1]], positions, np.nan)
        return replace(found, positions=positions, groups=_groups(network, positions), failures=())

    before = solving.find_start
    solving.find_start = before if places is None else given
    try:
        return solving.solve(trial.job)
    except Unsolvable as e:
        return "unsolvable: " + e.sentences[0]
    except NotConverged:
        return "does not converge"
    finally:
        solving.find_start = before


def _groups(network: Network, truth: Array) -> Array:
    """True orientations, as the median of what the pointings say."""
    found: dict[int, list[float]] = {}
    for block in network.blocks:
        if (block.group >= 0).any():
            d = truth[block.stations[:, 1]] - truth[block.stations[:, 0]]
            turn = np.arctan2(d[:, 0], d[:, 1]) - block.values[:, 0]
            for g, t in zip(block.group.tolist(), turn.tolist(), strict=True):
                found.setdefault(g, []).append(t)
    out = np.zeros(len(network.groups))
    for g, turns in found.items():
        away = np.angle(np.exp(1j * (np.array(turns)[:, None] - np.array(turns))))
        out[g] = turns[int(np.abs(away).sum(axis=1).argmin())]
    return out


def same(a: Solution, b: Solution, free: bool) -> bool:
    """Whether two solutions are one; positions of free networks depend on the start, their residuals do not."""
    size = max(1e-3, float(np.abs(a.residuals).max()))
    close = abs(a.total.square_sum - b.total.square_sum) <= 1e-6 * max(1.0, a.total.square_sum)
    apart = 0.0 if free else float(np.nanmax(np.abs(a.positions - b.positions)))
    extent = float(np.nanmax(np.abs(a.positions)))
    return bool(close and np.abs(a.residuals - b.residuals).max() <= 1e-6 * size and apart <= max(1e-6, 1e-9 * extent))


def rightly_mirrored(trial: Trial, reference: Solution) -> bool:
    """Whether every other solution that the start names is one: as good as the true one, or the true one itself."""
    start = find_start(trial.job.network)
    here = [start.positions] + [np.column_stack([xy, np.nan_to_num(start.positions[:, 2])]) for xy in start.mirrors]
    found = []
    for places in here:
        got = solved(trial, places)
        if isinstance(got, str) or got.total.square_sum > 1.1 * reference.total.square_sum + 20:
            return False
        found.append(got.positions[:, 0] + 1j * got.positions[:, 1])
    return len(here) > 1 and all(_apart(found[0], other) for other in found[1:])


def _apart(a: Array, b: Array) -> bool:
    """Whether two solutions (n,) complex have different shapes, or one shape that is mirrored."""
    seen = ~np.isnan(a)
    a, b = a[seen] - a[seen].mean(), b[seen] - b[seen].mean()
    fit = np.vdot(a, b) / np.vdot(a, a)
    return bool(np.abs(fit * a - b).max() > 1e-4 * np.abs(b).max())


def verdict(trial: Trial) -> str:
    """One word for a network, and more where it fails."""
    reference, got = solved(trial, trial.truth), solved(trial, None)
    if isinstance(reference, str):
        return f"no solution from the truth ({reference.split(':')[0]})"
    if isinstance(got, str):
        if "equally well" in got:
            return "rightly said to be mirrored" if rightly_mirrored(trial, reference) else "FAILS: wrongly mirrored"
        return f"FAILS: {got}"
    return "same" if same(reference, got, " free " in trial.what) else "FAILS: another solution"


def main(count: int, first: int = 0, least: float = 0.55, clean: bool = False) -> None:
    """Print the table."""
    for blunder in (False,) if clean else (False, True):
        began, tally, slowest = time.perf_counter(), Counter[str](), 0.0
        for seed in range(first, first + count):
            trial = made(seed, blunder, least)
            t = time.perf_counter()
            find_start(trial.job.network)
            slowest = max(slowest, time.perf_counter() - t)
            word = verdict(trial)
            tally[word.split(":")[0]] += 1
            if word.startswith("FAILS"):
                print(f"  seed {seed} {trial.what} [{trial.blunder}] {word[:150]}", flush=True)
        able = sum(n for w, n in tally.items() if not w.startswith(("no solution", "rightly")))
        name, share = "one blunder" if blunder else "clean", 100 * tally["same"] / max(1, able)
        print(f"{name}: {count} networks, {able} with one solution, found from the truth; same from the readings alone "
              f"{tally['same']} ({share:.1f} %); {dict(tally)}; slowest start {slowest:.2f} s; "
              f"{time.perf_counter() - began:.0f} s")  # fmt: skip


if __name__ == "__main__":
    clean = "--clean" in sys.argv
    words = [a for a in sys.argv[1:] if a != "--clean"]
    count, first, least = [*words, *("100", "0", "0.55")[len(words) :]]
    main(int(count), int(first), float(least), clean)
