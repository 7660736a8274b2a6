"""One cause for many gross readings: a table in another unit, a station occupied or sighted under the wrong name.

Each is a change of the job as booked, and is tried by truly adjusting the changed job. With O_w the weighted square sum
without the k readings concerned and O_h that with them as changed, the change explains them if

    O_h - O_w <= chi2(k, 0.999) max(1, s0^2)          s0^2 the variance factor without them, BESIDES at the most

(the k readings then scatter no more than others do; the test of nested adjustments, Koch 1999, section 4.2), while as
booked they are grossly off, or the job could not be adjusted at all. Where the network needs them to hold together, so
that O_w is not to be had, O_h itself is held against FITS.

    unit        the lengths or rises of a table, an instrument, a reflector, a day times 0.3048, or over it
    occupied    what was read in one occupation of a station belongs to another one: the readings are compared with what
                every other station would read (an orientation free for every set), and the nearest are adjusted
    sighted     two or more readings of one occupation to one target, in the same way
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from adjust.book.distance_ledger import CONSTANT, NAMES, REFLECTOR
from adjust.book.job import Job
from adjust.errors import BrasscapError
from adjust.graph.starts import find_start
from adjust.judge.blunders import best_adjusted_without
from adjust.judge.critical import chi_square
from adjust.judge.effect_words import SIGNIFICANT, Systematic
from adjust.judge.mix_up_rows import OCCUPIED, RowsInCommon, Shared
from adjust.judge.naming import together
from adjust.judge.reliability import Reliability
from adjust.judge.rows import without_rows
from adjust.kinds import KINDS
from adjust.network import Array, Block, Ints
from adjust.solver.design import Design
from adjust.solver.solution import Solution
from adjust.solver.solve import solve

GROSS = 100.0
"""Statistic from which a unit is asked after: a factor 3.28 gives thousands (the limit of adjust.judge.blunders)."""
LEVEL = 0.999
FITS = 10.0
"""Weighted square sum a reading to spare below which a job counts as fitting: stated precision is wrong by more than a
factor 3 in few jobs, and a name or a unit mixed up gives thousands."""
BESIDES = 1e4
"""Variance factor that other blunders may leave: one of 500 standard deviations among 25 readings; a wrong name or unit
that is left makes millions."""
BENT = 0.05
"""Logarithm of the ratio of booked to adjusted lengths, its median in a table, from which a unit is asked after: one of
two tables in another unit shows a good part of the factor 3.28, and single blunders do not move a median so far."""
MOST_NAMED = 3
NEAREST = 3
"""Stations adjusted for each occupation or sight."""
NEAR = 300.0
"""Standard deviations within which the readings must be, root mean square, of those from another station, before it is
tried: the places without them may be off by some, and wrong stations are thousands away."""
EXPLAINED = 0.01
"""Share of the weighted square sum that may be left without the readings, where it is known with them."""
ANEW, ANEW_ROWS = 8, 1000
"""Changes for which the network without the readings is started anew, and the rows of a job up to which it is: a start
among gross errors takes a second in a job of 300 rows."""
LARGE = 20_000
"""Scalar rows above which nothing is tried: every trial takes long, and large jobs have their names from a list."""


@dataclass(frozen=True)
class MixUp:
    """A change of the job by which many gross readings are explained."""

    shared: Shared
    solution: Solution
    """Of the changed job."""
    sentence: str
    slip: str
    """feet-for-metres, wrong-station."""

    def as_effect(self, still: Sequence[str] = ()) -> Systematic:
        """As an effect common to many readings; ``still``: identifications of those that fail once it is put right."""
        few = together(list(still[:MOST_NAMED])) + (" and others" if len(still) > MOST_NAMED else "")
        besides = f" Once that is put right, {few} still fail{'s' if len(still) == 1 else ''}." if still else ""
        return Systematic(self.shared.what, self.shared.of, "number", len(self.shared.rows), None, None, None, None,
                          SIGNIFICANT, self.sentence + besides, self.slip)  # fmt: skip


def unit_mixed_up(solution: Solution, known: Reliability) -> MixUp | None:
    """The unit of some of the lengths or rises that explains what is gross in a solution; None where none does."""
    if not (np.abs(np.nan_to_num(known.statistic)) > GROSS).any():
        return None
    trials = _trials(solution, ())
    return trials.units(_most_bent(solution, trials.common.units())) if trials else None


def name_mixed_up(solution: Solution, gross: Sequence[int]) -> MixUp | None:
    """The one wrong name that explains two of the gross rows of a solution, or more; None where none does."""
    trials = _trials(solution, gross) if len(gross) >= 2 else None
    return trials.names() if trials else None


def _trials(solution: Solution, gross: Sequence[int]) -> _Trials | None:
    network = solution.job.network
    if len(network.rows) != len(solution.network.rows) or len(network.rows) > LARGE:
        return None
    return _Trials(RowsInCommon(solution.job, frozenset(gross)), solution)


def mix_up_of_refused(job: Job) -> MixUp | None:
    """The one change with which a refused job can be adjusted and fits; None where none is found."""
    if len(job.network.rows) > LARGE:
        return None
    start = find_start(job.network, job.settings.frame.plane_height)
    first = [job.network.rows.of_block(b, len(block)) for b, block in enumerate(job.network.blocks)]
    trials = _Trials(RowsInCommon(job, frozenset(int(first[b][i]) for (b, i), _ in start.doubtful)))
    return trials.units(sorted(trials.common.units(), key=lambda one: len(one.rows))) or trials.names()


def _most_bent(solution: Solution, units: list[Shared]) -> list[Shared]:
    """Those whose lengths, or the others of their sort, are of another size than booked, the most so first."""
    with np.errstate(divide="ignore", invalid="ignore"):
        size = np.abs(np.log(np.abs(solution.design.observed / solution.adjusted)))
    rows, blocks = solution.network.rows, solution.network.blocks
    says = np.array([KINDS[b.kind].says for b in blocks])[rows.block]
    bent = []
    for k, one in enumerate(units):
        mine = np.zeros(len(size), dtype=bool)
        mine[list(one.rows)] = True
        own, rest = (float(np.median(size[m])) for m in (mine, (says == says[one.rows[0]]) & ~mine))
        if max(own, rest) > BENT:
            bent.append((-own, k, one))
    return [one for _, _, one in sorted(bent, key=lambda b: b[:2])]


@dataclass(frozen=True)
class _Rest:
    """The network without the readings concerned."""

    positions: Array
    groups: Array
    design: Design
    square_sum: float
    degrees: int


@dataclass(frozen=True)
class _Trials:
    """Changes of a job, tried."""

    common: RowsInCommon
    as_booked: Solution | None = None
    """None where the job as booked was refused."""

    @property
    def _job(self) -> Job:
        return self.common.job

    def units(self, changes: Iterable[Shared]) -> MixUp | None:
        """The first change of a unit that explains its rows."""
        return next((found for one in changes if (found := self._unit(one))), None)

    def names(self) -> MixUp | None:
        """The first change of a name that explains its rows: those that are quickly tried first."""
        changes = [*self.common.occupations(), *self.common.sights()]
        ways = [(one, self._without) for one in changes if self.as_booked]
        if len(self._job.network.rows) <= ANEW_ROWS:
            ways += [(one, self._anew_without) for one in changes[:ANEW]]
        return next((found for one, without in ways if (found := self._name(one, without(one)))), None)

    # ---- units

    def _unit(self, one: Shared) -> MixUp | None:
        solution = self._explains(one, self._scaled(one), self._anew_without(one))
        if solution is None:
            return None
        says = KINDS[self._block(one.rows[0]).kind].says
        noun, verb = ("distances", "booked") if says == "length" else ("rises", "read")
        other, own = ("feet", "metres") if self.common.unit(one.rows[0]) == "m" else ("metres", "feet")
        text = (f"Likeliest slip: the {len(one.rows)} {noun} of {one.of} were {verb} in {other}. In {other} they fit "
                f"the others, in {own} they do not. Look at {self.common.places(one.rows)}.")  # fmt: skip
        return MixUp(one, solution, text, "feet-for-metres")

    def _scaled(self, one: Shared) -> Job:
        """The job with the booked lengths of some rows in the other unit; constants added to them stay."""
        values = [block.values.copy() for block in self._job.network.blocks]
        fixed = {NAMES[REFLECTOR], NAMES[CONSTANT]}
        for r in one.rows:
            b, i, part = self.common.at(r)
            added = sum(float(a[i]) for name, a in self._job.network.blocks[b].corrections if name in fixed)
            values[b][i, part] = (values[b][i, part] - added) * one.factor + added
        return self._with(replace(block, values=v) for block, v in zip(self._job.network.blocks, values, strict=True))

    # ---- names

    def _name(self, one: Shared, rest: _Rest | None) -> MixUp | None:
        """Another station in place of the one booked, by the network without the readings."""
        if rest is None:
            return None
        tried = [(s, self._explains(one, self._renamed(one, s), rest)) for s in self._nearest(one, rest)]
        fits = [(s, solution) for s, solution in tried if solution]
        if not fits:
            return None
        names = [self._job.network.stations.names[s] for s, _ in fits]
        return MixUp(one, fits[0][1], self._told(one, " or ".join(names)), "wrong-station")

    def _told(self, one: Shared, other: str) -> str:
        count, where = len(one.rows), self.common.places(one.rows)
        if one.what == OCCUPIED:
            return (f"Likeliest slip: the {count} readings booked at {one.of} were made at {other}. From {other} they "
                    f"fit the others, from {one.of} they do not. Look at {where}.")  # fmt: skip
        standing, target = one.of.split(" to ", 1)
        return (f"Likeliest slip: the {count} readings booked from {standing} to {target} were made to {other}. To "
                f"{other} they fit the others, to {target} they do not. Look at {where}.")  # fmt: skip

    def _nearest(self, one: Shared, rest: _Rest) -> list[int]:
        """The stations from which, or to which, the readings would be most like those booked."""
        placed = np.isfinite(rest.positions).any(axis=1)
        used = {int(s) for r in one.rows for s in self._block(r).stations[self.common.at(r)[1]]}
        scores = [(self._misfit(one, s, rest), s) for s in np.flatnonzero(placed).tolist() if s not in used]
        return [s for score, s in sorted(scores)[:NEAREST] if score <= NEAR**2 * len(one.rows)]

    def _misfit(self, one: Shared, station: int, rest: _Rest) -> float:
        """Squares of the differences in standard deviations, with an orientation of its own for every set."""
        positions = np.where(np.isnan(rest.positions), 0.0, rest.positions)
        total = 0.0
        for b, column in one.column:
            block = self._job.network.blocks[b].take(self._in_block(one, b))
            stations = block.stations.copy()
            stations[:, column] = station
            with np.errstate(divide="ignore", invalid="ignore"):
                computed = rest.design.values(replace(block, stations=stations), positions, rest.groups)
            off = block.values - computed
            if KINDS[block.kind].wraps:
                off = _on_circle(off, block.group if one.what == OCCUPIED else np.full(len(block), -1))
            total += float(np.nansum((off / block.sd) ** 2))
        return total

    def _in_block(self, one: Shared, b: int) -> Ints:
        return np.array([self.common.at(r)[1] for r in one.rows if self.common.at(r)[0] == b])

    def _renamed(self, one: Shared, station: int) -> Job:
        """The job with another station in the column; sets that this tears apart have an orientation each."""
        network = self._job.network
        blocks, groups = list(network.blocks), list(network.groups)
        for b, column in one.column:
            moved, stations, group = self._in_block(one, b), blocks[b].stations.copy(), blocks[b].group.copy()
            stations[moved, column] = station
            kept = np.delete(group, moved)
            for g in np.unique(group[moved][group[moved] >= 0]) if one.what == OCCUPIED else ():
                if g in kept and not groups[g].shared:
                    group[moved[group[moved] == g]] = len(groups)
                    groups.append(groups[g])
            blocks[b] = replace(blocks[b], stations=stations, group=group)
        return replace(self._job, network=replace(network, blocks=tuple(blocks), groups=tuple(groups)))

    # ---- trials

    def _explains(self, one: Shared, changed: Job, rest: _Rest | None) -> Solution | None:
        """The solution of the changed job, if the readings concerned then fit."""
        solution = _solved(changed)
        if solution is None:
            return None
        total = solution.total
        if rest is None:
            return solution if total.square_sum <= FITS * max(total.degrees_of_freedom, 1) else None
        most = chi_square(LEVEL, len(one.rows)) * min(max(1.0, rest.square_sum / max(rest.degrees, 1)), BESIDES)
        return solution if total.square_sum - rest.square_sum <= most else None

    def _without(self, one: Shared) -> _Rest | None:
        """The network without the readings, from where it lies as booked; None where it then fits hardly better."""
        assert self.as_booked is not None
        outcome, total = best_adjusted_without(self.as_booked, one.rows), self.as_booked.total
        if outcome is None or outcome.last.merit > EXPLAINED * total.square_sum:
            return None
        state, degrees = outcome.last.state, total.degrees_of_freedom - len(one.rows)
        return _Rest(state.positions, state.groups, self.as_booked.design, outcome.last.merit, degrees)

    def _anew_without(self, one: Shared) -> _Rest | None:
        """The network without the readings from a start of its own, for they may have bent the figure too far."""
        found = _solved(replace(self._job, network=without_rows(self._job.network, np.array(one.rows))))
        if found is None:
            return None
        total = found.total
        if self.as_booked and total.square_sum > EXPLAINED * self.as_booked.total.square_sum:
            return None
        return _Rest(found.positions, found.groups, found.design, total.square_sum, total.degrees_of_freedom)

    def _block(self, row: int) -> Block:
        return self._job.network.blocks[self.common.at(row)[0]]

    def _with(self, blocks: Iterable[Block]) -> Job:
        return replace(self._job, network=replace(self._job.network, blocks=tuple(blocks)))


def _on_circle(off: Array, group: Ints) -> Array:
    """Differences (m, 1) within half a circle, those of a set less their mean."""
    off = off.copy()
    for g in np.unique(group[group >= 0]):
        off[group == g] -= np.angle(np.exp(1j * off[group == g]).sum())
    return np.asarray(np.angle(np.exp(1j * off)), dtype=np.float64)


def _solved(job: Job) -> Solution | None:
    try:
        return solve(job)
    except BrasscapError:
        return None
