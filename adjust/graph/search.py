"""Places in space where trilateration does not lead: many starts, damped least squares, and jumps from the best.

Starts are places in more dimensions pressed into space (adjust.graph.lifted), the figure of the slope distances alone,
and places by lot. The figure: the shortest ways between stations stand for the distances that were not measured,
classical scaling turns them into places (Torgerson 1952; shortest ways: Shang and others 2003; both from memory), and
the figure and its mirror image are brought onto what is known.

In a thin network each of them is caught in some fold: a station, or a body of stations, on the wrong side of others.
From the best places so far all jumps are tried, adjusted, and the best of all that came out goes on (as in basin
hopping, Wales and Doye 1997, from memory, without its lots): a station to where its own readings meet, or beyond the
line or plane of its neighbours, a body beyond its hinge (adjust.graph.images).
"""

from __future__ import annotations

import numpy as np

from adjust.graph.fine import worse
from adjust.graph.images import images, neighbours, upright
from adjust.graph.lifted import lifted
from adjust.graph.space import SLOPE, Space
from adjust.graph.spheres import places
from adjust.graph.trilateration import loci_of, orientations, ties
from adjust.network import Array, Ints

BEAMS, LOTS, POSES = 8, 32, 8
POOL, HOPS, NEW_OF_HOP = 8, 12, 4
STEPS_OF_HOP, MORE_OF_HOP = 20, 12
TURNS, TURNS_CLEAN = 5, 2
"""Turns with fresh lots, and how many of them go on where all readings but one fit."""
WORK_MOST = 5e8
"""Starts times the cube of unknowns: some 4,000 starts of 50 unknowns, about 20 s."""
BRACED = 0.7
"""Degrees of freedom for each unknown from which one reading left out lets no wrong figure fit."""
NUMBERS_MOST = 8_000_000
ROBUST, PLAIN = 3.0, 1e6
APART = 1e-4
"""Share of the extent by which two solutions differ at least."""
ALIKE = 1e-3
"""Share of the cost within which two places are taken for images of each other, of which one is enough to jump from."""
Solutions = list[tuple[Array, float]]


def fits(space: Space, free: Ints, x: Array, without: int) -> bool:
    """Whether the readings but for the worst ones fit as sound ones would: chi-square's mean and five of its sd."""
    r = space.misfits(x[None], space.turns(x[None]))[0] / space.sd
    each = np.sort(ROBUST**2 * np.log1p((r / ROBUST) ** 2))
    spare = max(len(r) - len(free), 0)
    return bool(each[: len(each) - without].sum() < spare + 5 * np.sqrt(2 * spare) + 2)


def good_enough(space: Space, free: Ints, x: Array) -> bool:
    """Whether places need no search: all readings fit, or all but one where the others are well braced.

    In a thin network one reading left out may let a wrong figure fit.
    """
    braced = len(space.sort) - len(free) >= BRACED * len(free)
    return fits(space, free, x, 1 if braced else 0)


def searched(space: Space, stations: Ints, free: Ints, fill: Array, first: Solutions) -> Solutions:
    """The best places that starts of all sorts and jumps lead to, ``first`` (places, cost) among them."""
    every, work, each = first, 0.0, float(len(free) ** 3)
    for turn in range(TURNS):
        starts = [*lifted(space, stations, fill, turn), *_by_lot(space, stations, fill, turn)]
        starts += [] if turn else _figures(space, stations, fill)
        pool, done = _varied((every if turn == 0 else []) + _adjusted(space, free, fill, starts, PLAIN)), list[float]()
        work += len(starts) * each
        while len(done) < HOPS and work < WORK_MOST and pool and not fits(space, free, pool[0][0], 0):
            todo = [one for one in pool if one[1] not in done]
            if not todo:
                break
            done.append(todo[0][1])
            jumps = _jumps(space, stations, todo[0][0])
            work += len(jumps) * each
            pool = _varied(pool + _varied(_after_jumps(space, free, jumps))[:NEW_OF_HOP])
        every = sorted([*every, *pool], key=lambda one: one[1])
        if work > WORK_MOST or (every and fits(space, free, every[0][0], 0 if turn < TURNS_CLEAN - 1 else 1)):
            break
    return _distinct(every, stations)


def _after_jumps(space: Space, free: Ints, jumps: list[Array]) -> Solutions:
    """Adjusted places after jumps: few steps for all of them, more for the best that differ."""
    found: Solutions = []
    side = max(1, NUMBERS_MOST // (len(space.sort) * len(free)))
    for k in range(0, len(jumps), side):
        x = np.array(jumps[k : k + side])
        x, cost = space.settled(x, free, space.rough(x[0]), ROBUST, STEPS_OF_HOP)
        found += [(one, float(c)) for one, c in zip(x, cost, strict=True)]
    x = np.array([one for one, _ in _varied(found, MORE_OF_HOP)])
    x, cost = space.settled(x, free, space.sd, ROBUST)
    return [(one, float(c)) for one, c in zip(x, cost, strict=True)]


def _varied(found: Solutions, most: int = POOL) -> Solutions:
    """The best of each cost."""
    kept: Solutions = []
    for x, cost in sorted((one for one in found if np.isfinite(one[1])), key=lambda one: one[1]):
        if all(abs(cost - other) > ALIKE * cost for _, other in kept):
            kept.append((x, cost))
    return kept[:most]


def _jumps(space: Space, stations: Ints, x: Array) -> list[Array]:
    """Places (n, 3) with a station or a body moved to where it may belong."""
    out, near = [], ties(space)
    size = float(np.ptp(x[stations], axis=0).max())
    for s in stations[~space.known[stations].all(axis=1)].tolist():
        others = neighbours(space, s)
        placed = {o: x[o] for o in others.tolist()}
        loci = loci_of(space, near.get(s, []), s, placed, orientations(space, placed))
        for place, _ in places(loci) if len(loci) > 2 else []:
            if np.abs(place - x[s]).max() > APART * size:
                out.append(x.copy())
                out[-1][s] = place
        if len(others) > 1:
            out.append(upright(x, np.array([s]), x[others]))
    return out + images(space, stations, x)


def settled(space: Space, free: Ints, fill: Array, starts: list[Array], robust: float) -> Solutions:
    """The distinct adjusted places of least cost, those that fit equally well; ``robust`` in the first round."""
    return _distinct(_adjusted(space, free, fill, starts, robust), np.unique(np.concatenate([space.i, space.j])))


def _adjusted(space: Space, free: Ints, fill: Array, starts: list[Array], robust: float) -> Solutions:
    """Adjusted places and costs, one for each start."""
    found: Solutions = []
    side = max(1, min(32, NUMBERS_MOST // (len(space.sort) * len(free))))
    for k in range(0, len(starts), side):
        x = np.array([np.where(np.isnan(one) | space.known, fill, one) for one in starts[k : k + side]])
        x, _ = space.settled(x, free, space.rough(x[0]), robust)
        x, cost = space.settled(x, free, space.sd, ROBUST)
        found += [(one, float(c)) for one, c in zip(x, cost, strict=True)]
    return found


def _distinct(found: Solutions, stations: Ints) -> Solutions:
    """Best first, without repetitions and without what is clearly worse."""
    kept: Solutions = []
    for x, cost in sorted(found, key=lambda one: one[1]):
        if not np.isfinite(cost) or (kept and worse(cost, kept[0][1])):
            break
        size = float(np.ptp(x[stations], axis=0).max())
        if all(np.abs(x[stations] - y[stations]).max() > APART * size for y, _ in kept):
            kept.append((x, cost))
    return kept[:BEAMS]


def _figures(space: Space, stations: Ints, fill: Array) -> list[Array]:
    """The figure of the slope distances, and its mirror image, brought onto the known components in several ways."""
    from scipy.optimize import least_squares  # only where trilateration does not reach
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import shortest_path
    from scipy.spatial.transform import Rotation

    lines = space.sort == SLOPE
    number = np.full(len(space.known), -1)
    number[stations] = np.arange(len(stations))
    n = len(stations)
    least: dict[tuple[int, int], float] = {}
    for i, j, v in zip(number[space.i[lines]].tolist(), number[space.j[lines]].tolist(),
                       space.value[lines].tolist(), strict=True):  # fmt: skip
        least[min(i, j), max(i, j)] = v
    if not least:
        return []
    ends = np.array(list(least))
    far = shortest_path(coo_array((list(least.values()), ends.T), shape=(n, n)).tocsr(), directed=False)
    if not np.isfinite(far).all():
        return []
    centring = np.eye(n) - 1.0 / n
    w, v = np.linalg.eigh(-centring @ far**2 @ centring / 2)
    figure = v[:, -3:] * np.sqrt(np.maximum(w[-3:], 0.0))
    alone = Space(**{**vars(space), "known": np.zeros_like(space.known)})
    keep = lines
    for name in ("sort", "i", "j", "value", "up", "over", "sd", "of_set", "source"):
        setattr(alone, name, getattr(space, name)[keep])
    alone.sets, alone.plane = 0, 0.0
    x = np.zeros((1, *space.known.shape))
    x[0, stations] = figure
    x, _ = alone.settled(x, alone.free(stations), alone.rough(x[0]), PLAIN)
    figure = x[0, stations] - x[0, stations].mean(axis=0)
    known, given = space.known[stations], space.given[stations]
    middle = np.array([given[known[:, c], c].mean() for c in range(3)])
    out = []
    for k, turned in enumerate(Rotation.random(2 * POSES, random_state=4)):
        mirrored = figure * (np.array([1.0, 1, -1]) if k % 2 else 1.0)

        def posed(p: Array, shape: Array = mirrored) -> Array:
            return np.asarray(Rotation.from_rotvec(p[:3]).apply(shape) + middle + p[3:])

        def off(p: Array, shape: Array = mirrored) -> Array:
            return np.asarray((posed(p, shape) - given)[known])

        if known.sum() < 4:
            break
        p = least_squares(off, np.concatenate([turned.as_rotvec(), np.zeros(3)])).x
        one = np.full(space.known.shape, np.nan)
        one[stations] = np.where(known, given, posed(p))
        out.append(one)
    return out


def _by_lot(space: Space, stations: Ints, fill: Array, turn: int) -> list[Array]:
    """Places by lot within the reach of the readings."""
    rng = np.random.default_rng([7, len(stations), turn])
    lengths = space.value[space.sort == SLOPE]
    size = max(float(np.ptp(fill[stations], axis=0).max()), float(lengths.max(initial=1.0)))
    spread = size * np.array([0.6, 0.6, 0.25])
    return [np.where(space.known, space.given, fill + spread * rng.normal(size=fill.shape)) for _ in range(LOTS)]
