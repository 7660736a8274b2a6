"""Which readings stand out where several are grossly wrong: a redescending estimate on the iteration.

From the starting values, with u = |l| / s of every reading, every round takes the weights of Cauchy's estimate

    p = 1 / (s^2 (1 + (u / c)^2))        c falling from the median of u to C

and moves by a step or two of Gauss-Newton (iteratively reweighted least squares: Holland and Welsch 1977; c falling as
in graduated non-convexity, Blake and Zisserman 1987). A reading far from what the many say so loses its say, without
being named beforehand. What then is off by more than `GROSS` standard deviations stands out.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.errors import Unsolvable
from adjust.network import Array, Ints
from adjust.solver.design import State
from adjust.solver.elements import make_batches
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import GaussNewton, Linear, NotSettled

C = 3.0
"""Standard deviations at which a reading's weight has fallen to half in the last rounds; sound ones stay below."""
ROUNDS, ROUNDS_LARGE, LARGE = 16, 6, 5000
"""Rounds, and fewer in jobs of more than LARGE scalar rows, where each takes long."""
STEPS = 2
"""Steps of Gauss-Newton a round: more would follow weights that are not right yet."""
FALL = 2.0
"""Factor by which c falls from round to round."""
LEAST_WEIGHT = 1e-10
GROSS = 10.0
"""A reading is blamed only if it differs from the others by this many of its standard deviations."""


@dataclass(frozen=True)
class Outvoted:
    """Rows that stand out, the worst first, and the state in which they do."""

    rows: Ints
    state: State


def outvoted(iteration: GaussNewton, first: State) -> Outvoted | None:
    """Readings that the many outvote from a start; None where the estimate fails or nothing stands out."""
    design = iteration.design
    sd = np.where(design.held, np.inf, design.sd)
    state, c = first, np.inf
    rounds = ROUNDS if len(sd) <= LARGE else ROUNDS_LARGE
    try:
        for _ in range(rounds):
            u = _misfit(iteration, state, sd)
            c = max(C, min(c / FALL, float(np.median(u[np.isfinite(sd)]))))
            state = _moved(iteration, state, u / c).state
        u = _misfit(iteration, state, sd)
    except (SingularPattern, Unsolvable, np.linalg.LinAlgError):
        return None
    rows = np.argsort(-u, kind="stable")
    rows = rows[u[rows] > GROSS]
    return Outvoted(rows, state) if len(rows) else None


def _misfit(iteration: GaussNewton, state: State, sd: Array) -> Array:
    return np.asarray(np.abs(iteration.at(state).numbers.misclosure) / sd)


def _moved(iteration: GaussNewton, state: State, u: Array) -> Linear:
    """A round: the state after some steps with the weights of misfits u (R,) in units of c."""
    design = iteration.design
    spread = np.minimum(np.sqrt(1.0 + u**2), LEAST_WEIGHT**-0.5)
    again = GaussNewton(design, make_batches(design, np.where(design.held, 1e-3, design.sd) * spread),
                        iteration.datum)  # fmt: skip
    try:
        return again.run(state, STEPS).last
    except NotSettled as still:
        return still.here
