"""The words for what was found of the control."""

from __future__ import annotations

import math

import numpy as np

from adjust.judge.consistent import Found
from adjust.judge.held_marks import HeldMarks
from adjust.judge.scale_words import size_words as scale_size
from adjust.judge.shifts import Shifts
from adjust.network import Array
from adjust.solver.solution import Solution
from adjust.units import small_length

SCALE = "a common scale"
NUMBERS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten", "eleven", "twelve")
WINDS = ("north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west")


def unit_name(solution: Solution, marks: HeldMarks, shifts: Shifts, unit: int) -> str:
    """'M3' for the plane part of a mark, 'M3 height', or 'a common scale'."""
    if unit == len(shifts.units):
        return SCALE
    i = shifts.units[unit][0]
    name = solution.names[marks.station[i]]
    return f"{name} height" if marks.part[i] == 2 else name


def length_words(solution: Solution, metres: float) -> str:
    """'+43.0 mm', '+3.004 m', '-0.141 ft': small lengths in millimetres where the job is in metres."""
    unit = solution.job.settings.units.length
    return f"{metres:+.3f} m" if unit == "m" and abs(metres) >= 1 else small_length(metres, unit)


def size_words(solution: Solution, misfit: float, sd: float, what: str) -> str:
    """'estimate of all others minus known +43.0 mm, 3.6 times its uncertainty'."""
    size = length_words(solution, misfit)
    return f"{what} {size}, {abs(misfit) / sd:.1f} times its uncertainty" if sd > 0 else f"{what} {size}"


def findings(solution: Solution, marks: HeldMarks, shifts: Shifts, found: Found, factor: float) -> list[str]:
    """Sentences on what was released of a part, but for the scale itself; ``factor``: the variance factor."""
    names = [unit_name(solution, marks, shifts, u) for u in range(len(shifts.rows))]
    blamed = [u for u in found.blamed if u < len(shifts.units)]
    out = []
    rest = len(shifts.units) - len({*blamed, *(u for u in found.released if u < len(shifts.units))})
    for unit in blamed:
        out.append(_blame(solution, marks, shifts, found, unit, (factor, rest, found.doubtful)))
    if found.doubtful:
        pair = _pair(solution, marks, shifts, found, factor)
        out.append(pair or _doubt([names[u] for u in found.doubtful], found, bool(blamed)))
    return out


def _blame(solution: Solution, marks: HeldMarks, shifts: Shifts, found: Found, unit: int,
           told: tuple[float, int, tuple[int, ...]]) -> str:  # fmt: skip
    """'Control: M3 disagrees with the readings and the other five marks: they put it 43.0 mm ...'."""
    factor, rest, doubtful = told
    name = unit_name(solution, marks, shifts, unit)
    others = tuple(u for u in found.released if u != unit)
    shift = shifts.shift(unit, shifts.basis(others)) or shifts.shift(unit, shifts.basis(()))
    what = "heights" if name.endswith(" height") and not _has_plane(marks, shifts) else "marks"
    with_whom = f"the readings and the other {_count(rest, what)}"
    head = f"Control: {name} disagrees with {with_whom}"
    one = len(found.blamed) == 1 and not doubtful
    end = ("without it they agree" if one else "without what is named here they agree") if found.rest > 0 else (
        "without it nothing is left to compare")  # fmt: skip
    if shift is None:
        return f"{head}; {end}"
    t, _ = shifts.beyond(unit, shifts.basis(others))
    times = math.sqrt(t / factor) if factor > 0 else math.nan
    where = _where(solution, marks, shifts, unit, shift[0])
    return f"{head}: they put it {where}, {times:.1f} times its uncertainty; {end}"


def _has_plane(marks: HeldMarks, shifts: Shifts) -> bool:
    return bool((marks.part[np.concatenate(shifts.units)] < 2).any())


def _count(n: int, what: str) -> str:
    number = NUMBERS[n] if n < len(NUMBERS) else str(n)
    return f"{number} {what if n != 1 else what[:-1]}"


def _where(solution: Solution, marks: HeldMarks, shifts: Shifts, unit: int, shift: Array) -> str:
    """'43.0 mm to the east of its known place', '12.0 mm above its known height'."""
    parts = marks.part[shifts.units[unit]]
    length = length_words(solution, float(np.linalg.norm(shift))).lstrip("+")
    if (parts == 2).all():
        return f"{length} {'above' if shift[0] > 0 else 'below'} its known height"
    east = float(shift[parts == 0].sum())
    north = float(shift[parts == 1].sum())
    wind = WINDS[round(math.degrees(math.atan2(east, north)) / 45) % 8]
    return f"{length} to the {wind} of its known place"


def _doubt(names: list[str], found: Found, besides: bool) -> str:
    marks = [n for n in names if n != SCALE]
    who = " or ".join(marks)
    if SCALE in names:
        who = f"either {who} is wrong or the control has a common scale against the readings" if marks else SCALE
    else:
        who = f"{who} is wrong"
    end = "without the right one of them the others agree" if found.rest > 0 else "too few marks are left to compare"
    return f"Control: {'besides, ' if besides else ''}{who}: nothing here tells which; {end}"


def _pair(solution: Solution, marks: HeldMarks, shifts: Shifts, found: Found, factor: float) -> str:
    """Two marks in the plane with lengths between them: only their distance can be compared; '' for other cases."""
    if shifts.rank != 1 or len(shifts.units) != 2 or not shifts.scaled or found.blamed:
        return ""
    a, b = (int(marks.station[u[0]]) for u in shifts.units)
    told = shifts.shift(2, shifts.basis(()))
    if told is None:
        return ""
    known = solution.network.stations.known
    share, sd_share = float(told[0][0]), math.sqrt(float(told[1][0, 0]) * factor)
    off = share * math.dist(known[a, :2], known[b, :2])
    m = 1 / (1 + share)
    ppm, sd = (m - 1) * 1e6, m * m * sd_share * 1e6
    size = length_words(solution, abs(off)).lstrip("+")
    return (f"Control: the distance between {solution.names[a]} and {solution.names[b]} is {size} "
            f"{'longer' if off > 0 else 'shorter'} by the readings than by the known coordinates, {abs(ppm) / sd:.1f} "
            f"times its uncertainty: one of the two marks is wrong, or there is {scale_size(ppm, sd)}; nothing here "
            "tells which")  # fmt: skip
