"""How readings vote: a Cauchy cost bounds what one of them can say, and the value that most of them like wins."""

from __future__ import annotations

import math

SPREAD = 1e-3
"""Misfit (radians, or share of the length) at which a reading begins to count as foreign: starts are that good."""
AGREES = 0.02
"""Misfit up to which a reading agrees with a place."""
MOST_ASKED = 9
"""Members of a set that are tried as its spokesman."""


def wrapped(angle: float) -> float:
    """An angle brought into [-pi, pi]."""
    return math.remainder(angle, 2 * math.pi)


def cost_of(misfit: float) -> float:
    """Cauchy cost of a misfit."""
    return math.log1p((misfit / SPREAD) ** 2)


def agree(values: list[float]) -> tuple[float, float, int]:
    """The angle among ``values`` that the others like best: (angle, cost of the others, number that agree)."""
    away = [wrapped(v - values[0]) for v in values]
    if max(away) - min(away) < SPREAD:
        middle = sum(away) / len(away)
        return values[0] + middle, sum(((m - middle) / SPREAD) ** 2 for m in away), len(values)
    best = (values[0], math.inf, 0)
    for one in values[:: max(1, len(values) // MOST_ASKED)]:
        misfits = [wrapped(v - one) for v in values]
        cost = sum(math.log1p((m / SPREAD) ** 2) for m in misfits)
        if cost < best[1]:
            best = (one, cost, sum(abs(m) < AGREES for m in misfits))
    return best
