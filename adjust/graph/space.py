"""Readings of stations in space as arrays, their misfits at many places at once, and damped least squares on them.

Slope distance s^2 = (h2 - h1)^2 + (1 + h1/R + h2/R) D^2 with h above the plane (adjust.frames; h1 h2/R^2 left out), so
ds = (q D dD + (h2 - h1)(dh2 - dh1) + D^2/2R (dh1 + dh2)) / s with q = 1 + (h1 + h2)/R. Zenith angle in the same
triangle, with u = h2 - h1 - D^2/2R: dz = ((u + D^2/R) dD - D (dh2 - dh1)) / (D^2 + u^2). Lengths on the plane; rises;
pointings with an orientation a set. A misfit r costs k^2 log(1 + (r/k sd)^2).
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
    over: Array
    """Sum of instrument and target height."""
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
    def of(cls, clues: Clues, inside: set[int], given: Array, known: Bools, plane: float) -> Space:
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
        above = [blocks[b].above for b, _ in sources]
        over = [0.0 if a is None else float(np.nan_to_num(a[sources[r[6]][1]]).sum())
                for r, a in ((r, above[r[6]]) for r in rows)]  # fmt: skip
        columns = list(zip(*rows, strict=True))

        def ints(k: int) -> Ints:
            return np.array(columns[k], dtype=np.int64)

        return cls(
            ints(0), ints(1), ints(2), np.array(columns[3], dtype=float), np.array(columns[4], dtype=float),
            np.array(over, dtype=float), np.maximum(np.nan_to_num(np.array(sd, dtype=float), nan=1e-3), 1e-7),
            ints(5), ints(6), len(numbers) - 1, known, given, plane,
        )  # fmt: skip

    def misfits(self, x: Array, turn: Array) -> Array:
        """Computed minus observed (S, R) in metres or radians at places (S, n, 3), orientations (S, g)."""
        d = x[:, self.j] - x[:, self.i]
        flat = np.maximum(np.hypot(d[..., 0], d[..., 1]), 1e-9)
        rise, grow = d[..., 2] - self.up, self._grow(x)
        turned = np.concatenate([turn, np.zeros((len(x), 1))], axis=1)[:, self.of_set]
        computed = np.select(
            [self.sort == SLOPE, self.sort == LENGTH, self.sort == RISE, self.sort == ZENITH],
            [np.sqrt(rise**2 + grow * flat**2), flat, d[..., 2], np.arctan2(flat, rise - flat**2 / (2 * RADIUS_M))],
            np.arctan2(d[..., 0], d[..., 1]) - turned,
        )
        r = computed - self.value
        return np.asarray(np.where(self.sort == POINTING, r - 2 * np.pi * np.round(r / (2 * np.pi)), r))

    def _grow(self, x: Array) -> Array:
        """q (S, R): the square of a length at the heights of its ends as a share of that on the plane."""
        return np.asarray(1 + (x[:, self.i, 2] + x[:, self.j, 2] + self.over - 2 * self.plane) / RADIUS_M)

    def partials(self, x: Array) -> Array:
        """Partials (S, R, 3 n + g) of the misfits."""
        count, n = x.shape[:2]
        d = x[:, self.j] - x[:, self.i]
        flat = np.maximum(np.hypot(d[..., 0], d[..., 1]), 1e-9)
        rise, grow = d[..., 2] - self.up, self._grow(x)
        slope = np.sqrt(rise**2 + grow * flat**2)
        zero, one = np.zeros_like(flat), np.ones_like(flat)
        sorts = [self.sort == SLOPE, self.sort == LENGTH, self.sort == RISE, self.sort == ZENITH]
        e, m = d[..., 0], d[..., 1]
        up = rise - flat**2 / (2 * RADIUS_M)
        away = flat**2 + up**2
        by_flat = (up + flat**2 / RADIUS_M) / away / flat
        by = np.stack([
            np.select(sorts, [grow * e / slope, e / flat, zero, by_flat * e], m / flat**2),
            np.select(sorts, [grow * m / slope, m / flat, zero, by_flat * m], -e / flat**2),
            np.select(sorts, [rise / slope, zero, one, -flat / away], zero),
        ], axis=-1)  # fmt: skip
        both = np.where(self.sort == SLOPE, flat**2 / (2 * RADIUS_M) / slope, 0.0)
        out = np.zeros((count, len(self.sort), 3 * n + self.sets))
        rows = np.arange(len(self.sort))
        for c in range(3):
            out[:, rows, 3 * self.i + c] -= by[..., c]
            out[:, rows, 3 * self.j + c] += by[..., c]
        for ends in (self.i, self.j):
            out[:, rows, 3 * ends + 2] += both
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
        x, turn, damping = x.copy(), self.turns(x), np.full(len(x), 1e-3)
        n, stalled = x.shape[1], np.zeros(len(x), dtype=np.int64)

        def cost_of(r: Array) -> Array:
            return np.asarray((robust**2 * np.log1p((r / robust) ** 2)).sum(axis=1))

        cost = cost_of(self.misfits(x, turn) / sd)
        for _ in range(steps):
            on = np.flatnonzero(stalled < STALLED)
            if not len(on):
                break
            step = self._step(x[on], turn[on], free, sd, robust, damping[on])
            tried, turned = x[on] + step[:, : 3 * n].reshape(-1, n, 3), turn[on] + step[:, 3 * n :]
            after = cost_of(self.misfits(tried, turned) / sd)
            better = after < cost[on]
            gained = better & (cost[on] - after > 1e-7 * (1 + cost[on]))
            stalled[on] = np.where(gained, 0, stalled[on] + 1)
            x[on[better]], turn[on[better]], cost[on[better]] = tried[better], turned[better], after[better]
            damping[on] = np.clip(np.where(better, damping[on] / 8, damping[on] * 5), 1e-10, 1e9)
        return x, cost

    def _step(self, x: Array, turn: Array, free: Ints, sd: Array, robust: float, damping: Array) -> Array:
        """Damped steps (S, 3 n + g)."""
        r = self.misfits(x, turn) / sd
        a = self.partials(x)[:, :, free] / sd[:, None]
        weighted = a.transpose(0, 2, 1) * (1 / (1 + (r / robust) ** 2))[:, None, :]
        normal = weighted @ a
        diagonal = np.einsum("suu->su", normal)
        extra = damping[:, None] * diagonal + 1e-12 * diagonal.max(axis=1, keepdims=True) + 1e-300
        out = np.zeros((len(x), 3 * x.shape[1] + self.sets))
        matrix = normal + extra[:, :, None] * np.eye(len(free))
        out[:, free] = -np.linalg.solve(matrix, weighted @ r[:, :, None])[:, :, 0]
        return out
