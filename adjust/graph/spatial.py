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
from adjust.graph.parts import HEIGHT, PLANE
from adjust.graph.search import BEAMS, PLAIN, ROBUST, Solutions, fits, good_enough, searched, settled
from adjust.graph.space import Space
from adjust.graph.spacewords import flat_words, mirror_words
from adjust.graph.trilateration import grown
from adjust.graph.valley import SAME, Rest, away, rest
from adjust.network import HELD, NEW, WEIGHTED, Array, Bools, Ints, Network

STATIONS_MOST = 80
"""Time grows with their cube."""
ROUNDS, IMAGES_OF = 3, 4
"""Rounds of images, and solutions in each whose images are tried."""
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
    starts = grown(space, stations)
    if not np.isnan(guess[stations]).any():
        starts.append(np.where(known, given, guess))
    best = settled(space, free, fill, starts, ROBUST)
    if not best or not good_enough(space, free, best[0][0]):
        best = searched(space, stations, free, fill, best)
    if not best or best[0][1] > 30 * _limit(space):
        return None
    rests = _solutions(space, free, fill, stations, best)
    rests = _by_rows(rests, given, role, stations)
    first, others = rests[0], rests[1:]
    failures = flat_words(network, space, stations, free, rests)
    failures = failures or mirror_words(network, stations, first.x, [one.x for one in others])
    r = space.misfits(first.x[None], first.turn[None])[0]
    bad = np.flatnonzero(np.abs(r) > 20 * space.rough(first.x))
    return Found(first.x, tuple(failures), tuple(one.x for one in others),
                 tuple((int(space.source[k]), float(r[k])) for k in bad.tolist()))  # fmt: skip


def _solutions(space: Space, free: Ints, fill: Array, stations: Ints, best: Solutions) -> list[Rest]:
    """All that fit as well as the best, each at its minimum, the best first; images of those found are tried too."""
    plain = rest(space, best[0][0], free, PLAIN)
    robust = PLAIN if fits(space, free, plain.x, 0) and plain.cost < 2 * best[0][1] + 100 else ROBUST
    kept: list[Rest] = []
    tried: list[Rest] = []
    for _ in range(ROUNDS):
        kept = _apart(kept + [rest(space, x, free, robust) for x, _ in best], free)
        new = [one for one in kept if not any(one is other for other in tried)][:IMAGES_OF]
        if not new or not kept[0].reached:
            break  # a valley without a bottom is refused as it is
        tried += new
        best = settled(space, free, fill, [y for one in new for y in images(space, stations, one.x)], ROBUST)
    # ways along a valley that are not at its end yet say no more where two bottoms are reached; alone they stay
    bottoms = [one for one in kept if one.reached]
    return bottoms if len(bottoms) > 1 and kept[0].reached else kept


def _apart(rests: list[Rest], free: Ints) -> list[Rest]:
    """Best first, without repetitions and without what is clearly worse."""
    kept: list[Rest] = []
    for one in sorted(rests, key=lambda one: one.cost):
        if kept and worse(one.cost, kept[0].cost):
            break
        if all(away(one, other, free) > SAME for other in kept):
            kept.append(one)
    return kept[:BEAMS]


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
