"""Control marks against the readings: held marks, check marks and weighted marks.

The misfit is adjusted minus known. A check mark takes no part, so var(misfit) = var(adjusted) + var(known). Held and
weighted marks are looked at together (adjust.judge.consistent): the fewest are released that leave the others agreeing
with the readings and each other. A released mark is judged with all released marks free and the others held, a mark of
the consistent set with the released ones free and itself left out (adjust.judge.held_marks). The plane part of a mark
and its height are right or wrong by themselves. The marks that are held or weighted together, and check coordinates
together, give a false alarm with the job's significance (Sidak 1967).

With the scale from residuals the misfit over its standard deviation has Student's t distribution only where these
residuals know nothing of the misfit: those of the free stage, and for a check mark any. Where there is no free stage
the misfit of a held or weighted mark is itself among the residuals, and the ratio is a tau (Pope 1976).

K and g are those of the adjusted network. A control wrong by much has bent it; then those of the free stage are taken,
which is the same network without the control.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from adjust.book.settings import Tests
from adjust.judge import critical
from adjust.judge.consistent import Found, Levels, find_consistent
from adjust.judge.control_words import findings, length_words, size_words, unit_name
from adjust.judge.held_marks import HeldMarks, at_free_stage, control_places, judge_held_marks
from adjust.judge.reliability import Reliability
from adjust.judge.scale_words import ScaleFinding, feet_cause, scale_finding
from adjust.judge.shifts import Shifts, parts_of
from adjust.network import CHECK, PARTS, Ints
from adjust.solver.solution import Solution

AGREES, DISAGREES, UNJUDGED = "agrees", "disagrees", "cannot be judged"
JOINT_MOST = 300
"""Held and weighted coordinates up to which all are looked at together; beyond, those marks that fail by themselves.
In a network of 400 stations
K of 300 coordinates takes 0.3 to 0.7 s and the search for eight wrong marks 0.6 s, where the adjustment takes 0.3 s."""
JOINT_UNITS = 150
"""Of those the worst that are looked at together; more than that are judged one by one."""
BENT = 0.1
"""A shift b bends the sights of length d to its mark by b^2 / 2d; from this share of its standard deviation on, the
figures of the free stage are taken."""
BENT_SCALE = 1e-3
"""The same of a common scale: its square is a millimetre in a kilometre."""
TURNS = 4
"""Rounds of turning the free stage to the marks that agree and looking again; the second hardly ever finds more."""


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
class ControlReport:
    """What is said of the control: every coordinate, and the whole."""

    marks: tuple[Mark, ...]
    consistent: tuple[str, ...]
    """Marks that agree with the readings and each other: the station, or 'NAME height'."""
    released: tuple[str, ...]
    """Marks that disagree with these."""
    cannot_tell: tuple[tuple[str, ...], ...]
    """Groups of which one is wrong (or several), and nothing tells which; 'a common scale' may be among them."""
    scale: ScaleFinding | None
    """The scale that the marks have in common against the readings, where it explains what disagrees."""
    sentences: tuple[str, ...]
    """The most important of it in words; none where all agree."""

    @property
    def failed(self) -> bool:
        """Whether anything disagrees."""
        wrong = any(mark.verdict == DISAGREES for mark in self.marks)
        return wrong or bool(self.released or self.cannot_tell or self.scale)


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


@dataclass(frozen=True)
class Judged:
    """The marks with the parts that hang together and what was found of each."""

    marks: HeldMarks
    parts: list[Shifts]
    found: list[Found]
    levels: Levels


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
) -> ControlReport:
    """Verdicts on held, check and weighted marks; ``held``: K and g of the marks where they are known already."""
    groups = [held] if held else _groups(solution, by, tests)
    groups = [_with_pv(marks, figures) for marks in groups]
    parts = [_parts(solution, marks) for marks in groups]
    levels = _levels(by, tests, *_count([one for some in parts for one in some]))
    judged = [_judge(solution, marks, some, by, levels) for marks, some in zip(groups, parts, strict=True)]
    told = [pair for one in judged for pair in _told(solution, one, by)]
    told.sort(key=lambda pair: pair[0])
    checks = _check_marks(solution, by, tests)
    held_ones = [mark for (weighted, *_), mark in told if not weighted]
    weighted_ones = [mark for (weighted, *_), mark in told if weighted]
    return _report(solution, judged, (*held_ones, *checks, *weighted_ones), by)


def _with_pv(marks: HeldMarks, figures: Reliability) -> HeldMarks:
    """g of weighted coordinates from the figures of the readings: g = -E'Mv with E minus the unit column."""
    weighted = marks.row >= 0
    g = np.where(weighted, figures.pv[marks.row], marks.g)
    return replace(marks, g=g)


def _groups(solution: Solution, by: Yardstick, tests: Tests) -> list[HeldMarks]:
    """All marks together; of very many those together that fail by themselves, and the others one by one."""
    station, part, _ = control_places(solution)
    if len(station) <= JOINT_MOST:
        return [judge_held_marks(solution)]
    names, of = np.unique(2 * station + (part == 2), return_inverse=True)
    failing: list[tuple[float, Ints, HeldMarks]] = []
    alone: list[HeldMarks] = []
    for start in range(0, len(names), JOINT_MOST // 3):
        some = np.flatnonzero((of >= start) & (of < start + JOINT_MOST // 3))
        marks = judge_held_marks(solution, some)
        for unit in marks.units:
            one = marks.take(unit)
            parts = parts_of(one)
            bad = any(find_consistent(p, _levels(by, tests, len(names), 1)).released for p in parts)
            if bad:
                failing.append((-sum(p.total for p in parts), some[unit], one))
            else:
                alone.append(one)
    failing.sort(key=lambda f: f[0])
    worst = [at for _, at, _ in failing[:JOINT_UNITS]]
    alone += [one for _, _, one in failing[JOINT_UNITS:]]
    return [*alone, *([judge_held_marks(solution, np.sort(np.concatenate(worst)))] if worst else [])]


def _levels(by: Yardstick, tests: Tests, units: int, parts: int) -> Levels:
    return Levels(by.scale, by.degrees, by.apart, tests.significance, units, parts)


def _parts(solution: Solution, marks: HeldMarks) -> list[Shifts]:
    """Parts with the common scale of the plane; that of heights only where it is that of feet against metres."""
    known = solution.network.stations.known[marks.station, marks.part]
    movement = np.zeros(len(known))
    for part in range(3):
        here = (marks.part == part) & (marks.own > 0)
        movement[here] = known[here] - known[here].mean() if here.any() else 0.0
    if (marks.own[marks.part < 2] == 0).any():
        movement[marks.part < 2] = 0.0
    return [_without_scale_of_heights(s, marks) for s in parts_of(marks, movement)]


def _without_scale_of_heights(shifts: Shifts, marks: HeldMarks) -> Shifts:
    """The part without its scale where it has heights alone, unless the scale is that of feet."""
    if not shifts.scaled or (marks.part[np.concatenate(shifts.units)] < 2).any():
        return shifts
    if shifts.rank > 1 and feet_cause(*_scale(shifts, (), 1.0)):
        return shifts
    return replace(shifts, rows=shifts.rows[:-1], root=shifts.root[:-1], scaled=False)


def _scale(shifts: Shifts, released: tuple[int, ...], factor: float) -> tuple[float, float]:
    """ppm of known against measured and its standard deviation, with the units ``released`` free."""
    told = shifts.shift(len(shifts.rows) - 1, shifts.basis(released))
    if told is None:
        return math.nan, math.nan
    m = 1 / (1 + float(told[0][0]))  # the shift is measured minus known, as a share of known
    return (m - 1) * 1e6, m * m * math.sqrt(float(told[1][0, 0]) * factor) * 1e6


def _count(parts: list[Shifts]) -> tuple[int, int]:
    """Units tested one by one, and parts; two marks with nothing but each other are one test."""
    return sum(1 if s.rank == 1 else len(s.rows) for s in parts), len(parts)


def _judge(solution: Solution, marks: HeldMarks, parts: list[Shifts], by: Yardstick, levels: Levels) -> Judged:
    judged = Judged(marks, parts, [find_consistent(p, levels) for p in parts], levels)
    free, kept = solution.free, np.arange(len(marks.station))
    if free is None or not (by.degrees is None or by.apart) or not _bent(solution, judged):
        return judged
    for _ in range(TURNS):
        straight = at_free_stage(marks, free, kept)
        if straight is None:
            return judged
        parts = _parts(solution, straight)
        judged = Judged(straight, parts, [find_consistent(p, levels) for p in parts], levels)
        gone = [s.units[u] for s, f in zip(parts, judged.found, strict=True) for u in f.released if u < len(s.units)]
        again = np.setdiff1d(np.arange(len(marks.station)), np.concatenate([np.empty(0, np.int64), *gone]))
        if np.array_equal(again, kept):
            break
        kept = again
    return judged


def _bent(solution: Solution, judged: Judged) -> bool:
    """Whether what was found has bent the network so much that its own figures are not good enough."""
    for shifts, found in zip(judged.parts, judged.found, strict=True):
        for unit in found.released:
            told = shifts.shift(unit, shifts.basis(tuple(u for u in found.released if u != unit)))
            if told is None:
                told = shifts.shift(unit, shifts.basis(()))
            if told is None:
                return True
            b, sd = float(np.abs(told[0]).max()), math.sqrt(float(np.diagonal(told[1]).min()))
            if unit == len(shifts.units):
                if b > BENT_SCALE:
                    return True
            elif b**2 / (2 * _nearest(solution, judged.marks.station[shifts.units[unit][0]])) > BENT * sd:
                return True
    return False


def _nearest(solution: Solution, station: int) -> float:
    """Metres from a mark to the nearest other station; heights are not bent."""
    plane = solution.positions[:, :2]
    d = np.hypot(*(plane - solution.network.stations.known[station, :2]).T)
    d[station] = np.nan
    d = d[np.isfinite(d) & (d > 0)]
    return float(d.min()) if len(d) else math.inf


Place = tuple[bool, int, int, int]


def _told(solution: Solution, judged: Judged, by: Yardstick) -> list[tuple[Place, Mark]]:
    """Every coordinate with what is said of it, by (weighted, row, station, part)."""
    out, seen = [], set()
    for shifts, found in zip(judged.parts, judged.found, strict=True):
        for unit, places in enumerate(shifts.units):
            seen |= set(places.tolist())
            out += _of_unit(solution, judged, shifts, found, unit, by)
    for i in range(len(judged.marks.station)):
        if i not in seen:
            out.append(_unjudged(solution, judged.marks, i))
    return out


def _place(marks: HeldMarks, i: int) -> Place:
    row = int(marks.row[i])
    return row >= 0, row, int(marks.station[i]), int(marks.part[i])


def _unjudged(solution: Solution, marks: HeldMarks, i: int, without: str = "") -> tuple[Place, Mark]:
    name, part, row = solution.names[marks.station[i]], PARTS[marks.part[i]], int(marks.row[i])
    if row < 0:
        why = f"without {without} the datum needs it" if without else "because the datum needs it"
        sentence = f"{name} {part}: nothing here can judge it, {why}"
        return _place(marks, i), Mark(name, part, None, None, UNJUDGED, sentence)
    misfit = float(solution.residuals[row])
    size = length_words(solution, misfit)
    sentence = f"{name} {part}: nothing here can judge it (adjusted minus known {size})"
    return _place(marks, i), Mark(name, part, misfit, None, UNJUDGED, sentence)


def _of_unit(
    solution: Solution, judged: Judged, shifts: Shifts, found: Found, unit: int, by: Yardstick
) -> list[tuple[Place, Mark]]:
    """The coordinates of one unit with the released ones free: all that are blamed for a doubtful one."""
    marks, places = judged.marks, shifts.units[unit]
    free = found.blamed if unit in found.doubtful else found.released
    q = shifts.basis(tuple(u for u in free if u != unit))
    told = shifts.shift(unit, q)
    if told is None:
        without = " and ".join(unit_name(solution, marks, shifts, u) for u in free if u != unit)
        return [_unjudged(solution, marks, int(i), without) for i in places]
    sd = np.sqrt(np.diagonal(told[1]) * by.scale)
    known = float(((shifts.z @ q) ** 2).sum()), q.shape[1]
    testable = judged.levels.probability(0.0, len(places), known) is not None
    worst = int(np.argmax(np.abs(told[0]) / sd)) if (sd > 0).all() else 0
    limit = by.limit(critical.job_level(judged.levels.of_unit, len(places)))
    out = []
    for j, i in enumerate(places.tolist()):
        misfit, one_sd = float(told[0][j]), float(sd[j])
        verdict = AGREES
        if not testable or not one_sd > 0 or unit in found.doubtful:
            verdict = UNJUDGED
        elif unit in found.blamed:
            beyond = limit is not None and abs(misfit) > limit * one_sd
            verdict = DISAGREES if j == worst or beyond else AGREES
        sentence = _sentence(solution, judged, shifts, found, unit, int(i), misfit, one_sd, verdict)
        name = solution.names[marks.station[i]]
        out.append((_place(marks, i), Mark(name, PARTS[marks.part[i]], misfit, one_sd, verdict, sentence)))
    return out


def _sentence(solution: Solution, judged: Judged, shifts: Shifts, found: Found, unit: int, i: int, misfit: float,
              sd: float, verdict: str) -> str:  # fmt: skip
    marks = judged.marks
    head = f"{solution.names[marks.station[i]]} {PARTS[marks.part[i]]}"
    size = size_words(solution, misfit, sd, "estimate of all others minus known")
    if unit in found.doubtful:
        who = " or ".join(unit_name(solution, marks, shifts, u) for u in found.doubtful)
        return f"{head}: {who} is wrong, nothing here tells which ({size})"
    if verdict == UNJUDGED:
        return f"{head}: nothing here can judge it ({size})"
    scale = len(shifts.units) in found.blamed
    once = " once the common scale is allowed for" if scale and verdict == AGREES and unit not in found.blamed else ""
    return f"{head}: {verdict}{once}, {size}"


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
        marks.append(_check(solution, stations.names[i], part, misfit, sd, None if free[i, part // 2] else limit))
    return marks


def _check(solution: Solution, station: str, part: int, misfit: float, sd: float, limit: float | None) -> Mark:
    """Verdict and sentence; without a limit or a standard deviation the mark cannot be judged."""
    if limit is None or not sd or math.isnan(sd):
        size = length_words(solution, misfit)
        sentence = f"{station} {PARTS[part]}: nothing here can judge it (adjusted minus known {size})"
        return Mark(station, PARTS[part], misfit, sd, UNJUDGED, sentence)
    verdict = DISAGREES if abs(misfit) / sd > limit else AGREES
    sentence = f"{station} {PARTS[part]}: {verdict}, {size_words(solution, misfit, sd, 'adjusted minus known')}"
    return Mark(station, PARTS[part], misfit, sd, verdict, sentence)


def _report(solution: Solution, judged: list[Judged], marks: tuple[Mark, ...], by: Yardstick) -> ControlReport:
    consistent: list[str] = []
    released: list[str] = []
    doubtful: list[tuple[str, ...]] = []
    sentences: list[str] = []
    scale: ScaleFinding | None = None
    for one in judged:
        for shifts, found in zip(one.parts, one.found, strict=True):
            names = [unit_name(solution, one.marks, shifts, u) for u in range(len(shifts.rows))]
            out = {*found.released, *found.blamed, *found.doubtful, len(shifts.units)}
            consistent += [names[u] for u in range(len(names)) if u not in out and shifts.seen(u)]
            released += [names[u] for u in found.blamed if u < len(shifts.units)]
            if found.doubtful:
                doubtful.append(tuple(names[u] for u in found.doubtful))
            if len(shifts.units) in found.blamed:
                scale = _scale_of(one.marks, shifts, found, by)
                sentences.append(scale.sentence)
            sentences += findings(solution, one.marks, shifts, found, by.scale)
    return ControlReport(marks, tuple(consistent), tuple(released), tuple(doubtful), scale, tuple(sentences))


def _scale_of(marks: HeldMarks, shifts: Shifts, found: Found, by: Yardstick) -> ScaleFinding:
    others = tuple(u for u in found.released if u != len(shifts.units))
    ppm, sd = _scale(shifts, others, by.scale)
    heights = (marks.part[np.concatenate(shifts.units)] == 2).all()
    agree = ("the other marks agree" if others else "the known heights agree with the readings" if heights
             else "the marks agree with the readings and each other")  # fmt: skip
    return scale_finding(ppm, sd, agree)
