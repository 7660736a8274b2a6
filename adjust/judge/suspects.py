"""The suspects of a judged solution: the blunders found together, then what still fails the plain test without them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from adjust.judge.blunders import Levels
from adjust.judge.leaving_out import Without
from adjust.judge.overall import OverallTest, overall_of
from adjust.judge.reliability import reliability
from adjust.judge.removals import Fit, Removal, fit, shifts
from adjust.judge.rows import rows_in
from adjust.network import Array

if TYPE_CHECKING:
    from adjust.judge.assess import Judgement


@dataclass(frozen=True)
class Suspect:
    """A reading that fails a test, with its error as the readings kept see it."""

    row: int
    blunder: float
    """Reading minus its estimate from all readings but the blunders, metres or radians."""
    sd: float
    statistic: float
    at_job_level: bool


@dataclass(frozen=True)
class Cleared:
    """A reading that fails the plain test while the blunders are in, and passes without them."""

    row: int
    statistic: float
    without: float


@dataclass(frozen=True)
class Mended:
    """The adjustment without the blunders."""

    rows: tuple[int, ...]
    square_sum: float
    degrees: int
    overall: OverallTest
    fit: Fit
    shifts: Array
    """(n, 3) coordinates without them minus those with them."""


def levels_of(judgement: Judgement) -> Levels:
    """The limits of the judgement's job."""
    return Levels.of(judgement.tests, int(judgement.reliability.tested.sum()))


def suspects(judgement: Judgement) -> tuple[Suspect, ...]:
    """Suspects of either level in order of blame."""
    found = judgement.blunders
    if not found.rows:
        if judgement.searched.shared:
            return ()  # what fails is the doing of an effect common to many readings
        return _readings_alone(judgement) if judgement.control_report.failed else _plain(judgement)
    without = found.model.without(found.rows)
    scale = math.sqrt(without.scale(levels_of(judgement).given))
    sd = np.sqrt(np.diagonal(without.covariance)) * scale
    first = [
        Suspect(r, float(b), float(s), float(-b / s), True)
        for r, b, s in zip(found.rows, without.blunder, sd, strict=True)
    ]
    # what still fails where control is wrong, or many readings share an error, is the doing of that
    elsewhere = judgement.control_report.failed or judgement.searched.shared
    return tuple(first) if elsewhere else (*first, *_left(judgement, without, scale))


def _readings_alone(judgement: Judgement) -> tuple[Suspect, ...]:
    """One reading at a time where control is wrong: in the free stage, which knows nothing of it; none without one."""
    free = judgement.solution.free
    if free is None:
        return ()
    alone, levels = reliability(free), levels_of(judgement)
    degrees = free.total.degrees_of_freedom
    scale = 1.0 if levels.given else (free.total.variance_factor or np.nan)
    statistic = alone.statistic / math.sqrt(scale)
    rows = np.flatnonzero(np.abs(np.nan_to_num(statistic)) > levels.limit(levels.reading, degrees))
    rows = rows[np.argsort(-np.abs(statistic[rows]), kind="stable")]
    place, root = rows_in(free.network, judgement.solution.network), alone.root * math.sqrt(scale)
    return tuple(
        Suspect(
            int(place[r]), float(alone.blunder[r]), float(root[r]), float(statistic[r]), judgement.blunders.too_many
        )
        for r in rows
    )


def _plain(judgement: Judgement) -> tuple[Suspect, ...]:
    """One reading at a time, where no set was found."""
    rel, statistic = judgement.reliability, judgement.statistic
    rows = np.flatnonzero(judgement.suspect | judgement.suspect_of_job)
    rows = rows[np.argsort(-np.abs(statistic[rows]), kind="stable")]
    root = rel.root * math.sqrt(judgement.scale)
    return tuple(
        Suspect(int(r), float(rel.blunder[r]), float(root[r]), float(statistic[r]), bool(judgement.suspect_of_job[r]))
        for r in rows
    )


def _left(judgement: Judgement, without: Without, scale: float) -> list[Suspect]:
    """What fails the test of one reading once the blunders are out."""
    levels = levels_of(judgement)
    statistic = without.statistic / scale
    failing = np.flatnonzero(np.abs(np.nan_to_num(statistic)) > levels.limit(levels.reading, without.degrees))
    order = failing[np.argsort(-np.abs(statistic[failing]), kind="stable")]
    return [
        Suspect(int(r), float(-without.pv[r] / without.m[r]), float(scale / math.sqrt(without.m[r])),
                float(statistic[r]), False)
        for r in order
    ]  # fmt: skip


def cleared(judgement: Judgement) -> tuple[Cleared, ...]:
    """Readings that the blunders made look bad, in the order of the book."""
    found = judgement.blunders
    if not found.rows:
        return ()
    named = {s.row for s in judgement.suspects}
    without = found.model.without(found.rows)
    after = without.statistic / math.sqrt(without.scale(levels_of(judgement).given))
    return tuple(
        Cleared(int(r), float(judgement.statistic[r]), float(after[r]))
        for r in np.flatnonzero(judgement.suspect | judgement.suspect_of_job)
        if int(r) not in named and not np.isnan(after[r])
    )


def mended(judgement: Judgement) -> Mended | None:
    """What the adjustment would be without the blunders; None where none was found."""
    found = judgement.blunders
    if not found.rows:
        return None
    without = found.model.without(found.rows)
    return Mended(found.rows, without.square_sum, without.degrees,
                  overall_of(without.square_sum, without.degrees, judgement.tests), fit(without, levels_of(judgement)),
                  shifts(judgement.solution, found))  # fmt: skip


def log(judgement: Judgement) -> tuple[Removal, ...]:
    """The steps of the search."""
    return judgement.searched.log
