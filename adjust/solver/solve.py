"""From a Job to a Solution: parts, datum, start, elements, Gauss-Newton."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from adjust.book.job import Job
from adjust.errors import NotConverged, Unsolvable
from adjust.frames import LocalPlane
from adjust.graph.parts import HEIGHT, PLANE, Part, find_parts
from adjust.graph.starts import Start, find_start
from adjust.network import HELD, WEIGHTED, Array, Bools, Network
from adjust.solver.cofactors import Cofactors
from adjust.solver.datum import PartDatum, assemble_datum, find_datum
from adjust.solver.defects import Loose
from adjust.solver.design import Design, Unknowns, control_as_new
from adjust.solver.elements import make_batches
from adjust.solver.gauss import GaussNewton, Linear
from adjust.solver.settle import Setting, freedom_at, settle
from adjust.solver.solution import PartResult, Solution
from adjust.solver.threads import one_thread

CONDITION_SD_RAD = 1e-5
CONDITION_SD_M = 1e-3
"""Working weight of a reading held without error. Any size gives the same answer, since the condition is then imposed
exactly; the size of an ordinary reading keeps the numbers well scaled."""


def solve(job: Job) -> Solution:
    """Adjust a job by least squares.

    Raises Unsolvable (Loose, with the movements) where the readings leave something free, NotConverged (NotSettled)
    where it does not settle. adjust.judge.solved.solve is the same with these told in trade words.
    """
    with one_thread():
        ready = prepare(job)
        return replace(_settled(job, ready), free=_free_stage(job, ready))


def _settled(job: Job, ready: Setting) -> Solution:
    outcome = settle(ready)
    return solution_at(job, ready, outcome.last, outcome.cofactors, outcome.iterations)


def _free_stage(job: Job, ready: Setting) -> Solution | None:
    """The readings alone on a free datum carried by the control marks, where control is more than the datum needs.

    None too where the readings do not hold together without the control, as in a resection.
    """
    if not any(one.spare > 0 for one in ready.parts):
        return None
    role = job.network.stations.role
    marks = np.flatnonzero(((role == HELD) | (role == WEIGHTED)).any(axis=1))
    names = tuple(job.network.stations.names[i] for i in marks)
    alone = replace(job, settings=replace(job.settings, datum_kind="free", datum_stations=names))
    try:
        return _settled(alone, prepare(alone, ready.start))
    except (Unsolvable, NotConverged):
        return None


def prepare(job: Job, start: Start | None = None) -> Setting:
    """Parts, datum, starting values and pattern of a job; raises Unsolvable."""
    parts = find_parts(job.network)
    start = start or find_start(job.network, job.settings.frame.plane_height)
    filled = replace(start, positions=_filled(start.positions, parts))
    settings = job.settings
    try:
        datum = find_datum(job.network, parts, settings.datum_kind, settings.datum_stations, filled.positions)
    except Unsolvable as missing:
        setting = _setting(job, _loosened(job, job.network, parts, filled), filled, lambda n: _loosened(
            job, n, find_parts(n), filled))  # fmt: skip
        raise Loose(freedom_at(setting, setting.iteration.at(setting.begin)), tuple(missing.sentences)) from None
    ready = _setting(job, datum, filled, lambda network: find_datum(
        network, find_parts(network), "free", settings.datum_stations, filled.positions))  # fmt: skip
    if start.failures:
        # nothing leads to some station: where even a guessed place for it can move, that is what to say
        freedom = freedom_at(ready, ready.iteration.at(ready.begin))
        raise Loose(freedom) if len(freedom.stations) else Unsolvable(start.failures)
    return ready


def _setting(job: Job, datum: list[PartDatum], start: Start, again: Callable[[Network], list[PartDatum]]) -> Setting:
    """Pattern for a datum; ``again`` finds the datum of the network without the control that a free one sets aside."""
    network = job.network
    free = _free_coordinates(network, datum)
    as_new = control_as_new(network, free)
    if as_new is not network:
        datum = again(as_new)
    unknowns = Unknowns.of(as_new, [d.part for d in datum], free)
    frame = LocalPlane.of(network.stations, job.settings.frame.plane_height)
    coupled = np.any([one.part.nodes.all(axis=1) for one in datum], axis=0)
    design = Design(as_new, frame, unknowns, np.asarray(coupled))
    batches = make_batches(design, np.where(design.held, _working_sd(design), design.sd))
    whole = assemble_datum(as_new, datum, unknowns, start.reference, start.groups)
    return Setting(as_new, datum, design, start, GaussNewton(design, batches, whole))


def _loosened(job: Job, network: Network, parts: list[Part], start: Start) -> list[PartDatum]:
    """The datum of every part, free where its control is too little, so that the rest can be looked at."""
    out = []
    for part in parts:
        try:
            out += find_datum(network, [part], job.settings.datum_kind, (), start.positions)
        except Unsolvable:
            free = find_datum(network, [part], "free", (), start.positions)
            out += [replace(one, stations=one.part.stations) for one in free]
    return out


def _filled(positions: Array, parts: list[Part]) -> Array:
    """Guessed places, seeded, where a reading asks for a coordinate and no start was found: what is free there is free
    almost everywhere."""
    asked = np.zeros((len(positions), 2), dtype=bool)
    for part in parts:
        asked |= part.nodes
    missing = asked[:, [PLANE, PLANE, HEIGHT]] & np.isnan(positions)
    if not missing.any():
        return positions
    known = np.isfinite(positions[:, :2]).all(axis=1)
    middle = positions[known, :2].mean(axis=0) if known.any() else np.zeros(2)
    extent = float(np.abs(positions[known, :2] - middle).max(initial=0.0)) or 100.0
    guess = np.random.default_rng(7).uniform(-1.0, 1.0, positions.shape) * extent + [*middle, 0.0]
    return np.asarray(np.where(missing, guess, positions))


def _working_sd(design: Design) -> Array:
    return np.where(design.wraps, CONDITION_SD_RAD, CONDITION_SD_M)


def _free_coordinates(network: Network, datum: list[PartDatum]) -> Bools:
    """Coordinates (n, 3) of the parts whose datum is free."""
    free = np.zeros((len(network.stations), 3), dtype=bool)
    for one in datum:
        if one.free:
            free |= one.part.nodes[:, [PLANE, PLANE, HEIGHT]]
    return free


def solution_at(job: Job, ready: Setting, last: Linear, cofactors: Cofactors, iterations: int) -> Solution:
    """The Solution for a linearisation: the last one of an iteration, or the start where nothing was iterated yet."""
    design = ready.design
    residuals = -last.numbers.misclosure
    squares = np.zeros(len(residuals))
    for w in last.whitened:
        squares[w.batch.rows] = w.l**2
    squares[design.held] = 0.0
    parts = tuple(_part(ready, one, squares) for one in ready.parts)
    total = PartResult(
        what="all",
        rows=np.ones(len(residuals), dtype=bool),
        observations=sum(p.observations for p in parts),
        unknowns=sum(p.unknowns for p in parts),
        conditions=sum(p.conditions for p in parts),
        datum_missing=sum(p.datum_missing for p in parts),
        square_sum=float(squares.sum()),
    )
    return Solution(
        job, ready, last.state.positions, last.state.groups, last.whitened, cofactors,
        last.numbers.coefficients, residuals, design.observed + residuals, parts, total, iterations,
    )  # fmt: skip


def _part(ready: Setting, one: PartDatum, squares: Array) -> PartResult:
    part: Part = one.part
    rows = part.rows
    held = int((rows & ready.design.held).sum())
    coordinates = ready.design.unknowns.coordinate[part.nodes[:, [PLANE, PLANE, HEIGHT]]]
    return PartResult(
        what=part.what,
        rows=rows,
        observations=int(rows.sum()) - held,
        unknowns=int((coordinates >= 0).sum()) + int(part.groups.sum()),
        conditions=held,
        datum_missing=one.null.shape[1] if one.free else 0,
        square_sum=float(squares[rows].sum()),
        datum=one,
    )
