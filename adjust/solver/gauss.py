"""Gauss-Newton with damping: x <- x + a dx, N dx = A*' l*, until the step vanishes.

The merit is the weighted square sum v'Pv with the local unknowns at their best. Where a full step worsens it, it is
damped (Levenberg 1944, Marquardt 1963): (N + m diag N) dx = A*' l*, m growing tenfold until the merit falls and
shrinking after every success; datum and conditions, which such a step leaves to their working weights, are imposed
again by the next full one. The last linearisation is made at the answer, so that cofactors belong to it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import diags_array

from adjust.errors import NotConverged, Unsolvable
from adjust.network import Array
from adjust.solver.cofactors import Cofactors
from adjust.solver.curvature import curvature, is_gross
from adjust.solver.datum import Datum, null_space, state_vector
from adjust.solver.design import Design, Linearised, State
from adjust.solver.elements import Batch, Whitened, whiten
from adjust.solver.engine import Factor, Pattern, SingularPattern

MOST_ITERATIONS, MOST_NEWTON = 60, 100
"""Iterations by full steps, and by Newton's steps after these did not settle. Of 927 networks with a gross error 13
settle in neither (tests/solver/any_network.py)."""
DAMPING_FIRST, DAMPING_MOST = 1e-4, 1e12
"""Shares of the diagonal of N added at the first failure, and at the last before the iteration gives up."""
STEP_LEAST_M = 1e-9
"""A step below one nanometre ends the iteration; Gauss-Newton's next step is smaller by the curvature times the
residual over the length, 1e-4 for 1 mm at 10 m."""
FARTHEST_M = 1e8
"""A step beyond the Earth is no step: the readings do not hold what is moved."""
WORSE, WORSE_SHARE = 1e-6, 1e-12
"""Growth of v'Pv, absolute and as a share, that still counts as none: above rounding, far below any statistic."""
GAIN = 1e-9
"""Fall of v'Pv, as a share, that shows that full steps still lead somewhere though they do not shrink. Near a minimum
with a gross error full steps can lead away from it within the rounding of v'Pv; only their growth shows it."""


@dataclass(frozen=True)
class Linear:
    """One state with its linearisation and whitened elements."""

    state: State
    numbers: Linearised
    whitened: list[Whitened]
    merit: float


class NotSettled(NotConverged):
    """NotConverged with the iteration, where it began and where it stopped; adjust.judge.unsettled finds the words."""

    def __init__(self, iteration: GaussNewton, first: State, here: Linear, sentences: list[str]) -> None:
        super().__init__(sentences)
        self.iteration, self.first, self.here = iteration, first, here


@dataclass(frozen=True)
class Outcome:
    """Where the iteration came to rest."""

    last: Linear
    cofactors: Cofactors
    iterations: int


class GaussNewton:
    """The iteration for one design, datum and list of batches."""

    def __init__(self, design: Design, batches: list[Batch], datum: Datum) -> None:
        self.design, self.batches, self.datum = design, batches, datum
        count = design.unknowns.count
        self.reduced = np.full(count, -1, dtype=np.int64)
        kept = np.setdiff1d(np.arange(count), datum.fixed)
        self.reduced[kept] = np.arange(len(kept))
        self.kept = kept
        reduced = np.append(self.reduced, -1)  # so that -1, no unknown, stays -1
        self.pattern = Pattern.of([reduced[b.columns] for b in batches], len(kept))
        self.held = np.flatnonzero(design.held)
        self.latest: Linear | None = None
        """The last linearisation made, for whoever has to explain a failure."""

    def at(self, state: State) -> Linear:
        """Linearise at a state."""
        numbers = self.design.linearise(state)
        self._check_sights(numbers)
        whitened = [whiten(b, numbers) for b in self.batches]
        self.latest = Linear(state, numbers, whitened, float(sum((w.reduced_l**2).sum() for w in whitened)))
        return self.latest

    def _check_sights(self, numbers: Linearised) -> None:
        """A sight of no length has no direction: the two stations are at one place."""
        bad = np.flatnonzero(~np.isfinite(numbers.coefficients).all(axis=1) | ~np.isfinite(numbers.misclosure))
        if not len(bad):
            return
        rows, network = self.design.network.rows, self.design.network
        block = network.blocks[rows.block[bad[0]]]
        i = int(rows.row[bad[0]])
        ends = " and ".join(network.stations.names[s] for s in block.stations[i])
        kind = block.kind.replace("_", " ")
        raise Unsolvable([f"{block.name(i)}: {ends} stand at one place, so the {kind} between them has no meaning; "
                          "correct the coordinates or the names"])  # fmt: skip

    def conditions(self, here: Linear) -> Array:
        """Rows K (h, u) of the readings held without error."""
        k = np.zeros((len(self.held), self.design.unknowns.count + 1))
        for i, row in enumerate(self.held):
            np.add.at(k[i], self.design.columns[row], here.numbers.coefficients[row])  # -1 falls into the last, cut off
        return k[:, :-1]

    def cofactors(self, here: Linear) -> Cofactors:
        """Cofactors at a state; raises SingularPattern."""
        factor = self.pattern.factor(here.whitened) if len(self.kept) else None
        null = null_space(self.design.network, self.datum.parts, self.design.unknowns, here.state.positions)
        return Cofactors.of(factor, self.reduced, self.conditions(here), null, self.datum.constraint)

    def step(self, here: Linear) -> Array:
        """The full step (u,) of all but the local unknowns."""
        dx = np.zeros(self.design.unknowns.count)
        factor = self.pattern.factor(here.whitened) if len(self.kept) else None
        if factor is not None:
            dx[self.kept] = factor.solve(self.pattern.right_side(here.whitened))
        k = self.conditions(here)
        if len(k):
            u = Cofactors.of(factor, self.reduced, k[:0], k[:0].T, k[:0].T).times(k.T)
            dx -= u @ np.linalg.solve(k @ u, k @ dx - here.numbers.misclosure[self.held])
        if self.datum.defect:
            c = self.datum.constraint
            null = null_space(self.design.network, self.datum.parts, self.design.unknowns, here.state.positions)
            x = state_vector(self.design.unknowns, here.state.positions, here.state.groups)
            dx -= null @ np.linalg.solve(c.T @ null, c.T @ (x + dx - self.datum.reference))
        return dx

    def moved(self, here: Linear, dx: Array) -> State:
        """The state after a step; local unknowns follow at their best."""
        positions, groups = here.state.positions.copy(), here.state.groups.copy()
        numbers = self.design.unknowns.coordinate
        positions[numbers >= 0] += dx[numbers[numbers >= 0]]
        shared = self.design.unknowns.shared
        groups[shared >= 0] += dx[shared[shared >= 0]]
        for w in here.whitened:
            if w.batch.locals.shape[1]:
                np.add.at(groups, w.batch.locals, w.local_step(dx))
        return State(positions, groups)

    def run(self, state: State, most: int | None = None) -> Outcome:
        """Iterate from a state, ``most`` times at the most; raises NotSettled or SingularPattern.

        Where a gross error keeps full steps from settling, the way is gone again with Newton's steps from the first
        full step that does not shrink: each of the two settles on networks where the other does not.
        """
        try:
            return self._iterate(state, most or MOST_ITERATIONS, patient=True)
        except (NotSettled, SingularPattern):
            if most is not None or self.latest is None or not is_gross(self.latest.whitened):
                raise
        return self._iterate(state, MOST_NEWTON, patient=False)

    def _iterate(self, state: State, most: int, patient: bool) -> Outcome:
        """The iteration; ``patient``: full steps as long as they lower the merit, though they may not shrink."""
        first = here = self.at(state)
        scale = float(np.abs(np.nan_to_num(state.positions)).max(initial=1.0))
        least = max(STEP_LEAST_M, 8 * np.finfo(float).eps * scale)
        damping, last = DAMPING_FIRST, np.inf
        for iteration in range(1, most + 1):
            dx = self.step(here)
            size = float(np.abs(dx).max(initial=0.0))
            full = self.at(self.moved(here, dx)) if size < FARTHEST_M else None
            shrinks = size <= max(last / 2, least)
            # conditions and datum may have to be paid for with a larger v'Pv; then shrinking steps are the proof
            free = shrinks and (len(self.held) or self.datum.defect)
            if full is not None and (
                free
                or (shrinks and no_worse(full, here))
                or (gains(full, here) and (patient or not is_gross(here.whitened)))
            ):
                here, last, damping = full, size, max(damping / 10, DAMPING_FIRST)
                if size <= least:
                    return Outcome(here, self.cofactors(here), iteration)
                continue
            damped, damping = self._damped(here, damping)
            if damped is None:
                break
            here, last = damped, np.inf  # the next full step may move the datum by any amount
        raise self.stopped(first.state, here)

    def _damped(self, here: Linear, damping: float) -> tuple[Linear | None, float]:
        """The state after the first damped step that does not worsen the merit, None if none; and the next damping."""
        normal, right = self.pattern.normal(here.whitened), self.pattern.right_side(here.whitened)
        bent = curvature(self.design, here.state, here.whitened, self.reduced, len(self.kept))
        hessian = normal if bent is None else (normal - bent).tocsc()
        while damping <= DAMPING_MOST:
            dx = np.zeros(self.design.unknowns.count)
            try:
                dx[self.kept] = Factor.of(hessian + diags_array(damping * normal.diagonal(), format="csc")).solve(right)
            except SingularPattern:  # not positive definite yet
                damping *= 10
                continue
            if np.abs(dx).max(initial=0.0) < FARTHEST_M:
                there = self.at(self.moved(here, dx))
                if no_worse(there, here):
                    return there, max(damping / 10, DAMPING_FIRST)
            damping *= 10
        return None, DAMPING_FIRST

    def stopped(self, first: State, here: Linear) -> NotSettled:
        """The refusal of an iteration that began at ``first`` and stopped at ``here``."""
        return NotSettled(self, first, here, self._words(here))

    def _words(self, here: Linear) -> list[str]:
        """The readings that fit worst where the iteration stopped."""
        worst = np.argsort(-np.abs(here.numbers.misclosure) / np.where(self.design.held, np.inf, self.design.sd))[:3]
        rows = self.design.network.rows
        names = [self.design.network.blocks[rows.block[r]].name(int(rows.row[r])) for r in worst]
        return ["the adjustment does not settle from these starting values; the readings that fit worst are "
                + ", ".join(names) + ": look there for a gross error, or give better starts"]  # fmt: skip


def no_worse(there: Linear, here: Linear) -> bool:
    """Whether v'Pv has not grown by more than rounding."""
    return there.merit <= here.merit * (1 + WORSE_SHARE) + WORSE


def gains(there: Linear, here: Linear) -> bool:
    """Whether v'Pv has fallen by more than rounding could."""
    return there.merit < here.merit * (1 - GAIN)
