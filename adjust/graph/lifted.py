"""Figures of slope distances found with more dimensions than three, and pressed flat again.

In three dimensions most places by lot are caught on the wrong side of a plane: a station cannot pass through its
neighbours' triangle without stretching its lines. With dimensions to spare it swings around, and least squares nearly
always comes to places in space + spare dimensions y that meet all lines. Then

    sum ((|x_i - x_j| - s) / w s)^2 + l^2 sum (y / w L)^2    least,    L the extent,

with l growing from nothing until y vanishes (relaxing the rank, as in semidefinite relaxations of the problem of
distances: Biswas and Ye 2004, from memory; here by least squares alone). Known coordinates stay, and the stations that
have them have no y.
"""

from __future__ import annotations

import numpy as np

from adjust.graph.space import LENGTH, RISE, SLOPE, Space
from adjust.network import Array, Bools, Ints

SPARE = 2
LOTS = 12
WORKING = 1e-2
"""Share w of lengths that counts as one."""
PRESSED = (0.0, 0.003, 0.01, 0.03, 0.1, 0.3, 1.0, 10.0)
STEPS = 10
NUMBERS_MOST = 4_000_000


def lifted(space: Space, stations: Ints, fill: Array, turn: int = 0) -> list[Array]:
    """Places (n, 3) by lot in 3 + SPARE dimensions, pressed into space."""
    rows = np.isin(space.sort, (SLOPE, LENGTH, RISE))
    if not (space.sort == SLOPE).any():
        return []
    number = np.full(len(space.known), -1)
    number[stations] = np.arange(len(stations))
    i, j = number[space.i[rows]], number[space.j[rows]]
    known = space.known[stations]
    still = np.concatenate([known, np.repeat(known[:, :2].all(axis=1, keepdims=True), SPARE, axis=1)], axis=1)
    size = max(float(np.ptp(fill[stations], axis=0).max()), float(np.median(space.value[rows])))
    rng = np.random.default_rng([9, len(stations), turn])
    lots = max(1, min(LOTS, NUMBERS_MOST // (len(i) * still.size)))
    x = np.zeros((lots, len(stations), 3 + SPARE))
    x[..., :3] = fill[stations]
    x += np.where(still, 0.0, size * rng.normal(size=x.shape))
    lines = _Lines(i, j, space.value[rows], space.up[rows], space.sort[rows] == RISE, space.sort[rows] == LENGTH)
    for press in PRESSED:
        x = lines.pressed(x, still, press, size)
    out = np.repeat(fill[None], lots, axis=0)
    out[:, stations] = np.where(known, space.given[stations], x[..., :3])
    return list(out)


class _Lines:
    """Slope distances, lengths in the plane and rises between stations in 3 + SPARE dimensions."""

    def __init__(self, i: Ints, j: Ints, value: Array, up: Array, rise: Bools, level: Bools) -> None:
        self.i, self.j, self.value, self.up, self.rise = i, j, value, up, rise
        # what a line sees of each dimension: rises the height alone, lengths all but the height
        self.sees = np.ones((len(i), 3 + SPARE))
        self.sees[rise] = [0, 0, 1, *[0] * SPARE]
        self.sees[level, 2] = 0.0
        self.w = WORKING * np.where(rise, np.median(value[~rise]), np.maximum(value, 1e-3))

    def misfits(self, x: Array) -> tuple[Array, Array]:
        """Misfits (S, R) in working sizes and their partials (S, R, 3 + SPARE) by the far end."""
        d = (x[:, self.j] - x[:, self.i]) * self.sees
        d[..., 2] -= np.where(self.rise, 0.0, self.up)
        far = np.maximum(np.sqrt((d**2).sum(axis=2)), 1e-9)
        r = np.where(self.rise, d[..., 2], far) - self.value
        by = np.where(self.rise[:, None], self.sees, d / far[..., None])
        return r / self.w, by / self.w[:, None]

    def pressed(self, x: Array, still: Bools, press: float, size: float) -> Array:
        """Places (S, n, d) after damped steps with the spare dimensions pressed."""
        free = np.flatnonzero(~still.ravel())
        spare = np.flatnonzero(free % still.shape[1] >= 3)
        weight, damping = (press / WORKING / size) ** 2, np.full(len(x), 1e-2)

        def cost_of(x: Array) -> Array:
            return np.asarray((self.misfits(x)[0] ** 2).sum(axis=1) + weight * (x[..., 3:] ** 2).sum(axis=(1, 2)))

        cost, d, rows = cost_of(x), still.shape[1], np.arange(len(self.i))
        for _ in range(STEPS):
            r, by = self.misfits(x)
            a = np.zeros((len(x), len(rows), still.size))
            for c in range(d):
                a[:, rows, d * self.i + c] -= by[..., c]
                a[:, rows, d * self.j + c] += by[..., c]
            a = a[:, :, free]
            normal = a.transpose(0, 2, 1) @ a
            right = (r[:, None, :] @ a)[:, 0]
            flat = x.reshape(len(x), -1)[:, free]
            normal[:, spare, spare] += weight
            right[:, spare] += weight * flat[:, spare]
            diagonal = np.einsum("suu->su", normal)
            extra = damping[:, None] * (diagonal + 1e-3 * diagonal.mean(axis=1, keepdims=True))
            step = np.linalg.solve(normal + extra[:, :, None] * np.eye(len(free)), right[:, :, None])[:, :, 0]
            tried = x.reshape(len(x), -1).copy()
            tried[:, free] -= step
            moved = tried.reshape(x.shape)
            after = cost_of(moved)
            better = after < cost
            x, cost = np.where(better[:, None, None], moved, x), np.where(better, after, cost)
            damping = np.clip(np.where(better, damping / 5, damping * 4), 1e-8, 1e8)
        return x
