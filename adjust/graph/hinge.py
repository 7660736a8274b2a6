"""Groups that hang on each other at single stations: their inner distances close the figure.

Where a group shares one station P with another one, each of its stations Q is |PQ| away from P, however the group
turns. These circles place Q together with each other (three groups in a triangle) or with any reading to Q; two places
are left as a rule, which what follows tells apart or not.
"""

from __future__ import annotations

from adjust.graph.clues import Index
from adjust.graph.grow import Group, follow, put
from adjust.graph.loci import Circle
from adjust.graph.places import CLEARLY, Place, candidates, ties

STATIONS_MOST = 200
"""Stations looked at in one search."""


def hinged(index: Index, bundle: list[Group], others: list[list[Group]]) -> list[Group]:
    """The equal groups of ``bundle`` with one more station that ``others`` help to place; empty if there is none."""
    first = bundle[0]
    if not first.scaled:
        return []
    reach = _reach(first, [other[0] for other in others])
    for station, found in list(reach.items())[:STATIONS_MOST]:
        if len({pivot for pivot, _ in found}) < 2 and not any(n in first.at for n in index.near[station]):
            continue
        grown = [new for group in bundle for new in _closed(index, group, station, found)]
        if grown:
            return follow(index, grown)
    return []


def _reach(group: Group, others: list[Group]) -> dict[int, list[tuple[int, float]]]:
    """Stations outside the group with (pivot, distance) from groups that hang on it at one station."""
    reach: dict[int, list[tuple[int, float]]] = {}
    for other in others:
        common = [i for i in other.at if i in group.at]
        if not other.scaled or len(common) != 1:
            continue
        pivot = common[0]
        for station, place in other.at.items():
            if station != pivot:
                reach.setdefault(station, []).append((pivot, abs(place - other.at[pivot])))
    # first those that most groups help to place
    return dict(sorted(reach.items(), key=lambda item: -len(item[1])))


def _closed(index: Index, group: Group, station: int, found: list[tuple[int, float]]) -> list[Group]:
    """The group with the station at each of its equal places."""
    clues = ties(index, station, group.at, group.turn, group.via, group.scaled)
    clues.circles += [(Circle(group.at[pivot], distance), -1) for pivot, distance in found if pivot in group.at]
    if clues.count < 2:
        return []
    places: list[Place] = candidates(clues)
    out = []
    for place in places:
        if place.cost < places[0].cost + CLEARLY:
            new = group.copy()
            new.cost += place.cost
            put(index, new, station, place.point)
            out.append(new)
    return out
