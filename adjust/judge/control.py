"""Control marks against the readings: held marks, check marks and weighted marks.

The misfit is adjusted minus known. A check mark takes no part, so var(misfit) = var(adjusted) + var(known); a weighted
mark is an observation and is judged by its own test; a held mark is left out as a whole (adjust.judge.held_marks).
Held coordinates together, and check coordinates together, give a false alarm with the job's significance (Sidak 1967).

With the scale from residuals the misfit over its standard deviation has Student's t distribution only where these
residuals know nothing of the misfit: those of the free stage, and for a check mark any. Where there is no free stage
the misfit of a held or weighted mark is itself among the residuals, and the ratio is a tau (Pope 1976).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjust.book.settings import Tests
from adjust.judge import critical
from adjust.judge.held_marks import HeldMarks, judge_held_marks
from adjust.judge.reliability import Reliability
from adjust.kinds import KINDS
from adjust.network import CHECK, PARTS
from adjust.solver.solution import Solution
from adjust.units import small_length

AGREES, DISAGREES, UNJUDGED = "agrees", "disagrees", "cannot be judged"


@dataclass(frozen=True)
class Mark:
    """One coordinate of one mark: misfit, its standard deviation, verdict and sentence."""

    station: str
    part: str
    misfit: float | None
    sd: float | None
    verdict: str
    sentence: str


@dataclass(frozen=True)
class Yardstick:
    """The variance factor that misfits are measured by."""

    scale: float
    degrees: int | None
    """Degrees of freedom behind ``scale``; None when it is given."""
    apart: bool
    """Whether the residuals behind ``scale`` are those of the readings alone, without the control."""

    def limit(self, level: float, checked: bool = False) -> float | None:
        """Critical value of a misfit over its standard deviation; ``checked``: of a mark that took no part."""
        if self.degrees is None:
            return critical.normal_critical(level)
        if not self.apart and not checked:
            return critical.tau_critical(level, self.degrees)
        return critical.student_critical(level, self.degrees) if self.degrees > 0 else None


def yardstick(solution: Solution, given: bool) -> Yardstick:
    """The variance factor of the readings alone, which no bad mark has spoilt, where they have any to spare."""
    if given:
        return Yardstick(1.0, None, False)
    apart = solution.free is not None and solution.free.total.degrees_of_freedom > 0
    alone = solution.free.total if solution.free and apart else solution.total
    factor = alone.variance_factor
    return Yardstick(math.nan if factor is None else factor, alone.degrees_of_freedom, apart)


def compare_control(
    solution: Solution, figures: Reliability, by: Yardstick, tests: Tests, held: HeldMarks | None = None
) -> tuple[Mark, ...]:
    """Verdicts on held, check and weighted marks; ``held``: shifts of the held ones where they are known already."""
    return (
        *_held_marks(solution, held or judge_held_marks(solution), by, tests),
        *_check_marks(solution, by, tests),
        *_weighted_marks(solution, figures, by, tests),
    )


def _held_marks(solution: Solution, marks: HeldMarks, by: Yardstick, tests: Tests) -> list[Mark]:
    judged = int(np.isfinite(marks.shift).sum())
    limit = by.limit(critical.job_level(tests.significance, judged)) if judged else None
    out = []
    for i, part, shift, sd in zip(
        marks.station.tolist(), marks.part.tolist(), marks.shift.tolist(), marks.sd.tolist(), strict=True
    ):
        name = solution.names[i]
        if math.isnan(shift):
            sentence = f"{name} {PARTS[part]}: nothing here can judge it, because the datum needs it"
            out.append(Mark(name, PARTS[part], None, None, UNJUDGED, sentence))
        else:
            out.append(_mark(solution, name, part, shift, sd * math.sqrt(by.scale), limit, "estimate of all others"))
    return out


def _check_marks(solution: Solution, by: Yardstick, tests: Tests) -> list[Mark]:
    stations = solution.network.stations
    where = np.argwhere((stations.role == CHECK) & ~np.isnan(solution.positions))
    limit = by.limit(critical.job_level(tests.significance, len(where)), checked=True)
    free = np.zeros((len(stations), 2), dtype=bool)
    for one in solution.parts:
        if one.datum and one.datum.free:
            free |= one.datum.part.nodes
    marks = []
    for i, part in where.tolist():
        misfit = float(solution.positions[i, part] - stations.known[i, part])
        known_sd = np.nan_to_num(stations.known_sd[i, part])
        sd = math.sqrt(max(solution.covariance[i, part, part], 0.0) * by.scale + known_sd**2)
        relative = bool(free[i, part // 2])
        marks.append(_mark(solution, stations.names[i], part, misfit, sd, None if relative else limit, "adjusted"))
    return marks


def _weighted_marks(solution: Solution, figures: Reliability, by: Yardstick, tests: Tests) -> list[Mark]:
    """Each at the level of one reading of the job."""
    rows, network = solution.network.rows, solution.network
    limit = by.limit(critical.job_level(tests.significance, int(figures.tested.sum())))
    marks = []
    for r in range(len(rows)):
        block = network.blocks[rows.block[r]]
        if not KINDS[block.kind].from_control:
            continue
        station, part = network.stations.names[block.stations[rows.row[r], 0]], int(rows.part[r])
        tested = bool(figures.tested[r])
        misfit = float(-figures.blunder[r] if tested else solution.residuals[r])
        sd = float(figures.root[r] * math.sqrt(by.scale)) if tested else None
        marks.append(_mark(solution, station, part, misfit, sd, limit, "estimate of all others"))
    return marks


def _mark(
    solution: Solution, station: str, part: int, misfit: float, sd: float | None, limit: float | None, what: str
) -> Mark:
    """Verdict and sentence; without a limit or a standard deviation the mark cannot be judged."""
    size = small_length(misfit, solution.job.settings.units.length)
    if limit is None or not sd or math.isnan(sd):
        sentence = f"{station} {PARTS[part]}: nothing here can judge it ({what} minus known {size})"
        return Mark(station, PARTS[part], misfit, sd, UNJUDGED, sentence)
    times = abs(misfit) / sd
    verdict = DISAGREES if times > limit else AGREES
    sentence = f"{station} {PARTS[part]}: {verdict}, {what} minus known {size}, {times:.1f} times its uncertainty"
    return Mark(station, PARTS[part], misfit, sd, verdict, sentence)
