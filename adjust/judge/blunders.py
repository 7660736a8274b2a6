"""Several blunders: which readings, left out together, make the rest fit, at the level of the whole job.

One at a time, largest statistic first, with everything estimated again after each step. After each step every reading
left out is tried back (adjust.judge.leaving_out): it returns if its statistic without the other ones is below the
limit, and it is exchanged where, without the others, another reading now has the larger statistic. The last two undo
what a first, swamped choice did wrong.

Two blunders can hide each other, so that no single statistic shows them (masking). So the same steps begin once more
from what a robust estimate sets apart: iteratively reweighted least squares, first nearly L1 (the least sum of absolute
errors), then redescending (Welsch 1977: weight exp(-(z/c)^2/2)), with z the residual over its own standard deviation.
Of the two sets found the one with the lower

    Omega_S + |S| k^2        (scale given)        R ln(Omega_S / R) + |S| k^2        (from residuals)

is taken, k the larger of the limits of one reading and of the job: a set has to earn each reading it leaves out.

Gross errors bend the geometry at which all this is linear. Such readings are left out first, each with a true
adjustment before the next is judged; and at the end the network is adjusted again without the set, all
readings are linearised there, and the steps go on from the set until it stays as it is. Where more than a tenth of the
readings (above 500: fifty and one in a thousand) would have to go, blunders are no explanation: nothing is set apart.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from contextlib import suppress
from dataclasses import dataclass, replace

import numpy as np

from adjust.book.settings import Tests
from adjust.errors import NotConverged, Unsolvable
from adjust.judge import critical
from adjust.judge.leaving_out import Model, Without
from adjust.judge.reliability import Reliability
from adjust.network import Array
from adjust.solver.design import State
from adjust.solver.elements import gather, whiten
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import GaussNewton, Linear, Outcome
from adjust.solver.solution import Solution

GROSS = 100.0
"""Statistic from which a reading is left out truly before a second one is judged: 0.2 m in a distance of 2 mm moves a
station at 100 m by so much that its sights turn by 2e-6 of their squares, a tenth of their standard deviations."""
GROSS_MOST = 12
"""Readings left out so; more of them are no slips but standard deviations or units that are wrong."""
GONE = 1e7
"""Factor on the standard deviation of a reading left out: 1e-14 of its weight is left, so an error of 10 km moves the
rest by less than 1e-9 m."""
ROUNDS = 6
"""Adjustments without the set; in the study of tests/judge/blunders_study.py the set stayed after two or three."""
STEPS = 10
"""Steps for each reading that could be set apart, before the search ends as it is."""
LEAST_MOST, SHARE_MOST, MANY, MORE = 3, 10, 50, 1000
"""At most one reading in ten is set apart, and at most fifty and one in a thousand, but three in any job."""
NEARLY_L1, REDESCENDING = 6, 8
WELSCH = 3.0
"""c of the weights: readings beyond three of their standard deviations lose most of their weight."""
SET_APART = 3.0
NEVER_BELOW = 1e-4
ROWS_ROBUST = 20_000
"""Scalar rows up to which the robust estimate is always made; beyond, only where a test has failed."""


@dataclass(frozen=True)
class Levels:
    """Limits of the statistics of a job."""

    given: bool
    reading: float
    """Significance of one reading's test."""
    job: float
    """Significance of each of the job's tests, so that all together give a false alarm with that of the job."""

    @classmethod
    def of(cls, tests: Tests, tested: int) -> Levels:
        """Those of ``tested`` readings."""
        return cls(tests.variance_factor == "given", tests.outlier, critical.job_level(tests.significance, tested))

    def limit(self, level: float, r: int) -> float:
        """Critical value with r degrees of freedom; infinite where nothing can be tested."""
        if self.given:
            return critical.normal_critical(level)
        return critical.tau_critical(level, r) or math.inf

    def price(self, r: int) -> float:
        """k^2: what the weighted square sum must fall by for each reading left out."""
        return self.limit(min(self.job, self.reading), r) ** 2


@dataclass(frozen=True)
class Path:
    """Sets of rows one after the other, from the first to the one where no step was left to make."""

    model: Model
    sets: tuple[tuple[int, ...], ...]

    @property
    def last(self) -> list[int]:
        """The set it ends with."""
        return list(self.sets[-1])


@dataclass(frozen=True)
class Found:
    """A set of readings found in error."""

    rows: tuple[int, ...]
    """In the order of blame."""
    model: Model
    """All readings linearised where the network without them lies."""
    outcome: Outcome | None
    """The adjustment without them; None where there are none."""
    together: bool
    """Whether only the robust estimate found them."""
    paths: tuple[Path, ...] = ()
    """The steps that led to the set, each path with the model in which it was gone."""
    first: Model | None = None
    """All readings linearised at the solution itself."""
    too_many: bool = False
    """Whether more readings fail than blunders could explain; none is set apart then."""


def find_blunders(solution: Solution, known: Reliability, tests: Tests, begin: Sequence[int] = ()) -> Found:
    """The readings in error at the level of the whole job, and the network without them; ``begin``: those known."""
    levels = Levels.of(tests, int(known.tested.sum()))
    model = Model.of(solution, known)
    nothing = Found((), model, None, False, first=model)
    if model.degrees < 2 or not known.tested.any():
        return nothing
    if begin:
        return _settled(solution, levels, [], model, False, list(begin))
    way = _gross_first(solution, model, levels)
    here = way[-1].model if way else model
    plain = improved(here, levels, way[-1].last if way else [])
    if plain is None:
        return Found((), model, None, False, first=model, too_many=True)
    robust = _from_robust(solution, here, levels, plain.last)
    chosen = robust or plain
    if not chosen.last:
        return nothing
    return _settled(solution, levels, [*way[:-1], chosen], model, robust is not None, chosen.last)


def exactly(solution: Solution, known: Reliability, rows: Sequence[int]) -> Found:
    """The network without given readings, no step further."""
    model = Model.of(solution, known)
    outcome = adjusted_without(solution, rows) if rows else None
    if outcome is None:
        return Found((), model, None, False, first=model)
    there = Model.at(solution, outcome.last.state)
    return Found(_in_order(there, rows), there, outcome, False, (), model)


def gross_rows(solution: Solution, known: Reliability, tests: Tests) -> list[int]:
    """Rows in gross error, by which the figure is bent; they have to be out before anything else is judged."""
    model = Model.of(solution, known)
    if model.degrees < 2 or not known.tested.any():
        return []
    way = _gross_first(solution, model, Levels.of(tests, int(known.tested.sum())))
    return way[-1].last if way else []


def _gross_first(solution: Solution, model: Model, levels: Levels) -> list[Path]:
    """Readings in gross error, left out one by one with a true adjustment after each; the last path has made no step.

    They bend the figure at which the readings are linear, so no second one can be judged before the first is out.
    """
    ways: list[Path] = []
    rows: list[int] = []
    while len(rows) < GROSS_MOST and not _too_many(model, len(rows) + 1):
        now = model.without(rows)
        r = now.largest()
        if r < 0 or abs(now.statistic[r]) <= GROSS * math.sqrt(now.scale(levels.given)):
            break
        outcome = adjusted_without(solution, [*rows, r])
        if outcome is None:
            break
        ways.append(Path(model, (tuple(rows), (*rows, r))))
        rows, model = [*rows, r], Model.at(solution, outcome.last.state)
    return [*ways, Path(model, (tuple(rows),))] if ways else []


def _settled(
    solution: Solution, levels: Levels, paths: list[Path], at_first: Model, together: bool, rows: list[int]
) -> Found:
    """Adjust without the set until it stays as it is."""
    seen: set[frozenset[int]] = set()
    nothing = Found((), at_first, None, False, first=at_first)
    while True:
        outcome = adjusted_without(solution, rows)
        if outcome is None:
            return nothing
        model = Model.at(solution, outcome.last.state)
        again = improved(model, levels, rows)
        if again is None:
            return replace(nothing, too_many=True)
        if not again.last:
            return nothing
        if set(again.last) == set(rows) or frozenset(again.last) in seen or len(seen) >= ROUNDS:
            return Found(_in_order(model, rows), model, outcome, together, tuple(paths), at_first)
        seen.add(frozenset(rows))
        paths.append(again)
        rows = again.last


def _in_order(model: Model, rows: Sequence[int]) -> tuple[int, ...]:
    """Rows by their statistics, each tried back without the others."""
    statistic = np.abs(model.without(rows).tried_back)
    return tuple(int(rows[k]) for k in np.argsort(-statistic, kind="stable"))


def adjusted_without(solution: Solution, rows: Sequence[int]) -> Outcome | None:
    """The network without the rows; None where it does not settle."""
    return next(_adjusted(solution, rows), None)


def best_adjusted_without(solution: Solution, rows: Sequence[int]) -> Outcome | None:
    """The same, the better of what the solution and the start lead to: gross errors in a whole set-up bend both."""
    return min(_adjusted(solution, rows), key=lambda outcome: outcome.last.merit, default=None)


def _adjusted(solution: Solution, rows: Sequence[int]) -> Iterator[Outcome]:
    """The network without the rows, begun from the solution and from the start, where it settles."""
    factor = np.ones(len(solution.residuals))
    factor[list(rows)] = GONE
    iteration = solution.setting.iteration.reweighted(factor)
    for state in (State(solution.positions, solution.groups), solution.setting.begin):
        with suppress(NotConverged, SingularPattern, Unsolvable, np.linalg.LinAlgError):
            yield iteration.run(state)


def improved(model: Model, levels: Levels, begin: Sequence[int]) -> Path | None:
    """The steps from a set until none is left to make; None where too many readings would have to go."""
    sets = [tuple(begin)]
    for _ in range(STEPS * _most(model)):
        after = _step(model, levels, list(sets[-1]))
        if after is None or any(set(after) == set(one) for one in sets):
            break
        sets.append(tuple(after))
        if _too_many(model, len(after)):
            return None
    return Path(model, tuple(sets))


def _most(model: Model) -> int:
    """How many readings can be set apart."""
    tested = int((model.m > 0).sum())
    return max(LEAST_MOST, min(tested // SHARE_MOST, MANY + tested // MORE))


def _too_many(model: Model, count: int) -> bool:
    return count > _most(model) or count >= model.degrees


def _step(model: Model, levels: Levels, rows: list[int]) -> list[int] | None:
    """The set after one step: a reading back, one exchanged, or one more; None where nothing is to be done."""
    now = model.without(rows)
    if rows:
        least, size = _weakest(now, levels)
        if size <= levels.limit(levels.job, now.degrees + 1):
            return [r for r in rows if r != least]
        exchanged = _exchanged(now)
        if exchanged:
            return exchanged
    r = now.largest()
    if r < 0 or now.degrees < 2:
        return None
    size = abs(now.statistic[r]) / math.sqrt(max(now.scale(levels.given), 1e-300))
    return [*rows, r] if size > levels.limit(levels.job, now.degrees) else None


def _weakest(now: Without, levels: Levels) -> tuple[int, float]:
    """The row of a set with the smallest statistic when it is tried back alone, and that statistic, scaled."""
    k = int(np.argmin(np.abs(now.tried_back)))
    w = float(now.tried_back[k])
    scale = 1.0 if levels.given else (now.square_sum + w * w) / (now.degrees + 1)
    return now.rows[k], abs(w) / math.sqrt(max(scale, 1e-300))


def _exchanged(now: Without) -> list[int] | None:
    """The set with a row exchanged for one of a larger statistic without the others; None where there is none."""
    for k, r in enumerate(now.rows):
        better = now.better_than(k)
        if better != r:
            return [*(s for s in now.rows if s != r), better]
    return None


def cost(model: Model, levels: Levels, rows: Sequence[int]) -> float:
    """What a set is judged by against another: the lower the better."""
    now = model.without(rows)
    fit = now.square_sum if levels.given else len(model.m) * math.log(max(now.square_sum, 1e-300))
    return fit + len(rows) * levels.price(model.degrees)


def _from_robust(solution: Solution, model: Model, levels: Levels, plain: list[int]) -> Path | None:
    """The way to a better set that begins from the robust estimate; None where there is none."""
    if len(model.m) > ROWS_ROBUST and not plain:
        return None
    apart = model.independent(set_apart(solution, model))
    if not apart or set(apart) <= set(plain):
        return None
    found = improved(model, levels, apart)
    if not found or not found.last or set(found.last) == set(plain):
        return None
    found = Path(model, ((), *found.sets))
    return found if cost(model, levels, found.last) < cost(model, levels, plain) else None


def set_apart(solution: Solution, model: Model) -> list[int]:
    """Rows that the robust estimate sets apart, the largest first, no more than could be blunders."""
    iteration = solution.setting.iteration
    here = iteration.at(model.state)
    sd, centred = solution.design.sd, solution.sd_readings
    share = np.where(model.m > 0, model.m / model.p, np.inf)
    own = np.where(model.m > 0, np.sqrt(share / model.p), np.inf)
    z = model.misclosure / own
    if not len(z):
        return []
    for k in range(NEARLY_L1 + REDESCENDING):
        weight = 1.0 / np.maximum(np.abs(z), 0.5) if k < NEARLY_L1 else np.exp(-((z / WELSCH) ** 2) / 2)
        factor = _factor(np.maximum(np.minimum(weight, 1.0), NEVER_BELOW), sd, centred)
        z = _residuals(iteration.reweighted(factor), here) / own
    found = np.flatnonzero((np.abs(z) > SET_APART) & (model.m > 0))
    return [int(r) for r in found[np.argsort(-np.abs(z[found]), kind="stable")][: _most(model)]]


def _factor(weight: Array, sd: Array, centred: Array) -> Array:
    """Factors (R,) on the standard deviations that leave this share of each row's weight, its centring included."""
    own = np.where(sd > 0, sd, 1.0)
    return np.where(sd > 0, np.sqrt(np.maximum((centred**2 / weight - (centred**2 - own**2)) / own**2, 1.0)), 1.0)


def _residuals(iteration: GaussNewton, here: Linear) -> Array:
    """(R,) observed minus adjusted after one step with other weights."""

    whitened = [whiten(b, here.numbers) for b in iteration.batches]
    dx = iteration.step(Linear(here.state, here.numbers, whitened, 0.0))
    out = np.zeros(len(here.numbers.misclosure))
    for w in whitened:
        rest = w.reduced_l - (w.reduced @ gather(dx, w.batch.columns)[:, :, None])[:, :, 0]
        out[w.batch.rows] = (w.factor @ rest[:, :, None])[:, :, 0]
    return out
