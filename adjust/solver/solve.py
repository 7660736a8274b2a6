"""From a Job to a Solution: parts, datum, start, elements, Gauss-Newton."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.book.job import Job
from adjust.errors import Unsolvable
from adjust.frames import LocalPlane
from adjust.graph.parts import HEIGHT, PLANE, Part, find_parts
from adjust.graph.starts import Start, find_start
from adjust.network import Array, Bools, Network
from adjust.solver import defects
from adjust.solver.cofactors import Cofactors
from adjust.solver.datum import PartDatum, assemble_datum, find_datum
from adjust.solver.design import Design, State, Unknowns, control_as_new
from adjust.solver.elements import make_batches
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import GaussNewton, Linear
from adjust.solver.solution import PartResult, Solution
from adjust.solver.threads import one_thread

CONDITION_SD_RAD = 1e-5
CONDITION_SD_M = 1e-3
"""Working weight of a reading held without error. Any size gives the same answer, since the condition is then imposed
exactly; the size of an ordinary reading keeps the numbers well scaled."""


@dataclass(frozen=True)
class Setting:
    """A network made ready to iterate."""

    network: Network
    parts: list[PartDatum]
    design: Design
    start: Start
    iteration: GaussNewton


def solve(job: Job) -> Solution:
    """Adjust a job by least squares.

    Raises Unsolvable in trade words where the readings leave something free, NotConverged where it does not settle.
    """
    with one_thread():
        ready = prepare(job)
        state = State(ready.start.positions, ready.start.groups)
        try:
            outcome = ready.iteration.run(state)
        except SingularPattern as singular:
            raise Unsolvable(free_movements(ready, singular)) from None
        return solution_at(job, ready, outcome.last, outcome.cofactors, outcome.iterations)


def prepare(job: Job) -> Setting:
    """Parts, datum, starting values and pattern of a job; raises Unsolvable."""
    parts = find_parts(job.network)
    start = find_start(job.network)
    if start.failures:
        raise Unsolvable(start.failures)
    settings = job.settings
    datum = find_datum(job.network, parts, settings.datum_kind, settings.datum_stations, start.positions)
    free = _free_coordinates(job.network, datum)
    network = control_as_new(job.network, free)
    if network is not job.network:
        datum = find_datum(network, find_parts(network), "free", settings.datum_stations, start.positions)
    unknowns = Unknowns.of(network, [d.part for d in datum], free)
    design = Design(network, LocalPlane(), unknowns)
    batches = make_batches(design, np.where(design.held, _working_sd(design), design.sd))
    whole = assemble_datum(network, datum, unknowns, start.reference, start.groups)
    return Setting(network, datum, design, start, GaussNewton(design, batches, whole))


def _working_sd(design: Design) -> Array:
    return np.where(design.wraps, CONDITION_SD_RAD, CONDITION_SD_M)


def _free_coordinates(network: Network, datum: list[PartDatum]) -> Bools:
    """Coordinates (n, 3) of the parts whose datum is free."""
    free = np.zeros((len(network.stations), 3), dtype=bool)
    for one in datum:
        if one.free:
            free |= one.part.nodes[:, [PLANE, PLANE, HEIGHT]]
    return free


def free_movements(ready: Setting, singular: SingularPattern) -> list[str]:
    """Sentences for what nothing fixes, found at the starting values."""
    iteration = ready.iteration
    here = iteration.at(State(ready.start.positions, ready.start.groups))
    normal = iteration.pattern.normal(here.whitened)
    return defects.words(ready.network, ready.design.unknowns, iteration.kept, normal, singular.unknowns)


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
        job, ready.network, design, last.state.positions, last.state.groups, last.whitened, cofactors,
        residuals, design.observed + residuals, parts, total, iterations, ready.start.assumed,
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
