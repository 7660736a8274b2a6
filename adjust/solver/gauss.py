"""Gauss-Newton with damping: x <- x + a dx, N dx = A*' l*, until the step vanishes.

The merit is the weighted square sum v'Pv with the local unknowns at their best. Where a full step worsens it, it is
damped (Levenberg 1944, Marquardt 1963): (N + m diag N) dx = A*' l*, m growing tenfold until the merit falls and
shrinking after every success; datum and conditions, which such a step leaves to their working weights, are imposed
again by the next full one. The last linearisation is made at the answer, so that cofactors belong to it.
"""

from __future__ import annotations

from copy import copy
from dataclasses import dataclass, replace

import numpy as np
from scipy.sparse import csc_array, diags_array

from adjust.errors import NotConverged, Unsolvable
from adjust.network import Array
from adjust.solver.cofactors import Cofactors
from adjust.solver.curvature import curvature, is_gross
from adjust.solver.datum import Datum, null_space, state_vector
from adjust.solver.design import Design, Linearised, State
from adjust.solver.elements import Batch, Whitened, whiten
from adjust.solver.engine import Factor, Pattern, SingularPattern

MOST_ITERATIONS, MOST_NEWTON = 60, 100
"""Iterations by full steps, and by Newton's steps after these did not settle; docs/measured.md counts the networks that
settle in neither."""
DAMPING_FIRST, DAMPING_MOST = 1e-4, 1e12
"""Shares of the diagonal of N added at the first failure, and at the last before the iteration gives up."""
TRIAL_DAMPED = 3
"""Damped steps of a trial: without its gross error a network needs hardly any, and with it many."""
STEP_LEAST_M = 1e-9
"""A step below one nanometre ends the iteration; Gauss-Newton's next step is smaller by the curvature times the
residual over the length, 1e-4 for 1 mm at 10 m."""
DAMPING_LEAST = 1e-12
"""Damping of Newton's steps at the least: where a gross error leaves little of a curvature, 1e-4 would slow them."""
SETTLED_M = 1e-6
"""A Newton step below one micrometre ends its way where readings are gross: the next one would be smaller by as much
again, and rounding is larger than elsewhere, since v'Pv is."""
CREEP, CREEPS = 12, 1e-7
"""Newton's way ends where v'Pv fell by less than this share in so many steps: it leads where there is no rest, as when
a gross error pulls a station under another, where their sight loses its direction."""
DATUM_PARTS = 40
"""Movements by which a figure comes to its datum: a turn of 180 degrees by the midpoint rule scales it by 2e-4."""
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

    def reweighted(self, factor: Array) -> GaussNewton:
        """The same with the standard deviations of the rows, centring apart, multiplied by factors (R,)."""
        other = copy(self)
        other.batches = [
            replace(b, covariance=b.covariance * factor[b.rows][:, :, None] * factor[b.rows][:, None, :])
            for b in self.batches
        ]
        other.latest = None
        return other

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

    def step(self, here: Linear, hessian: csc_array | None = None) -> Array:
        """The full step (u,) of all but the local unknowns, by N or by the matrix given."""
        factor = None
        if len(self.kept):
            factor = self.pattern.factor(here.whitened) if hessian is None else Factor.of(hessian)
        dx = np.zeros(self.design.unknowns.count)
        if factor is not None:
            dx[self.kept] = factor.solve(self.pattern.right_side(here.whitened))
        k = self.conditions(here)
        if len(k):
            u = Cofactors.of(factor, self.reduced, k[:0], k[:0].T, k[:0].T).times(k.T)
            dx -= u @ np.linalg.solve(k @ u, k @ dx - here.numbers.misclosure[self.held])
        return dx + self._to_datum(here.state, dx) if self.datum.defect else dx

    def _to_datum(self, state: State, dx: Array) -> Array:
        """The movement (u,) along the missing freedoms that fulfils the datum's conditions after a step (u,)."""
        c = self.datum.constraint
        null = null_space(self.design.network, self.datum.parts, self.design.unknowns, state.positions)
        x = state_vector(self.design.unknowns, state.positions, state.groups)
        return np.asarray(-null @ np.linalg.solve(c.T @ null, c.T @ (x + dx - self.datum.reference)))

    def _hessian(self, here: Linear) -> csc_array | None:
        """N with the curvature of the gross readings taken off; None where there are none."""
        bent = curvature(self.design, here.state, here.whitened, self.reduced, len(self.kept))
        return None if bent is None else (self.pattern.normal(here.whitened) - bent).tocsc()

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
        """Iterate from a state; raises NotSettled or SingularPattern. With ``most`` a trial of so many iterations.

        Where a gross error keeps full steps from settling, the way is gone again with damped steps from the first full
        one that does not shrink, and then by Newton's alone: each settles on networks where the others do not.
        """
        if most is not None:
            return self._iterate(state, most, TRIAL_DAMPED)
        try:
            return self._iterate(state, MOST_ITERATIONS, MOST_ITERATIONS)
        except (NotSettled, SingularPattern) as why:
            if self.latest is None or not is_gross(self.latest.whitened):
                raise
            singular = isinstance(why, SingularPattern) and self.latest.state is state
        try:
            return self._iterate(state, MOST_NEWTON, MOST_NEWTON, patient=False)
        except (NotSettled, SingularPattern):
            pass
        try:
            return self._by_newton(state)
        except SingularPattern:
            if singular:  # at the start itself: adjust.solver.settle looks beside it
                raise
            raise self.stopped(state, self.latest) from None

    def _iterate(self, state: State, most: int, most_damped: int, patient: bool = True) -> Outcome:
        """Full steps and, where they do not serve, damped ones, both up to a number.

        ``patient``: a full step that lowers the merit serves though it may not shrink.
        """
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
            damped, damping, _ = self._damped(here, damping, self._hessian(here)) if most_damped else (None, 0.0, 0.0)
            if damped is None:
                break
            most_damped -= 1
            here, last = damped, np.inf  # the next full step may move the datum by any amount
        raise self.stopped(first.state, here)

    def _by_newton(self, state: State) -> Outcome:
        """Damped steps by Newton's matrix on minimal constraints until they vanish, then conditions and datum."""
        first = here = self.at(state)
        damping, way = DAMPING_FIRST, [(here.merit, np.inf)]
        for iteration in range(1, MOST_NEWTON + 1):
            hessian = self._hessian(here)
            if hessian is None:
                return self._iterate(here.state, MOST_ITERATIONS, MOST_ITERATIONS)
            there, damping, size = self._damped(here, damping, hessian, DAMPING_LEAST)
            if there is None or _creeps(way, there.merit, size):
                break
            here = there
            way.append((here.merit, size))
            if size <= SETTLED_M:
                return self._imposed(first, here, iteration)
        raise self.stopped(first.state, here)

    def _imposed(self, first: Linear, here: Linear, iteration: int) -> Outcome:
        """Conditions and datum at a minimum of the merit, by full steps that shrink."""
        if self.datum.defect:
            here = self.at(self._on_datum(here))
        last = np.inf
        while last > SETTLED_M:
            dx = self.step(here, self._hessian(here))
            size, iteration = float(np.abs(dx).max(initial=0.0)), iteration + 1
            if size > max(last / 2, SETTLED_M) or size > FARTHEST_M:
                raise self.stopped(first.state, here)
            here, last = self.at(self.moved(here, dx)), size
        return Outcome(here, self.cofactors(here), iteration)

    def _on_datum(self, here: Linear) -> State:
        """The figure carried to its datum along the missing freedoms, in small movements so that it keeps its shape."""
        nothing = np.zeros(self.design.unknowns.count)
        for part in range(DATUM_PARTS, 0, -1):
            half = self.moved(here, self._to_datum(here.state, nothing) / (2 * part))
            state = self.moved(here, self._to_datum(half, nothing) / part)
            here = self.at(state)
        return here.state

    def _damped(
        self, here: Linear, damping: float, hessian: csc_array | None, least: float = DAMPING_FIRST
    ) -> tuple[Linear | None, float, float]:
        """The state after the first damped step that does not worsen the merit, None if none; the next damping; the
        largest movement. ``hessian`` is N where there is none."""
        normal, right = self.pattern.normal(here.whitened), self.pattern.right_side(here.whitened)
        matrix = normal if hessian is None else hessian
        while damping <= DAMPING_MOST:
            dx = np.zeros(self.design.unknowns.count)
            try:
                dx[self.kept] = Factor.of(matrix + diags_array(damping * normal.diagonal(), format="csc")).solve(right)
            except SingularPattern:  # not positive definite yet
                damping *= 10
                continue
            size = float(np.abs(dx).max(initial=0.0))
            if size < FARTHEST_M:
                there = self.at(self.moved(here, dx))
                if no_worse(there, here):
                    return there, max(damping / 10, least), size
            damping *= 10
        return None, DAMPING_FIRST, np.inf

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


def _creeps(way: list[tuple[float, float]], merit: float, size: float) -> bool:
    """Whether neither the merit fell nor the steps shrank in the last of the steps (merit, size) so far."""
    if len(way) <= CREEP:
        return False
    before, large = way[-CREEP]
    return merit > before * (1 - CREEPS) and size > large / CREEP


def no_worse(there: Linear, here: Linear) -> bool:
    """Whether v'Pv has not grown by more than rounding."""
    return there.merit <= here.merit * (1 + WORSE_SHARE) + WORSE


def gains(there: Linear, here: Linear) -> bool:
    """Whether v'Pv has fallen by more than rounding could."""
    return there.merit < here.merit * (1 - GAIN)
