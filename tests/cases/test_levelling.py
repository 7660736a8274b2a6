"""Levelling: heights, residuals and precision of worked examples, through the whole program."""

from __future__ import annotations

from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pytest

from tests.cases.worked import QUANTITIES, Case, Check, Result, checks_of
from tests.helpers import close

OUTSIDE = (
    # Strang and Borre (1997), chapter 8; confidence: memory
    "levelling_three_bench_marks",
    # Ghilani and Wolf (2006), sections 12.3 and 12.4; confidence: memory
    "levelling_unweighted_two_bench_marks",
    "levelling_weighted_by_length",
    # Krumm (2020), example 2.1, pages 6-9; confidence: read
    "levelling_with_standard_deviations",
)
INSIDE = (
    # inputs: Mikhail and Ackermann (1976), table 7-1, confidence: read; results: cross-check, not outside evidence
    "level_net_conditions_or_parameters",
    # exact algebra, not outside evidence
    "exact_free_levelling_triangle",
    # inputs: Pasioti (2017), confidence: read; results: cross-check, not outside evidence
    "free_levelling_network",
)


@cache
def result(name: str) -> Result:
    with TemporaryDirectory() as folder:
        return Case(name).run(Path(folder))


@pytest.mark.parametrize("check", checks_of(*OUTSIDE), ids=str)
def test_levelling_gives_the_printed_digits(check: Check) -> None:
    check.passes(QUANTITIES[check.what](result(check.case), check.of))


@pytest.mark.parametrize("check", checks_of(*INSIDE), ids=str)
def test_levelling_agrees_with_algebra_or_a_second_computation(check: Check) -> None:
    check.passes(QUANTITIES[check.what](result(check.case), check.of))


def test_the_misprinted_reference_standard_deviation_is_not_what_comes_out() -> None:
    """Krumm (2020), confidence: read, prints 0.6512 where the textbook of the same data prints 0.6575."""
    name = "levelling_with_standard_deviations"
    got = QUANTITIES["reference sd"](result(name), "all")
    assert abs(got - float(Case(name).data["not_reproduced"])) > 0.005


def test_heights_agree_with_the_adjustment_of_loop_conditions() -> None:
    """B v = -w with covariance C: v = -C B' (B C B')^-1 w (conditions only). Cross-check, not outside evidence.

    Loops of lines 1 to 8: A-B-C, B-D-C (8 against), D-E-C (8), C-A by E (3, 6, 7).
    """
    solution = result("level_net_conditions_or_parameters").solution
    loops = np.array(
        [
            [1, 1, 1, 0, 0, 0, 0, 0],
            [0, -1, 0, 1, 0, 0, 0, -1],
            [0, 0, 0, 0, 1, 1, 0, 1],
            [0, 0, -1, 0, 0, -1, 1, 0],
        ],
        float,
    )
    observed, variance = solution.design.observed, 0.1 * np.array([18.1, 9.4, 14.2, 17.6, 13.5, 9.9, 13.8, 14.0])
    cov = np.diag(variance)
    v = -cov @ loops.T @ np.linalg.solve(loops @ cov @ loops.T, loops @ observed)
    close(solution.residuals, v, atol=1e-10)
    close(solution.total.square_sum, float(v @ (v / variance)), atol=1e-10)
    close(solution.total.degrees_of_freedom, 4, atol=0.1)


@pytest.mark.parametrize("name", ["exact_free_levelling_triangle", "free_levelling_network"])
def test_free_heights_and_cofactors_are_those_of_the_pseudo_inverse(name: str) -> None:
    """x = A^+ l and Q = (A'A)^+ for unit weights. Cross-check, not outside evidence."""
    solution = result(name).solution
    (block,) = solution.network.blocks
    a = np.zeros((len(block), len(solution.names)))
    lines = np.arange(len(block))
    a[lines, block.stations[:, 0]], a[lines, block.stations[:, 1]] = -1.0, 1.0
    close(solution.positions[:, 2], np.linalg.pinv(a) @ solution.design.observed, atol=1e-11)
    numbers = solution.design.unknowns.coordinate[:, 2]
    close(solution.cofactors.blocks(numbers[None])[0], np.linalg.pinv(a.T @ a), atol=1e-12)
