"""Likely slips of readings that are named where no start agrees or the adjustment does not settle.

Where the others lead without some readings S they differ from them by b with the covariance K^-1,

    K = E_S'M E_S      b = K^-1 E_S'M l      (adjust.judge.leaving_out; M as in adjust.judge.influence)

at the place to which the others alone were adjusted. The misclosures l there may hold an orientation turned by a wrong
pointing of the set: M takes it out, as it is linear. Each b with its standard deviation is weighed against the slips of
text (adjust.judge.slips_asked); there is no cause where the rest cannot be adjusted either.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from adjust.book.job import Job
from adjust.errors import BrasscapError
from adjust.judge.causes import Cause
from adjust.judge.influence import Influence
from adjust.judge.slips_asked import of_amount
from adjust.network import Array, Network
from adjust.solver.design import State
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import GaussNewton
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
    if found is None:
        return [()] * len(rows)
    places = [(network.blocks[network.rows.block[r]], int(network.rows.row[r])) for r in rows]
    return [of_amount(job, block, i, b, s)
            for (block, i), b, s in zip(places, found[0].tolist(), found[1].tolist(), strict=True)]  # fmt: skip


def start_causes(job: Job, place: tuple[int, int], less: Network) -> tuple[Cause, ...]:
    """Likely slips of a reading (block and row) without which (``less``) the others have a start."""
    b, i = place
    network = job.network
    try:
        positions = solve(replace(job, network=less)).positions
        start = np.where(np.isnan(positions), network.stations.start, positions)
        given = replace(network, stations=replace(network.stations, start=start))
        ready = prepare(replace(job, network=given))
    except (BrasscapError, SingularPattern, np.linalg.LinAlgError):
        return ()
    block, used = network.blocks[b], ready.design.network
    at = next((n for n, one in enumerate(used.blocks) if one is block), None)
    if at is None:  # a free datum sets control aside
        return ()
    row = int(used.rows.of_block(at, len(block))[i])
    state = State(np.where(np.isnan(positions), ready.begin.positions, positions), ready.begin.groups)
    found = amounts(ready.iteration, state, (row,)) if row >= 0 else None
    return of_amount(job, block, i, float(found[0][0]), float(found[1][0])) if found else ()
