"""Control marks against the readings: held marks, check marks and weighted marks.

The misfit is adjusted minus known. A check mark takes no part, so var(misfit) = var(adjusted) + var(known); a weighted
mark is an observation and is judged by its own test; a held mark is left out as a whole (adjust.judge.held_marks).
Held coordinates together, and check coordinates together, give a false alarm with the job's significance (Sidak 1967).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjust.book.settings import Tests
from adjust.judge import critical
from adjust.judge.held_marks import judge_held_marks
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


def compare_control(
    solution: Solution, figures: Reliability, scale: float, degrees: int | None, tests: Tests, limit: float | None
) -> tuple[Mark, ...]:
    """Verdicts on held, check and weighted marks; ``limit`` is the critical value of one reading for the job."""
    return (
        *_held_marks(solution, scale, degrees, tests),
        *_check_marks(solution, scale, degrees, tests),
        *_weighted_marks(solution, figures, scale, limit),
    )


def _held_marks(solution: Solution, scale: float, degrees: int | None, tests: Tests) -> list[Mark]:
    marks = judge_held_marks(solution)
    judged = int(np.isfinite(marks.shift).sum())
    limit = critical.line_multiplier(1 - critical.job_level(tests.significance, judged), degrees) if judged else None
    out = []
    for i, part, shift, sd in zip(
        marks.station.tolist(), marks.part.tolist(), marks.shift.tolist(), marks.sd.tolist(), strict=True
    ):
        name = solution.names[i]
        if math.isnan(shift):
            sentence = f"{name} {PARTS[part]}: nothing here can judge it, because the datum needs it"
            out.append(Mark(name, PARTS[part], None, None, UNJUDGED, sentence))
        else:
            out.append(_mark(solution, name, part, shift, sd * math.sqrt(scale), limit, "estimate of all others"))
    return out


def _check_marks(solution: Solution, scale: float, degrees: int | None, tests: Tests) -> list[Mark]:
    stations = solution.network.stations
    where = np.argwhere((stations.role == CHECK) & ~np.isnan(solution.positions))
    limit = critical.line_multiplier(1 - critical.job_level(tests.significance, len(where)), degrees)
    free = np.zeros((len(stations), 2), dtype=bool)
    for one in solution.parts:
        if one.datum and one.datum.free:
            free |= one.datum.part.nodes
    marks = []
    for i, part in where.tolist():
        misfit = float(solution.positions[i, part] - stations.known[i, part])
        known_sd = np.nan_to_num(stations.known_sd[i, part])
        sd = math.sqrt(max(solution.covariance[i, part, part], 0.0) * scale + known_sd**2)
        relative = bool(free[i, part // 2])
        marks.append(_mark(solution, stations.names[i], part, misfit, sd, None if relative else limit, "adjusted"))
    return marks


def _weighted_marks(solution: Solution, figures: Reliability, scale: float, limit: float | None) -> list[Mark]:
    rows, network = solution.network.rows, solution.network
    marks = []
    for r in range(len(rows)):
        block = network.blocks[rows.block[r]]
        if not KINDS[block.kind].from_control:
            continue
        station, part = network.stations.names[block.stations[rows.row[r], 0]], int(rows.part[r])
        tested = bool(figures.tested[r])
        misfit = float(-figures.blunder[r] if tested else solution.residuals[r])
        sd = float(figures.root[r] * math.sqrt(scale)) if tested else None
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
