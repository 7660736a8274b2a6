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
    return overall_of(part.square_sum, part.degrees_of_freedom, tests)


def overall_of(square_sum: float, degrees: int, tests: Tests) -> OverallTest:
    """The test of a weighted square sum with so many degrees of freedom."""
    interval = variance_factor_interval(tests.significance, degrees)
    if interval is None or tests.variance_factor != "given":
        return OverallTest(interval, UNTESTED, False)
    factor = square_sum / degrees
    return OverallTest(interval, NOT_MET if factor > interval[1] else MET, factor < interval[0])
