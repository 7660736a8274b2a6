"""Where one station can be, judged by all clues that tie it to stations already placed.

Candidates are the common points of two loci; each is scored by every clue of the station with a Cauchy cost
sum log(1 + (r/s)^2), r being the misfit as an angle or a share of the length. One gross blunder adds a bounded amount,
so the candidate that most readings agree on wins.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from adjust.graph.agreement import AGREES, SPREAD, agree, wrapped
from adjust.graph.clues import Index
from adjust.graph.loci import Circle, Locus, Ray, azimuth, crossing, meet, seen_under, unit

CLEARLY = 3.0
"""A place fits clearly better than another when its cost is less by this: one reading that misses by 4.4 SPREAD."""
APART = 0.02
"""Places nearer than this share of the distance to the neighbours are one place."""
MOST_LOCI = 5
"""Loci of one sort from which candidates are made: more only cost time, all readings still vote."""


@dataclass
class Fan:
    """Pointings at the sought station whose orientation is free: (place of the target, reading)."""

    targets: list[tuple[complex, float]]
    sources: list[int]


@dataclass
class Ties:
    """All clues between a station and placed stations."""

    rays: list[tuple[Ray, int]]
    circles: list[tuple[Circle, int]]
    fans: list[Fan]

    @property
    def sources(self) -> list[int]:
        """The readings behind the ties."""
        return [s for _, s in self.rays] + [s for _, s in self.circles] + [s for f in self.fans for s in f.sources]

    @property
    def count(self) -> int:
        """Number of conditions on the two coordinates."""
        return len(self.rays) + len(self.circles) + sum(len(f.targets) - 1 for f in self.fans)


@dataclass(frozen=True)
class Place:
    """A candidate: its point, cost, number of conditions that agree, and how well its loci cross."""

    point: complex
    cost: float
    agreeing: int
    sine: float


def ties(index: Index, station: int, at: dict[int, complex], turn: dict[int, float], via: dict[int, int],
         scaled: bool) -> Ties:  # fmt: skip
    """The clues between ``station`` and the placed stations ``at``, with the orientations ``turn`` of sets.

    ``via`` names the unplaced station from whose line alone a set has its orientation: back to that station it says
    nothing new. Clues of one sort to the same neighbour count once: they check each other, not the place.
    """
    rays: dict[tuple[int, int], list[tuple[float, int]]] = {}
    fans: dict[int, Fan] = {}
    for p in index.into[station]:
        if p.at in at and p.set in turn and via.get(p.set) != station:
            rays.setdefault((p.at, 0), []).append((turn[p.set] + p.reading, p.source))
    for p in index.out[station]:
        if p.to not in at:
            continue
        if index.local[p.set]:
            fan = fans.setdefault(p.set, Fan([], []))
            fan.targets.append((at[p.to], p.reading))
            fan.sources.append(p.source)
        elif p.set in turn and via.get(p.set) != station:
            rays.setdefault((p.to, 1), []).append((turn[p.set] + p.reading + math.pi, p.source))
    circles: dict[int, list[tuple[float, int]]] = {}
    if scaled:
        for other, metres, source in index.lengths[station]:
            if other in at:
                circles.setdefault(other, []).append((metres, source))
    return Ties(
        [(Ray(at[k[0]], unit(a)), s) for k, found in rays.items() for a, s in [_middle(found, True)]],
        [(Circle(at[k], d), s) for k, found in circles.items() for d, s in [_middle(found, False)]],
        [f for f in fans.values() if len(f.targets) > 1],
    )


def _middle(found: list[tuple[float, int]], wraps: bool) -> tuple[float, int]:
    """The value that is nearest to all others."""
    if len(found) == 1:
        return found[0]

    def away(one: tuple[float, int]) -> float:
        return sum(abs(wrapped(v - one[0])) if wraps else abs(v - one[0]) for v, _ in found)

    return min(found, key=away)


def score(t: Ties, x: complex) -> tuple[float, int]:
    """Cost of a point and the number of conditions that agree with it."""
    cost, agreeing = 0.0, 0
    for ray, _ in t.rays:
        w = (x - ray.start) * ray.along.conjugate()
        m = math.atan2(w.imag, w.real)
        cost += math.log1p((m / SPREAD) ** 2)
        agreeing += abs(m) < AGREES
    for circle, _ in t.circles:
        d = abs(x - circle.centre)
        m = (d - circle.radius) / max(d, circle.radius, 1e-9)
        cost += math.log1p((m / SPREAD) ** 2)
        agreeing += abs(m) < AGREES
    for fan in t.fans:
        _, c, n = agree([azimuth(p - x) - reading for p, reading in fan.targets])
        cost += c
        agreeing += n - 1
    return cost, agreeing


def voters(t: Ties, x: complex) -> set[int]:
    """The readings that agree with a point."""
    out = set()
    for ray, source in t.rays:
        w = (x - ray.start) * ray.along.conjugate()
        if abs(math.atan2(w.imag, w.real)) < AGREES:
            out.add(source)
    for circle, source in t.circles:
        d = abs(x - circle.centre)
        if abs(d - circle.radius) < AGREES * max(d, circle.radius):
            out.add(source)
    for fan in t.fans:
        turns = [azimuth(p - x) - reading for p, reading in fan.targets]
        middle = agree(turns)[0]
        out.update(s for s, turn in zip(fan.sources, turns, strict=True) if abs(wrapped(turn - middle)) < AGREES)
    return out


def refined(t: Ties, x: complex) -> complex:
    """The point after one reweighted least-squares step on its rays and circles; an intersection alone would pass its
    error on from step to step.

    A ray misses by its offset across, a circle by its offset along the radius, both as a share of the distance.
    """
    pulls: list[tuple[complex, float]] = []
    for ray, _ in t.rays:
        w = x - ray.start
        d = abs(w) or 1.0
        pulls.append((1j * ray.along / d, (w * ray.along.conjugate()).imag / d))
    for circle, _ in t.circles:
        w = x - circle.centre
        d = abs(w) or 1.0
        pulls.append((w / (d * d), (d - circle.radius) / d))
    ee = en = nn = re = rn = 0.0
    for normal, miss in pulls:
        weight = 1.0 / (1.0 + (miss / SPREAD) ** 2)
        ee += weight * normal.real**2
        en += weight * normal.real * normal.imag
        nn += weight * normal.imag**2
        re -= weight * normal.real * miss
        rn -= weight * normal.imag * miss
    determinant = ee * nn - en * en
    if determinant <= 0.01 * (ee + nn) ** 2:
        return x
    step = complex(nn * re - en * rn, ee * rn - en * re) / determinant
    return x + step if abs(step) < AGREES * _nearest(t, x) else x


def candidates(t: Ties) -> list[Place]:
    """Distinct places, best first; only as many pairs of loci are met as it takes to find one that all agree on."""
    loci = _loci(t)
    found: list[Place] = []
    every = t.count
    for i, j in _pairs(loci):
        here = [Place(x, *score(t, x), crossing(loci[i], loci[j], x)) for x in meet(loci[i], loci[j])]
        found += here
        if here:
            best = min(here, key=lambda p: p.cost)
            if best.agreeing == every and best.cost < max(1, every - 2) and best.sine > 0.1:
                found = here  # any other answer would lie on these two loci as well
                break
    return _distinct(found, t)


def _loci(t: Ties) -> list[Locus]:
    loci: list[Locus] = [ray for ray, _ in t.rays[:MOST_LOCI]]
    loci += [circle for circle, _ in t.circles[:MOST_LOCI]]
    for fan in t.fans[:3]:
        k = fan.targets[:4]
        arcs = [seen_under(k[a][0], k[b][0], k[b][1] - k[a][1]) for a in range(len(k)) for b in range(a + 1, len(k))]
        loci += [arc for arc in arcs if arc is not None]
    return loci


def _pairs(loci: list[Locus]) -> list[tuple[int, int]]:
    """Pairs of loci, polar steps first: they have one answer."""
    pairs = [(i, j) for i in range(len(loci)) for j in range(i + 1, len(loci))]

    def polar(pair: tuple[int, int]) -> bool:
        a, b = loci[pair[0]], loci[pair[1]]
        return not (isinstance(a, Ray) and isinstance(b, Circle) and a.start == b.centre)

    return sorted(pairs, key=polar)


def _distinct(found: list[Place], t: Ties) -> list[Place]:
    """Best first, without those that stand where a better one stands."""
    found.sort(key=lambda p: (round(p.cost, 6), -p.sine))
    kept: list[Place] = []
    for place in found:
        size = _nearest(t, place.point)
        if all(abs(place.point - other.point) > APART * size for other in kept):
            kept.append(place)
        if len(kept) == 4:
            break
    return kept


def _nearest(t: Ties, x: complex) -> float:
    known = [r.start for r, _ in t.rays] + [c.centre for c, _ in t.circles] + [p for f in t.fans for p, _ in f.targets]
    return min(abs(x - p) for p in known) if known else 0.0
