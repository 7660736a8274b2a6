"""A constant of reflector or instrument that was added to distances that had it already.

All distances with the constant share an error b then. As one more unknown of the adjustment, with its column c (1 in
their rows) and l = observed - computed, both whitened and cleared of the local unknowns (c*, l*: see
adjust.solver.elements),

    b = (c*'l* - (A*'c*)' Q A*'l*) / S        S = c*'c* - (A*'c*)' Q A*'c*        standard deviation of b: 1 / sqrt(S)

(elimination of the others from the normal equations; any textbook of adjustment). b is told apart from the coordinates
only where the scale is fixed, by known points or by distances along one line.
"""

from __future__ import annotations

import math
from collections import defaultdict

import numpy as np

from adjust.judge.critical import normal_critical
from adjust.network import Array, Bools
from adjust.solver.solution import Solution
from adjust.units import small_length

NAMES = ("reflector constant", "instrument constant")
HERE = "here"
FEWEST = 3
TIMES = 3.0
"""Standard deviations, and at the least the share below, within which the common error must be the constant."""
SHARE = 0.1
CHECKED = 1e-6
"""Share of c*'c* that must be left after the other unknowns; below, rounding decides (adjust.judge.reliability)."""


def twice(solution: Solution) -> list[str]:
    """A sentence for each constant that seems to have been in the distances already."""
    sorts: dict[tuple[str, float], set[str]] = defaultdict(set)
    for line in solution.job.ledger:
        if line.name in NAMES and line.how == HERE and line.amount:
            sorts[line.name, line.amount].add(line.observation)
    out = []
    for (name, amount), observations in sorts.items():
        rows = _rows(solution, observations)
        if rows.sum() < FEWEST:
            continue
        b, sd = common_error(solution, rows)
        level = solution.job.settings.tests.significance
        if not abs(b) > normal_critical(level) * sd or abs(b - amount) > max(TIMES * sd, SHARE * abs(amount)):
            continue
        unit = solution.job.settings.units.length
        size, error, constant = (small_length(x, unit) for x in (b, sd, amount))
        out.append(f"all {int(rows.sum())} distances with the {name} {constant} are off by {size} (standard deviation "
                   f"{error.lstrip('+')}): was the constant applied twice? If the instrument had applied it already, "
                   "say so in applied.")  # fmt: skip
    return out


def _rows(solution: Solution, observations: set[str]) -> Bools:
    """(R,) scalar rows of some readings."""
    rows, blocks = solution.network.rows, solution.network.blocks
    return np.array([blocks[b].kind == "distance" and blocks[b].name(i) in observations
                     for b, i in zip(rows.block.tolist(), rows.row.tolist(), strict=True)], dtype=bool)  # fmt: skip


def common_error(solution: Solution, chosen: Bools) -> tuple[float, float]:
    """The common error of the ``chosen`` (R,) rows in metres and its standard deviation; (0, inf): none is told."""
    load, right = np.zeros((2, solution.design.unknowns.count + 1))
    square = product = 0.0
    for w in solution.whitened:
        column = _cleared(w.q, np.linalg.solve(w.factor, chosen[w.batch.rows].astype(float)[:, :, None])[:, :, 0])
        square += float((column**2).sum())
        product += float((column * w.reduced_l).sum())
        for target, values in ((load, column), (right, w.reduced_l)):
            np.add.at(target, w.batch.columns, (w.reduced * values[:, :, None]).sum(axis=1))
    moved = solution.cofactors.times(load[:-1, None])[:, 0]
    left = square - float(load[:-1] @ moved)
    if not left > CHECKED * square:
        return 0.0, math.inf
    return (product - float(moved @ right[:-1])) / left, 1 / math.sqrt(left)


def _cleared(q: Array, values: Array) -> Array:
    """Values (b, k) without their part along the local unknowns."""
    return np.asarray(values - (q @ (q.transpose(0, 2, 1) @ values[:, :, None]))[:, :, 0])
