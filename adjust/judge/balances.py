"""Simple balances, for comparison with least squares: each shares a misclosure out by rule of thumb.

With legs of length d_i and components e_i, n_i, and the misclosure (w_E, w_N) = computed - known,

    compass rule (Bowditch)   dE_i = -w_E d_i / sum d          dN_i = -w_N d_i / sum d
    transit rule              dE_i = -w_E |e_i| / sum |e|      dN_i = -w_N |n_i| / sum |n|
    equal angle balance       every angle gets -w / n, before the components are formed (adjust.judge.traversed)
    levels                    dh_i = -w s_i / sum s, with s the lengths, or the numbers of set-ups

(Bowditch 1808, The Analyst; the others are common practice). Least squares with all readings is the answer of the
program; these say what a balance by hand would have given, and how far that is from it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjust.book.job import Job
from adjust.graph.runs import LOOP, Lines, Run, known_heights, level_loops, level_runs, signs
from adjust.graph.sights import known_places
from adjust.judge.booked import Booked
from adjust.judge.closures import computed_traverses
from adjust.judge.traversed import Traversed
from adjust.network import CHECK, Array
from adjust.solver.solution import Solution
from adjust.solver.threads import one_thread

COMPASS, TRANSIT = "compass rule", "transit rule"
BY_LENGTH, BY_SETUPS, BY_LINES = "levels by length", "levels by set-ups", "levels by lines"


@dataclass(frozen=True)
class Balance:
    """One balanced traverse or levelled run beside least squares; metres."""

    method: str
    kind: str
    """loop traverse, link traverse, level loop, level run."""
    stations: tuple[int, ...]
    places: Array
    """(k, 2) east and north, or (k, 1) heights, of the stations in order."""
    largest: float
    """Largest difference of a station from least squares: its distance, or its height difference without sign."""
    at: int
    """The station where it is."""


def shared_out(size: Array, misclosure: float) -> Array:
    """Corrections (k,) in proportion to sizes (k,): their sum is minus the misclosure."""
    return np.asarray(-misclosure * size / size.sum())


def compass(length: Array, misclosure: tuple[float, float]) -> Array:
    """Corrections (k, 2) of east and north of legs by their lengths (k,)."""
    return np.column_stack([shared_out(length, w) for w in misclosure])


def transit(components: Array, misclosure: tuple[float, float]) -> Array:
    """Corrections (k, 2) of east and north of legs by the sizes of their components (k, 2); none by none."""
    size = np.abs(components)
    return np.column_stack([shared_out(size[:, c], w) if size[:, c].any() else 0 * size[:, c]
                            for c, w in enumerate(misclosure)])  # fmt: skip


def equal(angles: Array, misclosure: float) -> Array:
    """Balanced angles (k,)."""
    return np.asarray(angles - misclosure / len(angles))


def summed_up(start: Array, steps: Array) -> Array:
    """Coordinates (k + 1, c) from a start (c,) and steps (k, c)."""
    return np.concatenate([start[None], start + np.cumsum(steps, axis=0)])


def area(corners: Array) -> float:
    """Area enclosed by corners (k, 2) in order, without sign: half the sum of cross products."""
    east, north = corners.T
    return abs(float(east @ np.roll(north, -1) - north @ np.roll(east, -1))) / 2


def balances(solution: Solution) -> tuple[Balance, ...]:
    """Every loop and link traverse by compass and transit rule, every levelled run (and loop of a known mark) by
    length or set-ups, beside least squares. Loops without a known station begin at the adjusted place of their first.
    Links without a direction have no balance, nor what ends at a mark that is only to be checked."""
    with one_thread():
        booked = Booked.of(solution)
        checked = (booked.network.stations.role[:, :2] == CHECK).any(axis=1)
        out = []
        for one in computed_traverses(booked):
            if not one.turnable and (one.traverse.closed or not checked[list(one.traverse.stations)].any()):
                out += _traverse(solution, booked, one)
        return (*out, *_levels(solution))


def _traverse(solution: Solution, booked: Booked, one: Traversed) -> list[Balance]:
    first = one.traverse.stations[0]
    known = known_places(booked.network)[first]
    start = (booked.network.stations.known if known else solution.positions)[first, :2]
    lengths = np.array([leg.value for leg in one.legs])
    bearings = np.array([bearing.value for bearing in one.balanced])
    steps = lengths[:, None] * np.column_stack([np.sin(bearings), np.cos(bearings)])
    misclosure = (one.east.value, one.north.value)
    corrections = {COMPASS: compass(lengths, misclosure), TRANSIT: transit(steps, misclosure)}
    return [
        _beside(solution, method, one.traverse.kind, one.traverse.stations, summed_up(start, steps + correction))
        for method, correction in corrections.items()
    ]


def _levels(solution: Solution) -> list[Balance]:
    job, network = solution.job, solution.job.network
    lines = Lines.of(network)
    known = known_heights(network)
    carries = known & (network.stations.role[:, 2] != CHECK)
    runs = [run for run in level_loops(network, lines) if known[list(run.stations[:-1])].sum() == 1]
    runs += [run for run in level_runs(network, lines) if carries[[run.stations[0], run.stations[-1]]].all()]
    return [_level(solution, job, lines, run) for run in runs]


def _level(solution: Solution, job: Job, lines: Lines, run: Run) -> Balance:
    network, known = job.network, job.network.stations.known[:, 2]
    place = {row: k for k, row in enumerate(lines.row.tolist())}
    rows = [row for (row,) in run.rows]
    steps = lines.rise[[place[row] for row in rows]] * signs(network, run)
    first, last = run.stations[0], run.stations[-1]
    misclosure = math.fsum(steps.tolist()) + (0.0 if run.kind == LOOP else float(known[first] - known[last]))
    sizes = lines.walked[[place[row] for row in rows]]
    method, size = BY_LINES, np.ones(len(rows))
    for column, by in ((1, BY_SETUPS), (0, BY_LENGTH)):
        if not np.isnan(sizes[:, column]).any():
            method, size = by, sizes[:, column]
    heights = summed_up(np.array([known[first]]), (steps + shared_out(size, misclosure))[:, None])
    return _beside(solution, method, run.kind, run.stations, heights)


def _beside(solution: Solution, method: str, kind: str, stations: tuple[int, ...], places: Array) -> Balance:
    part = slice(0, 2) if places.shape[1] == 2 else slice(2, 3)
    away = np.sqrt(((places - solution.positions[list(stations), part]) ** 2).sum(axis=1))
    worst = int(np.argmax(np.nan_to_num(away)))
    return Balance(method, kind, stations, places, float(away[worst]), stations[worst])
