"""Which readings fight when the iteration does not settle.

The readings that fit worst where it began and where it stopped are tried one by one: the iteration runs again with the
weight of one of them taken away, and if it settles, that reading is named with what it differs from the others. Where
none mends it, or the rest still fits badly, those that a redescending estimate finds (adjust.judge.outvoted) are left
out together, and if it settles, each is put back in turn: it is sound if it then fits, else it is named with the rest.
What is named gets its likely slips where its amount fits some (adjust.judge.causes_of_refusals).
At the most TRIED + 2 + MOST_TOGETHER iterations are run.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.book.job import Job
from adjust.errors import Unsolvable
from adjust.judge.causes_of_refusals import unsettled_causes
from adjust.judge.naming import amount, called, together
from adjust.judge.outvoted import GROSS, outvoted
from adjust.judge.slips_asked import told as slip_words
from adjust.judge.unfixed import Figure
from adjust.network import Array, Block, Ints
from adjust.solver.defects import Freedom, thin_stations
from adjust.solver.design import State
from adjust.solver.elements import make_batches
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import GaussNewton, NotSettled

TRIED, TRIED_LARGE, LARGE = 12, 4, 5000
"""Readings tried, and fewer in jobs of more than LARGE scalar rows, where each trial takes long."""
TRIAL_ITERATIONS = 15
"""Without its gross error a network settles in fewer than ten iterations; more would only make the user wait."""
WITHOUT = 1e5
"""Factor on the standard deviation of the reading whose weight is taken away."""
MOST_NAMED = 5
AS_GOOD = 3.0
"""Others are named too if without them the weighted square sum is within this factor of the best."""

MOST_TOGETHER = 6
"""Readings left out together: more gross errors than that are a mix-up of names or files."""
FITS = 30.0
"""The weighted square sum per reading to spare from which what is left counts as badly fitting still: with sound
readings it is near 1, and one gross error of `GROSS` standard deviations in ten readings gives 10."""


@dataclass(frozen=True)
class _Trial:
    """An iteration that settled without some rows: what it left, and how far these rows are off."""

    rows: tuple[int, ...]
    square_sum: float
    amounts: tuple[float, ...]
    state: State


def words(job: Job, stopped: NotSettled) -> list[str]:
    """One sentence for every reading without which the iteration settles, or for several together, else those that
    fit worst."""
    rows = _candidates(stopped)
    trials = sorted((t for t in (_one(stopped, int(r)) for r in rows) if t), key=lambda t: t.square_sum)
    if not trials or trials[0].square_sum > FITS * len(stopped.iteration.design.sd):
        several = _several(stopped)
        if several and not (trials and trials[0].square_sum <= AS_GOOD * several.square_sum):
            return [_together(job, stopped, several)]
    if not trials and (thin := _thin(stopped)):
        return thin
    if not trials:
        few = ", ".join(_called(job, stopped, int(r)) for r in rows[:3])
        return [
            "the adjustment does not settle from these starting values, and leaving out any one reading does not mend "
            f"it; those that fit worst are {few}: look there for gross errors, or give better starts"
        ]
    most = AS_GOOD * trials[0].square_sum + len(stopped.iteration.design.sd)
    return [_alone(job, stopped, t) for t in trials[:MOST_NAMED] if t.square_sum <= most]


def _alone(job: Job, stopped: NotSettled, trial: _Trial) -> str:
    (row,), (size,) = trial.rows, trial.amounts
    text = (f"{_called(job, stopped, row)} disagrees with the others by about {_amount(job, stopped, row, size)}: "
            "without it the adjustment settles, with it it does not; check it in the book")  # fmt: skip
    return "".join([text, *_slips(job, stopped, trial)])


def _slips(job: Job, stopped: NotSettled, trial: _Trial) -> list[str]:
    """'. Likeliest slip: ... Look at FILE:LINE.' of the readings of a trial, as far as some fit."""
    causes = unsettled_causes(job, stopped.iteration, trial.state, trial.rows)
    told = [words for words in (slip_words(one) for one in causes) if words]
    return [f". {words}" if n == 0 else f" {words}" for n, words in enumerate(told)]


def _together(job: Job, stopped: NotSettled, trial: _Trial) -> str:
    if len(trial.rows) == 1:
        return _alone(job, stopped, trial)
    who = together([_called(job, stopped, r) for r in trial.rows])
    by = together([_amount(job, stopped, r, a) for r, a in zip(trial.rows, trial.amounts, strict=True)])
    text = (f"without {who} together the adjustment settles, with them it does not: they differ from the others by "
            f"about {by}; check them in the book")  # fmt: skip
    return "".join([text, *_slips(job, stopped, trial)])


def _thin(stopped: NotSettled) -> list[str]:
    """The stations that were fixed only just where it began or stopped, if there are any."""
    iteration, found = stopped.iteration, []
    for here in (stopped.here, iteration.at(stopped.first)):
        thin = tuple(thin_stations(iteration.design, iteration.datum.parts, here.whitened, here.state, 0.0))
        nothing = np.zeros((*here.state.positions.shape, 0))
        positions = np.nan_to_num(here.state.positions)
        found += Figure(Freedom(iteration.design.network, positions, nothing, [], thin)).sentences()
    return list(dict.fromkeys(found))


def _candidates(stopped: NotSettled) -> Ints:
    """Rows that fit worst at the stop and at the start, by turns."""
    design, iteration = stopped.iteration.design, stopped.iteration
    most = TRIED if len(design.network.rows) <= LARGE else TRIED_LARGE
    orders = [np.argsort(-_misfit(stopped, here.numbers.misclosure), kind="stable")[:most]
              for here in (stopped.here, iteration.at(stopped.first))]  # fmt: skip
    found: list[int] = []
    for r in np.stack(orders, axis=1).ravel().tolist():
        same_set = design.local == design.local[r] if design.local[r] >= 0 else np.arange(len(design.local)) == r
        found += [r, *np.flatnonzero(same_set).tolist()]  # the one that oriented its set seems to fit
    return np.array(list(dict.fromkeys(found))[:most], dtype=np.int64)


def _misfit(stopped: NotSettled, misclosure: Array) -> Array:
    design = stopped.iteration.design
    return np.asarray(np.abs(misclosure) / np.where(design.held, np.inf, design.sd))


def _one(stopped: NotSettled, row: int) -> _Trial | None:
    """The trial without one reading; None where it does not settle either, or the reading is not grossly off."""
    trial = _without(stopped, (row,), _start_without(stopped, row))
    return trial if trial and abs(trial.amounts[0]) > GROSS * stopped.iteration.design.sd[row] else None


def _without(stopped: NotSettled, rows: tuple[int, ...], start: State) -> _Trial | None:
    """The trial without some readings; None where it does not settle either."""
    iteration = stopped.iteration
    if iteration.design.held[list(rows)].any():
        return None
    sd = np.where(iteration.design.held, 1e-3, iteration.design.sd)
    sd[list(rows)] *= WITHOUT
    try:
        again = GaussNewton(iteration.design, make_batches(iteration.design, sd), iteration.datum)
        last = again.run(start, TRIAL_ITERATIONS).last
    except (SingularPattern, NotSettled, Unsolvable, np.linalg.LinAlgError):
        return None
    amounts = last.numbers.misclosure[list(rows)]
    return _Trial(rows, last.merit, tuple(amounts.tolist()), last.state)


def _several(stopped: NotSettled) -> _Trial | None:
    """The trial without those that stand out together, less those that are sound."""
    for first in (stopped.first, stopped.here.state):
        found = outvoted(stopped.iteration, first)
        if found is None or len(found.rows) > MOST_TOGETHER:
            continue
        trial = _without(stopped, tuple(found.rows.tolist()), found.state)
        if trial:
            return _needed(stopped, trial)
    return None


def _needed(stopped: NotSettled, trial: _Trial) -> _Trial:
    """The trial without those of its rows that fit when they are put back, the least of them first."""
    sd = stopped.iteration.design.sd
    for row in sorted(trial.rows, key=lambda r: abs(trial.amounts[trial.rows.index(r)]) / sd[r]):
        rest = tuple(r for r in trial.rows if r != row)
        again = _without(stopped, rest, trial.state) if rest else None
        if again and again.square_sum <= AS_GOOD * trial.square_sum + GROSS**2:
            trial = again
    return trial


def _start_without(stopped: NotSettled, row: int) -> State:
    """The start, with the orientation that the reading shares turned to the mean of the others of its set."""
    design, first = stopped.iteration.design, stopped.first
    group = design.local[row]
    others = np.flatnonzero((design.local == group) & (np.arange(len(design.local)) != row))
    if group < 0 or not len(others):
        return first
    numbers = design.linearise(first)
    turn = np.angle(np.exp(1j * numbers.misclosure[others]).sum())
    groups = first.groups.copy()
    groups[group] += turn / numbers.by_local[others[0]]
    return State(first.positions, groups)


def _called(job: Job, stopped: NotSettled, row: int) -> str:
    block, i = _booked(stopped, row)
    return called(job, block, i)


def _amount(job: Job, stopped: NotSettled, row: int, size: float) -> str:
    return amount(job, _booked(stopped, row)[0], size)


def _booked(stopped: NotSettled, row: int) -> tuple[Block, int]:
    network = stopped.iteration.design.network
    return network.blocks[network.rows.block[row]], int(network.rows.row[row])
