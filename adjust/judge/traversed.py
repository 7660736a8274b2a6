"""A traverse computed as a surveyor would: bearings carried along, angles balanced equally, legs summed.

With t_i the angles turned (clockwise from the station behind to the one ahead) and a_j the bearing of leg j,

    a_j = a_{j-1} + t_j + 180 degrees
    w   = sum t_i - n 180 degrees                       of a loop of n angles, modulo a circle: a walk round an interior
                                                        of n corners turns (n - 2) 180, round the exterior (n + 2) 180
    w   = a_opening + sum t_i + m 180 - a_closing       of a link between two known directions
    t_i' = t_i - w / n                                  the equal balance
    E   = sum D_j sin a_j',   N = sum D_j cos a_j'      and with the known ends the linear misclosure

(common practice; any textbook of surveying). Every quantity is a Form of the readings, so that w, E and N bring their
covariance with them, the balance included. Without a known direction a loop is turned as the provisional places are,
and a link is turned onto its known ends: then only its length can misclose.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

from adjust.graph.sights import known_places
from adjust.graph.traverses import Traverse, turns
from adjust.judge.booked import Booked, Form, total
from adjust.units import TURN, wrap

DERIVED = 1e-9
"""Radians (0.2 milliseconds) within which a booked closing bearing is the carried one: nobody measures so well."""


@dataclass(frozen=True)
class Turned:
    """An angle turned at a station, and the station it belongs to."""

    at: int
    form: Form


@dataclass(frozen=True)
class Traversed:
    """What came out of a traverse."""

    traverse: Traverse
    legs: tuple[Form, ...]
    turned: tuple[Turned, ...]
    """The angles that take part in the balance."""
    booked: tuple[Form, ...]
    """Bearings of the legs before the balance."""
    balanced: tuple[Form, ...]
    angle: Form | None
    """The angular misclosure; None where it cannot be tested."""
    closing: float | None
    """Bearing of the last leg, carried back from the closing direction; None without one."""
    why: str
    """Why the angles cannot be tested."""
    turnable: bool
    """A link without any direction: only the length between its ends can misclose."""
    east: Form
    north: Form
    """Computed minus known, after the balance; of a turnable one along and across the line of its ends."""

    @property
    def length(self) -> float:
        """Sum of the legs in metres."""
        return math.fsum(leg.value for leg in self.legs)


def polar(leg: Form, bearing: Form) -> tuple[Form, Form]:
    """East and north of a leg: D sin a, D cos a, with dE = sin a dD + D cos a da, dN = cos a dD - D sin a da."""
    s, c = math.sin(bearing.value), math.cos(bearing.value)
    d = leg.value
    east, north = total([leg * s, bearing * (d * c)]), total([leg * c, bearing * (-d * s)])
    return replace(east, value=d * s), replace(north, value=d * c)


def summed(legs: Sequence[Form], bearings: Sequence[Form]) -> tuple[Form, Form]:
    """East and north of some legs in a row."""
    steps = [polar(d, a) for d, a in zip(legs, bearings, strict=True)]
    return total([e for e, _ in steps]), total([n for _, n in steps])


def traversed(booked: Booked, one: Traverse) -> Traversed:
    """Compute a traverse."""
    if one.by_bearings:
        return _by_bearings(booked, one)
    return _loop(booked, one) if one.closed else _link(booked, one)


@dataclass(frozen=True)
class _Direction:
    """A known direction at a station: ``bearing`` of the line to ``to``, measured or from coordinates."""

    to: int
    bearing: Form
    measured: bool


def _direction(booked: Booked, at: int, other: int) -> _Direction | None:
    """What orients a station whose next one is ``other``: a known mark it sights, else a measured bearing."""
    known, sights = known_places(booked.network), booked.sights
    if known[at]:
        for third in sights.targets(at):
            if known[third] and third != other and sights.ways(at, third, other):
                return _Direction(third, booked.known_bearing(at, third), False)
    for third in [other, *sights.targets(at)]:
        bearing = booked.bearing(at, third)
        if bearing and (third == other or sights.ways(at, third, other)):
            return _Direction(third, bearing, True)
    return None


def _loop(booked: Booked, one: Traverse) -> Traversed:
    legs = tuple(booked.leg(*pair) for pair in pairwise(one.stations))
    forms = [(at, booked.turned(at, back, fore)) for at, back, fore in turns(one)]
    turned = tuple(Turned(at, form) for at, form in forms if form)
    angle, why = None, ""
    if one.missing:
        why = f"the closing angle at {_name(booked, one.missing[0])} was never turned"
        inner = [t.form for t in turned]
    else:
        angle = _wrapped(total([t.form for t in turned]), -len(turned) * TURN / 2)
        inner = [t.form for t in turned[1:]]
    raw = _carried(booked, one, inner)
    share = angle * (-1 / len(turned)) if angle else None
    balanced = raw if share is None else _carried(booked, one, [t + share for t in inner])
    east, north = summed(legs, balanced)
    closing = None if angle is None else raw[-1].value - angle.value
    return Traversed(one, legs, turned, raw, balanced, angle, closing, why, False, east, north)


def _carried(booked: Booked, one: Traverse, inner: list[Form]) -> tuple[Form, ...]:
    """Bearings of a loop's legs from the first leg that has a direction, carried both ways by the angles between."""
    n = len(one.stations) - 1
    for k in range(n):
        at, to = one.stations[k], one.stations[k + 1]
        if (direction := _direction(booked, at, to)) is not None:
            base = direction.bearing
            if direction.to != to:
                turn = booked.turned(at, direction.to, to)
                assert turn is not None
                base = base + turn
            break
    else:
        k, base = 0, Form(_provisional(booked, one))
    out = {k: base}
    for j in range(k + 1, n):
        out[j] = _plus(total([out[j - 1], inner[j - 1]]), TURN / 2)
    for j in range(k - 1, -1, -1):
        out[j] = _plus(total([out[j + 1], inner[j] * -1.0]), -TURN / 2)
    return tuple(out[j] for j in range(n))


def _provisional(booked: Booked, one: Traverse) -> float:
    east, north = (float(v) for v in (booked.places[one.stations[1]] - booked.places[one.stations[0]])[:2])
    return 0.0 if math.isnan(east) else math.atan2(east, north)


def _link(booked: Booked, one: Traverse) -> Traversed:
    opening = _direction(booked, one.stations[0], one.stations[1])
    closing = _direction(booked, one.stations[-1], one.stations[-2])
    if opening is None and closing is not None:  # walk it from the end that has a direction
        turned_round = replace(one, stations=one.stations[::-1])
        return _link(booked, turned_round)
    s = one.stations
    legs = tuple(booked.leg(*pair) for pair in pairwise(s))
    turned = []
    if opening and opening.to != s[1]:
        turned.append(_turned(booked, s[0], opening.to, s[1]))
    first = len(turned)
    turned += [_turned(booked, *turn) for turn in turns(one)]
    last = len(turned)
    if closing and closing.to != s[-2]:
        turned.append(_turned(booked, s[-1], s[-2], closing.to))
    base = opening.bearing if opening else Form(0.0)
    raw = _along(base, [t.form for t in turned], first, last)
    angle, back, why = None, None, f"no known direction was sighted at {_name(booked, s[-1])}"
    if opening and closing:
        ahead = closing.bearing if closing.to != s[-2] else _plus(closing.bearing, TURN / 2)
        half = TURN / 2 if closing.to != s[-2] else 0.0
        carried = total([raw[-1], *(t.form for t in turned[last:])])
        angle, why = _wrapped(total([carried, ahead * -1.0]), half), ""
        back = raw[-1].value - angle.value
        if closing.measured and abs(angle.value) < DERIVED:
            line = f"{_name(booked, s[-1])}-{_name(booked, closing.to)}"
            angle, why = None, (f"the bearing of {line} closes exactly: it was derived from the angles, not measured")
    elif not opening:
        why = f"no known direction was sighted at {_name(booked, s[0])} or at {_name(booked, s[-1])}"
    balanced = raw
    if angle:
        share = angle * (-1 / len(turned))
        balanced = _along(base, [t.form + share for t in turned], first, last)
    parts = (tuple(turned), raw, balanced, angle, back, why)
    if opening is None:
        return Traversed(one, legs, *parts, True, *_chord(booked, one, legs, balanced))
    return Traversed(one, legs, *parts, False, *_ends(booked, one, legs, balanced))


def _along(base: Form, turned: list[Form], first: int, last: int) -> tuple[Form, ...]:
    """Bearings of a link's legs; the opening angle brings no half circle: its line is looked along, not walked."""
    out = [total([base, *turned[:first]])]
    for angle in turned[first:last]:
        out.append(_plus(total([out[-1], angle]), TURN / 2))
    return tuple(out)


def _ends(booked: Booked, one: Traverse, legs: Sequence[Form], bearings: Sequence[Form]) -> tuple[Form, Form]:
    """East and north computed at the end, less the known ones."""
    first, last = one.stations[0], one.stations[-1]
    sums = summed(legs, bearings)
    e, n = (
        total([one_sum, booked.coordinate(first, c), booked.coordinate(last, c) * -1.0])
        for c, one_sum in enumerate(sums)
    )
    return e, n


def _chord(booked: Booked, one: Traverse, legs: Sequence[Form], bearings: Sequence[Form]) -> tuple[Form, Form]:
    """Misclosure of a link without directions: length of the line of its ends, along the known line; as east, north."""
    east, north = summed(legs, bearings)
    length = math.hypot(east.value, north.value)
    first, last = one.stations[0], one.stations[-1]
    line = booked.known_bearing(first, last)
    s, c = math.sin(line.value), math.cos(line.value)
    known = booked.network.stations.known
    ends = [booked.coordinate(last, 0) * s, booked.coordinate(last, 1) * c,
            booked.coordinate(first, 0) * -s, booked.coordinate(first, 1) * -c]  # fmt: skip
    along = total([east * (east.value / length), north * (north.value / length), *(e * -1.0 for e in ends)])
    along = replace(along, value=length - math.hypot(*(known[last] - known[first])[:2]))
    return along * s, along * c


def _by_bearings(booked: Booked, one: Traverse) -> Traversed:
    legs = tuple(booked.leg(*pair) for pair in pairwise(one.stations))
    bearings = [booked.bearing(*pair) for pair in pairwise(one.stations)]
    forms = tuple(form for form in bearings if form)
    east, north = summed(legs, forms) if one.closed else _ends(booked, one, legs, forms)
    why = "every leg has a bearing of its own, so that there are no angles to sum"
    return Traversed(one, legs, (), forms, forms, None, None, why, False, east, north)


def _turned(booked: Booked, at: int, back: int, fore: int) -> Turned:
    form = booked.turned(at, back, fore)
    assert form is not None
    return Turned(at, form)


def _plus(form: Form, amount: float) -> Form:
    return replace(form, value=form.value + amount)


def _wrapped(form: Form, amount: float) -> Form:
    return replace(form, value=wrap(form.value + amount))


def _name(booked: Booked, station: int) -> str:
    return booked.network.stations.names[station]
