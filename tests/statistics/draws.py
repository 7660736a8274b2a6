"""Many draws of errors against one linearisation, judged by the program's own judge.

At a linearisation everything that the judge starts from is linear in the errors e of the readings:

    dx = Q A*'l*     v~ = A* dx - l*     with l~ = L^-1 e,  l* = l~ - Q_B Q_B' l~

so the program is asked once for its answer to a unit error in every reading (``Response``), and a draw is the sum. What
the judge makes of it, statistics, limits, verdicts, is asked of the program draw by draw: a ``Judgement`` of the job
without errors with this draw's residuals, square sums, coordinates and marks in place of its own. The study adjusts
some draws again from their readings, as ``brasscap adjust`` does, and compares the two (calibration.py).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

import adjust
from adjust.book.job import Job
from adjust.judge.assess import Judgement
from adjust.judge.control import compare_control, yardstick
from adjust.judge.held_marks import HeldMarks, judge_held_marks
from adjust.judge.reliability import reliability
from adjust.judge.staged import unsearched
from adjust.network import Network
from adjust.solver.solution import PartResult, Solution
from tests.statistics.jobs import Array, Clean

MODES = ("given", "from-residuals")


def with_tests(job: Job, **tests: object) -> Job:
    """The job with other [tests]."""
    settings = job.settings
    return replace(job, settings=replace(settings, tests=replace(settings.tests, **tests)))  # type: ignore[arg-type]  # Tests' own fields


@dataclass(frozen=True)
class Response:
    """Answers of a solution to unit errors in its R readings, by the program's factor of the normal equations."""

    solution: Solution
    whitened: list[Array]
    """(b, k, R) v~ by batch."""
    dx: Array
    """(u, R)."""

    @classmethod
    def of(cls, solution: Solution) -> Response:
        """Solve for a unit error in every reading."""
        count = len(solution.residuals)
        unit, rhs, reduced = np.eye(count), np.zeros((solution.design.unknowns.count + 1, count)), []
        for w in solution.whitened:
            b, k = w.batch.rows.shape
            l = np.linalg.solve(w.factor, unit[w.batch.rows].reshape(b, k, count))
            reduced.append(l - w.q @ (w.q.transpose(0, 2, 1) @ l))
            np.add.at(rhs, w.batch.columns, w.reduced.transpose(0, 2, 1) @ reduced[-1])
        dx = solution.cofactors.times(rhs[:-1])
        padded = np.concatenate([dx, np.zeros((1, count))])
        v = [w.reduced @ padded[w.batch.columns] - l for w, l in zip(solution.whitened, reduced, strict=True)]
        return cls(solution, v, dx)

    def drawn(self, errors: Array) -> Solution:
        """The solution with errors (R,) in the readings, at the same linearisation."""
        solution = self.solution
        whitened = [replace(w, l=-(v @ errors)) for w, v in zip(solution.whitened, self.whitened, strict=True)]
        squares, residuals = np.zeros(len(errors)), np.zeros(len(errors))
        for w in whitened:
            squares[w.batch.rows] = w.l**2
            residuals[w.batch.rows] = -(w.factor @ w.l[:, :, None])[:, :, 0]
        return replace(self.with_sums(squares), whitened=whitened, residuals=residuals,
                       positions=solution.positions + self.moves @ errors)  # fmt: skip

    def sums(self, squares: Array) -> tuple[tuple[PartResult, ...], PartResult]:
        """Parts and total with other squares (R,) of the whitened residuals, so with other variance factors."""
        one, *more = (replace(p, square_sum=float(squares @ p.rows)) for p in self.solution.parts)
        return (one, *more), replace(self.solution.total, square_sum=float(squares.sum()))

    def with_sums(self, squares: Array) -> Solution:
        """The solution with these."""
        parts, total = self.sums(squares)
        return replace(self.solution, parts=parts, total=total)

    @cached_property
    def squares(self) -> Array:
        """(R, R) the whitened residuals of all rows, by row."""
        out = np.zeros((self.dx.shape[1],) * 2)
        for w, v in zip(self.solution.whitened, self.whitened, strict=True):
            out[w.batch.rows] = v
        return out

    @cached_property
    def moves(self) -> Array:
        """(n, 3, R) movement of every coordinate."""
        numbers = self.solution.design.unknowns.coordinate
        return np.asarray(np.concatenate([self.dx, np.zeros((1, self.dx.shape[1]))])[numbers])

    @cached_property
    def pv(self) -> Array:
        """(R, R) e'Pv of every row as the judge forms it."""
        return np.stack([reliability(self.drawn(e)).pv for e in np.eye(self.dx.shape[1])], axis=1)

    @cached_property
    def marks(self) -> tuple[HeldMarks, Array]:
        """The marks, and (h, R) their g."""
        shifts = [judge_held_marks(self.drawn(e)).g for e in np.eye(self.dx.shape[1])]
        return judge_held_marks(self.solution), np.stack(shifts, axis=1)


def _names(network: Network) -> list[tuple[str, int, int]]:
    """File, row and part of every scalar row, the same in a network from which rows were taken."""
    rows = network.rows
    return [
        (network.blocks[b].file, int(network.blocks[b].line[i]), p)
        for b, i, p in zip(rows.block.tolist(), rows.row.tolist(), rows.part.tolist(), strict=True)
    ]


@dataclass(frozen=True)
class Draws:
    """Errors (d, R) and all that the program has made of them linearly, (d, ...)."""

    errors: Array
    squares: Array
    free_squares: Array
    pv: Array
    moves: Array
    """(d, n, 3)."""
    g: Array


class Bench:
    """A network without errors, solved and judged once, ready to be judged for any errors."""

    def __init__(self, clean: Clean) -> None:
        self.clean = clean
        self.job = {mode: with_tests(clean.job, variance_factor=mode) for mode in MODES}
        self.solution = adjust.solve(clean.job)
        self.base = {mode: adjust.assess(replace(self.solution, job=self.job[mode])) for mode in MODES}
        self.nothing = {mode: unsearched(j.solution, j.reliability, j.tests) for mode, j in self.base.items()}
        self.response = Response.of(self.solution)
        free = self.solution.free
        self.free = Response.of(free) if free else None
        if free:
            place = {name: r for r, name in enumerate(_names(self.solution.network))}
            self.rows_of_free = np.array([place[name] for name in _names(free.network)])

    def draw(self, rng: np.random.Generator, count: int, factor: float = 1.0) -> Draws:
        """Errors ``factor`` times as large as stated."""
        return self.of(factor * self.clean.errors(rng, count))

    def of(self, errors: Array) -> Draws:
        """What the program makes of errors (d, R)."""
        r = self.response
        free = (errors[:, self.rows_of_free] @ self.free.squares.T) ** 2 if self.free else np.zeros((len(errors), 0))
        moves = np.einsum("npr,dr->dnp", r.moves, errors, optimize=True)
        return Draws(errors, (errors @ r.squares.T) ** 2, free, errors @ r.pv.T, moves, errors @ r.marks[1].T)

    def scale(self, draws: Draws, mode: str, shrunk: float = 1.0) -> Array:
        """(d,) the variance factor the judge goes by; ``shrunk``: how much too small it takes sigma from residuals."""
        if mode == "given":
            return np.ones(len(draws.errors))
        rows, degrees = self.solution.total.rows, self.solution.total.degrees_of_freedom
        return np.asarray(draws.squares[:, rows].sum(axis=1) / degrees * shrunk**2)

    def readings(self, draws: Draws, mode: str, shrunk: float = 1.0) -> Judgement:
        """One judgement whose one-reading statistics, limits and suspects are those of all draws (d, R).

        Each draw's P v is told in its own standard deviation of unit weight, so that one scale serves all.
        """
        base = self.base[mode]
        unit = np.sqrt(self.scale(draws, mode, shrunk))[:, None]
        return replace(base, reliability=replace(base.reliability, pv=draws.pv / unit), scale=1.0)

    def judged(self, draws: Draws, mode: str, shrunk: float = 1.0) -> Iterator[Judgement]:
        """The judgements of the draws one by one."""
        base, given = self.base[mode], mode == "given"
        plain, marks = replace(self.solution, job=self.job[mode]), self.response.marks[0]
        for d in range(len(draws.errors)):
            figures = replace(base.reliability, pv=draws.pv[d])
            parts, total = self.response.sums(draws.squares[d])
            free = self.free.with_sums(draws.free_squares[d]) if self.free else None
            solution = replace(plain, parts=parts, total=total, free=free, positions=plain.positions + draws.moves[d])
            scale = 1.0 if given else (total.variance_factor or np.nan) * shrunk**2
            report = self.nothing[mode].report
            if report.marks:
                by = yardstick(solution, given)
                by = by if given else replace(by, scale=by.scale * shrunk**2)
                report = compare_control(solution, figures, by, base.tests, replace(marks, g=draws.g[d]))
            # the search for blunders is not drawn: its rates are measured on complete jobs (tests.judge.blunders_study)
            nothing = replace(self.nothing[mode], cleaned=solution, report=report)
            yield replace(base, solution=solution, reliability=figures, searched_given=nothing, scale=scale)
