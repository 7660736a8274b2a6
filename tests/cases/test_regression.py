"""Certified linear regressions: what the solvers reach in double precision. No stations, so no job folder.

Two solvers, named in every test:
 - `orthogonal`: Householder QR of the columns scaled by powers of two. The program does not use it; it shows what the
   data allow, about 16 digits less those of the condition number.
 - `engine`: adjust.solver.engine, the scaled normal equations that every adjustment uses, fed with single-row elements.
   One step loses the digits of the condition number twice; the next steps of Gauss-Newton bring them back, because the
   misclosures are formed anew from the observation equations.

NIST Statistical Reference Datasets, linear regression; confidence: read (Longley's residual sd: memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from scipy.linalg import solve_triangular

from adjust.network import Array
from adjust.solver.design import Linearised
from adjust.solver.elements import Batch, Whitened, whiten
from adjust.solver.engine import PIVOT_LEAST, Pattern, SingularPattern
from adjust.solver.threads import one_thread
from tests.cases.worked import Case
from tests.helpers import close

NAMES = ("longley", "filip", "wampler1", "wampler2", "wampler3", "wampler4")
SOLVABLE = tuple(name for name in NAMES if name != "filip")
EXACT_FIT = ("wampler1", "wampler2")


@dataclass(frozen=True)
class Digits:
    """Correct digits of the worst coefficient and of the worst standard deviation asked for."""

    coefficients: float
    sds: float | None = None
    """None: the fit is exact and the standard deviations are zero."""


# Measured digits behind each line; asked for is up to one less, since the last bits differ between machines.
# fmt: off
ORTHOGONAL = {
    "longley": Digits(10, 11.5),   # 10.9, 12.3
    "filip": Digits(7, 6.5),       #  8.1,  7.3
    "wampler1": Digits(8.2),       #  9.2
    "wampler2": Digits(12.5),      # 13.7
    "wampler3": Digits(8.2, 12.5), #  9.2, 13.5
    "wampler4": Digits(7, 12.5),   #  7.8, 13.6
}
ENGINE_FIRST = {
    "longley": Digits(6.2, 7.5),   #  7.2,  8.3
    "wampler1": Digits(5),         #  5.9
    "wampler2": Digits(8.4),       #  9.3
    "wampler3": Digits(5, 9.5),    #  5.9, 10.4
    "wampler4": Digits(5, 9.5),    #  5.9, 10.4
}
ENGINE = {
    "longley": Digits(10, 7.5),    # 11.0,  8.3
    "wampler1": Digits(9.2),       # 10.3
    "wampler2": Digits(12.5),      # 13.1
    "wampler3": Digits(9.2, 9.5),  # 11.0, 10.4
    "wampler4": Digits(7, 9.5),    #  8.1, 10.4
}
# fmt: on


@dataclass(frozen=True)
class Fit:
    """Coefficients (u,), their standard deviations (u,) and the residual sum of squares."""

    coefficients: Array
    sds: Array
    square_sum: float


def certified(name: str, key: str) -> Array:
    return np.array([float(x) for x in Case(f"nist_{name}").data[key].split()])


def equations(name: str) -> tuple[Array, Array]:
    """A (m, u) and l (m,) with equal weights."""
    data = Case(f"nist_{name}").data
    if "degree" in data:
        a = np.vander(certified(name, "predictor"), data["degree"] + 1, increasing=True)
    else:
        predictors = np.array([[float(x) for x in row.split()] for row in data["predictors"].strip().split("\n")])
        a = np.column_stack([np.ones(len(predictors)), predictors])
    return a, certified(name, "response")


@cache
def orthogonal(name: str) -> Fit:
    """Q R of the scaled columns; powers of two scale without rounding."""
    a, l = equations(name)
    scale = 2.0 ** -np.round(np.log2(np.linalg.norm(a, axis=0)))
    with one_thread():
        q, r = np.linalg.qr(a * scale)
        x = solve_triangular(r, q.T @ l) * scale
        inverse = solve_triangular(r, np.eye(len(r)))
        v = q @ (q.T @ l) - l
    return fit(x, v, np.sqrt((inverse**2).sum(axis=1)) * scale)


def fit(x: Array, v: Array, roots: Array) -> Fit:
    """A fit from coefficients, residuals and the roots of the cofactors."""
    square_sum = float(v @ v)
    return Fit(x, roots * np.sqrt(square_sum / (len(v) - len(x))), square_sum)


def elements(a: Array, misclosure: Array) -> list[Whitened]:
    """One element a row, as the program would make them for uncorrelated readings of unit weight."""
    m, u = a.shape
    columns = np.tile(np.arange(u), (m, 1))
    none = np.empty((m, 0), np.int64)
    batch = Batch(
        rows=np.arange(m)[:, None],
        columns=columns,
        slots=columns[:, None],
        locals=none,
        covariance=np.ones((m, 1, 1)),
        vectors=none,
        seats=none[:, None],
        vector_sd=np.empty((m, 0, 3)),
    )
    numbers = Linearised(a, np.zeros(m), misclosure, np.zeros(m), np.full(m, -1), np.empty((m, 0, 3)))
    return [whiten(batch, numbers)]


@cache
def engine(name: str, steps: int) -> Fit:
    """Steps of Gauss-Newton from zero with the program's engine, and cofactors by its exact entries."""
    a, l = equations(name)
    with one_thread():
        filled = elements(a, l)
        pattern = Pattern.of([one.batch.columns for one in filled], a.shape[1])
        factor = pattern.factor(filled)
        x = np.zeros(a.shape[1])
        for _ in range(steps):
            x = x + factor.solve(pattern.right_side(elements(a, l - a @ x)))
        diagonal = np.arange(len(x))
        return fit(x, a @ x - l, np.sqrt(factor.entries(diagonal, diagonal)))


def digits(got: Array, wanted: Array) -> float:
    """Correct decimal digits of the worst entry: -log10 of the relative error, at most 16."""
    assert np.all(wanted != 0)
    return float(-np.log10(max(np.abs(got / wanted - 1).max(), 1e-16)))


def reaches(found: Fit, name: str, asked: Digits) -> None:
    """Assert the digits of a fit; what is measured is printed, with the citation."""
    got = digits(found.coefficients, certified(name, "coefficients"))
    sds = np.nan if asked.sds is None else digits(found.sds, certified(name, "standard_deviations"))
    print(f"{name}: {got:.1f} digits of coefficients, {sds:.1f} of sds; {Case(f'nist_{name}').citation}")
    assert got >= asked.coefficients >= 4
    if asked.sds is not None:
        assert sds >= asked.sds >= 4


@pytest.mark.parametrize("name", NAMES)
def test_orthogonal_factorisation_reaches_its_digits(name: str) -> None:
    reaches(orthogonal(name), name, ORTHOGONAL[name])


@pytest.mark.parametrize("name", SOLVABLE)
def test_one_step_of_the_engine_reaches_its_digits(name: str) -> None:
    reaches(engine(name, 1), name, ENGINE_FIRST[name])


@pytest.mark.parametrize("name", SOLVABLE)
def test_three_steps_of_the_engine_reach_the_digits_of_orthogonal_factorisation(name: str) -> None:
    """Coefficients only: standard deviations come from the normal equations and keep their digits."""
    assert ENGINE[name].coefficients >= ORTHOGONAL[name].coefficients
    reaches(engine(name, 3), name, ENGINE[name])


def test_the_engine_refuses_filip_in_place_of_a_poor_answer() -> None:
    """Scaled condition number 5e9: normal equations square it beyond double precision, so a pivot vanishes."""
    a, l = equations("filip")
    filled = elements(a, l)
    pattern = Pattern.of([filled[0].batch.columns], a.shape[1])
    with pytest.raises(SingularPattern) as caught:
        pattern.factor(filled)
    assert len(caught.value.unknowns) >= 1
    scaled = a / np.linalg.norm(a, axis=0)
    assert np.linalg.cond(scaled) ** -2 < PIVOT_LEAST


@pytest.mark.parametrize(
    ("name", "solver"), [(name, "orthogonal") for name in NAMES] + [(name, "engine") for name in SOLVABLE]
)
def test_residuals_have_the_certified_size(name: str, solver: str) -> None:
    """Residual sum of squares; Longley: the residual standard deviation, from memory."""
    found = orthogonal(name) if solver == "orthogonal" else engine(name, 3)
    data = Case(f"nist_{name}").data
    if name in EXACT_FIT:
        # the readings lie on the polynomial: nothing is left but the rounding of numbers of their size
        assert data["residual_sum_of_squares"] == 0
        size = float(np.abs(certified(name, "response")).max())
        assert np.sqrt(found.square_sum) < 1e-12 * size
    elif name == "longley":
        wanted = data["residual_standard_deviation"]
        close(np.sqrt(found.square_sum / 9), wanted, atol=1e-9 * wanted)
    else:
        wanted = data["residual_sum_of_squares"]
        # powers rounded to double precision, times Filip's condition number: 2.3e-8 measured; the others below 1e-13
        close(found.square_sum, wanted, atol=(1e-6 if name == "filip" else 1e-9) * wanted)


def test_a_wrong_digit_in_the_data_is_seen() -> None:
    """The negative control: one response of Longley changed by one in its last place."""
    a, l = equations("longley")
    l = l.copy()
    l[7] += 1
    x = np.linalg.lstsq(a / np.linalg.norm(a, axis=0), l, rcond=None)[0] / np.linalg.norm(a, axis=0)
    assert digits(x, certified("longley", "coefficients")) < 4
