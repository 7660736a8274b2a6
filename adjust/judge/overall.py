"""The overall test: v'Pv against chi-square, two-sided, per uncoupled part and in total.

Below the lower limit the readings agree better than stated: a warning, no failure. With the scale from the residuals
nothing is left to test.
"""

from __future__ import annotations

from dataclasses import dataclass

from adjust.book.settings import Tests
from adjust.judge.critical import variance_factor_interval
from adjust.solver.solution import PartResult, Solution

MET, NOT_MET, UNTESTED = "met", "not met", "cannot be tested"


@dataclass(frozen=True)
class OverallTest:
    """Limits of the variance factor and the verdict."""

    interval: tuple[float, float] | None
    verdict: str
    better_than_stated: bool


def overall_tests(solution: Solution, tests: Tests) -> tuple[OverallTest, ...]:
    """The test of every part, then of all together."""
    return tuple(_overall(part, tests) for part in (*solution.parts, solution.total))


def _overall(part: PartResult, tests: Tests) -> OverallTest:
    interval = variance_factor_interval(tests.significance, part.degrees_of_freedom)
    if interval is None or tests.variance_factor != "given" or part.variance_factor is None:
        return OverallTest(interval, UNTESTED, False)
    verdict = NOT_MET if part.variance_factor > interval[1] else MET
    return OverallTest(interval, verdict, part.variance_factor < interval[0])
