"""Groups of stations that stand right to each other, grown from a few placed stations by closed forms.

A step is *strong* when more readings than needed agree on the place, *weak* when just enough do, *open* when two
places fit equally well. Strong steps go first, weak ones when no strong one is left, in the order of the book. For
open ones every candidate is followed in a group of its own; groups that fit clearly worse are dropped, and what
survives are the equal solutions.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from adjust.graph.agreement import agree
from adjust.graph.clues import Index
from adjust.graph.loci import azimuth
from adjust.graph.places import CLEARLY, Place, candidates, refined, ties

MOST_GROUPS = 12
"""Equal solutions followed at once."""
SAME_COST = 8.0
"""A group is dropped when another one with as many stations costs less by this."""
FIRM = 5
"""A set read at several stations is firm when more of its lines than this agree."""
FLAT = 0.15
"""Sine of the crossing below which a weak step waits for a better one."""


@dataclass
class Group:
    """Stations placed relative to each other: places, orientations of sets, and whether its lengths are true."""

    at: dict[int, complex] = field(default_factory=dict)
    turn: dict[int, float] = field(default_factory=dict)
    via: dict[int, int] = field(default_factory=dict)
    firm: dict[int, None] = field(default_factory=dict)
    """Sets whose orientation is not looked at again: north where it is known, large ones that agree."""
    scaled: bool = True
    cost: float = 0.0
    weak: dict[int, None] = field(default_factory=dict)
    """Readings that steps without a check rest on."""
    poor: dict[int, None] = field(default_factory=dict)
    """Stations placed where two lines hardly cross."""
    open: dict[int, list[Place]] = field(default_factory=dict)
    waiting: dict[int, Place] = field(default_factory=dict)
    """Weak steps not made yet."""
    stations: dict[int, None] = field(default_factory=dict)
    sets: dict[int, None] = field(default_factory=dict)
    """What has to be looked at again."""

    def copy(self) -> Group:
        """A group that grows on its own."""
        return Group(
            dict(self.at), dict(self.turn), dict(self.via), dict(self.firm), self.scaled, self.cost, dict(self.weak),
            dict(self.poor), dict(self.open), dict(self.waiting), dict(self.stations), dict(self.sets),
        )  # fmt: skip


def put(index: Index, group: Group, station: int, point: complex) -> None:
    """Place a station and note what may follow from it."""
    group.at[station] = point
    group.open.pop(station, None)
    group.waiting.pop(station, None)
    group.stations.pop(station, None)
    for other in index.near[station]:
        if other not in group.at:
            group.stations[other] = None
        for p in index.of_line.get((min(station, other), max(station, other)), ()):
            group.sets[p.set] = None


def grow(index: Index, group: Group) -> None:
    """Make strong and weak steps until neither is left."""
    while True:
        if group.sets:
            one = next(iter(group.sets))
            del group.sets[one]
            _orient(index, group, one)
        elif group.stations:
            station = next(iter(group.stations))
            del group.stations[station]
            _look(index, group, station)
        elif not group.scaled and _scale(index, group):
            continue
        elif group.waiting:
            station = _firmest(group)
            place = group.waiting[station]
            found = ties(index, station, group.at, group.turn, group.via, group.scaled)
            group.weak.update(dict.fromkeys(found.sources))
            group.cost += place.cost
            if place.sine < FLAT:
                group.poor[station] = None
            put(index, group, station, place.point)
        else:
            return


def _firmest(group: Group) -> int:
    """The first weak step with a good crossing, else the one with the best."""
    for station, place in group.waiting.items():
        if place.sine > FLAT:
            return station
    return max(group.waiting, key=lambda s: group.waiting[s].sine)


def _orient(index: Index, group: Group, one: int) -> None:
    """Orient a set by its lines with known azimuth, as most of them say."""
    if one in group.firm:
        return
    if index.local[one] and index.of_set[one] and index.of_set[one][0].at not in group.at:
        return
    values, sources, via = [], [], -1
    for p in index.of_set[one]:
        if p.at in group.at and p.to in group.at and group.at[p.at] != group.at[p.to]:
            values.append(azimuth(group.at[p.to] - group.at[p.at]) - p.reading)
            sources.append(p.source)
    if not values:
        for p in index.of_set[one]:
            line = _line(index, group, p.at, p.to, one)
            if line is not None:
                values, sources = [line - p.reading], [p.source]
                via = p.to if p.at in group.at else p.at
                break
    if not values:
        return
    value, _, agreeing = agree(values)
    if agreeing > FIRM and not index.local[one]:
        group.firm[one] = None
    before = group.turn.get(one)
    group.turn[one] = value
    group.via.pop(one, None)
    if via >= 0:
        group.via[one] = via
    if agreeing < 2:
        group.weak.update(dict.fromkeys(sources))
    if before is None or abs(before - value) > 1e-4:
        _tell(index, group, one)


def _tell(index: Index, group: Group, one: int) -> None:
    """Stations to which a newly oriented set points, and sets on the same lines, are to be looked at."""
    for p in index.of_set[one]:
        for station in (p.at, p.to):
            if station not in group.at:
                group.stations[station] = None
        if p.to not in group.at or p.at not in group.at:
            for q in index.of_line[min(p.at, p.to), max(p.at, p.to)]:
                if q.set not in group.turn:
                    group.sets[q.set] = None


def _line(index: Index, group: Group, at: int, to: int, one: int) -> float | None:
    """Azimuth of a line along which another oriented set points."""
    for p in index.of_line[min(at, to), max(at, to)]:
        if p.set != one and p.set in group.turn:
            return group.turn[p.set] + p.reading + (0.0 if p.at == at else math.pi)
    return None


def _look(index: Index, group: Group, station: int) -> None:
    """Sort a station by what its clues say: place it, or keep it waiting or open."""
    group.waiting.pop(station, None)
    group.open.pop(station, None)
    if station in group.at:
        return
    found = ties(index, station, group.at, group.turn, group.via, group.scaled)
    if found.count < 2:
        return
    places = candidates(found)
    if not places:
        return
    best = places[0]
    rivals = [p for p in places[1:] if p.cost < best.cost + CLEARLY]
    if rivals:
        group.open[station] = [best, *rivals]
    elif best.agreeing > 2 and best.sine > FLAT:
        group.cost += best.cost
        put(index, group, station, refined(found, best.point))
    else:
        group.waiting[station] = best


def _scale(index: Index, group: Group) -> bool:
    """Give an unscaled group its size by the lengths inside it; True if there is one."""
    ratios = sorted(
        metres / abs(group.at[i] - group.at[j])
        for i in group.at
        for j, metres, _ in index.lengths[i]
        if i < j and j in group.at and group.at[i] != group.at[j]
    )
    if not ratios:
        return False
    resize(index, group, ratios[(len(ratios) - 1) // 2])
    return True


def resize(index: Index, group: Group, ratio: float) -> None:
    """Multiply a group, which is then true to scale."""
    group.at = {i: ratio * z for i, z in group.at.items()}
    group.scaled = True
    group.waiting.clear()
    group.open.clear()
    group.stations.update((j, None) for i in group.at for j in index.near[i] if j not in group.at)


def follow(index: Index, groups: list[Group]) -> list[Group]:
    """Grow groups, following every candidate of open steps; the survivors fit equally well, best first."""
    while True:
        for group in groups:
            grow(index, group)
        groups = prune(groups)
        chosen = [_fork(index, group) for group in groups]
        if not any(chosen):
            return groups
        groups = [
            new for group, station in zip(groups, chosen, strict=True) for new in _branches(index, group, station)
        ]


def prune(groups: list[Group]) -> list[Group]:
    """The groups that none beats."""
    best: list[Group] = []
    for group in sorted(groups, key=lambda g: (-len(g.at), g.cost)):
        if all(group.cost < other.cost + SAME_COST for other in best) and not any(_same(group, o) for o in best):
            best.append(group)
    return best[:MOST_GROUPS]


def _same(a: Group, b: Group) -> bool:
    """Whether two groups place all stations alike."""
    if a.at.keys() != b.at.keys():
        return False
    size = max((abs(z - next(iter(a.at.values()))) for z in a.at.values()), default=0.0)
    return all(abs(z - b.at[i]) <= 1e-3 * size for i, z in a.at.items())


def _fork(index: Index, group: Group) -> int | None:
    """The open station to decide next: one that others hang on; the first one of a group of two."""
    for station in group.open:
        if len(group.at) == 2 or any(other not in group.at for other in index.near[station]):
            return station
    return None


def _branches(index: Index, group: Group, station: int | None) -> list[Group]:
    if station is None:
        return [group]
    out = []
    for place in group.open[station]:
        new = group.copy()
        new.cost += place.cost
        put(index, new, station, place.point)
        out.append(new)
    return out
