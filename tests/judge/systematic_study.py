"""Study of common effects: how often a real one is found under its name, and how often clean jobs show one.

    OPENBLAS_NUM_THREADS=1 python -m tests.judge.systematic_study 200

Every job is that of tests.judge.sharing, adjusted once a seed; its draws are errors at the same linearisation, through
the program's own operator and search (``Problem.with_errors``). An effect is planted at five standard deviations of its
own test. Counted are the jobs in which it is significant under its own name (named); in which another is, that the
readings tell from it with a correlation above 0.9 (alike); or only others (other); and false ones beside it.
"""

from __future__ import annotations

import sys
import tempfile
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from adjust.book.settings import Tests
from adjust.judge import systematic
from adjust.judge.critical import normal_critical
from adjust.judge.effect_columns import Effect, effects
from adjust.judge.effect_words import Finding, name
from adjust.judge.systematic import Problem, search
from tests.judge.sharing import EFFECTS, job, judged
from tests.networks import Array

SIZE = 5.0
TESTS = Tests()
MODES = ("given", "from-residuals")


@dataclass
class Row:
    """Jobs with an effect of one sort."""

    jobs: int = 0
    named: int = 0
    alike: int = 0
    other: int = 0
    single: int = 0
    """Said to rest on single readings."""
    false: int = 0
    """Significant effects beside the first, in all jobs."""
    worst: float = 0.0
    """Largest error of its size where it is named, in standard deviations."""


def taken(problem: Problem, found: Sequence[int], rows: Sequence[int]) -> list[systematic._Taken]:
    """These effects and single readings as unknowns that are in."""
    return [*(systematic._effect(problem, c) for c in found), *(systematic._row(problem, r) for r in rows)]


def problems(folder: Path, count: int) -> Iterator[tuple[Problem, Array]]:
    """Jobs without effects, and the standard deviations (R,) of their readings."""
    for seed in range(count):
        judgement = judged(job(folder / str(seed), seed, applied="applied = []"))
        columns, _ = effects(
            judgement.solution.network, judgement.solution.coefficients[:, -1], judgement.solution.adjusted
        )
        problem = Problem.of(judgement.solution, judgement.reliability, columns)
        yield problem, np.where(judgement.solution.design.held, 0.0, judgement.solution.design.sd)


def named(problem: Problem, wanted: tuple[str, str]) -> int:
    """Number of an effect by its name; -1 where the job has it not."""
    return next((c for c, e in enumerate(problem.effects) if (e.what, name(e)) == wanted), -1)


def detection(folder: Path, count: int, mode: str = "given") -> dict[str, Row]:
    """Each effect planted once in each of ``count`` jobs."""
    out = {effect: Row() for effect in EFFECTS}
    tests = replace(TESTS, variance_factor=mode)
    for seed, (problem, sd) in enumerate(problems(folder, count)):
        rng = np.random.default_rng([20261215, seed])
        for effect, (wanted, *_) in EFFECTS.items():
            c = named(problem, wanted)
            if c < 0 or not problem.checked[c]:
                continue
            e = problem.effects[c]
            size = SIZE / float(np.sqrt(problem.m[c]))
            l = rng.normal(size=len(sd)) * sd
            l[e.rows] += size * e.values
            _count(out[effect], problem, c, size, search(problem.with_errors(l), tests))
    return out


def _count(row: Row, problem: Problem, c: int, size: float, found: list[Finding]) -> None:
    significant = [k for k, f in enumerate(found) if f.is_significant]
    row.jobs += 1
    f = found[c]
    if f.is_significant:
        assert f.value is not None
        assert f.sd is not None
        row.named += 1
        row.worst = max(row.worst, abs(f.value - size) / f.sd)
    elif significant:
        alike = any(correlation(problem, c, k) > systematic.TOLD_APART for k in significant)
        row.alike += alike
        row.other += not alike
    elif f.single:
        row.single += 1
    row.false += max(len(significant) - 1, 0)


def correlation(problem: Problem, c: int, k: int) -> float:
    """Of two effects."""
    (other,) = taken(problem, [k], [])
    e: Effect = problem.effects[c]
    return abs(float(e.times(other.mf))) / float(np.sqrt(problem.m[c]))


@dataclass(frozen=True)
class Rate:
    """A share of effects that were called significant, with its standard error over the jobs drawn."""

    what: str
    share: float
    error: float
    wanted: float

    @property
    def within(self) -> bool:
        """Within three standard errors of what is stated; of the search, not above it."""
        gap = self.share - self.wanted
        return gap <= 3 * self.error and ("search" in self.what or gap >= -3 * self.error)


def false_alarms(folder: Path, draws: int, searched: int, level: float, count: int = 2,
                 mode: str = "given") -> dict[str, list[Rate]]:  # fmt: skip
    """Clean jobs: the share of single tests above the limit in ``draws`` draws a job, and of the search in some."""
    tests = replace(TESTS, outlier=level, variance_factor=mode)
    out: dict[str, list[Rate]] = {"plain": [], "5 per cent larger errors": []}
    for seed, (problem, sd) in enumerate(problems(folder / "clean", count)):
        rng = np.random.default_rng([20261216, seed])
        at = np.flatnonzero(problem.checked)
        E = np.zeros((len(sd), len(at)))
        for k, c in enumerate(at):
            E[problem.effects[c].rows, k] = problem.effects[c].values
        ME = problem.influence.times(E)
        errors = rng.normal(size=(draws, len(sd))) * sd
        w = np.abs(errors @ ME) / np.sqrt(problem.m[at])
        for label, factor in zip(out, (1.0, 1.05), strict=True):
            if mode == "given":
                out[label].append(_rate(f"job {seed}, alone", factor * w > normal_critical(level), level))
        hits = np.array([
            [f.is_significant for f in search(problem.with_errors(l), tests)] for l in errors[:searched]
        ])  # fmt: skip
        out["plain"].append(_rate(f"job {seed}, search", hits[:, at], level))
    return out


def _rate(what: str, hits: Array, level: float) -> Rate:
    """Share of hits (draws, p); the tests of one draw hang together, so the error is that of the draws' means."""
    each = np.asarray(hits).mean(axis=1)
    return Rate(
        what,
        float(each.mean()),
        float(max(each.std(ddof=1), np.sqrt(level / hits.shape[1])) / np.sqrt(len(each))),
        level,
    )


def main(count: int) -> None:
    """Print both tables."""
    for mode in MODES:
        with tempfile.TemporaryDirectory() as folder:
            print(
                f"variance factor {mode}; {count} jobs an effect, {SIZE:g} standard deviations, level {TESTS.outlier}"
            )
            for effect, row in detection(Path(folder), count, mode).items():
                print(f"  {effect:26s} {row}")
            rates = false_alarms(Path(folder), 20000, 2000, TESTS.outlier, 5, mode)
            for label, some in rates.items():
                for rate in some:
                    print(f"  {label}: {rate} {'within' if rate.within else 'outside'}")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 200)
