"""Several sets at a station against each other: means, spreads, what lies outside a limit, what moved between sets.

Directions d of set s to target t are d = m_t + o_s + e. The orientations o are found with medians, so that one bad
pointing, be it the zero target, does not turn its set; then means and orientations by least squares over what is kept,
and one direction has the standard deviation sqrt(sum e^2/f) with f = pointings - targets - sets + 1 (ISO 17123-3, the
part without the test; from memory). A pointing is outside where it differs from the mean of the other sets by more
than the declared limit; of two sets that differ no test tells which.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from statistics import median

from adjust.units import wrap

Key = tuple[str, str]
"""(set, target)."""
SWEEPS = 60
"""Alternating means converge by the share of common targets; sets are nearly complete, so a few would do."""


@dataclass(frozen=True)
class SetMeans:
    """Means by target, orientations by set, residuals by (set, target) of what was kept, and the spread."""

    means: dict[str, float]
    orientations: dict[str, float]
    residuals: dict[Key, float]
    sd: float | None
    """Standard deviation of one value in one set, from the spread; None without redundancy."""


def difference(turning: bool) -> Callable[[float], float]:
    """Differences of directions are taken on the circle, those of zenith angles and distances as they are."""
    return wrap if turning else float


def set_means(values: Mapping[Key, float], turning: bool) -> SetMeans:
    """Means of ``values`` over the sets; ``turning``: every set has an orientation of its own (directions)."""
    sets, targets = list(dict.fromkeys(s for s, _ in values)), list(dict.fromkeys(t for _, t in values))
    less = difference(turning)
    o, m = _robust(values, sets, turning)
    for _ in range(SWEEPS if turning else 1):
        m = _means(values, o, m, less)
        if turning:
            o = {s: o[s] + _mean([less(v - m[t] - o[s]) for (k, t), v in values.items() if k == s]) for s in sets}
    residuals = {key: less(v - m[key[1]] - o[key[0]]) for key, v in values.items()}
    f = len(values) - len(targets) - (len(sets) - 1 if turning else 0)
    sd = math.sqrt(math.fsum(e * e for e in residuals.values()) / f) if f > 0 else None
    return SetMeans(m, o, residuals, sd)


def _robust(values: Mapping[Key, float], sets: list[str], turning: bool) -> tuple[dict[str, float], dict[str, float]]:
    """Orientations and means by medians, the first set turned by nothing; each set is joined by common targets."""
    less = difference(turning)
    o: dict[str, float] = {}
    by_set: dict[str, dict[str, float]] = defaultdict(dict)
    for (s, t), v in values.items():
        by_set[s][t] = v
    found: dict[str, list[float]] = defaultdict(list)
    for s in sets:
        turns = [v - median(found[t]) for t, v in by_set[s].items() if found[t]]
        base = turns[0] if turns else 0.0
        o[s] = base + median([less(x - base) for x in turns]) if turning and turns else 0.0
        for t, v in by_set[s].items():
            first = found[t][0] if found[t] else v - o[s]
            found[t].append(first + less(v - o[s] - first))
    return o, {t: median(all_) for t, all_ in found.items()}


def _means(
    values: Mapping[Key, float], o: Mapping[str, float], near: Mapping[str, float], less: Callable[[float], float]
) -> dict[str, float]:
    by_target: dict[str, list[float]] = defaultdict(list)
    for (s, t), v in values.items():
        by_target[t].append(less(v - o[s] - near[t]))
    return {t: near[t] + _mean(off) for t, off in by_target.items()}


def _mean(values: list[float]) -> float:
    return math.fsum(values) / len(values)


@dataclass(frozen=True)
class Outside:
    """A value that lies outside a limit: how far from the mean of the other sets, and whether it is the only one."""

    key: Key
    off: float
    sure: bool
    """False: only one other set has the target, so the fault may be there."""


def outside(values: Mapping[Key, float], turning: bool, limit: float) -> list[Outside]:
    """Values farther than ``limit`` from the mean of the other sets, the farthest first, each tested without those.

    Of two sets that differ both are returned, neither sure.
    """
    left: dict[Key, float] = dict(values)
    out: list[Outside] = []
    while True:
        found = [one for key in left if (one := against_others(left, key, turning)) and abs(one.off) > limit]
        sure = [one for one in found if one.sure]
        if not sure:
            return out + found
        worst = max(sure, key=lambda one: abs(one.off))
        out.append(worst)
        del left[worst.key]


def against_others(values: Mapping[Key, float], key: Key, turning: bool) -> Outside | None:
    """How far a value lies from the mean of the other sets, turned by medians; None where there is no other."""
    s, t = key
    others = [k for k in values if k[1] == t and k != key]
    if not others:
        return None
    less = difference(turning)
    o, _ = _robust(values, list(dict.fromkeys(k for k, _ in values)), turning)
    base = values[others[0]] - o[others[0][0]]
    mean = base + _mean([less(values[k] - o[k[0]] - base) for k in others])
    return Outside(key, less(values[key] - o[s] - mean), len(others) > 1)
