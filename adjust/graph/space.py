"""Readings of stations in space as arrays, their misfits at many places at once, and damped least squares on them.

Slope distance s^2 = (h2 - h1)^2 + (1 + h1/R)(1 + h2/R) D^2 with h above the plane (adjust.frames); zenith angle of the
same triangle, curvature D^2/2R; lengths on the plane; rises; pointings with an orientation a set.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.frames import RADIUS_M
from adjust.graph.clues import Clues
from adjust.network import Array, Bools, Ints

SLOPE, LENGTH, RISE, ZENITH, POINTING = range(5)
STEPS, STALLED = 60, 6


@dataclass
class Space:
    """Readings (R,) by sort with their ends, values, instrument less target heights, standard deviations, sets."""

    sort: Ints
    i: Ints
    j: Ints
    value: Array
    up: Array
    sd: Array
    of_set: Ints
    source: Ints
    sets: int
    known: Bools
    """(n, 3) components that stay."""
    given: Array
    plane: float
    """Height of the plane."""

    @classmethod
    def of(cls, clues: Clues, inside: set[int], given: Array, known: Bools) -> Space:
        """The readings whose ends are all ``inside``."""
        rows: list[tuple[int, int, int, float, float, int, int]] = []
        slopes = {s[4] for s in clues.slopes}
        rows += [(SLOPE, i, j, v, up, -1, s) for i, j, v, up, s in clues.slopes]
        rows += [(LENGTH, c.i, c.j, c.metres, 0.0, -1, c.source) for c in clues.lengths if c.source not in slopes]
        rows += [(RISE, c.i, c.j, c.metres, 0.0, -1, c.source) for c in clues.rises]
        rows += [(ZENITH, i, j, v, up, -1, s) for i, j, v, up, s in clues.zeniths]
        numbers: dict[int, int] = {clues.north: -1}
        for p in clues.pointings:
            if p.at in inside and p.to in inside and p.at != p.to:
                one = numbers.setdefault(p.set, len(numbers) - 1)
                rows.append((POINTING, p.at, p.to, p.reading, 0.0, one, p.source))
        rows = [r for r in rows if r[1] in inside and r[2] in inside]
        blocks, sources = clues.network.blocks, clues.sources
        sd = [float(blocks[b].sd[row, 0]) for b, row in (sources[r[6]] for r in rows)]
        columns = list(zip(*rows, strict=True))

        def ints(k: int) -> Ints:
            return np.array(columns[k], dtype=np.int64)

        heights = given[known[:, 2], 2]
        return cls(
            ints(0), ints(1), ints(2), np.array(columns[3], dtype=float), np.array(columns[4], dtype=float),
            np.maximum(np.nan_to_num(np.array(sd, dtype=float), nan=1e-3), 1e-7), ints(5), ints(6), len(numbers) - 1,
            known, given, float(heights.mean()) if len(heights) else 0.0,
        )  # fmt: skip

    def misfits(self, x: Array, turn: Array) -> Array:
        """Computed minus observed (S, R) in metres or radians at places (S, n, 3), orientations (S, g)."""
        d = x[:, self.j] - x[:, self.i]
        flat = np.maximum(np.hypot(d[..., 0], d[..., 1]), 1e-9)
        rise = d[..., 2] - self.up
        grow = 1 + (x[:, self.i, 2] + x[:, self.j, 2] - 2 * self.plane) / RADIUS_M
        turned = np.concatenate([turn, np.zeros((len(x), 1))], axis=1)[:, self.of_set]
        computed = np.select(
            [self.sort == SLOPE, self.sort == LENGTH, self.sort == RISE, self.sort == ZENITH],
            [np.sqrt(rise**2 + grow * flat**2), flat, d[..., 2], np.arctan2(flat, rise - flat**2 / (2 * RADIUS_M))],
            np.arctan2(d[..., 0], d[..., 1]) - turned,
        )
        r = computed - self.value
        return np.asarray(np.where(self.sort == POINTING, r - 2 * np.pi * np.round(r / (2 * np.pi)), r))

    def partials(self, x: Array) -> Array:
        """Partials (S, R, 3 n + g) of the misfits."""
        count, n = x.shape[:2]
        d = x[:, self.j] - x[:, self.i]
        flat = np.maximum(np.hypot(d[..., 0], d[..., 1]), 1e-9)
        rise = d[..., 2] - self.up
        slope = np.sqrt(rise**2 + flat**2)
        zero, one = np.zeros_like(flat), np.ones_like(flat)
        sorts = [self.sort == SLOPE, self.sort == LENGTH, self.sort == RISE, self.sort == ZENITH]
        e, m = d[..., 0], d[..., 1]
        by = np.stack([
            np.select(sorts, [e / slope, e / flat, zero, rise * e / flat / slope**2], m / flat**2),
            np.select(sorts, [m / slope, m / flat, zero, rise * m / flat / slope**2], -e / flat**2),
            np.select(sorts, [rise / slope, zero, one, -flat / slope**2], zero),
        ], axis=-1)  # fmt: skip
        out = np.zeros((count, len(self.sort), 3 * n + self.sets))
        rows = np.arange(len(self.sort))
        for c in range(3):
            out[:, rows, 3 * self.i + c] -= by[..., c]
            out[:, rows, 3 * self.j + c] += by[..., c]
        turned = np.flatnonzero(self.of_set >= 0)
        out[:, turned, 3 * n + self.of_set[turned]] = -1.0
        return out

    def turns(self, x: Array) -> Array:
        """Orientations (S, g) at places: circular means."""
        d = x[:, self.j] - x[:, self.i]
        away = np.exp(1j * (np.arctan2(d[..., 0], d[..., 1]) - self.value))
        return np.asarray(np.angle(np.stack([away[:, self.of_set == g].sum(axis=1) for g in range(self.sets)], axis=1))
                          if self.sets else np.zeros((len(x), 0)))  # fmt: skip

    def free(self, stations: Ints) -> Ints:
        """Numbers of the unknowns: components of the stations that are not known, then orientations."""
        columns = [3 * s + c for s in stations.tolist() for c in range(3) if not self.known[s, c]]
        return np.array([*columns, *(3 * len(self.known) + np.arange(self.sets))], dtype=np.int64)

    def rough(self, x: Array) -> Array:
        """Working size (R,) of misfits far from the answer: a thousandth of the length, a milliradian."""
        lengths = (self.sort == SLOPE) | (self.sort == LENGTH)
        typical = float(np.median(self.value[lengths])) if lengths.any() else 100.0
        return np.asarray(np.select(
            [lengths, self.sort == RISE], [1e-3 * np.maximum(self.value, 0.1 * typical), 1e-3 * typical],
            1e-3,
        ))  # fmt: skip

    def settled(self, x: Array, free: Ints, sd: Array, robust: float, steps: int = STEPS) -> tuple[Array, Array]:
        """Places (S, n, 3) and costs (S,) after damped steps; a misfit r costs k^2 log(1 + (r / k sd)^2), k robust."""
        n = x.shape[1]
        x, turn, damping = x.copy(), self.turns(x), np.full(len(x), 1e-3)
        eye, stalled = np.eye(len(free)), np.zeros(len(x), dtype=np.int64)

        def cost_of(r: Array) -> Array:
            return np.asarray((robust**2 * np.log1p((r / robust) ** 2)).sum(axis=1))

        r = self.misfits(x, turn) / sd
        cost = cost_of(r)
        for _ in range(steps):
            a = self.partials(x)[:, :, free] / sd[:, None]
            w = 1 / (1 + (r / robust) ** 2)
            weighted = a.transpose(0, 2, 1) * w[:, None, :]
            normal = weighted @ a
            diagonal = np.einsum("suu->su", normal)
            extra = damping[:, None] * diagonal + 1e-12 * diagonal.max(axis=1, keepdims=True) + 1e-300
            step = -np.linalg.solve(normal + extra[:, :, None] * eye, weighted @ r[:, :, None])[:, :, 0]
            full = np.zeros((len(x), 3 * n + self.sets))
            full[:, free] = step
            tried, turned = x + full[:, : 3 * n].reshape(x.shape), turn + full[:, 3 * n :]
            r_tried = self.misfits(tried, turned) / sd
            after = cost_of(r_tried)
            better = after < cost
            stalled = np.where(better & (cost - after > 1e-7 * (1 + cost)), 0, stalled + 1)
            x, turn = np.where(better[:, None, None], tried, x), np.where(better[:, None], turned, turn)
            r, cost = np.where(better[:, None], r_tried, r), np.where(better, after, cost)
            damping = np.clip(np.where(better, damping / 8, damping * 5), 1e-10, 1e9)
            if (stalled >= STALLED).all():
                break
        return x, cost
