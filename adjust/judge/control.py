"""Control marks against the readings: check marks and weighted marks.

The misfit is adjusted minus known. A check mark takes no part, so var(misfit) = var(adjusted) + var(known); a weighted
mark is an observation and is judged by its own test. Each check coordinate is tested at the level at which all of
them together give a false alarm with the job's significance (Sidak 1967).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjust.book.settings import Tests
from adjust.judge import critical
from adjust.judge.reliability import Reliability
from adjust.kinds import KINDS
from adjust.network import CHECK, PARTS
from adjust.solver.solution import Solution

AGREES, DISAGREES, UNJUDGED = "agrees", "disagrees", "cannot be judged"


@dataclass(frozen=True)
class Mark:
    """One coordinate of one mark: misfit, its standard deviation, verdict and sentence."""

    station: str
    part: str
    misfit: float
    sd: float | None
    verdict: str
    sentence: str


def compare_control(
    solution: Solution, figures: Reliability, scale: float, degrees: int | None, tests: Tests, limit: float | None
) -> tuple[Mark, ...]:
    """Verdicts on check marks, then on weighted marks; ``limit`` is the critical value of one reading for the job."""
    return (*_check_marks(solution, scale, degrees, tests), *_weighted_marks(solution, figures, scale, limit))


def _check_marks(solution: Solution, scale: float, degrees: int | None, tests: Tests) -> list[Mark]:
    stations = solution.network.stations
    where = np.argwhere((stations.role == CHECK) & ~np.isnan(solution.positions))
    level = critical.job_level(tests.significance, len(where))
    limit = critical.line_multiplier(1 - level, degrees)
    free = {one.what for one in solution.parts if one.datum and one.datum.free}
    marks = []
    for i, part in where.tolist():
        misfit = float(solution.positions[i, part] - stations.known[i, part])
        known_sd = np.nan_to_num(stations.known_sd[i, part])
        sd = math.sqrt(max(solution.covariance[i, part, part], 0.0) * scale + known_sd**2)
        is_free = any(p.datum and p.what in free and p.datum.part.nodes[i, part // 2] for p in solution.parts)
        marks.append(_mark(stations.names[i], PARTS[part], misfit, sd, None if is_free else limit))
    return marks


def _weighted_marks(solution: Solution, figures: Reliability, scale: float, limit: float | None) -> list[Mark]:
    rows, network = solution.network.rows, solution.network
    marks = []
    for r in range(len(rows)):
        block = network.blocks[rows.block[r]]
        if not KINDS[block.kind].from_control:
            continue
        station, part = network.stations.names[block.stations[rows.row[r], 0]], PARTS[rows.part[r]]
        if not figures.tested[r]:
            marks.append(_mark(station, part, float(solution.residuals[r]), None, None))
            continue
        misfit, sd = float(-figures.blunder[r]), float(figures.root[r] * math.sqrt(scale))
        marks.append(_mark(station, part, misfit, sd, limit, "estimate of all others"))
    return marks


def _mark(
    station: str, part: str, misfit: float, sd: float | None, limit: float | None, what: str = "adjusted"
) -> Mark:
    """Verdict and sentence; without a limit or a standard deviation the mark cannot be judged."""
    mm = misfit * 1000
    if limit is None or not sd or math.isnan(sd):
        return Mark(
            station, part, misfit, sd, UNJUDGED, f"{station} {part}: nothing here can judge it (differs by {mm:.1f} mm)"
        )
    times = abs(misfit) / sd
    verdict = DISAGREES if times > limit else AGREES
    sentence = f"{station} {part}: {verdict}, {what} minus known {mm:+.1f} mm, {times:.1f} times its standard deviation"
    return Mark(station, part, misfit, sd, verdict, sentence)
