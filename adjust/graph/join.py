"""Local groups and their joining by similarity, never by reflection.

A group that control does not reach grows from one of its lines, in a frame of its own: z -> a z + b brings it into
another group's frame. Two common stations give a and b; one common station and one common oriented set (north, a set
of azimuths, a set at the common station) give them where both groups are true to scale.
"""

from __future__ import annotations

import cmath
import math

from adjust.graph.agreement import cost_of, wrapped
from adjust.graph.clues import Index
from adjust.graph.grow import Group, follow, prune, put, resize
from adjust.graph.loci import similarity

LINES_TRIED = 4
GOOD = 5.0
"""Cost a station below which a group is taken without trying another line: it grows with the chain even in clean
networks (4.1 in 1,000 stations of angles alone)."""
COMMON_MOST = 8


def local_groups(index: Index, seed: int) -> list[Group]:
    """Equal groups grown from the best line at a station, or none.

    A few lines are tried until one leads somewhere and its readings agree well: a poor first triangle spoils the rest.
    """
    best: list[Group] = []
    tried = 0
    for other in _lines(index, seed):
        groups = follow(index, [_line_group(index, seed, other)])
        if not best or (-len(groups[0].at), groups[0].cost) < (-len(best[0].at), best[0].cost):
            best = groups
        tried += len(groups[0].at) > 3
        if (tried and best[0].cost <= GOOD * len(best[0].at)) or tried >= LINES_TRIED:
            break
    return best


def _lines(index: Index, seed: int) -> list[int]:
    """Neighbours of a station, the best line to start from first: measured, pointed along, with most triangles."""
    lengths = {other for other, _, _ in index.lengths[seed]}

    def worth(other: int) -> tuple[bool, bool, int]:
        pointed = (min(seed, other), max(seed, other)) in index.of_line
        third = (_seen_with(index, seed, other) | lengths) & (
            _seen_with(index, other, seed) | {k for k, _, _ in index.lengths[other]}
        )
        return (other not in lengths, not pointed, -len(third))

    return sorted(index.near[seed], key=worth)


def _seen_with(index: Index, at: int, to: int) -> set[int]:
    """Stations that stand in one set with ``to`` at a station."""
    sets = {p.set for p in index.out[at] if p.to == to}
    return {p.to for p in index.out[at] if p.set in sets and p.to != to}


def _line_group(index: Index, seed: int, other: int) -> Group:
    """The group of one line, running north; without a length it is 1 long and not true to scale."""
    metres = [d for to, d, _ in index.lengths[seed] if to == other]
    group = Group(scaled=bool(metres))
    put(index, group, seed, 0j)
    put(index, group, other, complex(0.0, sorted(metres)[(len(metres) - 1) // 2] if metres else 1.0))
    return group


def join(index: Index, a: list[Group], b: list[Group]) -> list[Group]:
    """Equal unions of two lists of equal groups in the frame of ``a``, grown on; empty if nothing joins them."""
    unions = [union for one in a for other in b for union in _unions(index, one, other)]
    return follow(index, prune(unions)) if unions else []


def _unions(index: Index, a: Group, b: Group) -> list[Group]:
    common = [i for i in b.at if i in a.at]
    if len(common) < 2:
        decided = [(_decided(index, a, i, p.point), b) for i in a.open if i in b.at for p in a.open[i]]
        decided += [(a, _decided(index, b, i, p.point)) for i in b.open if i in a.at for p in b.open[i]]
        if decided:
            return [union for one, other in decided for union in _unions(index, one, other)]
    if not common:
        return []
    if a.scaled < b.scaled:
        # the frame is a's, the scale is b's
        ratio = _ratio(a, b, common)
        if ratio is None:
            return []
        a = a.copy()
        resize(index, a, ratio)
    move = best_move(a, b, common)
    return [_united(index, a, b, *move)] if move else []


def _decided(index: Index, group: Group, station: int, point: complex) -> Group:
    """A copy of a group with an open station at one of its places."""
    out = group.copy()
    put(index, out, station, point)
    return out


def _ratio(a: Group, b: Group, common: list[int]) -> float | None:
    i = common[0]
    j = max(common, key=lambda k: abs(b.at[k] - b.at[i]))
    return abs(b.at[i] - b.at[j]) / abs(a.at[i] - a.at[j]) if a.at[i] != a.at[j] else None


def best_move(a: Group, b: Group, common: list[int]) -> tuple[complex, complex] | None:
    """The similarity z -> m z + c that most common stations and sets agree on."""
    rigid = a.scaled and b.scaled
    found = []
    some = common[:: max(1, len(common) // COMMON_MOST)]
    for k, i in enumerate(some):
        for j in some[k + 1 :]:
            move = similarity(b.at[i], b.at[j], a.at[i], a.at[j], rigid)
            if move:
                found.append(move)
    if rigid:
        for one in [s for s in b.turn if s in a.turn][:COMMON_MOST]:
            # azimuths grow by the turn; a complex factor turns the other way
            m = cmath.rect(1.0, -wrapped(a.turn[one] - b.turn[one]))
            found.append((m, a.at[common[0]] - m * b.at[common[0]]))
    if not found:
        return None
    size = max(abs(a.at[i] - a.at[common[0]]) for i in common) or max(abs(z) for z in b.at.values()) or 1.0

    def cost(move: tuple[complex, complex]) -> float:
        m, c = move
        out = sum(cost_of(abs(m * b.at[i] + c - a.at[i]) / size) for i in some)
        turns = [one for one in b.turn if one in a.turn][:COMMON_MOST]
        return out + sum(cost_of(wrapped(b.turn[s] - cmath.phase(m) - a.turn[s])) for s in turns)

    return min(found, key=cost)


def _united(index: Index, a: Group, b: Group, m: complex, c: complex) -> Group:
    """The union in the frame of ``a``; misfits at the common stations count in its cost."""
    out = a.copy()
    out.weak.update(b.weak)
    out.cost += b.cost
    size = max(abs(m * z) for z in b.at.values()) or 1.0
    for one, turn in b.turn.items():
        moved = turn - cmath.phase(m)
        if one in out.turn:
            out.cost += cost_of(wrapped(moved - out.turn[one]))
        else:
            out.turn[one] = math.remainder(moved, 2 * math.pi)
            for p in index.of_set[one]:
                out.stations.update((i, None) for i in (p.at, p.to) if i not in out.at)
    for i, z in b.at.items():
        if i in out.at:
            out.cost += cost_of(abs(m * z + c - out.at[i]) / size)
    for i, z in b.at.items():
        if i not in out.at:
            put(index, out, i, m * z + c)
    return out
