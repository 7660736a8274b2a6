"""The log of the search for blunders: what was left out, taken back or exchanged, with before and after.

Every step is told in the model in which it was made (adjust.judge.leaving_out). The last entry of the log is the
adjustment without all of them, where nothing is linear any more.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjust.judge.blunders import Found, Levels, Path
from adjust.judge.leaving_out import Model, Without
from adjust.network import Array, Ints
from adjust.solver.solution import Solution

LEFT_OUT, TAKEN_BACK, EXCHANGED, TOGETHER = "left out", "taken back", "exchanged", "set apart by a robust estimate"
ADJUSTED = "adjusted without them"


@dataclass(frozen=True)
class Fit:
    """How well a set of readings fits: variance factor, and the reading with the largest statistic."""

    variance_factor: float | None
    largest: int
    statistic: float | None


@dataclass(frozen=True)
class Shift:
    """The coordinate that moved most."""

    station: int
    part: int
    value: float


@dataclass(frozen=True)
class Removal:
    """One step of the search."""

    action: str
    rows: tuple[int, ...]
    """What was left out (after the step, for those set apart together), taken back, or came in exchange."""
    instead: int
    """What it was exchanged for returned; -1 for none."""
    statistic: float | None
    """Of the row, by which it was left out or taken back; None for several."""
    limit: float | None
    before: Fit
    after: Fit
    shift: Shift | None


def removals(solution: Solution, found: Found, levels: Levels) -> tuple[Removal, ...]:
    """The log; empty where nothing was found."""
    out: list[Removal] = []
    for path in found.paths:
        for before, after in zip(path.sets, path.sets[1:], strict=False):
            out.append(_removal(solution, levels, path, before, after))
    return (*out, _adjusted(solution, found, levels)) if found.rows else ()


def _removal(
    solution: Solution, levels: Levels, path: Path, before: tuple[int, ...], after: tuple[int, ...]
) -> Removal:
    model, gone, back = path.model, set(after) - set(before), set(before) - set(after)
    one, other = model.without(before), model.without(after)
    action = TOGETHER if len(gone) > 1 else EXCHANGED if gone and back else LEFT_OUT if gone else TAKEN_BACK
    rows = tuple(r for r in (after if gone else before) if r in (gone or back))
    statistic = limit = None
    if action == TAKEN_BACK:
        statistic, limit = (
            _scaled(float(other.statistic[rows[0]]), other, levels),
            levels.limit(levels.job, other.degrees),
        )
    elif action != TOGETHER:
        # what came in is judged in the network without the others that stay out
        alone = model.without([r for r in before if r not in back])
        statistic, limit = (
            _scaled(float(alone.statistic[rows[0]]), alone, levels),
            levels.limit(levels.job, alone.degrees),
        )
    moved = _movement(model, after) - _movement(model, before)
    return Removal(action, rows, min(back) if gone and back else -1, statistic, limit, fit(one, levels),
                   fit(other, levels), largest_shift(solution, moved))  # fmt: skip


def _scaled(statistic: float, without: Without, levels: Levels) -> float:
    return statistic / math.sqrt(without.scale(levels.given))


def _movement(model: Model, rows: tuple[int, ...]) -> Array:
    """(u,) of the errors of the rows; what leaving them out takes away."""
    return -model.movement(rows) if rows else np.zeros(len(model.influence.cofactors.reduced))


def fit(without: Without, levels: Levels) -> Fit:
    """How well the readings kept fit."""
    r = without.largest()
    factor = without.square_sum / without.degrees if without.degrees > 0 else None
    return Fit(factor, r, None if r < 0 else _scaled(float(without.statistic[r]), without, levels))


def largest_shift(solution: Solution, moved: Array) -> Shift | None:
    """The largest movement among the coordinates of movements (u,) of the unknowns."""
    numbers: Ints = solution.design.unknowns.coordinate
    if not (numbers >= 0).any():
        return None
    sizes = np.where(numbers >= 0, np.append(moved, 0.0)[numbers], 0.0)
    return _largest(sizes)


def _largest(sizes: Array) -> Shift:
    i, part = np.unravel_index(int(np.abs(sizes).argmax()), sizes.shape)
    return Shift(int(i), int(part), float(sizes[i, part]))


def shifts(solution: Solution, found: Found) -> Array:
    """(n, 3) coordinates without the blunders minus those with them, metres; NaN where not determined."""
    assert found.outcome is not None
    return np.asarray(found.outcome.last.state.positions - solution.positions)


def _adjusted(solution: Solution, found: Found, levels: Levels) -> Removal:
    assert found.first is not None
    at_first = found.first.without(())
    return Removal(ADJUSTED, found.rows, -1, None, None, fit(at_first, levels),
                   fit(found.model.without(found.rows), levels),
                   _largest(np.nan_to_num(shifts(solution, found))))  # fmt: skip
