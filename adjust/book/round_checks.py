"""What a station's rounds show beyond their means: limits, moved zero targets, mixed-up names, uneven collimation."""

from __future__ import annotations

import math
from collections import defaultdict
from typing import TYPE_CHECKING

from adjust.book.sets import outside
from adjust.units import RHO_SEC, wrap

if TYPE_CHECKING:
    from adjust.book.round_slips import Slip
    from adjust.book.rounds import Pointing, Station

SAME_PLACE = 30 / RHO_SEC
"""Two names in one direction, zenith angle and distance are one target; neighbouring targets are seldom so near."""
SAME_LENGTH_M = 0.010
GROSS = 120 / RHO_SEC
"""Between sets even poor pointing stays below; what differs by more is a slip (common practice)."""
FEWEST = 3


def findings(station: Station, slips: list[Slip]) -> list[str]:
    """Sentences about one station, in the order in which one would look; ``slips`` are readings known as misread."""
    named = {slip.key for slip in slips if slip.what == "direction"}
    misread = [slip.sentence for slip in slips]
    return [*misread, *_moved(station, named), *_one_target_two_names(station), *_undecided(station), *_uneven(station)]


def _moved(station: Station, named: set[tuple[str, str]]) -> list[str]:
    """Pointings far off in one set: the zero target of a set, or another target under the name."""
    values = {(p.set, p.to): p.direction for p in station.pointings if p.direction is not None}
    limit = min(GROSS, _clear(station))
    out = []
    for one in outside(values, True, limit):
        in_set, to = one.key
        zero = next(p.to for p in station.pointings if p.set == in_set) == to
        size = f'{abs(one.off) * RHO_SEC:.0f}"'
        where = f"{station.file}: {station.at} set {in_set}"
        if not one.sure or one.key in named:
            continue
        if zero:
            out.append(f"{where}: the zero target {to} lies {size} away from the other sets, the rest of the set does "
                       "not: it was moved, or mispointed.")  # fmt: skip
        elif abs(one.off) > GROSS:
            out.append(f"{where}: {to} lies {size} away from the other sets: another target under this name, or a "
                       "circle reading misread.")  # fmt: skip
    return out


def _clear(station: Station) -> float:
    """What stands out clearly from the spread of the sets themselves, by its median size."""
    found = station.means.get("direction")
    if found is None or not found.residuals:
        return GROSS
    sizes = sorted(abs(e) for e in found.residuals.values())
    return max(10 * sizes[len(sizes) // 2] / 0.6745, 5 / RHO_SEC)


def _one_target_two_names(station: Station) -> list[str]:
    """Two names at the same direction, zenith angle and distance in a set."""
    out = []
    by_set: dict[str, list[Pointing]] = defaultdict(list)
    for p in station.pointings:
        by_set[p.set].append(p)
    seen: set[tuple[str, str]] = set()
    for in_set, found in by_set.items():
        ordered = sorted((p for p in found if p.direction is not None), key=lambda p: p.direction or 0.0)
        for a, b in zip(ordered, ordered[1:] + ordered[:1], strict=True):
            if a is not b and _same_place(a, b) and (pair := (min(a.to, b.to), max(a.to, b.to))) not in seen:
                seen.add(pair)
                out.append(f"{station.file}: {station.at} set {in_set}: {pair[0]} and {pair[1]} are sighted at one "
                           "place: one target under two names?")  # fmt: skip
    return out


def _same_place(a: Pointing, b: Pointing) -> bool:
    assert a.direction is not None
    assert b.direction is not None
    if abs(wrap(a.direction - b.direction)) > SAME_PLACE:
        return False
    if a.zenith is not None and b.zenith is not None and abs(a.zenith - b.zenith) > SAME_PLACE:
        return False
    both = a.distance is not None and b.distance is not None
    return both and abs((a.distance or 0.0) - (b.distance or 0.0)) < SAME_LENGTH_M


def _undecided(station: Station) -> list[str]:
    """Differences beyond the declared limit that two sets cannot attribute."""
    out, seen = [], set()
    for key, found in station.out.items():
        for one in found:
            if not one.sure and (key, one.key[1]) not in seen:
                seen.add((key, one.key[1]))
                size = f'{abs(one.off) * RHO_SEC:.1f}"' if key != "distance" else f"{abs(one.off) * 1000:.1f} mm"
                what = {"direction": "directions", "zenith": "zenith angles", "distance": "distances"}[key]
                out.append(f"{station.file}: {station.at} to {one.key[1]}: the {what} of two sets differ by {size}, "
                           "more than [rejection] allows; two sets cannot tell which is wrong.")  # fmt: skip
    return out


def _uneven(station: Station) -> list[str]:
    """2C that changes with the target: between targets it differs far more than within one (F test, 0.1 %)."""
    by_target: dict[str, list[float]] = defaultdict(list)
    for p in station.pointings:
        if p.two_c is not None:
            # on the horizon: 2C grows with 1/sin z, which is no fault of a target
            by_target[p.to].append(p.two_c * (math.sin(p.zenith) if p.zenith is not None else 1.0))
    groups = [v for v in by_target.values() if len(v) > 1]
    n, k = sum(map(len, groups)), len(groups)
    if k < FEWEST or n - k < FEWEST:
        return []
    means = [math.fsum(v) / len(v) for v in groups]
    mean = math.fsum(x for v in groups for x in v) / n
    between = math.fsum(len(v) * (m - mean) ** 2 for v, m in zip(groups, means, strict=True)) / (k - 1)
    within = math.fsum((x - m) ** 2 for v, m in zip(groups, means, strict=True) for x in v) / (n - k)
    from scipy.special import fdtri

    if between <= float(fdtri(k - 1, n - k, 0.999)) * within:
        return []
    named = [t for t, v in by_target.items() if len(v) > 1]
    worst = max(range(k), key=lambda j: abs(means[j] - mean))
    rest = math.fsum(m for j, m in enumerate(means) if j != worst) / (k - 1)
    odd, others = (f'{x * RHO_SEC:+.0f}"' for x in (means[worst], rest))
    where = f"{station.file}: {station.at}"
    return [f"{where}: 2C changes with the target: {odd} to {named[worst]}, {others} to the others on the mean: a "
            "short sight, a tilted axis, or a target read off its middle."]  # fmt: skip
