"""The largest consistent set of control marks: which marks to release so that the others agree.

A set is *consistent* if, with the rest S released, none of its marks is contradicted by the readings and the others
(T_j|S, adjust.judge.shifts) and all together are not either (T - T_S). The n marks share UNITS_SHARE of the job's
significance (each at 1 - (1 - a)^(1/n): for correlated statistics of this kind no more false alarms than that, Sidak
1967, Royen 2014), the tests of all together have the rest. A common scale counts as one more mark.

The fewest released are sought first: of u units all sets of one, of two, and so on up to EXHAUSTIVE units; beyond,
the worst one is released until the rest is consistent, and each released one is then tried back. Among sets of one size
the one with the largest T_S is the likeliest. Another set S' is *not excluded* where the readings do not contradict
that the errors are all in S': then T_(S and S') - T_S' has the chi-square distribution with rank(S and S') - rank(S')
degrees of freedom, and T_S - T_S' is no larger, so S' stays if T_S - T_S' lies below its upper point at the job's
significance. Only what is in all the sets that stay is blamed.

With the scale from residuals T over its degrees and the variance factor has Fisher's F where these residuals know
nothing of the marks, and T / v'Pv a beta distribution (p/2, (r - p)/2) where it is among them (p = 1: Pope's tau); v'Pv
and r are then those with S released.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from scipy import special

from adjust.judge.critical import job_level
from adjust.judge.shifts import Shifts

UNITS_SHARE = 0.9
"""Of the significance, for the marks one by one; the chi-square of all together has the rest. One mark moved by five
standard deviations is found by its own test in 0.97 and by the chi-square of eight marks in 0.93 of all cases, so the
latter is there for what no single mark shows (tests/judge/control_study.py)."""
EXHAUSTIVE = 12
"""Units of one part up to which all sets are looked at: at most 8,192 with a common scale, a second or two."""

Set = tuple[int, ...]


@dataclass(frozen=True)
class Levels:
    """What statistics are measured by, and the levels of the tests."""

    scale: float
    degrees: int | None
    """Degrees of freedom behind ``scale``; None when it is given."""
    apart: bool
    """Whether the residuals behind ``scale`` know nothing of the marks."""
    significance: float
    units: int
    """Marks (and scales) tested one by one in the whole job."""
    parts: int
    """Parts that hang together."""

    @property
    def of_unit(self) -> float:
        """Level of one mark."""
        return job_level(UNITS_SHARE * self.significance, self.units)

    @property
    def of_rest(self) -> float:
        """Level of all marks of a part together."""
        return job_level((1 - UNITS_SHARE) * self.significance, self.parts)

    def probability(self, t: float, p: int, released: tuple[float, int]) -> float | None:
        """Chance of T at least ``t`` with p degrees, (T_S, rank) being released; None where nothing can be said."""
        if self.degrees is None:
            return float(special.chdtrc(p, t))
        if math.isnan(self.scale) or self.degrees <= 0:
            return None
        if self.apart:
            return float(special.fdtrc(p, self.degrees, t / p / self.scale)) if self.scale > 0 else None
        rest, r = self.scale * self.degrees - released[0], self.degrees - released[1]
        if r <= p or rest <= 0:
            return None
        return float(special.betainc((r - p) / 2, p / 2, max(1 - t / rest, 0.0)))


@dataclass(frozen=True)
class Found:
    """What to release of one part."""

    released: Set
    """The likeliest of the smallest sets whose release leaves the others consistent; the scale is the last unit."""
    blamed: Set
    """What is in every such set that is not excluded."""
    doubtful: Set
    """What is in some, but not in all of them."""
    rest: int
    """Degrees of freedom that are left to compare with ``released`` released."""


def find_consistent(shifts: Shifts, levels: Levels) -> Found:
    """The largest consistent set of a part, and what cannot be told apart."""
    if is_consistent(shifts, (), levels):
        return Found((), (), (), shifts.rank)
    count = len(shifts.rows)
    sets = _smallest(shifts, levels) if count - shifts.scaled <= EXHAUSTIVE else _one_by_one(shifts, levels)
    best = max(sets, key=lambda s: (shifts.explained(s)[0], [-u for u in s]))
    staying = [set(s) for s in sets if s == best or not _excluded(shifts, best, s, levels)]
    blamed = set.intersection(*staying)
    doubtful = set.union(*staying) - blamed
    rest = shifts.rank - shifts.explained(best)[1]
    return Found(best, tuple(sorted(blamed)), tuple(sorted(doubtful)), rest)


def is_consistent(shifts: Shifts, released: Set, levels: Levels) -> bool:
    """Whether nothing contradicts the units that are not released."""
    q = shifts.basis(released)
    known = float(((shifts.z @ q) ** 2).sum()), q.shape[1]
    rest = shifts.rank - known[1]
    if rest <= 0:
        return True
    if _fails(levels.probability(shifts.total - known[0], rest, known), levels.of_rest):
        return False
    return not any(_unit_fails(shifts, u, q, known, levels) for u in range(len(shifts.rows)) if u not in released)


def _unit_fails(shifts: Shifts, unit: int, q: np.ndarray, known: tuple[float, int], levels: Levels) -> bool:
    t, p = shifts.beyond(unit, q)
    return p > 0 and _fails(levels.probability(t, p, known), levels.of_unit)


def _fails(probability: float | None, level: float) -> bool:
    return probability is not None and probability < level


def _smallest(shifts: Shifts, levels: Levels) -> list[Set]:
    """All consistent sets of the smallest number released."""
    for size in range(1, len(shifts.rows) + 1):
        found = [s for s in combinations(range(len(shifts.rows)), size) if is_consistent(shifts, s, levels)]
        if found:
            return found
    raise AssertionError("with everything released nothing is contradicted")


def _one_by_one(shifts: Shifts, levels: Levels) -> list[Set]:
    """The worst released until the rest is consistent, each tried back, and the sets with one of them exchanged."""
    released: Set = ()
    while not is_consistent(shifts, released, levels):
        released = (*released, _worst(shifts, released, levels))
    for unit in released:
        fewer = tuple(u for u in released if u != unit)
        if is_consistent(shifts, fewer, levels):
            released = fewer
    released = tuple(sorted(released))
    return [released, *(s for s in _exchanged(released, len(shifts.rows)) if is_consistent(shifts, s, levels))]


def _worst(shifts: Shifts, released: Set, levels: Levels) -> int:
    """The unit whose release explains most for its degrees of freedom."""
    q = shifts.basis(released)
    others = [u for u in range(len(shifts.rows)) if u not in released]
    told = [shifts.beyond(u, q) for u in others]
    return others[int(np.argmax([_strength(t / max(levels.scale, 1e-300), p) for t, p in told]))]


def _strength(t: float, p: int) -> float:
    """Square of the normal statistic as unlikely as T with p degrees, near enough (Wilson and Hilferty 1931)."""
    if p == 0:
        return -math.inf
    return float((t / p) ** (1 / 3) - 1 + 2 / (9 * p)) / math.sqrt(2 / (9 * p))


def _exchanged(released: Set, count: int) -> Iterator[Set]:
    for out in released:
        for into in range(count):
            if into not in released:
                yield tuple(sorted({*released, into} - {out}))


def _excluded(shifts: Shifts, best: Set, other: Set, levels: Levels) -> bool:
    """Whether the readings contradict that the errors are all in ``other``."""
    known = shifts.explained(other)
    both = shifts.explained(tuple(sorted({*best, *other})))
    p = both[1] - known[1]
    gain = shifts.explained(best)[0] - known[0]
    if p <= 0:
        return False
    return gain > 0 and _fails(levels.probability(gain, p, known), levels.significance)
