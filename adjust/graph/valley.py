"""Places in space brought to the bottom of their valley, and how well its walls hold them.

Near a plane a height h changes a slope distance s by h^2/2s only, and v'Pv is no bowl but a long valley, or two beside
each other. Gauss-Newton's matrix N = A'PA knows nothing of this; the matrix of second derivatives of v'Pv / 2,

    H = A'PA + sum of P r (second derivatives of r),

does, and Newton's steps by it (with damping by the diagonal of N, Marquardt 1963) come to rest there too. H is found by
central differences of the gradient A'P r. Two places x and y are the same when they lie within a share of a standard
deviation of each other, (x - y)' N (x - y) < SAME^2, by the larger of both N. A valley is too flat to be trusted

- where along some movement u, H and N differ by more than a share: |u'H u - u'N u| > STRAINED u'N u, so that standard
  deviations by N mean nothing there, and each of Gauss-Newton's steps is that share of the last (beyond 1 it never
  settles);
- where a station's movement by one of its standard deviations bends the readings more than it moves them (BENT, as in
  adjust.solver.defects);
- where another solution lies within BESIDE standard deviations, the same valley in fact.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.graph.space import Space
from adjust.network import Array, Ints

STEPS = 120
STEP_LEAST_M = 1e-8
STEP_OF_DIFFERENCE = 1e-3
"""Metres, for a length of 100 m; radians a hundredth of it over that length. Rounding leaves 1e-13 / 1e-3 of it."""
DAMPING_MOST = 1e12
SAME, BESIDE = 0.1, 5.0
"""Standard deviations between solutions that are one, and between those that are two of the same valley: at five, the
saddle between the images of a station on one slope is 1.6 above them in v'Pv, less than its 95 % point of 3.8."""
STRAINED = 0.7
"""At which v'Pv grows by 0.3 or by 1.7 over one standard deviation in place of 1."""
BENT = 1.0
"""Second over first order of the readings at one standard deviation, as in adjust.solver.defects."""


@dataclass(frozen=True)
class Rest:
    """A minimum: places (n, 3), orientations (g,), cost, N and H (u, u) by the free unknowns; if it was reached."""

    x: Array
    turn: Array
    cost: float
    normal: Array
    hessian: Array
    reached: bool


def _gradients(space: Space, x: Array, turn: Array, free: Ints, robust: float) -> Array:
    """Gradients (S, u) of half the cost at places (S, n, 3) and orientations (S, g)."""
    r = space.misfits(x, turn) / space.sd
    pulled = r / (1 + (r / robust) ** 2) / space.sd
    return np.asarray((pulled[:, None, :] @ space.partials(x))[:, 0, free])


def _cost(space: Space, x: Array, turn: Array, robust: float) -> float:
    r = space.misfits(x[None], turn[None])[0] / space.sd
    return float((robust**2 * np.log1p((r / robust) ** 2)).sum())


def _matrices(space: Space, x: Array, turn: Array, free: Ints, robust: float) -> tuple[Array, Array]:
    """N and H (u, u)."""
    a = space.partials(x[None])[0][:, free] / space.sd[:, None]
    r = space.misfits(x[None], turn[None])[0] / space.sd
    normal = (a * (1 / (1 + (r / robust) ** 2))[:, None]).T @ a
    n, u = x.size, len(free)
    step = np.where(free < n, STEP_OF_DIFFERENCE, 1e-2 * STEP_OF_DIFFERENCE)
    moves = np.zeros((2 * u, n + space.sets))
    moves[np.arange(u), free] = step
    moves[u + np.arange(u), free] = -step
    g = _gradients(space, x + moves[:, :n].reshape(-1, *x.shape), turn + moves[:, n:], free, robust)
    hessian = (g[:u] - g[u:]) / (2 * step)[:, None]
    return normal, (hessian + hessian.T) / 2


def rest(space: Space, x: Array, free: Ints, robust: float) -> Rest:
    """The minimum that Newton's damped steps lead to from places (n, 3)."""
    x, turn, damping, n = x.copy(), space.turns(x[None])[0], 1e-6, x.size
    cost, reached = _cost(space, x, turn, robust), False
    normal, hessian = _matrices(space, x, turn, free, robust)
    for _ in range(STEPS):
        right = -_gradients(space, x[None], turn[None], free, robust)[0]
        moved = False
        while not moved and damping < DAMPING_MOST:
            step = _step(hessian, normal, damping, right)
            if step is not None:
                full = np.zeros(n + space.sets)
                full[free] = step
                tried, turned = x + full[:n].reshape(x.shape), turn + full[n:]
                after = _cost(space, tried, turned, robust)
                moved = after <= cost * (1 + 1e-13) + 1e-12
            damping = max(damping / 10, 1e-12) if moved else damping * 10
        if not moved or step is None:
            reached = bool(np.linalg.norm(right) < 1e-6)
            break
        x, turn, cost = tried, turned, after
        normal, hessian = _matrices(space, x, turn, free, robust)
        reached = float(np.abs(step).max(initial=0.0)) < STEP_LEAST_M
        if reached:
            break
    return Rest(x, turn, cost, normal, hessian, reached)


def _step(hessian: Array, normal: Array, damping: float, right: Array) -> Array | None:
    """Newton's damped step, None where the damped matrix is not positive definite."""
    from scipy.linalg import cho_factor, cho_solve  # only where heights hang on slope distances

    diagonal = np.diag(normal)
    matrix = hessian + np.diag(damping * diagonal + 1e-13 * diagonal.max(initial=1e-300))
    try:
        return np.asarray(cho_solve(cho_factor(matrix), right))
    except np.linalg.LinAlgError:
        return None


def away(a: Rest, b: Rest, free: Ints) -> float:
    """How far two minima are apart, in standard deviations of the one that is held better."""
    turned = np.remainder(a.turn - b.turn + np.pi, 2 * np.pi) - np.pi
    d = np.concatenate([(a.x - b.x).ravel(), turned])[free]
    return float(np.sqrt(max(max(d @ one.normal @ d for one in (a, b)), 0.0)))


def strain(one: Rest) -> tuple[float, Array]:
    """The largest |u'H u - u'N u| / u'N u, and the movement u (of one standard deviation) at which it is reached."""
    scale = 1 / np.sqrt(np.maximum(np.diag(one.normal), 1e-300))
    w, v = np.linalg.eigh(one.normal * scale[:, None] * scale)
    root = v / np.sqrt(np.maximum(w, 1e-13 * w.max(initial=1e-300)))
    held, u = np.linalg.eigh(root.T @ (one.hessian * scale[:, None] * scale) @ root)
    k = int(np.argmax(np.abs(held - 1)))
    return float(abs(held[k] - 1)), (root @ u[:, k]) * scale


def bend(space: Space, one: Rest, free: Ints, own: Ints) -> tuple[float, float, Array]:
    """Second over first order of the readings where a station moves by one standard deviation along its worst way.

    ``own`` are the positions of its unknowns in ``free``; also that standard deviation and the way (k,).
    """
    n = one.x.size
    a = space.partials(one.x[None])[0][:, free] / space.sd[:, None]
    scale = 1 / np.maximum(np.linalg.norm(a, axis=0), 1e-300)
    q = np.linalg.pinv((a * scale).T @ (a * scale), rcond=1e-13) * scale[:, None] * scale
    w, v = np.linalg.eigh(q[np.ix_(own, own)])
    sd = float(np.sqrt(max(w[-1], 0.0)))
    move = np.zeros(n + space.sets)
    move[free] = q[:, own] @ v[:, -1] / max(sd, 1e-12)
    there, here, back = (
        space.misfits((one.x.ravel() + t * move[:n]).reshape(1, *one.x.shape), (one.turn + t * move[n:])[None])[0]
        for t in (1.0, 0.0, -1.0)
    )
    # a part of the curve that a small shift of all takes up does not count
    curve = (there + back - 2 * here) / (2 * space.sd)
    curve = curve - a @ (q @ (a.T @ curve[:, None]))[:, 0]
    return float(np.linalg.norm(curve)), sd, v[:, -1]
