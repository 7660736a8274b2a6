"""What a closure would misclose by if one of its readings were another: exactly, and with what covariance.

A sum w = sum b l of readings changes by b c with a reading that is c smaller. A zenith angle goes into a rise by its
cosine: with b = -S sin z the change is S (cos z - cos (z - c)). Of a traverse the angular misclosure w and the raw end
of the walk (no balance) are taken together,

    w,   E = sum d sin a + E0 - E1,   N = sum d cos a + N0 - N1

an angle that is c smaller turns all legs behind it, a' = a - c, which is done as it stands, since with c of many
degrees nothing is linear. The partials B by all readings are those of the changed walk,

    dE = sum (sin a' dd + d cos a' da),   dN = sum (cos a' dd - d sin a' da)      and the covariance  C = B Q B'.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from adjust.judge.booked import Booked, Form, total
from adjust.judge.traversed import Traversed
from adjust.kinds import KINDS
from adjust.network import Array, Bools, Network

Key = int | tuple[int, int]
"""A scalar row, or a coordinate (station, component) of a known mark."""


def _keys(forms: Iterable[Form]) -> list[Key]:
    found: dict[Key, None] = {}
    for one in forms:
        found |= dict.fromkeys(one.rows) | dict.fromkeys(one.marks)
    return list(found)


def _partials(forms: Iterable[Form], keys: list[Key]) -> Array:
    """(k, v) partials of some forms by the keys."""
    place = {key: n for n, key in enumerate(keys)}
    some = list(forms)
    out = np.zeros((len(some), len(keys)))
    for one, row in zip(some, out, strict=True):
        for part in (one.rows, one.marks):
            row[[place[key] for key in part]] = list(part.values())
    return out


@dataclass(frozen=True)
class Summed:
    """A misclosure that is a sum of readings: a height, or the angles of a triangle."""

    form: Form
    angle: bool
    zeniths: dict[int, float]
    """Zenith angles among its rows, radians."""

    @classmethod
    def of(cls, network: Network, form: Form, angle: bool) -> Summed:
        """With the zenith angles among its rows."""
        rows, zeniths = network.rows, {}
        for row in form.rows:
            block = network.blocks[rows.block[row]]
            if KINDS[block.kind].says == "zenith":
                zeniths[row] = float(block.values[rows.row[row], 0])
        return cls(form, angle, zeniths)

    @cached_property
    def keys(self) -> list[Key]:
        """What it depends on."""
        return _keys([self.form])

    @property
    def wraps(self) -> Bools:
        """Which of its components run round a circle."""
        return np.array([self.angle])

    def at(self, row: int, c: Array) -> tuple[Array, Array]:
        """Misclosures (m, 1) and partials (m, 1, v) with a reading smaller by each of c (m,)."""
        by = np.tile(_partials([self.form], self.keys), (len(c), 1, 1))
        mine, k = self.form.rows.get(row, 0.0), self.keys.index(row)
        if row in self.zeniths:
            z = self.zeniths[row]
            slope = -mine / math.sin(z)
            by[:, 0, k] = -slope * np.sin(z - c)
            return self.form.value - slope * (math.cos(z) - np.cos(z - c))[:, None], by
        return self.form.value - mine * c[:, None], by


@dataclass(frozen=True)
class Walk:
    """A traverse: its angular misclosure, if it has one, and the raw end of its walk."""

    traversed: Traversed
    ends: tuple[Form, ...]
    """Known coordinates at the beginning less those at the end, east and north; without directions the length of
    their line."""

    @classmethod
    def of(cls, booked: Booked, done: Traversed) -> Walk:
        """With its known ends."""
        first, last = done.traverse.stations[0], done.traverse.stations[-1]
        if done.traverse.closed:
            return cls(done, (Form(0.0), Form(0.0)))
        two = [total([booked.coordinate(first, c), booked.coordinate(last, c) * -1.0]) for c in range(2)]
        if not done.turnable:
            return cls(done, tuple(two))
        size = math.hypot(*(one.value for one in two))
        line = total([one * (one.value / size) for one in two])
        return cls(done, (Form(size, {}, line.marks),))

    @cached_property
    def _parts(self) -> list[Form]:
        done = self.traversed
        return [*done.legs, *done.booked, *self.ends, *([done.angle] if done.angle else [])]

    @cached_property
    def keys(self) -> list[Key]:
        """What it depends on."""
        return _keys(self._parts)

    @cached_property
    def _by(self) -> tuple[Array, Array, Array, Array]:
        """Partials (k, v) of legs, bearings, ends, and (1 or 0, v) of the angular misclosure."""
        done = self.traversed
        angle = [done.angle] if done.angle else []
        legs, bearings, ends, turn = (_partials(f, self.keys) for f in (done.legs, done.booked, self.ends, angle))
        return legs, bearings, ends, turn

    @property
    def wraps(self) -> Bools:
        """Which of its components run round a circle."""
        return np.array([*([True] if self.traversed.angle else []), *[False] * len(self.ends)])

    def at(self, row: int, c: Array) -> tuple[Array, Array]:
        """Misclosures (m, 1 to 3) and partials (m, 1 to 3, v) with a reading smaller by each of c (m,)."""
        k, done = self.keys.index(row), self.traversed
        legs, bearings, ends, turn = self._by
        d = np.array([f.value for f in done.legs]) - c[:, None] * legs[:, k]
        a = np.array([f.value for f in done.booked]) - c[:, None] * bearings[:, k]
        s, n = np.sin(a), np.cos(a)
        east, north = (d * s).sum(axis=1), (d * n).sum(axis=1)
        by_east, by_north = s @ legs + (d * n) @ bearings, n @ legs - (d * s) @ bearings
        if done.turnable:
            far = np.hypot(east, north)
            values = [far - self.ends[0].value]
            by = [(east / far)[:, None] * by_east + (north / far)[:, None] * by_north - ends[0]]
        else:
            values = [east + self.ends[0].value, north + self.ends[1].value]
            by = [by_east + ends[0], by_north + ends[1]]
        if done.angle:
            values = [done.angle.value - turn[0, k] * c, *values]
            by = [np.tile(turn[0], (len(c), 1)), *by]
        return np.stack(values, axis=1), np.stack(by, axis=1)


Made = Summed | Walk
"""What a closure is computed from."""
