"""The judgement of a solution: overall tests, one-reading tests, precision, lines, control marks, and the verdict."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from adjust.book.settings import Tests
from adjust.judge import critical
from adjust.judge.control import ControlReport, Mark
from adjust.judge.lines import Lines, find_lines
from adjust.judge.overall import NOT_MET, OverallTest, overall_tests
from adjust.judge.reliability import Reliability, largest_effect, reliability
from adjust.judge.similarity import Similarity, fit_control
from adjust.network import Array, Bools, Ints
from adjust.solver.solution import Solution
from adjust.solver.threads import one_thread

if TYPE_CHECKING:
    from adjust.judge.balances import Balance
    from adjust.judge.blunders import Found
    from adjust.judge.causes import Cause
    from adjust.judge.closures import Closure
    from adjust.judge.components import Component
    from adjust.judge.effect_words import Systematic
    from adjust.judge.separable import Group
    from adjust.judge.staged import Searched
    from adjust.judge.suspects import Suspect
    from adjust.judge.unchecked import Unchecked

CLOSURES_MOST = 20_000
"""Scalar readings above which an adjustment does not look for closures (docs/measured.md: a level net of 5,000 stations
needs about one adjustment's time); the record of larger jobs is cut as well."""


@dataclass(frozen=True)
class Judgement:
    """Everything that is said about a solution."""

    solution: Solution
    tests: Tests
    reliability: Reliability
    scale: float
    """Variance factor by which covariances are multiplied: 1 when the stated standard deviations are trusted."""
    degrees: int | None
    """Degrees of freedom behind ``scale``; None when it is given."""
    critical: float | None
    critical_job: float | None
    shift: float | None
    """Smallest detectable blunder in standard deviations of the estimated blunder."""
    effect_station: Ints
    effect_part: Ints
    effect: Array
    """Movement of the coordinate moved most by the smallest detectable blunder (R,), metres."""
    lines: Lines
    searched_given: Searched | None = None
    """Blunders and control where they are known already; None: they are looked for."""

    @property
    def control(self) -> tuple[Mark, ...]:
        """Verdicts on the coordinates of held, check and weighted marks."""
        return self.control_report.marks

    @cached_property
    def statistic(self) -> Array:
        """Test statistic (R,): w when the scale is given, tau when it is from residuals; NaN where none."""
        if self.scale <= 0 or self.critical is None:
            return np.full(len(self.reliability.m), np.nan)
        return self.reliability.statistic / math.sqrt(self.scale)

    @cached_property
    def smallest_detectable(self) -> Array:
        """Smallest blunder (R,) that the one-reading test finds with its power, metres or radians."""
        shift = np.nan if self.shift is None else self.shift
        return self.reliability.root * shift * math.sqrt(self.scale)

    @cached_property
    def suspect(self) -> Bools:
        """Rows (R,) that fail the plain one-reading test."""
        return self._above(self.critical)

    @cached_property
    def suspect_of_job(self) -> Bools:
        """Rows (R,) that fail at the level of the whole job."""
        return self._above(self.critical_job)

    def _above(self, limit: float | None) -> Bools:
        if limit is None:
            return np.zeros(len(self.statistic), dtype=bool)
        return np.asarray(np.abs(np.nan_to_num(self.statistic)) > limit)

    @cached_property
    def unchecked(self) -> Unchecked:
        """Readings that no other checks with the reasons, and the stations that hang on them only."""
        from adjust.judge.unchecked import Unchecked  # its words are seldom needed, and take their time to load

        return Unchecked(self.solution, self.reliability)

    @property
    def all_checked(self) -> bool:
        """Whether every reading is checked by others."""
        return bool((self.reliability.tested | self.solution.design.held).all())

    @cached_property
    def searched(self) -> Searched:
        """Blunders, the network without them, and the control compared with that."""
        from adjust.judge.staged import search

        if self.searched_given is not None:
            return self.searched_given
        with one_thread():
            return search(self.solution, self.reliability, self.tests)

    @property
    def blunders(self) -> Found:
        """The readings that are in error at the level of the whole job, and the network without them."""
        return self.searched.found

    @property
    def control_report(self) -> ControlReport:
        """What is said of the control, compared with the readings without the blunders."""
        return self.searched.report

    def confusable(self, suspect: Suspect) -> list[tuple[int, float, float]]:
        """Rows that no test here can tell from a suspect: row, correlation of the statistics, and the chance that the
        wrong one of the two is blamed for an error of this size."""
        from adjust.judge.separable import confusable, wrong_of_two

        found = confusable(self.blunders, suspect.row)
        return [(r, rho, wrong_of_two(rho, abs(suspect.statistic))) for r, rho in found.items()]

    def causes(self, suspect: Suspect) -> tuple[Cause, ...]:
        """Everyday slips that would explain a suspect at the job's level, the likeliest first; none where none fits."""
        from adjust.judge.causes import causes

        return causes(self, suspect) if suspect.at_job_level else ()

    @property
    def blame(self) -> Ints:
        """Rows of the suspects of either level in order of blame."""
        return np.array([s.row for s in self.suspects], dtype=np.int64)

    @cached_property
    def suspects(self) -> tuple[Suspect, ...]:
        """The blunders found together, then what still fails the test of one reading without them."""
        from adjust.judge.suspects import suspects

        return suspects(self)

    @cached_property
    def separability(self) -> tuple[Group, ...]:
        """Groups of readings that no test can tell apart; none looked for in large jobs."""
        from adjust.judge.influence import Influence
        from adjust.judge.separable import groups

        with one_thread():
            return groups(Influence.of(self.solution), self.reliability, self.shift or np.nan)

    @property
    def expected_by_chance(self) -> float:
        """Readings of a clean job that the plain test is expected to flag."""
        return float(self.tests.outlier * np.isfinite(self.statistic).sum())

    @cached_property
    def overall(self) -> tuple[OverallTest, ...]:
        """Overall test of every part, then of all together."""
        return overall_tests(self.solution, self.tests)

    @cached_property
    def overall_free(self) -> tuple[OverallTest, ...]:
        """The same for the free stage: the readings alone; empty without one."""
        return overall_tests(self.solution.free, self.tests) if self.solution.free else ()

    @cached_property
    def similarity(self) -> Similarity | None:
        """How the free network lies on its control."""
        return fit_control(self.solution.free, self.scale) if self.solution.free else None

    @cached_property
    def closures(self) -> tuple[Closure, ...]:
        """Everything that closes, by the rules of the job; none where there are too many readings to look for them."""
        from adjust.judge.closures import closures
        from adjust.judge.tolerances import declared_rule

        job = self.solution.job
        return closures(self.solution, declared_rule(job)) if len(job.network.rows) <= CLOSURES_MOST else ()

    @cached_property
    def balances(self) -> tuple[Balance, ...]:
        """Simple balances of traverses and levelled runs, for comparison."""
        from adjust.judge.balances import balances

        return balances(self.solution) if self.closures else ()

    @property
    def systematic(self) -> tuple[Systematic, ...]:
        """Effects common to many readings, each with its test."""
        return self.searched.systematic

    @cached_property
    def components(self) -> tuple[Component, ...]:
        """Variance components by groups of readings, the blunders left out."""
        from adjust.judge.components import components

        return components(self.searched.cleaned)

    @property
    def constants(self) -> list[str]:
        """Sentences on constants of reflector or instrument that the distances seem to have had already."""
        from adjust.judge.systematic import constants_twice

        return constants_twice(self.systematic)

    @cached_property
    def booked_ids(self) -> list[str]:
        """Identification of each scalar row of the job's own network, by which closures count."""
        network = self.solution.job.network
        rows = network.rows
        return [network.blocks[b].name(i) for b, i in zip(rows.block.tolist(), rows.row.tolist(), strict=True)]

    @cached_property
    def covariance(self) -> Array:
        """(n, 3, 3) covariance of each station with the variance factor applied; NaN where not determined."""
        return self.solution.covariance * self.scale

    @property
    def failed(self) -> bool:
        """Whether a test failed, so that the program ends with exit code 1."""
        return (
            any(test.verdict == NOT_MET for test in (*self.overall, *self.overall_free))
            or bool(self.suspect_of_job.any())
            or self.control_report.failed
            or any(one.at_job_level for one in self.suspects)
            or any(one.verdicts[key] == NOT_MET for one in self.closures for key in one.declared)
            or any(one.verdict == NOT_MET for one in self.solution.job.reductions)
        )

    @cached_property
    def ids(self) -> list[str]:
        """Identification of the observation of each scalar row (R,)."""
        rows, blocks = self.solution.network.rows, self.solution.network.blocks
        return [blocks[b].name(i) for b, i in zip(rows.block.tolist(), rows.row.tolist(), strict=True)]

    def frame(self) -> Any:
        """Readings as a pandas data frame, metres and radians; needs pandas."""
        import pandas as pd

        rows, blocks = self.solution.network.rows, self.solution.network.blocks
        columns = {
            "id": self.ids,
            "kind": [blocks[b].kind for b in rows.block.tolist()],
            "observed": self.solution.design.observed,
            "residual": self.solution.residuals,
            "sd": self.solution.sd_readings,
            "redundancy": self.reliability.redundancy,
            "statistic": self.statistic,
            "smallest_detectable": self.smallest_detectable,
            "suspect": self.suspect,
        }
        return pd.DataFrame(columns).set_index("id")

    def _repr_html_(self) -> str:
        from adjust.notebook import cell, html_table

        worst = np.argsort(-np.abs(np.nan_to_num(self.statistic)), kind="stable")[:20].tolist()
        ids, head = self.ids, ("reading", "statistic", "redundancy", "suspect")
        rows = [
            (
                ids[r],
                cell(self.statistic[r], 2),
                cell(self.reliability.redundancy[r], 2),
                "yes" if self.suspect[r] else "",
            )
            for r in worst
        ]
        return html_table(f"{self!r}, largest statistics first", head, rows)

    def __repr__(self) -> str:
        n = len(self.blame)
        return f"<Judgement: overall test {self.overall[-1].verdict}, {n} suspect{'s' if n != 1 else ''}>"


def assess(solution: Solution) -> Judgement:
    """Assess a solution by the [tests] of its job."""
    with one_thread():
        tests = solution.job.settings.tests
        figures = reliability(solution)
        r = solution.total.degrees_of_freedom
        given = tests.variance_factor == "given"
        degrees = None if given else r
        scale = 1.0 if given else (solution.total.variance_factor or np.nan)
        n = int(figures.tested.sum())
        level = critical.job_level(tests.significance, n)
        job = critical.normal_critical(level) if given else critical.tau_critical(level, r)
        station, part, size = largest_effect(solution)
        shift = (
            critical.noncentrality(tests.outlier, tests.power) if given
            else critical.noncentrality_tau(tests.outlier, tests.power, r)
        )  # fmt: skip
        smallest = figures.root * (np.nan if shift is None else shift) * np.sqrt(scale)
        return Judgement(
            solution=solution,
            tests=tests,
            reliability=figures,
            scale=scale,
            degrees=degrees,
            critical=critical.normal_critical(tests.outlier) if given else critical.tau_critical(tests.outlier, r),
            critical_job=job,
            shift=shift,
            effect_station=station,
            effect_part=part,
            effect=size * smallest,
            lines=find_lines(solution, scale),
        )
