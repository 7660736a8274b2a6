"""Moments and the restricted likelihood of variance components with dense matrices, from their definitions."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import null_space, orth
from scipy.optimize import minimize

from adjust.judge.groupings import Grouping
from adjust.solver.design import State
from adjust.solver.solution import Solution

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Dense:
    """l = J x + e: J (R, u) spans what the unknowns can explain, conditions fulfilled; rows of readings only."""

    J: Array
    l: Array
    own: Array
    """(R, R) covariance without centring."""
    vectors: Array
    """(R, R) covariance of centring."""
    of_row: NDArray[np.int64]
    grouping: Grouping

    @classmethod
    def of(cls, solution: Solution, grouping: Grouping) -> Dense:
        """At the solution, local unknowns as columns of their own."""
        design = solution.design
        numbers = design.linearise(State(solution.positions, solution.groups))
        count, groups = design.unknowns.count, len(solution.groups)
        J = np.zeros((len(numbers.misclosure), count + groups + 1))
        for r, (columns, values) in enumerate(zip(design.columns, numbers.coefficients, strict=True)):
            for c, x in zip(columns, values, strict=True):
                J[r, c if c >= 0 else -1] += x
            J[r, count + numbers.local[r] if numbers.local[r] >= 0 else -1] += numbers.by_local[r]
        J = J[:, :-1] / np.maximum(np.linalg.norm(J[:, :-1], axis=0), 1e-12)
        held = design.held
        if held.any():
            J = J @ null_space(J[held])
        own = np.diag(design.sd**2)
        for cluster in solution.network.clusters:
            own[np.ix_(cluster.rows, cluster.rows)] = cluster.covariance
        effect = np.zeros((len(J), len(design.vectors.sd), 3))
        for r, slot in np.argwhere(design.vectors.of_row >= 0):
            v = design.vectors.of_row[r, slot]
            effect[r, v] += numbers.by_vector[r, slot] * design.vectors.sd[v]
        effect = effect.reshape(len(J), -1)[~held]
        scale = 1 / design.sd[~held]  # every row in its own standard deviation, so that lengths and angles are alike
        unit = np.outer(scale, scale)
        return cls(
            orth(J[~held] * scale[:, None], rcond=1e-10), numbers.misclosure[~held] * scale,
            own[np.ix_(~held, ~held)] * unit, effect @ effect.T * unit, grouping.of_row[~held], grouping,
        )  # fmt: skip

    def parts(self, theta: Array) -> list[Array]:
        """V_g in their present sizes."""
        root = np.sqrt(theta)[self.of_row]
        out = []
        for g in range(len(self.grouping.names)):
            inside = (self.of_row == g).astype(float)
            out.append(self.own * np.outer(root, root) * (inside[:, None] + inside) / 2)
        return [*out, self.vectors * theta[-1]] if self.grouping.centring else out

    def covariance(self, theta: Array) -> Array:
        """C."""
        return sum(self.parts(theta), np.zeros_like(self.own)) + (0 if self.grouping.centring else self.vectors)

    def moments(self, theta: Array) -> tuple[Array, Array, Array]:
        """q, t, S."""
        P = np.linalg.inv(self.covariance(theta))
        M = P - P @ self.J @ np.linalg.inv(self.J.T @ P @ self.J) @ self.J.T @ P
        parts, Pv = self.parts(theta), -M @ self.l
        q = np.array([Pv @ V @ Pv for V in parts])
        t = np.array([np.trace(M @ V) for V in parts])
        return q, t, np.array([[np.trace(M @ V @ M @ W) for W in parts] for V in parts])

    def twice_minus_log_likelihood(self, theta: Array) -> float:
        """log det C + log det J'PJ + v'Pv (Patterson and Thompson 1971)."""
        C = self.covariance(theta)
        P = np.linalg.inv(C)
        N = self.J.T @ P @ self.J
        v = self.l - self.J @ np.linalg.solve(N, self.J.T @ P @ self.l)
        return float(np.linalg.slogdet(C)[1] + np.linalg.slogdet(N)[1] + v @ P @ v)

    def most_likely(self) -> Array:
        """theta (G,) by a general search over its logarithms."""
        found = minimize(
            lambda x: self.twice_minus_log_likelihood(np.exp(x)), np.zeros(self.grouping.count), method="L-BFGS-B",
            bounds=[(-12.0, 5.0)] * self.grouping.count, options={"ftol": 1e-15, "gtol": 1e-6},
        )  # fmt: skip
        return np.asarray(np.exp(found.x))
