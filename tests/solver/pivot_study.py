"""Measure what the thresholds of the solver stand between; their docstrings quote the figures printed here.

    .venv/bin/python -m tests.solver.pivot_study            all, about a minute
    .venv/bin/python -m tests.solver.pivot_study 50         with 50 networks instead of 500

1. PIVOT_LEAST (adjust.solver.engine): the smallest scaled pivot of random free networks whose datum is removed by
   minimal constraints, against the smallest one left where the datum is not removed, and where one station hangs on a
   single distance. Then networks with most of their readings taken away, told apart by dense singular values; then long
   open traverses, whose pivots fall with their length.
2. UNCHECKED_BELOW (adjust.judge.reliability): the checked share computed for readings that truly nothing checks (those
   to a station reached by one distance and one pointing), and the smallest share of all others.
3. DENSE_MOST and MOVES (adjust.solver.defects): time of the eigenvalue decomposition at 3,000 unknowns; the largest
   share of a unit movement that rounding gives to a station that does not move, and the smallest of one that does.
"""

from __future__ import annotations

import math
import sys
import time
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
from scipy.linalg import eigh
from scipy.sparse.linalg import splu

import adjust
import adjust.errors
from adjust.judge.reliability import reliability
from adjust.solver import defects
from adjust.solver.design import State
from adjust.solver.engine import PIVOT_LEAST, Pattern
from adjust.solver.gauss import Linear
from adjust.solver.solve import Setting, prepare
from adjust.solver.threads import one_thread
from tests.networks import Array, Made, Row, Table, random_job, write_job

KINDS = (("distances", "directions"), ("distances", "angles"), ("distances",), ("directions",), ("levelled_lengths",))
SEED = 2027


def networks(
    count: int, folder: Path, kinds: tuple[tuple[str, ...], ...], control: str, spur: bool, first: int = 0
) -> Iterator[Made]:
    """Random jobs of 4 to 60 stations."""
    for k in range(first, first + count):
        rng = np.random.default_rng([SEED, k])
        yield random_job(rng, folder / str(k), int(rng.integers(4, 61)), kinds[k % len(kinds)], control, spur=spur)


def linearised(ready: Setting) -> Linear:
    """Linearised at the starting values, 0.3 m off at the most."""
    return ready.iteration.at(State(ready.start.positions, ready.start.groups))


def pivots(pattern: Pattern, here: Linear) -> Array:
    """Pivots of the scaled normal matrix, in the way of adjust.solver.engine but without its limit."""
    normal = pattern.normal(here.whitened)
    if not np.all(normal.diagonal() > 0):  # refused there before any pivot: nothing asks for that unknown
        return np.zeros(1)
    scale = 1.0 / np.sqrt(normal.diagonal())
    scaled = normal.copy()
    scaled.data = normal.data * scale[normal.indices] * np.repeat(scale, np.diff(normal.indptr))
    lu = splu(scaled, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0,
              options={"SymmetricMode": True, "Equil": False})  # fmt: skip
    return np.asarray(lu.U.diagonal())


def thinned(made: Made, rng: np.random.Generator) -> Made:
    """The job with some 40 to 80 per cent of its readings taken away, so that it may just hold or just not."""
    share = rng.uniform(0.2, 0.6)
    tables = [
        t if t.kind == "stations" else replace(t, rows=[r for r in t.rows if rng.random() < share]) for t in made.tables
    ]
    write_job(made.folder, [t for t in tables if t.rows], free=True)
    return made


def smallest_singular_value(ready: Setting, here: Linear) -> float:
    """Of the dense whitened rows with columns of unit length: the independent judge of what is solvable."""
    A = np.zeros((len(ready.network.rows), len(ready.iteration.kept) + 1))
    for w, columns in zip(here.whitened, ready.iteration.pattern.columns, strict=True):
        np.add.at(A, (w.batch.rows[:, :, None], columns[:, None, :]), w.reduced)
    A = A[:, :-1]
    size = np.linalg.norm(A, axis=0)
    return float(np.linalg.svd(A / np.where(size > 0, size, 1.0), compute_uv=False)[len(size) - 1 : len(size)].sum())


def study_pivots(count: int, folder: Path) -> None:
    solvable, datum, spur = [], [], []
    for made in networks(count, folder / "pivots", KINDS, "free", spur=False):
        ready = prepare(adjust.read(made.folder))
        here = linearised(ready)
        solvable.append(pivots(ready.iteration.pattern, here).min())
        whole = Pattern.of([b.columns for b in ready.iteration.batches], ready.design.unknowns.count)
        datum.append(least_or_refused(whole, here))
    for made in networks(count, folder / "spurs", (("distances",),), "held", spur=True):
        ready = prepare(adjust.read(made.folder))
        spur.append(least_or_refused(ready.iteration.pattern, linearised(ready)))
    say = "smallest pivot of each"
    print(f"{count} free networks, datum removed: {say} at least {min(solvable):.1e}, median {np.median(solvable):.1e}")
    print(f"the same, datum left in: {say} at most {max(datum):.1e}, median {np.median(datum):.1e}")
    print(f"{count} networks with a spur: {say} at most {max(spur):.1e}, median {np.median(spur):.1e}")


def study_thinned(count: int, folder: Path) -> None:
    fixed, loose, between = [], [], []
    for k, made in enumerate(networks(count, folder / "thinned", KINDS[:4], "free", spur=False)):
        try:
            ready = prepare(adjust.read(thinned(made, np.random.default_rng([SEED, 1, k])).folder))
        except adjust.errors.BrasscapError:
            continue  # no datum can be placed in a piece of one line
        here = linearised(ready)
        value = smallest_singular_value(ready, here)
        (fixed if value > 1e-6 else loose if value < 1e-12 else between).append(
            least_or_refused(ready.iteration.pattern, here)
        )
    print(f"{len(fixed)} thinned networks that hold (least singular value above 1e-6): least pivot {min(fixed):.1e}")
    print(f"{len(loose)} that do not hold (below 1e-12): smallest pivot of each at most {max(loose):.1e}, "
          f"{sum(p > PIVOT_LEAST for p in loose)} of them above PIVOT_LEAST; between: {between}")  # fmt: skip


def least_or_refused(pattern: Pattern, here: Linear) -> float:
    """The smallest pivot; zero where the factorisation itself refuses."""
    try:
        return float(pivots(pattern, here).min())
    except RuntimeError:
        return 0.0


def traverse(folder: Path, n: int) -> Path:
    """An open traverse of n stations, 100 m legs, directions back and fore and every leg measured."""
    rng = np.random.default_rng([SEED, n])
    azimuths = np.cumsum(rng.uniform(-0.3, 0.3, n - 1))
    east = np.concatenate([[0.0], np.cumsum(100 * np.sin(azimuths))])
    north = np.concatenate([[0.0], np.cumsum(100 * np.cos(azimuths))])
    name = [f"{i} x" for i in range(n)]
    legs: list[Row] = [{"from": name[i], "to": name[i + 1], "distance": 100.0} for i in range(n - 1)]
    rays: list[Row] = [
        {"at": name[i], "to": name[j], "direction": math.atan2(east[j] - east[i], north[j] - north[i]) % math.tau}
        for i in range(n) for j in (i - 1, i + 1) if 0 <= j < n
    ]  # fmt: skip
    places: list[Row] = [{"station": name[i], "east": float(east[i]), "north": float(north[i])} for i in range(n)]
    tables = [
        Table("stations.csv", "stations", places),
        Table("distances.csv", "distances", legs, "station"),
        Table("directions.csv", "directions", rays, "station"),
    ]
    return write_job(folder, tables, free=True)


def study_traverses(folder: Path) -> None:
    """Nothing in an open traverse is checked: its redundancy numbers are all rounding."""
    for n in (10, 60, 300, 1000, 3000):
        job = adjust.read(traverse(folder / f"traverse{n}", n))
        ready = prepare(job)
        here = linearised(ready)
        line = f"open traverse of {n:5d} stations: smallest pivot {pivots(ready.iteration.pattern, here).min():.1e}"
        if n <= 1000:
            left = np.abs(reliability(adjust.solve(job)).redundancy).max()
            line += f", largest redundancy number left by rounding {left:.1e}"
        print(line)


def study_unchecked(count: int, folder: Path) -> None:
    unchecked, shares = [], []
    kinds = (("distances", "directions"), ("distances", "angles"), ("levelled_lengths",))
    for k, control in enumerate(("held", "weighted", "free")):
        for made in networks(count // 3, folder / f"unchecked{k}", kinds, control, spur=True):
            figures = reliability(adjust.solve(adjust.read(made.folder)))
            spur = (made.readings.stations == len(made.names) - 1).any(axis=1)
            unchecked.append(np.abs(figures.redundancy[spur]).max())
            shares.append(np.abs(figures.redundancy))
    every = np.sort(np.concatenate(shares))
    gap = int(np.argmax(np.diff(np.log(np.maximum(every, 1e-17)))))
    print(f"{len(unchecked)} networks with a station reached once: share of its readings at most {max(unchecked):.1e}")
    print(f"all {len(every)} readings: widest gap between shares {every[gap]:.1e} and {every[gap + 1]:.1e}")


def study_movements(count: int, folder: Path) -> None:
    still, moving = [], []
    for made in networks(count, folder / "moves", (("distances",),), "held", spur=True):
        ready = prepare(adjust.read(made.folder))
        unknowns, iteration = ready.design.unknowns, ready.iteration
        null = np.abs(defects._null(iteration.pattern.normal(linearised(ready).whitened))).max(axis=1)
        own = unknowns.coordinate[ready.network.stations.index["spur"]]
        is_spur = np.isin(iteration.kept, own[own >= 0])
        still.append(null[~is_spur].max())
        moving.append(null[is_spur].max())
    print(f"{count} networks with a spur: share of a unit movement of standing stations at most {max(still):.1e}; "
          f"of the spur at least {min(moving):.1e}")  # fmt: skip


def study_eigh() -> None:
    rng = np.random.default_rng(SEED)
    square = rng.normal(size=(3000, 3000))
    square = square @ square.T
    begin = time.perf_counter()
    np.linalg.eigh(square)
    middle = time.perf_counter()
    eigh(square, eigvals_only=True)
    print(f"eigenvalues and vectors at 3,000 unknowns, one thread: {middle - begin:.1f} s; eigenvalues alone "
          f"{time.perf_counter() - middle:.1f} s")  # fmt: skip


def main(count: int) -> None:
    with one_thread(), TemporaryDirectory() as place:
        folder = Path(place)
        study_pivots(count, folder)
        study_thinned(count, folder)
        study_traverses(folder)
        study_unchecked(count, folder)
        study_movements(min(count, 100), folder)
        study_eigh()


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 500)
