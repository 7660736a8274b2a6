"""Effects that many readings share, each tested as one more unknown without adjusting again.

With a column e (adjust.judge.effect_columns) and M of adjust.judge.influence the effect b, as an unknown of the same
adjustment, and its standard deviation are

    b = e'Ml / e'Me        sd = s / sqrt(e'Me)        statistic w = e'Ml / sqrt(e'Me)

with l = observed - computed; at rest M l = -P v, and away from it this is the first step of the adjustment with b. With
the variance factor given s = 1 and w is compared with the normal. From residuals the effect is first taken out of the
square sum, s^2 = (v'Pv - w^2)/(r - 1), and w/s has Student's t distribution with r - 1 degrees (the same test as Pope's
tau: adjust.judge.critical).

One real effect makes others significant that have readings with it, and so does one grossly wrong reading. So unknowns
F, each scaled to f'Mf = 1, go in one by one: the effect, or the error of a single reading, with the largest |w|. All
others are tested with them in (adjust.judge.influence):

    K = F'MF    P v -> P v - M F K^-1 F'Pv    e'Me -> e'Me - e'MF K^-1 F'Me    v'Pv -> v'Pv - (F'Pv)'K^-1 F'Pv

until no effect is significant. What no longer is has been explained by the unknown that went in last.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from adjust.book.settings import Tests
from adjust.judge.critical import normal_critical, student_critical
from adjust.judge.effect_columns import MOST, Effect, common_heights, effects
from adjust.judge.effect_words import NONE_SEEN, TWICE, Finding, Systematic, sentence_of_more, told
from adjust.judge.influence import Influence
from adjust.judge.reliability import Reliability
from adjust.network import Array, Bools, Ints
from adjust.solver.solution import Solution

CHECKED = 1e-6
"""Share of e'Pe that must be left after the other unknowns; below, rounding decides (adjust.judge.reliability)."""
EXACT = 0.02
"""Share of e'Me by which e'MCMe may differ from it. Both are the same but for rounding, below 1e-10, where the datum is
exact. Heights of a free network of slopes are free only nearly (a metre up makes its lines longer by 1.6e-7), and M is
then off by as much as is seen here: in nine stations 6e-3 at the most for effects that dense adjustments tell, and 0.5
or more for a scale that they do not (tests/judge/test_systematic.py)."""
MOST_SINGLE = 10
"""Single readings that are left out on the way; a book with more gross errors has to be put right first."""
ENTRIES = 4_000_000
"""Numbers (rows x columns) that are solved for at once: 32 MB, and all columns of a job of 60,000 readings."""
TOLD_APART = 0.9
"""Correlation above which two effects are named together, as for single readings (design: 'statistics correlated above
0.9 are named together')."""


def systematic(solution: Solution, reliability: Reliability, tests: Tests) -> tuple[Systematic, ...]:
    """Every effect with its test, in the order of adjust.judge.effect_columns."""
    return words_of(solution, *findings(solution, reliability, tests))


def findings(solution: Solution, reliability: Reliability, tests: Tests) -> tuple[list[Finding], int]:
    """The bare figures of every effect, and how many effects were left out."""
    columns, left_out = effects(solution.network, solution.coefficients[:, -1], solution.adjusted)
    failing = np.abs(np.nan_to_num(reliability.statistic)) > normal_critical(tests.outlier)
    columns += common_heights(solution, failing)
    return (search(Problem.of(solution, reliability, columns), tests) if columns else []), left_out


def words_of(solution: Solution, found: list[Finding], left_out: int) -> tuple[Systematic, ...]:
    """Findings with their sentences."""
    words = [told(solution, one) for one in found]
    return (*words, sentence_of_more(left_out, MOST)) if left_out else tuple(words)


def expected_by_chance(found: Sequence[Systematic], tests: Tests) -> float:
    """Effects of a clean job that are expected to be called significant."""
    return float(tests.outlier * sum(one.statistic is not None for one in found))


def constants_twice(found: Sequence[Systematic]) -> list[str]:
    """The sentences on constants that the distances seem to have had already."""
    return [one.sentence for one in found if one.cause == TWICE]


@dataclass(frozen=True)
class Problem:
    """All that the tests are made of; p effects, R scalar rows."""

    effects: list[Effect]
    pv: Array
    """(R,) P v of the readings alone, -M l."""
    m: Array
    """(p,) e'Me."""
    checked: Bools
    """(p,) effects that the other unknowns do not take up."""
    rows_m: Array
    """(R,) M_ii; 0 for readings that nothing checks."""
    square_sum: float
    degrees: int
    influence: Influence

    @classmethod
    def of(cls, solution: Solution, reliability: Reliability, columns: list[Effect]) -> Problem:
        """One solution with its effects: all columns, and l itself, through M at once."""
        influence, l = Influence.of(solution), -solution.residuals
        count = len(l)
        step = max(1, ENTRIES // max(count, 1))
        m, pe, again = (np.zeros(len(columns)) for _ in range(3))
        pv = np.zeros(count)
        for start in range(0, len(columns), step):
            some = columns[start : start + step]
            errors = np.zeros((count, len(some) + (start == 0)))
            for k, one in enumerate(some):
                errors[one.rows, k] = one.values
            if start == 0:
                errors[:, -1] = l
            me, here = influence.times(errors), slice(start, start + len(some))
            m[here] = [one.times(me[:, k]) for k, one in enumerate(some)]
            pe[here], again[here] = (x[: len(some)] for x in (influence.weights(errors), influence.variances(me)))
            if start == 0:
                pv = -me[:, -1]
        rows_m = np.where(reliability.tested, reliability.m, 0.0)
        square_sum, degrees = -float(l @ pv), solution.total.degrees_of_freedom
        checked = (m > CHECKED * pe) & (np.abs(again - m) < EXACT * m)
        return cls(columns, pv, m, checked, rows_m, square_sum, degrees, influence)

    def with_errors(self, l: Array) -> Problem:
        """The same readings with other l (R,), at the same linearisation."""
        pv = -self.influence.times(l[:, None])[:, 0]
        return Problem(self.effects, pv, self.m, self.checked, self.rows_m, -float(l @ pv), self.degrees,
                       self.influence)  # fmt: skip

    def column(self, rows: Ints, values: Array, m: float) -> Array:
        """M f (R,) of a column scaled to f'Mf = 1."""
        errors = np.zeros((len(self.pv), 1))
        errors[rows, 0] = values / math.sqrt(m)
        return self.influence.times(errors)[:, 0]


@dataclass(frozen=True)
class Stage:
    """The figures with some unknowns F in."""

    problem: Problem
    mf: Array
    """(R, k) M F."""
    k: Array
    """(k, k) F'MF."""
    g: Array
    """(k,) F'Pv."""

    @classmethod
    def of(cls, problem: Problem, taken: Sequence[_Taken]) -> Stage:
        """With these in."""
        mf = np.stack([t.mf for t in taken], axis=1) if taken else np.zeros((len(problem.pv), 0))
        k = np.array([[t.times(u.mf) for u in taken] for t in taken]).reshape(len(taken), len(taken))
        g = np.array([t.times(problem.pv) for t in taken])
        return cls(problem, mf, (k + k.T) / 2, g)

    @property
    def b(self) -> Array:
        """(k,) K^-1 F'Pv."""
        return np.asarray(np.linalg.solve(self.k, self.g), dtype=np.float64)

    @property
    def square_sum(self) -> float:
        """v'Pv with F in."""
        return max(self.problem.square_sum - float(self.g @ self.b), 0.0)

    def effect(self, one: Effect, m: float) -> tuple[float, float]:
        """e'Pv and e'Me of an effect."""
        coupling = one.times(self.mf)
        left = m - float(coupling @ np.linalg.solve(self.k, coupling))
        return float(one.times(self.problem.pv) - coupling @ self.b), left

    @property
    def rows_w(self) -> Array:
        """(R,) |w| of every reading; 0 where nothing checks it."""
        p = self.problem
        left = p.rows_m - np.einsum("rk,rk->r", self.mf, np.linalg.solve(self.k, self.mf.T).T)
        told_apart = (left > CHECKED * p.rows_m) & (p.rows_m > 0)
        w = (p.pv - self.mf @ self.b) / np.sqrt(np.where(told_apart, left, 1.0))
        return np.where(told_apart, np.abs(w), 0.0)

    def correlation(self, one: Effect, m: float, of: _Taken) -> float:
        """Of an effect alone with one unknown that is in."""
        return abs(float(one.times(of.mf))) / math.sqrt(m)


@dataclass(frozen=True)
class _Taken:
    """An unknown that went in: an effect, or the error of one reading (``effect`` None)."""

    effect: int | None
    rows: Ints
    values: Array
    """Scaled to f'Mf = 1."""
    mf: Array

    def times(self, matrix: Array) -> float:
        """f'x."""
        return float(self.values @ matrix[self.rows])


@dataclass
class _Course:
    """What has been found on the way, by effect."""

    findings: dict[int, Finding] = field(default_factory=dict)
    open: set[int] = field(default_factory=set)
    significant: list[int] = field(default_factory=list)
    single: list[int] = field(default_factory=list)


def search(problem: Problem, tests: Tests) -> list[Finding]:
    """Test every effect, the largest first and the others with it in."""
    course = _Course()
    taken: list[_Taken] = []
    while True:
        stage = Stage.of(problem, taken)
        now = {c: _finding(stage, c, tests) for c in range(len(problem.effects)) if c not in course.significant}
        _vanished(stage, now, course, taken)
        course.findings |= {c: f for c, f in now.items() if c not in course.findings or f.above}
        course.open = {c for c, f in now.items() if f.above}
        if not course.open:
            break
        best = max(course.open, key=lambda c: (now[c].w, -c))
        row = int(stage.rows_w.argmax())
        if stage.rows_w[row] >= now[best].w and len(course.single) < MOST_SINGLE:
            course.single.append(row)
            taken.append(_row(problem, row))
        else:
            course.significant.append(best)
            taken.append(_effect(problem, best))
    _at_the_end(problem, tests, course, taken)
    return [course.findings[c] for c in range(len(problem.effects))]


def _effect(problem: Problem, c: int) -> _Taken:
    one, m = problem.effects[c], float(problem.m[c])
    return _Taken(c, one.rows, one.values / math.sqrt(m), problem.column(one.rows, one.values, m))


def _row(problem: Problem, row: int) -> _Taken:
    m = float(problem.rows_m[row])
    at = np.array([row])
    return _Taken(None, at, np.ones(1) / math.sqrt(m), problem.column(at, np.ones(1), m))


def _vanished(stage: Stage, now: dict[int, Finding], course: _Course, taken: list[_Taken]) -> None:
    """Say of what was significant and no longer is what has explained it."""
    for c in course.open & now.keys():
        if now[c].above:
            continue
        before, last = course.findings[c], taken[-1]
        if last.effect is None:
            course.findings[c] = before.because(single=tuple(course.single))
        else:
            alike = stage.correlation(before.effect, float(stage.problem.m[c]), last)
            course.findings[c] = before.because(by=stage.problem.effects[last.effect])
            if alike > TOLD_APART:
                leader = course.findings[last.effect]
                course.findings[last.effect] = leader.like(before.effect, alike)


def _finding(stage: Stage, c: int, tests: Tests) -> Finding:
    """An effect tested with what is in."""
    p = stage.problem
    one, m = p.effects[c], float(p.m[c])
    if not p.checked[c]:
        return Finding(one)
    g, left = stage.effect(one, m)
    if not left > CHECKED * m:
        return Finding(one)
    w, r = abs(g) / math.sqrt(left), p.degrees - len(stage.g)
    if tests.variance_factor == "given":
        return Finding(one, -g / left, 1 / math.sqrt(left), normal_critical(tests.outlier), w)
    if r <= 1:
        return Finding(one, spare=False)
    s = math.sqrt(max(stage.square_sum - w * w, CHECKED**2 * stage.square_sum) / (r - 1))
    return Finding(one, -g / left, s / math.sqrt(left) if s else None, student_critical(tests.outlier, r - 1), w)


def _at_the_end(problem: Problem, tests: Tests, course: _Course, taken: list[_Taken]) -> None:
    """Each significant effect with all others in, and the rest beside them; one that falls below goes out again."""
    kept = list(taken)
    while True:
        joint = {}
        for t in kept:
            if t.effect is not None:
                others = Stage.of(problem, [u for u in kept if u is not t])
                joint[t.effect] = _finding(others, t.effect, tests)
        weak = [c for c, f in joint.items() if not f.above]
        if not weak:
            break
        out = min(weak, key=lambda c: joint[c].w)
        kept = [t for t in kept if t.effect != out]
        by = next((t.effect for t in reversed(kept) if t.effect is not None), None)
        before = course.findings[out]
        course.findings[out] = (
            before.because(single=tuple(course.single)) if by is None else before.because(by=problem.effects[by])
        )
    for c, f in joint.items():
        course.findings[c] = f.significant(course.findings[c].alike)
    final = Stage.of(problem, kept)
    for c, f in course.findings.items():
        if f.verdict == NONE_SEEN and c not in joint:
            beside = _finding(final, c, tests)
            course.findings[c] = f if beside.value is None or beside.above else beside
