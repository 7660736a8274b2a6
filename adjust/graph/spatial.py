"""Starting places of stations whose heights follow from slope distances: what plane and heights apart cannot give.

1. Trilateration in space: from the stations that are known a station is placed on three of its spheres and planes
   (adjust.graph.spheres); of two points that fit equally both are followed.
2. Where that does not reach all, the figure of the slope distances alone: the shortest ways between stations stand for
   the distances that were not measured, classical scaling turns them into places (Torgerson 1952; shortest ways: Shang
   and others 2003; both from memory), and the figure and its mirror image are brought onto what is known; then places
   by lot.
3. All of them are adjusted by damped least squares, first as shares of the lengths, then by standard deviations.
4. Images are looked for in the best one: all new stations beyond the plane of the known ones, each one beyond the plane
   of its neighbours. What cannot be told apart is said, and so is a height fixed only just.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.frames import LocalPlane
from adjust.graph.clues import Clues
from adjust.graph.fine import worse
from adjust.graph.images import images
from adjust.graph.lifted import lifted
from adjust.graph.parts import HEIGHT, PLANE, listed
from adjust.graph.space import POINTING, RISE, SLOPE, Space
from adjust.graph.spheres import Locus, Plane, Sphere, places
from adjust.graph.valley import BENT, BESIDE, HOLD, SAME, Rest, away, bend, rest, softest
from adjust.network import HELD, NEW, WEIGHTED, Array, Bools, Ints, Network

STATIONS_MOST = 80
"""Time grows with their cube."""
BEAMS, LOTS, POSES = 8, 32, 8
NUMBERS_MOST = 8_000_000
ROBUST, PLAIN = 3.0, 1e6
GROSS_SD = 20.0
"""Standard deviations from which a reading counts as gross and solutions are compared with damped misfits."""
ROUNDS, IMAGES_OF = 3, 4
"""Rounds of images, and solutions in each whose images are tried."""
APART = 1e-4
"""Share of the extent by which two solutions differ at least."""
RANK_LEAST = 1e-7


@dataclass(frozen=True)
class Found:
    """Places (n, 3) of the stations of a part, sentences of failure, other solutions (n, 3)."""

    x: Array
    failures: tuple[str, ...]
    mirrors: tuple[Array, ...]
    misfits: tuple[tuple[int, float], ...]


def place_in_space(network: Network, clues: Clues, nodes: Bools, guess: Array,
                   plane_height: float | None = None) -> Found | None:  # fmt: skip
    """Places of the part with ``nodes`` (n, 2), or None where the readings do not fix it or nothing fits.

    ``guess`` (n, 3) are places found otherwise, NaN where none; ``plane_height`` as the job says, None by its heights.
    """
    stations = np.flatnonzero(nodes[:, PLANE] & nodes[:, HEIGHT])
    role, given = network.stations.role, network.stations.start
    known = ((role == HELD) | (role == WEIGHTED)) & ~np.isnan(given)
    if len(stations) > STATIONS_MOST or not known[stations].any(axis=0).all():
        return None
    plane = LocalPlane.of(network.stations, plane_height).plane_height
    space = Space.of(clues, set(stations.tolist()), given, known, plane)
    free = space.free(stations)
    fill = _filled(stations, given, known)
    if not len(free) or not _determined(space, fill, free):
        return None
    starts = _grown(space, stations)
    if not np.isnan(guess[stations]).any():
        starts.append(np.where(known, given, guess))
    best = _best(space, free, fill, starts, ROBUST)
    for more in (lifted, _figures, _by_lot):
        if not best or not _fits(space, free, best[0][0]):
            best = _distinct(best + _best(space, free, fill, more(space, stations, fill), PLAIN), stations)
    if not best or best[0][1] > 30 * _limit(space):
        return None
    rests = _solutions(space, free, fill, stations, best)
    rests = _by_rows(rests, given, role, stations)
    first, others = rests[0], rests[1:]
    failures = _flat_words(network, space, stations, free, rests)
    failures = failures or mirror_words(network, stations, first.x, [one.x for one in others])
    r = space.misfits(first.x[None], first.turn[None])[0]
    bad = np.flatnonzero(np.abs(r) > 20 * space.rough(first.x))
    return Found(first.x, tuple(failures), tuple(one.x for one in others),
                 tuple((int(space.source[k]), float(r[k])) for k in bad.tolist()))  # fmt: skip


def _solutions(space: Space, free: Ints, fill: Array, stations: Ints, best: Solutions) -> list[Rest]:
    """All that fit as well as the best, each at its minimum, the best first; images of those found are tried too."""
    r = space.misfits(best[0][0][None], space.turns(best[0][0][None]))[0] / space.sd
    robust = PLAIN if np.abs(r).max() < GROSS_SD else ROBUST
    kept: list[Rest] = []
    tried: list[Rest] = []
    for _ in range(ROUNDS):
        kept = _apart(kept + [rest(space, x, free, robust) for x, _ in best], free)
        new = [one for one in kept if not any(one is other for other in tried)][:IMAGES_OF]
        if not new:
            break
        tried += new
        best = _best(space, free, fill, [y for one in new for y in images(space, stations, one.x)], ROBUST)
    return kept


def _apart(rests: list[Rest], free: Ints) -> list[Rest]:
    """Best first, without repetitions and without what is clearly worse."""
    kept: list[Rest] = []
    for one in sorted(rests, key=lambda one: one.cost):
        if kept and worse(one.cost, kept[0].cost):
            break
        if all(away(one, other, free) > SAME for other in kept):
            kept.append(one)
    return kept[:BEAMS]


def _fits(space: Space, free: Ints, x: Array) -> bool:
    """Whether the readings but for the worst one fit as sound ones would: chi-square's mean and seven times its root."""
    r = space.misfits(x[None], space.turns(x[None]))[0] / space.sd
    each = ROBUST**2 * np.log1p((r / ROBUST) ** 2)
    spare = max(len(r) - len(free), 0)
    return float(each.sum() - each.max()) < spare + 7 * np.sqrt(2 * spare) + 10


def _filled(stations: Ints, given: Array, known: Bools) -> Array:
    """Places (n, 3) with every unknown component in the middle of the known ones: what does not matter."""
    middle = np.array([given[known[:, c], c].mean() if known[:, c].any() else 0.0 for c in range(3)])
    return np.where(known, given, middle)


def _limit(space: Space) -> float:
    """Damped sum of squares up to which places fit, one gross error among them (it costs 150 at 1e4 sd)."""
    return 10.0 * len(space.sort) + 300.0


def _determined(space: Space, fill: Array, free: Ints) -> bool:
    """Whether the readings fix everything at places by lot, and so almost everywhere."""
    rng = np.random.default_rng(3)
    size = float(np.ptp(fill, axis=0).max()) or 100.0
    x = np.where(space.known, fill, fill + size * rng.normal(size=fill.shape))
    a = space.partials(x[None])[0][:, free] / space.rough(x)[:, None]
    if len(a) < len(free):
        return False
    a = a / np.maximum(np.linalg.norm(a, axis=0), 1e-300)
    return float(np.linalg.svd(a, compute_uv=False)[-1]) > RANK_LEAST


Solutions = list[tuple[Array, float]]


def _best(space: Space, free: Ints, fill: Array, starts: list[Array], robust: float) -> Solutions:
    """The distinct adjusted places of least cost, those that fit equally well; ``robust`` in the first round."""
    found: Solutions = []
    if not starts:
        return found
    side = max(1, min(32, NUMBERS_MOST // (len(space.sort) * len(free))))
    for k in range(0, len(starts), side):
        x = np.array([np.where(np.isnan(one), fill, one) for one in starts[k : k + side]])
        x, _ = space.settled(x, free, space.rough(x[0]), robust)
        x, cost = space.settled(x, free, space.sd, ROBUST)
        found += [(one, float(c)) for one, c in zip(x, cost, strict=True)]
    return _distinct(found, np.unique(np.concatenate([space.i, space.j])))


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


def _grown(space: Space, stations: Ints) -> list[Array]:
    """Places (n, 3), NaN where not reached, by trilateration from the known stations; all that fit equally."""
    full = {s: space.given[s] for s in stations.tolist() if space.known[s].all()}
    beams: list[tuple[dict[int, Array], float]] = [(full, 0.0)]
    near = _ties(space)
    while True:
        after: list[tuple[dict[int, Array], float]] = []
        moved = False
        for placed, cost in beams:
            step = _next(space, near, placed, stations)
            if step is None:
                after.append((placed, cost))
                continue
            moved = True
            after += [({**placed, step[0]: x}, cost + c) for x, c in step[1]]
        beams = sorted(after, key=lambda b: (-len(b[0]), b[1]))[:BEAMS]
        if not moved:
            break
    most = len(beams[0][0])
    if most < len(stations):
        return []
    out = []
    for placed, _ in beams:
        if len(placed) == most:
            x = np.full(space.given.shape, np.nan)
            for s, place in placed.items():
                x[s] = place
            out.append(x)
    return out


def _ties(space: Space) -> dict[int, list[int]]:
    """Rows that touch each station."""
    near: dict[int, list[int]] = {}
    for row, (i, j) in enumerate(zip(space.i.tolist(), space.j.tolist(), strict=True)):
        near.setdefault(i, []).append(row)
        near.setdefault(j, []).append(row)
    return near


def _next(space: Space, near: dict[int, list[int]], placed: dict[int, Array],
          stations: Ints) -> tuple[int, Solutions] | None:  # fmt: skip
    """The next station to place and its equal places: first one with a check, last one that forks."""
    turn = _orientations(space, placed)
    left = [(s, _loci(space, near.get(s, []), s, placed, turn)) for s in stations.tolist() if s not in placed]
    fork: tuple[int, Solutions] | None = None
    # those with most to check them first; the first that stands alone goes
    for s, loci in sorted(left, key=lambda one: -len(one[1])):
        found = places(loci) if len(loci) > 2 else []
        if len(found) == 1 and len(loci) > 3:
            return s, found
        if found and (fork is None or len(found) < len(fork[1])):
            fork = s, found
    return fork


def _orientations(space: Space, placed: dict[int, Array]) -> dict[int, float]:
    """Orientations of the sets with a placed line; north is set -1."""
    turn = {-1: 0.0}
    for row in np.flatnonzero(space.sort == POINTING).tolist():
        i, j, one = int(space.i[row]), int(space.j[row]), int(space.of_set[row])
        if one not in turn and i in placed and j in placed:
            d = placed[j] - placed[i]
            turn[one] = float(np.arctan2(d[0], d[1]) - space.value[row])
    return turn


def _loci(space: Space, rows: list[int], s: int, placed: dict[int, Array], turn: dict[int, float]) -> list[Locus]:
    """Spheres and planes on which a station lies."""
    out: list[Locus] = [Plane(np.eye(3)[c], float(space.given[s, c])) for c in range(3) if space.known[s, c]]
    for row in rows:
        i, j, value = int(space.i[row]), int(space.j[row]), float(space.value[row])
        other, sense = (i, 1.0) if j == s else (j, -1.0)
        if other not in placed:
            continue
        if space.sort[row] == SLOPE:
            out.append(Sphere(placed[other] + np.array([0, 0, sense * space.up[row]]), value))
        elif space.sort[row] == RISE:
            out.append(Plane(np.array([0.0, 0, 1]), float(placed[other][2]) + sense * value))
        elif space.sort[row] == POINTING and int(space.of_set[row]) in turn:
            a = turn[int(space.of_set[row])] + value
            normal = np.array([np.cos(a), -np.sin(a), 0.0])
            out.append(Plane(normal, float(normal @ placed[other])))
    return out


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
    for name in ("sort", "i", "j", "value", "up", "sd", "of_set", "source"):
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


def _by_lot(space: Space, stations: Ints, fill: Array) -> list[Array]:
    """Places by lot within the reach of the readings."""
    rng = np.random.default_rng([7, len(stations)])
    lengths = space.value[space.sort == SLOPE]
    size = max(float(np.ptp(fill[stations], axis=0).max()), float(lengths.max(initial=1.0)))
    spread = size * np.array([0.6, 0.6, 0.25])
    return [np.where(space.known, space.given, fill + spread * rng.normal(size=fill.shape)) for _ in range(LOTS)]


def _by_rows(rests: list[Rest], given: Array, role: Ints, stations: Ints) -> list[Rest]:
    """The solutions, of which `stations` rows decide where one lies twice as near to them as the others."""
    rows = (role == NEW) & ~np.isnan(given)
    rows[np.setdiff1d(np.arange(len(given)), stations)] = False
    moving = np.zeros_like(rows)
    for one in rests[1:]:
        moving |= np.abs(one.x - rests[0].x) > 1e-6
    if len(rests) < 2 or not (rows & moving).any():
        return rests
    far = [float(np.abs((one.x - given)[rows]).sum()) for one in rests]
    order = np.argsort(far, kind="stable")
    first = far[order[0]]
    return [rests[k] for k in order.tolist() if far[k] < 2 * first or k == order[0]]


def mirror_words(network: Network, stations: Ints, x: Array, others: list[Array]) -> list[str]:
    """A sentence for every other solution."""
    out = []
    size = float(np.ptp(x[stations], axis=0).max())
    for y in others[:3]:
        moved = stations[np.abs(x[stations] - y[stations]).max(axis=1) > APART * size]
        s = int(moved[np.argmax(np.abs(x[moved] - y[moved]).max(axis=1))])
        name, who = network.stations.names[s], listed(network, moved, 8)
        a, b = (f"{z[s, 0]:.3f}, {z[s, 1]:.3f}, {z[s, 2]:.3f}" for z in (x, y))
        their = "its mirror image" if len(moved) == 1 else "their mirror images"
        out.append(
            f"{who} and {their} fit all readings equally well: {name} can stand at {a} or at {b} (metres east, north, "
            f"height); a row for {name} in stations.csv near the right place, or one more reading that tells them "
            "apart (a levelled line or a zenith angle), settles it"
        )
    return out


def _flat_words(network: Network, space: Space, stations: Ints, free: Ints, rests: list[Rest]) -> list[str]:
    """Stations whose place the readings fix only just (adjust.graph.valley)."""
    first, n = rests[0], 3 * len(space.known)
    found: dict[int, float] = {}
    for s in stations.tolist():
        own = np.flatnonzero((free < n) & (free // 3 == s))
        bent, sd, _ = bend(space, first, free, own) if len(own) else (0.0, 0.0, 0.0)
        if bent > BENT:
            found[s] = sd
    held, move = softest(first)
    if held < HOLD:
        found |= _most_moved(move, free, n, found)
    for other in rests[1:]:
        if away(first, other, free) < BESIDE:
            found |= _most_moved((other.x - first.x).ravel()[free[free < n]], free[free < n], n, found)
    out = []
    for s, sd in found.items():
        own = free[(free < n) & (free // 3 == s)]
        way = "up and down" if (own % 3 == 2).any() else "in one direction"
        out.append(
            f"{network.stations.names[s]} is fixed only just: it lies nearly in one plane with the stations that its "
            f"slope distances run to, which leave it {sd:.2f} m of play {way}; level to it or measure a zenith angle, "
            "or give its height"
        )
    return out


def _most_moved(move: Array, free: Ints, n: int, found: dict[int, float]) -> dict[int, float]:
    """The station that a movement (u,) of the free unknowns moves most, and how far; none if it is found already."""
    moved = np.zeros(n)
    moved[free[free < n]] = np.abs(move[free < n])
    s = int(np.argmax(moved)) // 3
    return {} if s in found else {s: float(moved.max())}
