"""Starting heights: rises chained from known heights; where they misclose grossly, what most of them say."""

from __future__ import annotations

import math
from collections import deque
from dataclasses import dataclass

import numpy as np

from adjust.graph.clues import Rise
from adjust.network import Array, Bools

GROSS = 0.1
"""Metres of misclosure in a start above which the rises are weighed against each other."""
STEPS = 30
ORIGIN = 100.0
"""Height given to the first station of a piece without any known height."""


@dataclass(frozen=True)
class Heights:
    """Heights (n,), NaN where nothing is known; stations set at ORIGIN; (source, metres) of rises that disagree."""

    height: Array
    origins: tuple[int, ...]
    doubtful: tuple[tuple[int, float], ...]


def find_heights(given: Array, fixed: Bools, rises: list[Rise], asked: Bools, begin: bool = True) -> Heights:
    """Heights from the ``given`` ones (n,), of which the ``fixed`` ones stay whatever the rises say.

    Where ``begin``, a piece of the ``asked`` stations without a known height starts at ORIGIN.
    """
    height = given.copy()
    steps: list[list[tuple[int, float]]] = [[] for _ in height]
    for one in sorted(rises, key=lambda r: not r.sure):
        steps[one.i].append((one.j, one.metres))
        steps[one.j].append((one.i, -one.metres))
    origins = []
    queue = deque(np.flatnonzero(~np.isnan(height)).tolist())
    for seed in [-1, *(np.flatnonzero(asked).tolist() if begin else ())]:
        if seed >= 0 and math.isnan(height[seed]):
            height[seed] = ORIGIN
            origins.append(seed)
            queue.append(seed)
        while queue:
            i = queue.popleft()
            for j, rise in steps[i]:
                if math.isnan(height[j]):
                    height[j] = height[i] + rise
                    queue.append(j)
    if not rises or np.nanmax(np.abs(_misfit(height, rises)), initial=0.0) <= GROSS:
        return Heights(height, tuple(origins), ())
    held = fixed | np.isin(np.arange(len(height)), origins)
    height = _weighed(height, held, rises)
    away = _misfit(height, rises)
    doubtful = tuple((one.source, float(m)) for one, m in zip(rises, away, strict=True) if abs(m) > GROSS)
    return Heights(height, tuple(origins), doubtful)


def _misfit(height: Array, rises: list[Rise]) -> Array:
    i, j = np.array([r.i for r in rises]), np.array([r.j for r in rises])
    return np.asarray(height[j] - height[i] - np.array([r.metres for r in rises]))


def _weighed(height: Array, held: Bools, rises: list[Rise]) -> Array:
    """The heights of least sum of absolute misfits, by reweighting with 1/|r|: gross errors stay where they are."""
    from scipy.sparse import coo_array, csc_array, diags_array  # only where rises misclose
    from scipy.sparse.linalg import splu

    known = ~np.isnan(height)
    free = known & ~held
    number = np.full(len(height), -1, dtype=np.int64)
    number[free] = np.arange(free.sum())
    used = [r for r in rises if known[r.i] and known[r.j]]
    if not used or not free.any():
        return height
    rows, columns, signs = [], [], []
    for ends, sign in (([r.i for r in used], -1.0), ([r.j for r in used], 1.0)):
        at = number[ends]
        rows.append(np.flatnonzero(at >= 0))
        columns.append(at[at >= 0])
        signs.append(np.full(int((at >= 0).sum()), sign))
    shape = (len(used), int(free.sum()))
    a = coo_array((np.concatenate(signs), (np.concatenate(rows), np.concatenate(columns))), shape=shape).tocsc()
    height = height.copy()
    for step in range(STEPS):
        r = _misfit(height, used)
        # the first step is plain least squares: the chained heights carry the gross error along one arbitrary route
        w = 1.0 / np.maximum(np.abs(r), 1e-3) if step else np.ones(len(r))
        normal = csc_array(a.T @ diags_array(w) @ a)
        normal = csc_array(normal + diags_array(1e-12 * normal.diagonal() + 1e-300))
        try:
            height[free] += splu(normal).solve(-(a.T @ (w * r)))
        except RuntimeError:  # exactly singular: nothing to gain
            break
    return height
