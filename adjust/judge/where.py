"""Where to look when something does not close, in trade words with the size and the tolerance; silent where none fits.

A suggestion is made where the misclosure w fits what one slip would leave, to within `TIMES` standard deviations of
what the other readings may add; what everything would fit equally well is not said. The marks of the trade:

    slips      a reading with the text that it would have (adjust.judge.causes_of_closures): digits, minutes, signs,
               the other way round, a metre of a staff. What is said of these without a reading is then left out.
    levels     w is a whole number of metres, decimetres (feet, tenths): a staff misread; tolerance up to a twentieth of
               the step, else too much would fit by chance.
               w = 2 (back - fore) of a row of a raw book: its sights in each other's column (once, at an end).
    heights    by zenith angles: whole metres and decimetres likewise. An instrument or target height v with the
               share f in w: w = f v counted twice, w = 2 f v its sign, and where none is booked, w = -f v of
               another that is.
    angles     with t the angle booked, w = t or -t: counted twice, or dropped; w = 180 degrees.
               The whole w put into one angle closes the traverse: forwards and backwards it meets at that station.
    no closing angle: the end E' was to be E; an error at P turns E' about P, so |PE'| = |PE|: P lies on the
               perpendicular bisector of the closing line EE'.
    lengths    w runs along a leg: the leg is wrong by w.
    several    a line or leg in all that fail and in none that closes.

(Common practice; every one of them holds for one slip only.)
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from adjust.book.job import Job
from adjust.judge.book_rows import changes
from adjust.judge.booked import Booked, Form, total
from adjust.judge.rises import Rise
from adjust.judge.slips_asked import texts_of
from adjust.judge.traversed import Traversed, polar
from adjust.network import Array
from adjust.units import LENGTHS, TURN, format_angle, small_length, wrap

if TYPE_CHECKING:
    from adjust.judge.causes import Cause
    from adjust.judge.closures import Closure

TIMES = 3.0
"""Tolerance in standard deviations: a true cause is missed once in 370."""
TIMES_PLANE = 3.44
"""The same for a vector in the plane: sqrt(-2 ln(1/370))."""
FINE = 20
"""A step must be this many tolerances, so that chance fits it once in ten."""
SHARE = 1e-9
"""A height that goes into a misclosure by less goes out of it: an instrument's in a walk through its station."""
MOST = 3
"""Suggestions of a sort that are named."""
NOT_MET = "not met"


@dataclass(frozen=True)
class Levels:
    """What a levelled loop or run is made of: ``rises`` (k,) as walked, metres."""

    rises: Array


@dataclass(frozen=True)
class Heights:
    """What a loop or run with zenith angles is made of: its rises, and how each is walked (+1, or -1 from its end)."""

    rises: tuple[Rise, ...]
    signs: tuple[float, ...]


@dataclass(frozen=True)
class Walked:
    """What a traverse is made of."""

    booked: Booked
    traversed: Traversed


Context = Levels | Heights | Walked | None
"""What a closure is made of; None of triangles."""


@dataclass(frozen=True)
class Hint:
    """A suggestion: how badly it fits in tolerances (0 is best), and the sentence."""

    misfit: float
    sentence: str


def told(job: Job, one: Closure, context: Context) -> Closure:
    """The closure with its sentence: why something cannot be tested, and where to look if something is not met."""
    words = sentence(job, one, context)
    return replace(one, sentence=words) if words else one


def sentence(job: Job, one: Closure, context: Context) -> str:
    """Why something cannot be tested, and where to look if something is not met: likely slips, then hints."""
    words = Words(job)
    why = context.traversed.why if isinstance(context, Walked) else ""
    hints: list[Hint] = []
    if one.verdict == NOT_MET:
        if isinstance(context, Levels):
            hints = _levels(words, one, context)
        elif isinstance(context, Heights):
            hints = _heights(words, one, context)
        elif isinstance(context, Walked):
            hints = _traverse(words, one, context)
        elif not one.likely:
            hints = half_circle(words, one.misclosure["angle"], TIMES * one.sd["angle"])
    slips = [likeliest(one.likely)] if one.likely else []
    return "; ".join([*([why] if why else []), *slips, *(h.sentence for h in sorted(hints, key=lambda h: h.misfit))])


def likeliest(causes: tuple[Cause, ...]) -> str:
    """'likeliest slip: in the angle B to D at C the minutes were misread, 43 for 33 (angles.csv:14)'."""
    return f"likeliest slip{'s' if len(causes) > 1 else ''}: " + ", or ".join(texts_of(causes))


@dataclass(frozen=True)
class Words:
    """Sizes and names in the job's units."""

    job: Job

    def length(self, metres: float) -> str:
        """A size without sign: '1.000 m'; small ones in millimetres or thousandths of feet."""
        unit = self.job.settings.units.length
        if abs(metres) < 0.1:
            return small_length(abs(metres), unit).removeprefix("+")
        return f"{abs(metres) / LENGTHS[unit]:.3f} {unit}"

    def angle(self, radians: float) -> str:
        """An angle with its sign, in the job's notation."""
        notation = self.job.settings.units.angle
        return format_angle(radians, notation) + ("" if notation in ("dms", "packed") else f" {notation}")

    def name(self, station: int) -> str:
        """A station."""
        return str(self.job.network.stations.names[station])

    def line(self, i: int, j: int) -> str:
        """A line or leg."""
        return f"{self.name(i)}-{self.name(j)}"

    def row(self, row: int) -> str:
        """A reading by its id."""
        rows = self.job.network.rows
        return str(self.job.network.blocks[rows.block[row]].name(int(rows.row[row])))


def _some(hints: Iterable[Hint], of: int) -> list[Hint]:
    """The best few of one sort; none where more than half of all that could fit do."""
    found = sorted(hints, key=lambda h: h.misfit)
    return found[:MOST] if of < 2 or 2 * len(found) <= of else []


def _levels(words: Words, one: Closure, levels: Levels) -> list[Hint]:
    w, tolerance = one.misclosure["height"], TIMES * one.sd["height"]
    within = f"(within {words.length(tolerance)})"
    exchanged = [
        Hint(abs(w - size) / tolerance, f"the misclosure is what the sights of {place} would leave in each other's "
             f"column {within}")
        for place, size in changes(words.job, one.rows, levels.rises) if abs(w - size) <= tolerance < abs(size)
    ]  # fmt: skip
    cause = "a staff misread by that, on any of its lines"
    steps = [] if one.likely else _steps(words, w, tolerance, cause)
    return [*steps, *_some(exchanged, len(levels.rises))]


def _heights(words: Words, one: Closure, heights: Heights) -> list[Hint]:
    """Whole steps, and heights of instrument or target that were counted twice, with the wrong sign, or not at all."""
    w, tolerance = one.misclosure["height"], TIMES * one.sd["height"]
    shares = _height_shares(heights)
    booked = sorted({round(value, 4) for _, _, value in shares if value})
    found, tried = [], 0
    for (what, i, j), share, value in shares:
        slips = [(-share * v, v, "was perhaps not applied") for v in booked]
        if value:
            slips = [(share * value, value, "was perhaps applied twice"),
                     (2 * share * value, value, "may have the wrong sign")]  # fmt: skip
        at = f"the {what} height at {words.name(i)}" + (f" seen from {words.name(j)}" if j >= 0 else "")
        for slip, size, text in slips:
            away, tried = abs(w - slip), tried + 1
            if away <= tolerance and FINE * tolerance <= abs(slip):
                found.append(Hint(away / (tolerance or 1.0), f"{at} {text}: that would leave {words.length(slip)} "
                                  f"({words.length(size)} is booked, within {words.length(tolerance)})"))  # fmt: skip
    cause = "a height of instrument or target, or a staff, wrong by that"
    return [*([] if one.likely else _steps(words, w, tolerance, cause)), *_some(found, tried)]


_Height = tuple[str, int, int]
"""instrument and its station, -1; or target, its station and the instrument's."""


def _height_shares(heights: Heights) -> list[tuple[_Height, float, float]]:
    """Heights with their shares in the misclosure and sizes: an instrument's through the set-up, a target's of a
    line."""
    shares: dict[tuple[_Height, int, float], float] = {}
    for rise, sign in zip(heights.rises, heights.signs, strict=True):
        for of in rise.sightings:
            share = sign * of.share
            for key, by in (
                ((("instrument", of.at, -1), of.setup, of.instrument), share),
                ((("target", of.to, of.at), of.setup, of.target), -share),
            ):
                shares[key] = shares.get(key, 0.0) + by
    return [(what, share, value) for (what, _, value), share in shares.items() if abs(share) > SHARE]


def _steps(words: Words, w: float, tolerance: float, cause: str) -> list[Hint]:
    """A whole number of units or tenths of the staff."""
    within = f"(within {words.length(tolerance)})"
    unit = words.job.settings.units.length
    for step, what in ((LENGTHS[unit], {"m": "metre"}.get(unit, "foot")),
                       (LENGTHS[unit] / 10, {"m": "decimetre"}.get(unit, "tenth of a foot"))):  # fmt: skip
        n = round(abs(w) / step)
        away = abs(abs(w) - n * step)
        if 1 <= n <= 9 and away <= tolerance and FINE * tolerance <= step:
            many = {"metre": "metres", "decimetre": "decimetres", "foot": "feet"}.get(what, "tenths of a foot")
            size = f"a whole {what}" if n == 1 else f"{n} whole {many}"
            return [Hint(away / tolerance, f"the misclosure is {size}: {cause} {within}")]
    return []


def _traverse(words: Words, one: Closure, walked: Walked) -> list[Hint]:
    done = walked.traversed
    if done.turnable or not done.turned:
        return _along_legs(words, one, done) if not done.turnable else []
    if one.verdicts.get("angle") == NOT_MET:
        assert done.angle is not None
        w, tolerance = done.angle.value, TIMES * one.sd["angle"]
        backwards = [] if one.likely else half_circle(words, w, tolerance)
        return [*backwards, *_of_angles(words, done, w, tolerance), *_meeting(words, walked)]
    hints = _along_legs(words, one, done)
    return hints if done.angle else [*hints, *_bisector(words, walked)]


def half_circle(words: Words, w: float, tolerance: float) -> list[Hint]:
    """A misclosure of half a circle."""
    away = abs(wrap(w - TURN / 2))
    if away > tolerance or FINE * tolerance > TURN / 2:
        return []
    return [Hint(away / tolerance, "the angles misclose by half a circle: a direction read backwards, a face mixed up, "
                 f"or a deflection booked as an angle (within {words.angle(tolerance)})")]  # fmt: skip


def _of_angles(words: Words, done: Traversed, w: float, tolerance: float) -> list[Hint]:
    once = []
    within = f"(within {words.angle(tolerance)})"
    for one in done.turned:
        t, at = one.form.value, words.name(one.at)
        away = min(abs(wrap(w - t)), abs(wrap(w + t)))
        if away <= tolerance < abs(wrap(t)):
            once.append(Hint(away / tolerance, f"the angles misclose by the angle at {at}: it may have been dropped "
                             f"or counted twice {within}"))  # fmt: skip
    return _some(once, len(done.turned))


def _meeting(words: Words, walked: Walked) -> list[Hint]:
    """Stations whose angle, taking the whole misclosure, closes the traverse."""
    done, booked = walked.traversed, walked.booked
    if done.angle is None or done.angle.value == 0:
        return []
    hints = []
    turned = [replace(total([a, done.angle * -1.0]), value=a.value - done.angle.value) for a in done.booked]
    before = [polar(d, a) for d, a in zip(done.legs, done.booked, strict=True)]
    behind = [polar(d, a) for d, a in zip(done.legs, turned, strict=True)]
    for one in done.turned:
        k = _leg_behind(done, one.at)
        gap = _misclosed(booked, done, [*before[:k], *behind[k:]])
        size, times = _plane(booked, gap)
        if times <= TIMES_PLANE:
            tolerance = size / times * TIMES_PLANE if times else 0.0
            hints.append(Hint(times / TIMES_PLANE, "forwards and backwards the traverse meets at "
                              f"{words.name(one.at)}, to {words.length(size)}: the angle there may be wrong by "
                              f"{words.angle(done.angle.value)} (within {words.length(tolerance)})"))  # fmt: skip
    return _some(hints, len(done.turned))


def _leg_behind(done: Traversed, at: int) -> int:
    """Number of the first leg that an angle at a station turns: none of a loop for its first station's angle."""
    if done.traverse.closed and at == done.traverse.stations[0]:
        return len(done.legs)
    return done.traverse.stations.index(at)


def _misclosed(booked: Booked, done: Traversed, steps: list[tuple[Form, Form]]) -> tuple[Form, Form]:
    """East and north of the steps, less those of the known ends."""
    first, last = done.traverse.stations[0], done.traverse.stations[-1]
    out = []
    for c in range(2):
        ends = [] if done.traverse.closed else [booked.coordinate(first, c), booked.coordinate(last, c) * -1.0]
        out.append(total([*(step[c] for step in steps), *ends]))
    return out[0], out[1]


def _plane(booked: Booked, gap: tuple[Form, Form]) -> tuple[float, float]:
    """Size of a vector in metres and in standard deviations."""
    g = np.array([gap[0].value, gap[1].value])
    inverse = np.linalg.pinv(booked.covariance(list(gap)), hermitian=True)
    return float(np.hypot(*g)), math.sqrt(max(float(g @ inverse @ g), 0.0))


def _along_legs(words: Words, one: Closure, done: Traversed) -> list[Hint]:
    """Legs that the linear misclosure runs along."""
    assert one.plane is not None
    w, cov = np.array([one.misclosure["east"], one.misclosure["north"]]), np.array(one.plane)
    hints = []
    for (i, j), bearing in zip(pairwise(done.traverse.stations), done.balanced, strict=True):
        u = np.array([math.sin(bearing.value), math.cos(bearing.value)])
        across = np.array([u[1], -u[0]])
        tolerance = TIMES * math.sqrt(max(float(across @ cov @ across), 0.0))
        away, size = abs(float(across @ w)), float(u @ w)
        if away <= tolerance:
            way = "long" if size > 0 else "short"
            hints.append(Hint(away / (tolerance or 1.0), f"the misclosure runs along {words.line(i, j)}: its length "
                              f"may be {words.length(size)} too {way} (to {words.length(tolerance)} "
                              "sideways)"))  # fmt: skip
    return _some(hints, len(done.legs))


def _bisector(words: Words, walked: Walked) -> list[Hint]:
    """Stations on the perpendicular bisector of the closing line."""
    done, booked = walked.traversed, walked.booked
    steps = [polar(d, a) for d, a in zip(done.legs, done.booked, strict=True)]
    whole = _misclosed(booked, done, steps)
    hints = []
    for one in done.turned:
        k = _leg_behind(done, one.at)
        ahead = [total([step[c] for step in steps[k:]]) for c in range(2)]  # P to E'
        wanted = [total([ahead[c], whole[c] * -1.0]) for c in range(2)]  # P to E
        reached, due = (math.hypot(*(form.value for form in pair)) for pair in (ahead, wanted))
        if min(reached, due) == 0:
            continue
        radial = total([*(f * (f.value / reached) for f in ahead), *(f * (-f.value / due) for f in wanted)])
        tolerance = TIMES * math.sqrt(booked.covariance([radial])[0, 0])
        away = abs(reached - due)
        wrong = wrap(math.atan2(ahead[0].value, ahead[1].value) - math.atan2(wanted[0].value, wanted[1].value))
        if away <= tolerance:
            hints.append(Hint(away / (tolerance or 1.0), "the perpendicular bisector of the closing line passes by "
                              f"{words.name(one.at)}: the angle there may be wrong by {words.angle(wrong)} (both ends "
                              f"of the line are equally far from it within {words.length(tolerance)})"))  # fmt: skip
    return _some(hints, len(done.turned))


def with_common(job: Job, closures: tuple[Closure, ...]) -> tuple[Closure, ...]:
    """The closures with the lines or legs common to all that fail, and in none that closes, added to those that do."""
    words, out = Words(job), list(closures)
    for of, what in (("level", "line"), ("height", "line"), ("traverse", "leg")):
        here = [k for k, one in enumerate(closures) if of in one.kind]
        failing = [k for k in here if closures[k].verdict == NOT_MET]
        if len(failing) < 2:
            continue
        shared = set.intersection(*(_pieces(closures[k]) for k in failing))
        for k in here:
            if k not in failing:
                shared -= _pieces(closures[k])
        named = [words.line(i, j) + (f" ({words.row(row)})" if row >= 0 else "") for i, j, row in sorted(shared)]
        if named and len(shared) < min(len(_pieces(closures[k])) for k in failing):
            rest = f" and {len(named) - MOST} more" if len(named) > MOST else ""
            these = f"{what} {named[0]} is" if len(named) == 1 else f"{what}s {' and '.join(named[:MOST])}{rest} are"
            text = f"{these} common to all {len(failing)} that fail and in none that closes"
            for k in failing:
                if len(named) == 1 and out[k].likely:  # the slip is in it, with text and place
                    continue
                out[k] = replace(out[k], sentence="; ".join(s for s in (text, out[k].sentence) if s))
    return tuple(out)


def _pieces(one: Closure) -> set[tuple[int, int, int]]:
    """Lines with their rows, or legs."""
    pairs = [(min(p), max(p)) for p in pairwise(one.stations)]
    rows = one.rows if "level" in one.kind else (-1,) * len(pairs)
    return {(*pair, row) for pair, row in zip(pairs, rows, strict=True)}
