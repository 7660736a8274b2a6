"""Closures: does it close? Misclosures of everything that closes, their own standard deviations, and verdicts.

A misclosure w = computed - known is a sum of readings, w = b'l + constants, so its variance is b'Qb with the full
covariance Q of the readings (centring and targets included, adjust.judge.booked). Without a rule of the job a
misclosure is compared with that: two-sided normal at a level a, and for the linear misclosure (E, N) with covariance C
the ellipse w'C^-1 w <= -2 ln a (chi-square with two degrees), cut along the misclosure. The level a is that of one of
all tests of closures here, so that a sound job has none that fails with probability 1 - significance (Sidak 1967, as if
they were independent).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from adjust.book.job import Job
from adjust.graph import runs
from adjust.graph.runs import HEIGHT_LOOP, LOOP, Lines, Run, height_walks, level_loops, level_runs, signs
from adjust.graph.traverses import Traverse, find_traverses, find_triangles
from adjust.judge import where
from adjust.judge.booked import Booked, Form, total
from adjust.judge.causes import Cause
from adjust.judge.causes_of_closures import likely
from adjust.judge.changed_closures import Made, Summed, Walk
from adjust.judge.critical import job_level, normal_critical
from adjust.judge.rises import Rise, rises
from adjust.judge.traversed import Traversed, traversed
from adjust.kinds import KINDS
from adjust.network import HELD
from adjust.solver.solution import Solution
from adjust.solver.threads import one_thread
from adjust.units import TURN, wrap

TESTED = ("height", "angle", "linear")
MET, NOT_MET, UNTESTED = "met", "not met", "cannot be tested"


@dataclass(frozen=True)
class Closure:
    """One closure; lengths in metres, angles in radians."""

    kind: str
    stations: tuple[int, ...]
    rows: tuple[int, ...]
    """Scalar rows of all its readings."""
    length: float | None
    """Length walked; None where it was not booked."""
    count: int
    """What ``counted`` says, for rules by a root of their number."""
    misclosure: dict[str, float]
    """Computed minus known: height; angle; east, north, linear, direction (its bearing)."""
    ratio: float | None
    """Length over linear misclosure."""
    sd: dict[str, float]
    """Standard deviations of the same from the readings; of linear in its own direction."""
    allowable: dict[str, float] = field(default_factory=dict)
    rule: str = ""
    verdict: str = UNTESTED
    """The worst of ``verdicts``; what cannot be tested counts less than what fails."""
    sentence: str = ""
    """Why something cannot be tested, or where to look."""
    verdicts: dict[str, str] = field(default_factory=dict)
    """Of height, angle and linear."""
    plane: tuple[tuple[float, float], tuple[float, float]] | None = None
    """Covariance of the misclosure in east and north; None where it has one dimension only."""
    declared: tuple[str, ...] = ()
    """What of height, angle and linear is allowed by a rule of the job; the rest by its own standard deviation."""
    counted: str = "angles"
    """angles; legs of a traverse by bearings; set-ups; lines where set-ups were not booked."""
    likely: tuple[Cause, ...] = ()
    """Likely slips of one that is not met, the best first."""


Rule = Callable[[Closure], tuple[dict[str, float], str]]
"""From a closure without verdict to what is allowed (height, angle, linear) and the rule's text; ({}, '') if it does
not say."""


def closures(what: Job | Solution, rule: Rule | None = None) -> tuple[Closure, ...]:
    """All closures of a job: level loops and runs, height loops and runs, loop and link traverses, triangles.

    Of a solution the same, reduced at the adjusted places instead of the starting ones.
    """
    with one_thread():
        job = what if isinstance(what, Job) else what.job
        found = _levels(job)
        said = {KINDS[block.kind].says for block in job.network.blocks}
        booked = _bare(job)
        if said & {"length", "pointings"}:
            booked = Booked.of(what)
            found += _heights(booked) if "zenith" in said else []
            computed = computed_traverses(booked)
            found += [_Found(_traverse(booked, one), Walk.of(booked, one), where.Walked(booked, one))
                      for one in computed]  # fmt: skip
            found += _triangles(booked, [one.traverse for one in computed])
        tests = sum(key in one.closure.misclosure for one in found for key in TESTED)
        judge = _Judge(job, rule, job_level(job.settings.tests.significance, tests))
        judged = [judge.judged(one.closure, one.context) for one in found]
        causes = likely(job, booked, [(one, of.made) for one, of in zip(judged, found, strict=True)])
        told = [where.told(job, replace(one, likely=slips), of.context)
                for one, slips, of in zip(judged, causes, found, strict=True)]  # fmt: skip
        return where.with_common(job, tuple(told))


@dataclass(frozen=True)
class _Found:
    """A closure without verdict, what it is computed from, and what tells where to look."""

    closure: Closure
    made: Made
    context: where.Context


def _bare(job: Job) -> Booked:
    """Readings without places, for levelled lines and marks."""
    nowhere = np.full((len(job.network.stations), 3), np.nan)
    return Booked(job, job.network, nowhere, np.zeros(len(job.network.groups)))


def computed_traverses(booked: Booked) -> tuple[Traversed, ...]:
    """The traverses of a job, computed."""
    sights = booked.sights
    lengths = {pair: booked.leg(*pair).value for pair in sights.legs}
    usable = {pair: rows for pair, rows in sights.legs.items() if lengths[pair] > 0}  # NaN: no place reduces it
    sights.legs = usable
    return tuple(traversed(booked, one) for one in find_traverses(booked.network, sights, lengths))


def _levels(job: Job) -> list[_Found]:
    network = job.network
    lines = Lines.of(network)
    if not len(lines.row):
        return []
    place = np.full(len(network.rows), -1)
    place[lines.row] = np.arange(len(lines.row))
    out = []
    for run in (*level_loops(network, lines), *level_runs(network, lines)):
        rows = [row for (row,) in run.rows]
        here = place[rows]
        along = signs(network, run) * lines.rise[here]
        w = math.fsum(along.tolist()) + _known_difference(job, run)
        sd = math.sqrt(_height_variance(job, run, rows, lines.variance[here].tolist()))
        lengths, setups = lines.walked[here].T
        count, counted = (len(rows), "lines") if np.isnan(setups).any() else (round(float(setups.sum())), "set-ups")
        length = None if np.isnan(lengths).any() else math.fsum(lengths.tolist())
        one = Closure(run.kind, run.stations, tuple(rows), length, count, {"height": w}, None, {"height": sd},
                      counted=counted)  # fmt: skip
        signed = Form(w, dict(zip(rows, signs(network, run).tolist(), strict=True)), _ends(run))
        out.append(_Found(one, Summed.of(network, signed, False), where.Levels(along)))
    return out


def _known_difference(job: Job, run: Run) -> float:
    """Height at the beginning less that at the end; zero for a loop."""
    known = job.network.stations.known[:, 2]
    return 0.0 if run.kind == LOOP else float(known[run.stations[0]] - known[run.stations[-1]])


def _ends(run: Run) -> dict[tuple[int, int], float]:
    """Partials by the heights of the known ends."""
    return {} if run.kind == LOOP else {(run.stations[0], 2): 1.0, (run.stations[-1], 2): -1.0}


def _height_variance(job: Job, run: Run, rows: list[int], variances: list[float]) -> float:
    """b'Qb of the lines, and of marks that are not held without error."""
    network, marks = job.network, _ends(run)
    if network.clusters or any(network.stations.role[i, 2] != HELD for i, _ in marks):
        signed = dict(zip(rows, signs(network, run).tolist(), strict=True))
        return float(_bare(job).covariance([Form(0.0, signed, marks)])[0, 0])
    return math.fsum(variances)


def _heights(booked: Booked) -> list[_Found]:
    """Loops and runs with rises by zenith angles in them."""
    lines, by_angles = Lines.of(booked.network), rises(booked)
    if not by_angles:
        return []
    legs = [Rise(int(i), int(j), Form(rise, {int(row): 1.0}), length, ()) for (i, j), row, rise, length in
            zip(lines.ends, lines.row, lines.rise.tolist(), lines.walked[:, 0].tolist(), strict=True)]  # fmt: skip
    legs += by_angles
    # levelled lines without a length: all by their variances then, those of zenith angles without centring
    by_length = lines.measure == runs.LENGTH or not len(lines.row)
    size = [one.length if by_length else _plain_variance(booked, one.form) for one in legs]
    ends = np.array([(one.start, one.end) for one in legs])
    walks = height_walks(booked.network, ends, runs.whole_sizes(np.array(size), by_length), len(lines.row))
    return [_height(booked, walk, [legs[k] for k in walk.lines]) for walk in walks]


def _plain_variance(booked: Booked, form: Form) -> float:
    return math.fsum(booked.variance[row] * by * by for row, by in form.rows.items())


def _height(booked: Booked, walk: runs.Walk, legs: list[Rise]) -> _Found:
    """One loop or run: known height, rises, less the known height."""
    signed = [1.0 if leg.start == at else -1.0 for leg, at in zip(legs, walk.stations, strict=False)]
    first, last = walk.stations[0], walk.stations[-1]
    ends = [] if walk.kind == HEIGHT_LOOP else [booked.coordinate(first, 2), booked.coordinate(last, 2) * -1.0]
    w = total([*(leg.form * sign for leg, sign in zip(legs, signed, strict=True)), *ends])
    sd = math.sqrt(booked.covariance([w])[0, 0])
    length = math.fsum(leg.length for leg in legs)
    one = Closure(walk.kind, walk.stations, tuple(sorted(w.rows)), None if math.isnan(length) else length, len(legs),
                  {"height": w.value}, None, {"height": sd}, counted="lines")  # fmt: skip
    return _Found(one, Summed.of(booked.network, w, False), where.Heights(tuple(legs), tuple(signed)))


def _traverse(booked: Booked, one: Traversed) -> Closure:
    """The closure of a computed traverse."""
    run = one.traverse.run(booked.sights)
    rows = tuple(sorted({*(row for rows in run.rows for row in rows), *(one.angle.rows if one.angle else ())}))
    misclosure: dict[str, float] = {}
    sd: dict[str, float] = {}
    if one.angle is not None:
        misclosure["angle"] = one.angle.value
        sd["angle"] = math.sqrt(booked.covariance([one.angle])[0, 0])
    cov = booked.covariance([one.east, one.north])
    east, north = one.east.value, one.north.value
    linear = math.hypot(east, north)
    misclosure |= {"east": east, "north": north, "linear": linear, "direction": math.atan2(east, north) % TURN}
    (ee, en), (ne, nn) = cov.tolist()
    plane = None if one.turnable else ((ee, en), (ne, nn))
    along = np.array([east, north]) / linear if linear else np.array([1.0, 0.0])
    across = np.array([along[1], -along[0]])
    sideways = math.sqrt(max(float(across @ cov @ across), 0.0))
    sd |= {"east": math.sqrt(ee), "north": math.sqrt(nn)}
    sd["linear"] = math.sqrt(max(float(along @ cov @ along), 0.0))
    if sideways < linear:  # else it has no direction worth the name
        sd["direction"] = sideways / linear
    return Closure(one.traverse.kind, one.traverse.stations, rows, one.length, len(one.turned) or len(one.legs),
                   misclosure, one.length / linear if linear else None, sd, plane=plane,
                   counted="angles" if one.turned else "legs")  # fmt: skip


def _triangles(booked: Booked, traverses: list[Traverse]) -> list[_Found]:
    """Sums of three angles, except of three-sided loop traverses, which have them already."""
    without = {frozenset(one.stations) for one in traverses if one.closed and not one.by_bearings and not one.missing}
    out = []
    for run in find_triangles(booked.sights, {s for s in without if len(s) == 3}):
        i, j, k, _ = run.stations
        forms = [booked.turned(*corner) for corner in ((i, j, k), (j, k, i), (k, i, j))]
        sum_of = total([form for form in forms if form])
        sd = math.sqrt(booked.covariance([sum_of])[0, 0])
        rows = tuple(sorted(sum_of.rows))
        sum_of = replace(sum_of, value=wrap(sum_of.value - TURN / 2))
        one = Closure(run.kind, run.stations, rows, None, 3, {"angle": sum_of.value}, None, {"angle": sd})
        out.append(_Found(one, Summed.of(booked.network, sum_of, True), None))
    return out


@dataclass(frozen=True)
class _Judge:
    """Verdicts by a rule, else by the misclosure's own standard deviation."""

    job: Job
    rule: Rule | None
    level: float
    """Significance of one test."""

    def judged(self, one: Closure, context: where.Context) -> Closure:
        """The closure with what is allowed, and verdicts."""
        allowable, text = self.rule(one) if self.rule else ({}, "")
        declared = tuple(allowable)
        own, words = self._own(one)
        if own.keys() - allowable.keys():
            allowable, text = {**own, **allowable}, "; ".join(t for t in (text, words) if t)
        verdicts = {
            key: (MET if abs(one.misclosure[key]) <= most else NOT_MET) if math.isfinite(most) else UNTESTED
            for key, most in allowable.items()
            if key in one.misclosure
        }
        if isinstance(context, where.Walked) and context.traversed.angle is None:
            verdicts["angle"] = UNTESTED
        verdict = next((v for v in (NOT_MET, UNTESTED) if v in verdicts.values()), MET if verdicts else UNTESTED)
        return replace(one, allowable=allowable, rule=text, verdict=verdict, verdicts=verdicts,
                       declared=declared)  # fmt: skip

    def _own(self, one: Closure) -> tuple[dict[str, float], str]:
        times = normal_critical(self.level)
        allowable: dict[str, float] = {key: times * one.sd[key] for key in ("height", "angle") if key in one.sd}
        if "linear" in one.sd:
            allowable["linear"] = self._linear(one)
        level = self.job.settings.tests.significance
        return allowable, f"its own standard deviation, at a significance of {level:g} for all closures together"

    def _linear(self, one: Closure) -> float:
        """How far the ellipse of the misclosure reaches in its direction; along a line, the normal interval."""
        if one.plane is None or one.misclosure["linear"] == 0:
            return normal_critical(self.level) * one.sd["linear"]
        w = np.array([one.misclosure["east"], one.misclosure["north"]]) / one.misclosure["linear"]
        return math.sqrt(-2 * math.log(self.level) / float(w @ np.linalg.pinv(np.array(one.plane), hermitian=True) @ w))
