"""Likely slips of readings that are named where no start agrees or the adjustment does not settle.

Where the others lead without some readings S they differ from them by b with the covariance K^-1,

    K = E_S'M E_S      b = K^-1 E_S'M l      (adjust.judge.leaving_out; M as in adjust.judge.influence)

at the place to which the others alone were adjusted. The misclosures l there may hold an orientation turned by a wrong
pointing of the set: M takes it out, as it is linear. Each b with its standard deviation is weighed as that of a suspect
is (adjust.judge.causes), in the network of the others; there is no cause where that cannot be adjusted.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from adjust.book.job import Job
from adjust.errors import BrasscapError
from adjust.judge.causes import Cause, of_cases
from adjust.judge.influence import Influence
from adjust.judge.rows import rows_in, without_rows
from adjust.judge.slip_forms import Slipped
from adjust.judge.slips_asked import Books, asked
from adjust.network import Array, Block, Network
from adjust.solver.design import State
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import GaussNewton
from adjust.solver.solution import Solution
from adjust.solver.solve import prepare, solve

UNCHECKED = 1e-6
"""Share of a reading's weight below which the others say nothing of it."""


def amounts(iteration: GaussNewton, state: State, rows: tuple[int, ...]) -> tuple[Array, Array] | None:
    """By how much rows differ from what all others have at a state, and standard deviations; None if not known."""
    design = iteration.design
    errors = np.zeros((len(design.sd), len(rows)))
    errors[list(rows), np.arange(len(rows))] = 1.0
    try:
        here = iteration.at(state)
        influence = Influence(here.whitened, iteration.cofactors(here), design.held)
        m = influence.times(errors)
        k = errors.T @ m
        if not (np.diagonal(k) > UNCHECKED * influence.weights(errors)).all():
            return None
        covariance = np.linalg.inv(k)
    except (BrasscapError, SingularPattern, np.linalg.LinAlgError):
        return None
    variances = np.diagonal(covariance)
    if not (variances > 0).all():
        return None
    b = covariance @ (m.T @ here.numbers.misclosure)
    return np.asarray(b), np.sqrt(variances)


def unsettled_causes(job: Job, iteration: GaussNewton, state: State, rows: tuple[int, ...]) -> list[tuple[Cause, ...]]:
    """Likely slips of each of the rows without which the iteration settled at a state."""
    found, network = amounts(iteration, state, rows), iteration.design.network
    gone = rows_in(network, job.network)[list(rows)]
    others = _adjusted(job, without_rows(job.network, gone)) if found is not None else None
    if found is None or others is None:
        return [()] * len(rows)
    places = [(network.blocks[network.rows.block[r]], int(network.rows.row[r])) for r in rows]
    return [_causes(job, others, block, i, b, s)
            for (block, i), b, s in zip(places, found[0].tolist(), found[1].tolist(), strict=True)]  # fmt: skip


def start_causes(job: Job, place: tuple[int, int], less: Network) -> tuple[Cause, ...]:
    """Likely slips of a reading (block and row) without which (``less``) the others have a start."""
    b, i = place
    network, others = job.network, _adjusted(job, less)
    if others is None:
        return ()
    start = np.where(np.isnan(others.positions), network.stations.start, others.positions)
    given = replace(network, stations=replace(network.stations, start=start))
    try:
        ready = prepare(replace(job, network=given))
    except (BrasscapError, SingularPattern, np.linalg.LinAlgError):
        return ()
    block, used = network.blocks[b], ready.design.network
    at = next((n for n, one in enumerate(used.blocks) if one is block), None)
    if at is None:  # a free datum sets control aside
        return ()
    row = int(used.rows.of_block(at, len(block))[i])
    state = State(np.where(np.isnan(others.positions), ready.begin.positions, others.positions), ready.begin.groups)
    found = amounts(ready.iteration, state, (row,)) if row >= 0 else None
    return _causes(job, others, block, i, float(found[0][0]), float(found[1][0])) if found else ()


def _adjusted(job: Job, others: Network) -> Solution | None:
    try:
        return solve(replace(job, network=others))
    except (BrasscapError, SingularPattern, np.linalg.LinAlgError):
        return None


def _causes(job: Job, others: Solution, block: Block, i: int, amount: float, sd: float) -> tuple[Cause, ...]:
    """Likely slips of a reading that is ``amount`` larger than the others have it, known to ``sd``."""
    read, state = asked(Books(job), block, i), State(others.positions, others.groups)
    return of_cases(Slipped(others, state, block, i, read.raws, read.kind, read.noun, read.wraps, amount, sd))
