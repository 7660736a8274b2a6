"""Stations that no construction reaches one by one, placed together: a ring of lengths, a chain closed far away.

A *knot* is a smallest set of unplaced stations that the readings fix together, once the placed ones are taken as they
are. Which stations are fixed at all is a matter of the figure, not of its measures: at places chosen by lot the
stations that no null vector of the design moves are fixed almost everywhere (generic rigidity; Gluck 1975, from
memory). Taking stations away as long as some of the rest stay fixed leaves the knot.

The knot has finitely many solutions. They are sought from many places by lot: every station starts on a locus of one
already placed (a ray at any distance, a circle at any azimuth), pieces that are rigid in themselves turn as a whole,
and damped least squares (Levenberg and Marquardt) runs from all of them side by side. What fits all readings is kept;
the search ends when every solution has been met several times. Equal ones are followed like any others.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass, field

import numpy as np

from adjust.graph.agreement import SPREAD
from adjust.graph.clues import Index, Places
from adjust.graph.grow import SAME_COST, Group, put, resize
from adjust.network import Array, Ints

FITS = 0.005
"""Misfit (radians, or share of the length) up to which a reading is met by a knot."""
KNOT_MOST = 80
"""Unplaced stations up to which knots are sought: time grows with their cube."""
ROUNDS, SIDE_BY_SIDE, NUMBERS_MOST = 12, 64, 1_000_000
STEPS, MORE_STEPS, NEARLY = 40, 60, 0.05
"""Steps from every place by lot, and further ones where no misfit is above NEARLY: valleys are long where a knot is
fixed only just."""
MET = 3
"""How often every solution is met before the search ends; or twice the rounds of the first are over."""
RANK_LEAST = 1e-7
MOST_SOLUTIONS = 6
FAR = 100.0
"""Times the extent of the placed stations within which a knot lies."""


@dataclass
class _Knot:
    """Readings among unplaced stations ``new`` and the placed ones, as arrays over both (numbered alike)."""

    new: list[int]
    number: dict[int, int]
    fixed: Places
    """Places (m,) of the placed stations, zero for the new ones, which come first."""
    i: Ints
    j: Ints
    metres: Array
    at: Ints
    to: Ints
    reading: Array
    set: Ints
    """Number of a set whose orientation is sought, -1 where it is known and part of ``reading``."""
    sets: int
    scale: bool
    """Whether the placed stations are not true to scale and lengths say what it is."""
    numbers: list[int] = field(default_factory=list)
    """The sets behind ``set``."""

    @property
    def unknowns(self) -> int:
        return 2 * len(self.new) + self.sets + self.scale

    @property
    def rows(self) -> int:
        return len(self.metres) + len(self.reading)


@dataclass
class _Solution:
    """Places (m,), log scale, cost of its readings, and how often it was met."""

    z: Places
    scale: float
    cost: float
    times: int = 1


def _knot(index: Index, group: Group, new: list[int]) -> _Knot:
    """The readings that tie ``new`` stations to each other and to the group."""
    inside = set(new)
    number = {s: k for k, s in enumerate(new)}
    lengths, pointings = [], []
    for s in new:
        lengths += [(s, o, d) for o, d, _ in index.lengths[s] if (o in group.at) or (o in inside and s < o)]
        pointings += [p for p in index.out[s] if p.to in group.at or p.to in inside]
        pointings += [p for p in index.into[s] if p.at in group.at]
    for a, b in [*((s, o) for s, o, _ in lengths), *((p.at, p.to) for p in pointings)]:
        number.setdefault(a, len(number))
        number.setdefault(b, len(number))
    fixed = np.array([group.at.get(s, 0j) for s in number])
    sets: dict[int, int] = {}
    reading, of = [], []
    for p in pointings:
        known = p.set in group.turn and p.set not in group.via
        reading.append(p.reading + (group.turn[p.set] if known else 0.0))
        of.append(-1 if known else sets.setdefault(p.set, len(sets)))

    def ints(values: list[int]) -> Ints:
        return np.array(values, dtype=np.int64)

    return _Knot(
        new, number, fixed,
        ints([number[s] for s, _, _ in lengths]), ints([number[o] for _, o, _ in lengths]),
        np.array([d for _, _, d in lengths], dtype=float),
        ints([number[p.at] for p in pointings]), ints([number[p.to] for p in pointings]),
        np.array(reading, dtype=float), ints(of), len(sets), bool(lengths) and not group.scaled, list(sets),
    )  # fmt: skip


def _misfits(k: _Knot, z: Places, turn: Array, scale: Array) -> Array:
    """Misfits (S, R) of lengths, as shares, and pointings at places (S, m), orientations (S, g), log scales (S,)."""
    computed = np.abs(z[:, k.j] - z[:, k.i]) * np.exp(scale)[:, None]
    lengths = (computed - k.metres) / np.maximum(np.maximum(computed, k.metres), 1e-9)
    d = z[:, k.to] - z[:, k.at]
    turned = np.concatenate([turn, np.zeros((len(z), 1))], axis=1)[:, k.set]
    away = np.arctan2(d.real, d.imag) - k.reading - turned
    return np.concatenate([lengths, away - 2 * np.pi * np.round(away / (2 * np.pi))], axis=1)


def _partials(k: _Knot, z: Places) -> Array:
    """Partials (S, R, u) of the misfits by east and north of the new stations, orientations, log scale."""
    count, lengths, n = len(z), len(k.metres), len(k.new)
    out = np.zeros((count, k.rows, k.unknowns))
    d = z[:, k.j] - z[:, k.i]
    far = np.maximum(np.abs(d), 1e-12)
    by_length = d / far / (far if k.scale else np.maximum(far, k.metres))
    s = z[:, k.to] - z[:, k.at]
    by_pointing = (s.imag - 1j * s.real) / np.maximum(np.abs(s), 1e-12) ** 2
    by = np.concatenate([by_length, by_pointing], axis=1)
    for ends, sign in ((np.concatenate([k.i, k.at]), -1.0), (np.concatenate([k.j, k.to]), 1.0)):
        rows = np.flatnonzero(ends < n)
        out[:, rows, 2 * ends[rows]] += sign * by[:, rows].real
        out[:, rows, 2 * ends[rows] + 1] += sign * by[:, rows].imag
    turned = np.flatnonzero(k.set >= 0)
    out[:, lengths + turned, 2 * n + k.set[turned]] = -1.0
    if k.scale:
        out[:, :lengths, -1] = 1.0
    return out


def find_knot(index: Index, group: Group, missing: list[int]) -> list[int]:
    """A smallest set of the ``missing`` stations that the readings fix together; empty if they fix none."""
    rng = np.random.default_rng(5)
    lot = dict(zip(missing, (rng.normal(size=(len(missing), 2)) @ [1, 1j]).tolist(), strict=True))
    middle, size = _extent(group)
    lot = {s: middle + size * z for s, z in lot.items()}
    left = _fixed(index, group, missing, lot)
    for station in sorted(left, key=index.degree):
        if station in left and len(left) > 1:
            fewer = _fixed(index, group, [s for s in left if s != station], lot)
            left = fewer or left
    return left


def _fixed(index: Index, group: Group, stations: list[int], lot: dict[int, complex]) -> list[int]:
    """The stations that no null vector moves at places by lot, until all that are left are fixed by what is left."""
    while stations:
        k = _knot(index, group, stations)
        z = k.fixed.copy()
        z[: len(stations)] = [lot[s] for s in stations]
        partials = _partials(k, z[None])[0]
        partials = partials / np.maximum(np.linalg.norm(partials, axis=0), 1e-300)
        triangle = np.zeros((k.unknowns, k.unknowns))
        upper = np.linalg.qr(partials, mode="r")
        triangle[: len(upper)] = upper
        _, s, vt = np.linalg.svd(triangle)
        free = vt[s < RANK_LEAST]
        moved = np.abs(free[:, : 2 * len(stations)]).max(axis=0, initial=0.0).reshape(-1, 2).max(axis=1) > 1e-6
        if not moved.any():
            return stations
        stations = [s for s, m in zip(stations, moved.tolist(), strict=True) if not m]
    return []


def loosened(index: Index, group: Group, knot: list[int]) -> tuple[Group, list[int]]:
    """The group without the neighbours of a knot that were placed by a poor crossing, and the knot with them.

    A station may be fixed well only by what the knot says of it; where it stands far off, no knot fits.
    """
    poor = [s for s in group.poor if any(o in knot for o in index.near[s])]
    out = group.copy()
    for s in poor:
        del out.at[s]
        for p in index.out[s]:
            if index.local[p.set]:
                out.turn.pop(p.set, None)
    return out, [*knot, *poor]


def close_knot(index: Index, group: Group, knot: list[int], bodies: list[Group]) -> list[Group]:
    """The groups with the stations of a knot in each of the solutions that fit all readings; empty if none does."""
    k = _knot(index, group, knot)
    if not k.rows or not k.unknowns:
        return []
    rng = np.random.default_rng([11, len(knot)])
    side = max(4, min(SIDE_BY_SIDE, NUMBERS_MOST // (k.rows * k.unknowns)))
    solutions: list[_Solution] = []
    first = ROUNDS
    middle, size = _extent(group)
    for number in range(1, ROUNDS + 1):
        z = np.array([_by_lot(index, group, k, bodies, rng) for _ in range(side)])
        z, scale, r = _settled(k, z, STEPS)
        near = np.abs(r).max(axis=1) < NEARLY
        if not near.any():
            continue
        z, scale, r = _settled(k, z[near], MORE_STEPS, scale[near])
        costs = np.log1p((r / SPREAD) ** 2).sum(axis=1)
        here = np.abs(z[:, : len(knot)] - middle).max(axis=1) < FAR * size  # rays meet anything at infinity
        for one in np.flatnonzero(here & (np.abs(r).max(axis=1) < FITS)).tolist():
            _meet(solutions, _Solution(z[one], float(scale[one]), float(costs[one])), len(knot))
        least = min((one.cost for one in solutions), default=0.0)
        solutions = [one for one in solutions if one.cost < least + SAME_COST]
        first = min(first, number) if solutions else ROUNDS
        if solutions and (min(one.times for one in solutions) >= MET or number > 2 * first):
            break
    solutions.sort(key=lambda one: one.cost)
    return [_grown(index, group, k, one) for one in solutions[:MOST_SOLUTIONS]]


def _meet(solutions: list[_Solution], found: _Solution, n: int) -> None:
    """Count a solution that is known already, or add it."""
    size = float(np.abs(found.z - found.z.mean()).max())
    for one in solutions:
        if np.abs(one.z[:n] - found.z[:n]).max() < 1e-3 * size:
            one.times += 1
            return
    solutions.append(found)


def _grown(index: Index, group: Group, k: _Knot, found: _Solution) -> Group:
    out = group.copy()
    out.cost += found.cost
    for s, place in zip(k.new, found.z.tolist(), strict=False):
        put(index, out, s, place)
    for one in k.numbers:
        out.sets[one] = None
    if k.scale:
        resize(index, out, math.exp(found.scale))
    return out


def _by_lot(index: Index, group: Group, k: _Knot, bodies: list[Group], rng: np.random.Generator) -> Places:
    """Places (m,) by lot: each new station on a locus of one placed before, rigid pieces turned as a whole."""
    z, left = dict(group.at), dict.fromkeys(k.new)
    middle, size = _extent(group)
    while left:
        near = [s for s in left if any(o in z for o in index.near[s])] or list(left)
        s = near[int(rng.integers(len(near)))]
        place = _locus_by_lot(index, group, s, z, size, rng)
        if place is None:
            place = middle + size * 10 ** rng.uniform(-0.3, 0.7) * cmath.rect(1.0, rng.uniform(0, 2 * math.pi))
        body = next((b for b in bodies if s in b.at and sum(i in left for i in b.at) > 2), None)
        members = {s: place}
        if body is not None:
            longer = 1.0 if body.scaled else size * 10 ** rng.uniform(-0.5, 0.5) / max(map(abs, body.at.values()))
            factor = cmath.rect(longer, rng.uniform(0, 2 * math.pi))
            if index.clues.north in body.turn and index.clues.north in group.turn:
                factor = cmath.rect(longer, body.turn[index.clues.north] - group.turn[index.clues.north])
            members |= {i: place + factor * (p - body.at[s]) for i, p in body.at.items() if i in left}
        z |= members
        for i in members:
            left.pop(i, None)
    return np.array([z[s] for s in k.number])


def _extent(group: Group) -> tuple[complex, float]:
    """Middle of the placed stations and the largest distance from it."""
    some = list(group.at.values())
    middle = sum(some) / len(some)
    return middle, max(abs(p - middle) for p in some) or 1.0


def _locus_by_lot(index: Index, group: Group, s: int, z: dict[int, complex], size: float,
                  rng: np.random.Generator) -> complex | None:  # fmt: skip
    """A point on a ray or a circle of a placed neighbour."""
    rays = [(z[p.at], group.turn[p.set] + p.reading) for p in index.into[s] if p.at in z and p.set in group.turn]
    rays += [(z[p.to], group.turn[p.set] + p.reading + math.pi) for p in index.out[s]
             if p.to in z and p.set in group.turn]  # fmt: skip
    circles = [(z[o], d) for o, d, _ in index.lengths[s] if o in z] if group.scaled else []
    if circles and (not rays or rng.random() < 0.5):
        centre, d = circles[int(rng.integers(len(circles)))]
        return centre + cmath.rect(d, rng.uniform(0, 2 * math.pi))
    if rays:
        start, azimuth = rays[int(rng.integers(len(rays)))]
        return start + size * 10 ** rng.uniform(-0.7, 0.5) * 1j * cmath.rect(1.0, -azimuth)
    return None


def _settled(k: _Knot, z: Places, steps: int, scale: Array | None = None) -> tuple[Places, Array, Array]:
    """Places (S, m), log scales (S,) and misfits (S, R) after damped steps side by side."""
    n, count = len(k.new), len(z)
    turn = _turns(k, z)
    if scale is None:
        scale = np.zeros(count)
    if k.scale:
        scale = np.median(np.log(k.metres / np.maximum(np.abs(z[:, k.j] - z[:, k.i]), 1e-12)), axis=1)
    damping = np.full(count, 1e-2)
    r = _misfits(k, z, turn, scale)
    cost = (r * r).sum(axis=1)
    for _ in range(steps):
        a = _partials(k, z)
        normal = a.transpose(0, 2, 1) @ a
        diagonal = np.einsum("suu->su", normal)
        extra = damping[:, None] * (diagonal + 1e-12 * diagonal.max(axis=1, keepdims=True) + 1e-300)
        normal = normal + extra[:, :, None] * np.eye(k.unknowns)
        step = -np.linalg.solve(normal, (a.transpose(0, 2, 1) @ r[:, :, None]))[:, :, 0]
        tried = z.copy()
        tried[:, :n] += step[:, 0 : 2 * n : 2] + 1j * step[:, 1 : 2 * n : 2]
        turned = turn + step[:, 2 * n : 2 * n + k.sets]
        scaled = scale + (step[:, -1] if k.scale else 0.0)
        r_tried = _misfits(k, tried, turned, scaled)
        cost_tried = (r_tried * r_tried).sum(axis=1)
        better = cost_tried < cost
        z, turn = np.where(better[:, None], tried, z), np.where(better[:, None], turned, turn)
        scale, r = np.where(better, scaled, scale), np.where(better[:, None], r_tried, r)
        cost = np.where(better, cost_tried, cost)
        damping = np.clip(np.where(better, damping / 5, damping * 4), 1e-12, 1e8)
    return z, scale, r


def _turns(k: _Knot, z: Places) -> Array:
    """Orientations (S, g) of the sets at places: circular means."""
    d = z[:, k.to] - z[:, k.at]
    away = np.exp(1j * (np.arctan2(d.real, d.imag) - k.reading))
    out = np.zeros((len(z), k.sets), dtype=complex)
    for one in range(k.sets):
        out[:, one] = away[:, k.set == one].sum(axis=1)
    return np.asarray(np.angle(out))
