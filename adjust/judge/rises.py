"""Rises by zenith angles: the height difference of two marks from a zenith angle and a length between them, as a form.

With z(D, h) and s(D, h) what the frame and the kinds compute for a target at the plane distance D and the height
difference h of the marks (heights of instrument and target, curvature and refraction are in them: adjust.frames,
adjust.kinds.zenith_angle), both booked values together give D and h by Newton's method,

    [dz/dD dz/dh] [dD]   [z booked - z]         dh/dz, dh/ds: the second row of the inverse,
    [ds/dD ds/dh] [dh] = [s booked - s]         dh/dk = -dh/dz dz/dk,

which is h = S cos z + i - t + (1 - k) D^2/2R in short, with dh/dz = -S sin z and dh/dS = cos z. Places in the plane are
not asked; of the heights only that of the instrument, since it scales the length on the plane by 1.6e-7 a metre.

The lengths of a pair are meaned, then the zenith angles of each way, then both ways: of a reciprocal mean the
coefficient of refraction goes out.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass

import numpy as np

from adjust.frames import beside
from adjust.judge.booked import Booked, Form, mean
from adjust.kinds import KINDS
from adjust.network import Array, Block, Bools, Ints
from adjust.units import wrap

STEPS = 6
"""Of Newton's method from the plain triangle, which is curvature away from the end."""
Pair = tuple[int, int]


@dataclass(frozen=True)
class Sighting:
    """A zenith angle's share in a rise: from its instrument to its target."""

    at: int
    to: int
    row: int
    setup: int
    share: float
    """By how much the rise grows with the instrument's height, and falls with the target's."""
    instrument: float
    target: float
    """Heights above the marks, metres."""


@dataclass(frozen=True)
class Rise:
    """Height of ``end`` less that of ``start``, metres, with the plane distance between them."""

    start: int
    end: int
    form: Form
    length: float
    sightings: tuple[Sighting, ...]


@dataclass(frozen=True)
class _One:
    """From one zenith angle with one length."""

    form: Form
    length: float


def rises(booked: Booked) -> list[Rise]:
    """The rises of all pairs of stations with a zenith angle and a length, in the order of the stations."""
    by_row = _by_zenith_angle(booked)
    pairs: dict[Pair, dict[Pair, list[tuple[int, list[_One]]]]] = defaultdict(lambda: defaultdict(list))
    for (at, to, row), found in sorted(by_row.items()):
        pairs[min(at, to), max(at, to)][at, to].append((row, found))
    return [_rise(booked, pair, ways) for pair, ways in sorted(pairs.items())]


def _rise(booked: Booked, pair: Pair, ways: dict[Pair, list[tuple[int, list[_One]]]]) -> Rise:
    forms, lengths, sightings = [], [], []
    for (at, to), found in ways.items():
        sign = 1.0 if (at, to) == pair else -1.0
        forms.append(mean([mean([one.form for one in ones]) for _, ones in found]) * sign)
        lengths += [one.length for _, ones in found for one in ones]
        share = sign / (len(ways) * len(found))
        sightings += [_sighting(booked, at, to, row, share) for row, _ in found]
    return Rise(*pair, mean(forms), float(np.mean(lengths)), tuple(sightings))


def _sighting(booked: Booked, at: int, to: int, row: int, share: float) -> Sighting:
    rows = booked.network.rows
    block, i = booked.network.blocks[rows.block[row]], int(rows.row[row])
    instrument, target = (0.0, 0.0) if block.above is None else block.above[i].tolist()
    return Sighting(at, to, row, int(block.setup[i]) if len(block.setup) else -1, share, instrument, target)


def _by_zenith_angle(booked: Booked) -> dict[tuple[int, int, int], list[_One]]:
    """Of every (instrument, target, scalar row) what each length of the pair gives with it."""
    network = booked.network
    rows, legs = network.rows, booked.sights.legs
    together: dict[Pair, list[Pair]] = defaultdict(list)
    for b, block in enumerate(network.blocks):
        if KINDS[block.kind].says != "zenith":
            continue
        for row, (at, to) in zip(rows.of_block(b, len(block)).tolist(), block.stations.tolist(), strict=True):
            for length in legs.get((min(at, to), max(at, to)), ()) if row >= 0 else ():
                together[b, int(rows.block[length])].append((row, length))
    coefficients = _coefficients(booked)
    out: dict[tuple[int, int, int], list[_One]] = defaultdict(list)
    for (b, c), both in together.items():
        angle, length = np.array(both).T
        solved = _Triangles(booked, network.blocks[b].take(rows.row[angle]), network.blocks[c].take(rows.row[length]))
        k, of_setting = solved.coefficients(coefficients)
        values, by, by_k = solved.solve(k)
        good = np.isfinite(values).all(axis=1) & (values[:, 0] > 0)
        for n in np.flatnonzero(good).tolist():
            partials = {int(angle[n]): float(by[n, 0]), int(length[n]): float(by[n, 1])}
            if of_setting[n] >= 0:
                partials[int(of_setting[n])] = float(by_k[n])
            at, to = solved.angles.stations[n].tolist()
            one = _One(Form(float(values[n, 1]), partials), float(values[n, 0]))
            out[at, to, int(angle[n])].append(one)
    return out


def _coefficients(booked: Booked) -> dict[int, tuple[float, int]]:
    """Coefficients of refraction that are readings of their own: value and scalar row by group."""
    rows, out = booked.network.rows, {}
    for b, block in enumerate(booked.network.blocks):
        if KINDS[block.kind].says == "setting":
            for group, value, row in zip(block.group, block.values[:, 0], rows.of_block(b, len(block)), strict=True):
                out[int(group)] = (float(value), int(row))
    return out


@dataclass(frozen=True)
class _Triangles:
    """Zenith angles (m,) with lengths (m,) of the same pairs; the lengths may run either way."""

    booked: Booked
    angles: Block
    lengths: Block

    def coefficients(self, readings: dict[int, tuple[float, int]]) -> tuple[Array, Ints]:
        """Coefficients of refraction (m,), and their scalar rows (m,), -1 where they are kept."""
        constant = np.zeros(len(self.angles)) if self.angles.constant is None else self.angles.constant
        k, row = constant.copy(), np.full(len(self.angles), -1)
        for n, group in enumerate(self.angles.group.tolist()):
            if group >= 0:
                k[n], row[n] = readings.get(group, (float(self.booked.groups[group]), -1))
        return k, row

    def solve(self, k: Array) -> tuple[Array, Array, Array]:
        """Plane distances and rises (m, 2), partials of the rises by angle and length (m, 2), and by k (m,)."""
        m = len(self.angles)
        z, s = self.angles.values[:, 0], self.lengths.values[:, 0]
        above = np.zeros((m, 2)) if self.angles.above is None else self.angles.above
        beyond = np.zeros((m, 3))
        beyond[:, 2] = np.nan_to_num(self.booked.places[self.angles.stations[:, 0], 2],
                                     nan=self.booked.frame.plane_height)  # fmt: skip
        back = self.lengths.stations[:, 0] != self.angles.stations[:, 0]
        with np.errstate(divide="ignore", invalid="ignore"):
            slope = s if self.lengths.surface == "slope" else s / np.sin(z)
            x = np.column_stack([slope * np.sin(z), slope * np.cos(z) + above[:, 0] - above[:, 1]])
            for _ in range(STEPS):
                ends = np.concatenate([beyond, beyond + np.column_stack([np.zeros(m), x])])
                angle, by_angle, by_k = self._at(self.angles, ends, np.zeros(m, dtype=bool), k)
                length, by_length, _ = self._at(self.lengths, ends, back, np.zeros(m))
                inverse = _inverse(np.stack([by_angle, by_length], axis=1))
                off = np.stack([np.array([wrap(v) for v in (z - angle).tolist()]), s - length], axis=1)
                x = x + np.einsum("mij,mj->mi", inverse, off)
        return x, inverse[:, 1], -inverse[:, 1, 0] * by_k

    def _at(self, block: Block, ends: Array, back: Bools, k: Array) -> tuple[Array, Array, Array]:
        """Computed values (m,) between ``ends`` (2m, 3), partials (m, 2) by distance and rise, and by k (m,)."""
        m, frame = len(block), self.booked.frame
        first, second = np.arange(m), np.arange(m, 2 * m)
        start, end = np.where(back, second, first), np.where(back, first, second)
        sights = frame.sights(ends, start, end, block.surface, block.above)
        jacobian = frame.jacobian(ends, start, end, block.surface, block.above)
        aside = None
        if block.offset is not None:
            sights, aside = beside(sights, block.offset)
        value, by_sight, by_k = KINDS[block.kind].on(block.surface)(sights[:, None], k)
        by = by_sight[:, :, 0] if aside is None else by_sight[:, :, 0] @ aside
        carried = frame.carry(by, jacobian)[:, 0]  # (m, ends, components)
        return value[:, 0], carried[first, np.where(back, 0, 1), 1:], by_k[:, 0]


def _inverse(a: Array) -> Array:
    """Inverses (m, 2, 2); not a number where there is none."""
    det = a[:, 0, 0] * a[:, 1, 1] - a[:, 0, 1] * a[:, 1, 0]
    out = np.stack([a[:, 1, 1], -a[:, 0, 1], -a[:, 1, 0], a[:, 0, 0]], axis=1).reshape(-1, 2, 2)
    return np.asarray(out / det[:, None, None])
