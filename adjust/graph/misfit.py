"""How well places fit all plane readings: misfits as angles or shares of the length, so that all kinds compare."""

from __future__ import annotations

import numpy as np

from adjust.graph.agreement import SPREAD, agree
from adjust.graph.clues import Clues, Places
from adjust.network import Array, Ints

TWO_PI = 2 * np.pi


class Misfits:
    """The lengths and pointings as arrays, for many places."""

    def __init__(self, clues: Clues) -> None:
        self.clues = clues
        lengths, pointings = clues.lengths, clues.pointings
        self.i = np.array([one.i for one in lengths], dtype=np.int64)
        self.j = np.array([one.j for one in lengths], dtype=np.int64)
        self.metres = np.array([one.metres for one in lengths], dtype=float)
        self.at = np.array([p.at for p in pointings], dtype=np.int64)
        self.to = np.array([p.to for p in pointings], dtype=np.int64)
        self.reading = np.array([p.reading for p in pointings], dtype=float)
        self.set = np.array([p.set for p in pointings], dtype=np.int64)
        self.source: Ints = np.array([*(one.source for one in lengths), *(p.source for p in pointings)], dtype=np.int64)

    def lengths(self, z: Places) -> Array:
        """Misfits of the lengths at complex places ``z`` (n,), as shares of the longer of observed and computed."""
        computed = np.abs(z[self.j] - z[self.i])
        return np.asarray((computed - self.metres) / np.maximum(np.maximum(computed, self.metres), 1e-9))

    def orientations(self, z: Places, robust: bool) -> Array:
        """Orientation of every set at places ``z``: what most of its pointings say, or (quickly) their mean."""
        turns = self._turns(z)
        out = np.zeros(self.clues.sets)
        known = np.isfinite(turns)
        if robust:
            of_set: dict[int, list[float]] = {}
            for one, turn in zip(self.set[known].tolist(), turns[known].tolist(), strict=True):
                of_set.setdefault(one, []).append(turn)
            for one, values in of_set.items():
                out[one] = agree(values)[0] if len(values) > 2 else values[0]
        else:
            out[self.set[known][::-1]] = turns[known][::-1]
            away = self._wrapped(turns - out[self.set])
            count = np.bincount(self.set[known], minlength=self.clues.sets)
            out += np.bincount(self.set[known], away[known], self.clues.sets) / np.maximum(count, 1)
        out[self.clues.north] = 0.0
        return out

    def pointings(self, z: Places, orientations: Array) -> Array:
        """Misfits of the pointings in radians."""
        return self._wrapped(self._turns(z) - orientations[self.set])

    def all(self, z: Places, robust: bool = True) -> Array:
        """Misfits of lengths, then pointings; NaN where an end is not placed."""
        return np.concatenate([self.lengths(z), self.pointings(z, self.orientations(z, robust))])

    def worst(self, z: Places) -> float:
        """The largest misfit, quickly."""
        with np.errstate(invalid="ignore"):
            m = np.abs(self.all(z, robust=False))
        return float(np.nanmax(m)) if np.isfinite(m).any() else 0.0

    def cost(self, z: Places) -> float:
        """Cauchy cost of all readings whose ends are placed."""
        with np.errstate(invalid="ignore"):
            m = self.all(z)
        return float(np.log1p((m[np.isfinite(m)] / SPREAD) ** 2).sum())

    def _turns(self, z: Places) -> Array:
        d = z[self.to] - z[self.at]
        turns = np.arctan2(d.real, d.imag) - self.reading
        turns[self.at == self.to] = np.nan
        return np.asarray(turns)

    @staticmethod
    def _wrapped(angles: Array) -> Array:
        return np.asarray(angles - TWO_PI * np.round(angles / TWO_PI))
