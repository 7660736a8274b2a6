"""Places of one part of the network in the plane, built with care: all constructions, groups, mirrors, blunders.

Everything grows from what is known; what is not reached grows in groups of its own, which are joined by similarity.
If readings then misfit grossly, the construction may rest on one of them: it is built again without each of the
readings that no other confirmed when it was used, and the places that most readings agree on are kept.
"""

from __future__ import annotations

import cmath
from dataclasses import dataclass, replace

import numpy as np

from adjust.graph.agreement import AGREES
from adjust.graph.closure import KNOT_MOST, close_knot, find_knot, loosened
from adjust.graph.clues import Clues, Index, Places
from adjust.graph.grow import Group, follow, put
from adjust.graph.hinge import hinged
from adjust.graph.join import best_move, join, local_groups
from adjust.graph.misfit import Misfits
from adjust.graph.places import CLEARLY, ties, voters
from adjust.graph.polish import polished
from adjust.network import Ints

WORK_MOST = 60_000
"""Clues times trials without one reading, at most: bounds the time at about a second."""
TRIALS_MOST = 120
MISSING = 40.0
"""Cost of a station that is not placed: more than two readings that misfit."""
ROUGH = 0.003
"""Misfit above which places are polished."""


@dataclass(frozen=True)
class Mirror:
    """Two equal places of some stations."""

    stations: tuple[int, ...]
    here: tuple[complex, ...]
    there: tuple[complex, ...]


@dataclass(frozen=True)
class Built:
    """Places (n,) complex of a part, NaN where not reached, in the frame of the known stations if there are any."""

    z: Places
    mirrors: tuple[Mirror, ...]
    weak: tuple[int, ...]
    cost: float
    scaled: bool
    oriented: bool
    """Whether north is that of azimuths or of known stations."""


def build(clues: Clues, stations: Ints, known: dict[int, complex], rows: dict[int, complex]) -> Built:
    """Places of the ``stations`` of one part from the ``known`` ones; ``rows`` decide between mirror images."""
    misfits = Misfits(clues)
    first = _once(clues, misfits, stations, known, rows, frozenset())
    if np.isnan(first.z[stations]).any():
        first = _once(clues, misfits, stations, known, rows, frozenset(), knots=True)
    best = _polish(clues, misfits, known, first)
    if len(bad_sources(misfits, best.z)) > 1 or _crowded(clues, best.z, stations):
        better = _without_one(clues, misfits, stations, known, rows, first)
        best = _polish(clues, misfits, known, better) if better is not first else best
    return _weighed(misfits, known, best) if best.mirrors else best


def _crowded(clues: Clues, z: Places, stations: Ints) -> list[int]:
    """Readings of stations that are not placed though three or more readings lead there: they may contradict."""
    missing = set(stations[np.isnan(z[stations])].tolist())
    found: dict[int, list[int]] = {}
    if missing:
        ends = [(c.i, c.j, c.source) for c in clues.lengths] + [(p.at, p.to, p.source) for p in clues.pointings]
        for i, j, source in ends:
            for one, other in ((i, j), (j, i)):
                if one in missing and other not in missing:
                    found.setdefault(one, []).append(source)
    return [source for sources in found.values() if len(sources) > 2 for source in sources]


def _weighed(misfits: Misfits, known: dict[int, complex], built: Built) -> Built:
    """The mirrors that are left when both solutions are polished: still apart, and still equal."""
    from adjust.graph.fine import Fine, worse  # only where two solutions are to be told apart

    fixed = frozenset(known)
    fine = Fine(misfits, fixed, len(built.z))
    z, best = fine.adjusted(polished(misfits, built.z, fixed))
    others: list[tuple[Places, float]] = []
    # the images of many stations first: they are images of the places as they were found
    for mirror in sorted(built.mirrors, key=lambda m: -len(m.stations)):
        other = built.z.copy()
        other[list(mirror.stations)] = mirror.there
        others.append(fine.adjusted(polished(misfits, other, fixed)))
        if others[-1][1] < best and worse(best, others[-1][1]):
            (z, best), others[-1] = others[-1], (z, best)
    left: list[Mirror] = []
    for other, cost in others:
        still = None if worse(cost, best) else _mirror(misfits, z, other)
        if still is not None and not any(_alike(still, one) for one in left):
            left.append(still)
    return replace(built, z=z, mirrors=tuple(left))


def _alike(a: Mirror, b: Mirror) -> bool:
    size = max(map(abs, a.there))
    return a.stations == b.stations and bool(np.abs(np.subtract(a.there, b.there)).max() < 1e-3 * size)


def bad_sources(misfits: Misfits, z: Places) -> list[int]:
    """Readings that misfit grossly, the worst first."""
    with np.errstate(invalid="ignore"):
        m = np.abs(misfits.all(z))
    m = np.where(np.isfinite(m), m, 0.0)
    order = np.argsort(-m, kind="stable")
    return list(dict.fromkeys(misfits.source[order[m[order] > AGREES]].tolist()))


def _once(clues: Clues, misfits: Misfits, stations: Ints, known: dict[int, complex], rows: dict[int, complex],
          without: frozenset[int], knots: bool = False) -> Built:  # fmt: skip
    """One construction without some readings; ``knots``: stations that are fixed only together are sought too."""
    index = Index(clues, without)
    alternatives = _groups(index, stations.tolist(), known, knots)
    done = [_finished(index, group) for group in alternatives] or [(Group(dict(known)), [])]
    places = [_array(clues, group) for group, _ in done]
    costs = [misfits.cost(z) for z in places]
    first = min(range(len(done)), key=lambda k: (-len(done[k][0].at), costs[k]))
    group, leaves = done[first]
    z = places[first]
    mirrors = [Mirror((s,), (z[s],), (z[s] + (b - a) * _back(clues, group),)) for s, a, b in leaves]
    for k, other in enumerate(places):
        if k != first and costs[k] < costs[first] + CLEARLY and len(done[k][0].at) == len(group.at):
            mirror = _mirror(misfits, z, other)
            if mirror is not None:
                mirrors.append(mirror)
    z, mirrors = _by_rows(z, mirrors, known, rows)
    missing = int(np.isnan(z[stations]).sum())
    oriented = bool(known) or clues.north in group.turn
    return Built(z, tuple(mirrors), tuple(group.weak), misfits.cost(z) + MISSING * missing, group.scaled, oriented)


def _array(clues: Clues, group: Group) -> Places:
    """Places (n,) complex, turned to the north of the azimuths where the group has some."""
    z = np.full(len(clues.network.stations), complex(np.nan, np.nan))
    # azimuth = reading + turn in the group's frame; a complex factor turns against the azimuths
    back = _back(clues, group)
    for i, place in group.at.items():
        z[i] = place * back
    return z


def _back(clues: Clues, group: Group) -> complex:
    """The factor that turns a group to the north of its azimuths."""
    return cmath.rect(1.0, group.turn.get(clues.north, 0.0))


def _groups(index: Index, stations: list[int], known: dict[int, complex], knots: bool) -> list[Group]:
    """The equal groups that hold most: the known stations' one, or the largest where none is known."""
    bundles: list[list[Group]] = []
    if known:
        world = Group(turn={index.clues.north: 0.0}, firm={index.clues.north: None})
        for i, z in known.items():
            put(index, world, i, z)
        bundles.append(follow(index, [world]))
    order = sorted(stations, key=lambda i: -index.degree(i))
    for seed in order:
        if any(seed in bundle[0].at for bundle in bundles):
            continue
        local = local_groups(index, seed)
        if local and len(local[0].at) > (2 if bundles else 1):
            bundles = _joined(index, [*bundles, local])
    if not bundles:
        return []
    main = 0 if known else max(range(len(bundles)), key=lambda b: len(bundles[b][0].at))
    return _knotted(index, stations, bundles[main], bundles) if knots else bundles[main]


def _knotted(index: Index, stations: list[int], bundle: list[Group], bundles: list[list[Group]]) -> list[Group]:
    """The equal groups with the knots closed that hang on them, and what follows from those."""
    while True:
        first = bundle[0]  # what is open in it has all its neighbours placed
        missing = [s for s in stations if s not in first.at and s not in first.open]
        if not missing or len(missing) > KNOT_MOST:
            return bundle
        knot = find_knot(index, first, missing)
        if not knot:
            return bundle
        bodies = [other[0] for other in bundles if other is not bundle]
        grown = [new for group in bundle for new in close_knot(index, group, knot, bodies)]
        if not grown:
            loose = [loosened(index, group, knot) for group in bundle]
            grown = [new for group, more in loose if len(more) > len(knot)
                     for new in close_knot(index, group, more, bodies)]  # fmt: skip
        if not grown:
            return bundle
        bundle = follow(index, grown)
        (bundle, *bundles) = _joined(index, [bundle, *(b for b in bundles if b[0].at.keys() - bundle[0].at.keys())])
        bundles = [bundle, *bundles]


def _joined(index: Index, bundles: list[list[Group]]) -> list[list[Group]]:
    """Join groups by similarity, then by hinges, until none of them can be joined."""
    while True:
        union = _one_union(index, bundles) or _one_hinge(index, bundles)
        if union is None:
            return bundles
        bundles = union


def _one_union(index: Index, bundles: list[list[Group]]) -> list[list[Group]] | None:
    """The bundles after the first joining of two of them; the union stands where the first of the two stood."""
    for a in range(len(bundles)):
        for b in range(a + 1, len(bundles)):
            union = join(index, bundles[a], bundles[b])
            if union:
                return [union if k == a else bundle for k, bundle in enumerate(bundles) if k != b]
    return None


def _one_hinge(index: Index, bundles: list[list[Group]]) -> list[list[Group]] | None:
    """The bundles after one of them has won a station that others hold by a hinge."""
    for a, bundle in enumerate(bundles):
        grown = hinged(index, bundle, [*bundles[:a], *bundles[a + 1 :]])
        if grown:
            return [grown if k == a else other for k, other in enumerate(bundles)]
    return None


def _finished(index: Index, group: Group) -> tuple[Group, list[tuple[int, complex, complex]]]:
    """The group with its open stations at the best of their places, and other places that the same readings favour."""
    leaves = []
    for station, places in list(group.open.items()):
        best = places[0].point
        clues = ties(index, station, group.at, group.turn, group.via, group.scaled)
        agreed = voters(clues, best)
        rival = next((p.point for p in places[1:] if voters(clues, p.point) == agreed), None)
        if rival is not None:
            leaves.append((station, best, rival))
        put(index, group, station, best)
    return group, leaves


def _mirror(misfits: Misfits, z: Places, other: Places) -> Mirror | None:
    """The stations that stand elsewhere in an equal solution; None where readings misfit differently."""
    with np.errstate(invalid="ignore"):
        here, there = (np.nan_to_num(np.abs(misfits.all(one))) for one in (z, other))
    # a gross error misfits in both images, and alike, or it is no image
    bad = np.maximum(here, there) > AGREES
    if np.abs(here - there)[bad].max(initial=0.0) > AGREES:
        return None
    with np.errstate(invalid="ignore"):
        size = float(np.nanmax(np.abs(z - z[np.isfinite(z)][0])))
        moved = np.flatnonzero(np.abs(z - other) > 1e-3 * size)
    if not len(moved):
        return None
    return Mirror(tuple(moved.tolist()), tuple(z[moved].tolist()), tuple(other[moved].tolist()))


def _by_rows(z: Places, mirrors: list[Mirror], known: dict[int, complex],
             rows: dict[int, complex]) -> tuple[Places, list[Mirror]]:  # fmt: skip
    """Mirrors that `stations` rows decide, decided; the rest is left."""
    left = []
    for mirror in mirrors:
        other = z.copy()
        other[list(mirror.stations)] = mirror.there
        here, there = _away(z, known, rows), _away(other, known, rows)
        if min(here, there) >= 0.5 * max(here, there):
            left.append(mirror)
        elif there < here:
            z = other
    return z, left


def _away(z: Places, known: dict[int, complex], rows: dict[int, complex]) -> float:
    """Sum of the distances from `stations` rows, after a similarity fit where nothing is known."""
    placed = {i: complex(z[i]) for i in rows if np.isfinite(z[i])}
    if not known and len(placed) > 2:
        move = best_move(Group(dict(rows)), Group(placed), list(placed))
        if move is not None:
            placed = {i: move[0] * p + move[1] for i, p in placed.items()}
    return sum(abs(p - rows[i]) for i, p in placed.items())


def _without_one(clues: Clues, misfits: Misfits, stations: Ints, known: dict[int, complex], rows: dict[int, complex],
                 first: Built) -> Built:  # fmt: skip
    """The best of the constructions without one suspicious reading or without one known station."""
    best = first
    bad = bad_sources(misfits, first.z)
    suspects = dict.fromkeys([*_crowded(clues, first.z, stations), *_suspects(clues, bad, first)])
    for source in list(suspects)[: min(TRIALS_MOST, max(4, WORK_MOST // max(1, len(misfits.source))))]:
        trial = _once(clues, misfits, stations, known, rows, frozenset({source}))
        if trial.cost < best.cost - CLEARLY:
            best = trial
            if _settled(misfits, trial, stations):
                return best
    if len(known) > 2:
        for station in list(known)[:8]:
            fewer = {i: z for i, z in known.items() if i != station}
            trial = _once(clues, misfits, stations, fewer, rows, frozenset())
            if trial.cost < best.cost - CLEARLY:
                best = trial
    return best


def _settled(misfits: Misfits, built: Built, stations: Ints) -> bool:
    """Whether one bad reading explains everything."""
    return len(bad_sources(misfits, built.z)) <= 1 and not np.isnan(built.z[stations]).any()


def _suspects(clues: Clues, bad: list[int], built: Built) -> list[int]:
    """Readings to try without: those used unchecked near the bad ones, the bad ones, then the other unchecked ones."""
    touched = set()
    blocks = clues.network.blocks
    for source in bad:
        b, row = clues.sources[source]
        touched.update(blocks[b].stations[row].tolist())

    def near(source: int) -> bool:
        b, row = clues.sources[source]
        return bool(touched.intersection(blocks[b].stations[row].tolist()))

    weak = [s for s in built.weak if s not in bad]
    return [*bad[:20], *(s for s in weak if near(s)), *bad[20:], *(s for s in weak if not near(s))]


def _polish(clues: Clues, misfits: Misfits, known: dict[int, complex], built: Built) -> Built:
    """Places after robust reweighting, if they fit better."""
    with np.errstate(invalid="ignore"):
        m = np.abs(misfits.all(built.z))
    if not (m[np.isfinite(m)] > ROUGH).any():
        return built
    z = polished(misfits, built.z, frozenset(known))
    before, after = misfits.cost(built.z), misfits.cost(z)
    return replace(built, z=z, cost=built.cost + after - before) if after < before else built
