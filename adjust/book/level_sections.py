"""Sections between lasting marks: runs of one section compared, and the balance of sights along a line.

A section is what a line levels from one lasting mark to the next. Two runs of one section, in opposite or in the same
direction, differ by d (run back turned round). With L the mean length of the two runs and n such pairs,

    standard deviation of one run per root kilometre         sqrt(sum(d^2/L) / 2n)
    standard deviation of the mean of both runs              sqrt(sum(d^2/L) / 4n)

because d of a section of L km has the variance 2 s^2 L if one kilometre of one run has s^2, and the mean of both runs a
quarter of that of d. This is the usual figure of a double levelling; it stands in H. Kahmen, Angewandte Geodaesie:
Vermessungskunde, and R. Witte, W. Sparla, Vermessungskunde und Grundlagen der Statistik fuer das Bauwesen (both quoted
from memory). The derivation above needs no more.

Balance: a line of sight that points up by c makes a line rise by c (sum of back lengths - sum of fore lengths) too
much: 4.8 mm for 10 sec and 100 m.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np

from adjust.book.level_lines import StaffLine, StaffTable
from adjust.book.reductions import Reduction
from adjust.book.rules import Limit
from adjust.network import Array
from adjust.units import RHO_SEC, small_length

LIKELY = 10.0 / RHO_SEC
"""Radians: a level in ordinary adjustment may point off by ten seconds, 0.05 mm/m. The limit of the FGCC's standards of
1984 for all orders but the third."""


@dataclass(frozen=True)
class Legs:
    """One level book reduced: names of rows, and rises, lengths of both sights, standard deviations (n,) by row."""

    table: StaffTable
    names: tuple[str, ...]
    rise: Array
    length: Array
    sd: Array


@dataclass(frozen=True)
class Section:
    """One run from one lasting mark to the next; metres."""

    line: str
    file: str
    ends: tuple[str, str]
    places: tuple[int, ...]
    rise: float
    length: float
    setups: int
    variance: float


def runs_of(legs: Legs, lasting: set[str]) -> list[Section]:
    """The sections of a level book; one with a set-up left out is none."""
    return [section for line in legs.table.lines for section in _of_line(legs, line, lasting)]


def _of_line(legs: Legs, line: StaffLine, lasting: set[str]) -> list[Section]:
    out, rows = [], []
    table = legs.table
    shots = [shot for shot in line.shots if shot.fore]
    for shot in shots:
        rows.append(shot)
        if legs.names[shot.row] not in lasting:
            continue
        at = np.array([s.row for s in rows])
        if not np.isnan(legs.sd[at]).any():
            places = sorted({table.place(s.back) for s in rows} | {table.place(s.row) for s in rows})
            ends = (legs.names[rows[0].back], legs.names[shot.row])
            out.append(
                Section(
                    line.name, table.cells.rows.file, ends, tuple(places), math.fsum(legs.rise[at]),
                    float(legs.length[at].sum()), len(rows), math.fsum(legs.sd[at] ** 2),
                )
            )  # fmt: skip
        rows = []
    return [s for s in out if s.ends[0] != s.ends[1]]


def sections(books: list[Legs], lasting: set[str], significance: float, rule: Limit | None = None) -> list[Reduction]:
    """Every pair of runs of one section, their sum, and the standard deviation that they show.

    Without a rule of the job they are compared with their standard deviations, all together at its significance.
    """
    by_ends: dict[tuple[str, ...], list[Section]] = {}
    for legs in books:
        for section in runs_of(legs, lasting):
            by_ends.setdefault(tuple(sorted(section.ends)), []).append(section)
    pairs = [(runs[k], runs[k + 1]) for runs in by_ends.values() for k in range(0, len(runs) - 1, 2)]
    odd = [(runs[-2], runs[-1]) for runs in by_ends.values() if len(runs) > 2 and len(runs) % 2]
    unit = books[0].table.cells.table.units.length
    tests = max(1, len(pairs) + len(odd))
    one_test = 1.0 - (1.0 - significance) ** (1.0 / tests)  # Sidak 1967, as for closures
    limit = NormalDist().inv_cdf(1.0 - one_test / 2.0)
    out = []
    so_far = 0.0
    for one, other in pairs:
        so_far += difference(one, other)
        out.append(_compared(one, other, limit, so_far, unit, rule))
    out += [_compared(one, other, limit, None, unit, rule) for one, other in odd]
    return out + (_together(pairs) if pairs else [])


def difference(one: Section, other: Section) -> float:
    """Rise of the first run minus that of the second in the same direction, metres."""
    return one.rise + (other.rise if one.ends == other.ends[::-1] else -other.rise)


def _compared(
    one: Section, other: Section, limit: float, so_far: float | None, unit: str, rule: Limit | None
) -> Reduction:
    d, sd = difference(one, other), math.sqrt(one.variance + other.variance)
    opposite = one.ends == other.ends[::-1]
    allowable: float | None = limit * sd
    if rule:
        allowable = rule.allowance.allowable(_mean_length(one, other), None, min(one.setups, other.setups))
    met = allowable is not None and abs(d) <= allowable
    way = "forward and back" if opposite else "run twice the same way"
    lines = one.line if one.line == other.line else f"{one.line} and {other.line}"
    of = f"{one.ends[0]} to {one.ends[1]}, {lines}"
    size, allowed = (small_length(abs(x), unit).lstrip("+") for x in (d, allowable or 0.0))
    by = f"of {rule.words}" if rule else "which their standard deviations allow"
    sentence = f"{of}, {way}: the two runs differ by {size}, more than the {allowed} {by}."
    if allowable is None:
        sentence = f"{of}: {by} asks for the length of the section, which was not booked."
    values: dict[str, float | None] = {
        "first": one.rise, "second": -other.rise if opposite else other.rise, "difference": d, "sd_difference": sd,
        "allowable": allowable, "length": _mean_length(one, other), "accumulated": so_far,
    }  # fmt: skip
    files = one.file if one.file == other.file else f"{one.file}, {other.file}"
    places = one.places + other.places
    verdict = "cannot be tested" if allowable is None else "met" if met else "not met"
    return Reduction("sections", of, files, places, values, "length", verdict, "" if met else sentence)


def _mean_length(one: Section, other: Section) -> float | None:
    length = (one.length + other.length) / 2
    return None if math.isnan(length) else length


def per_root_km(differences: Array, lengths: Array) -> tuple[float, float]:
    """Standard deviations of one run and of the mean of both, m per root km, from d and L (n,) in metres."""
    one = math.sqrt(float(np.sum(differences**2 / (lengths / 1000.0))) / (2 * len(differences)))
    return one, one / math.sqrt(2.0)


def _together(pairs: list[tuple[Section, Section]]) -> list[Reduction]:
    """The standard deviation of a kilometre that all pairs together show."""
    found = [(one, other) for one, other in pairs if _mean_length(one, other)]
    if not found:
        return []
    d = np.array([difference(*pair) for pair in found])
    lengths = np.array([_mean_length(*pair) for pair in found], dtype=float)
    one, mean = per_root_km(d, lengths)
    values: dict[str, float | None] = {
        "sd_one_run_per_root_km": one, "sd_mean_per_root_km": mean, "accumulated": math.fsum(d),
        "length": float(lengths.sum()), "pairs": float(len(d)),
    }  # fmt: skip
    sentence = (
        f"The runs show {one * 1000:.2f} mm*sqrt(km) for one run and {mean * 1000:.2f} mm*sqrt(km) for the mean of "
        f"both, from {len(d)} pair{'s' if len(d) > 1 else ''} over {lengths.sum() / 1000:.2f} km."
    )
    file = ", ".join(dict.fromkeys(s.file for pair in found for s in pair))
    return [Reduction("sections together", f"{len(d)} pairs", file, (), values, "length", "", sentence)]


def balances(table: StaffTable, lengths: tuple[Array, Array], tilt: tuple[Array, Array], sd: Array) -> list[Reduction]:
    """The balance of back and fore sights of every line, and what a collimation error would do there.

    ``tilt`` holds the collimation (n,) that the rows are corrected by and its standard deviation.
    """
    out = []
    for line in table.lines:
        rows = np.array([shot.row for shot in line.shots if shot.fore], dtype=np.int64)
        rows = rows[~np.isnan(sd[rows])]
        out.append(_balance(table, line, lengths[0][rows], lengths[1][rows], (tilt[0][rows], tilt[1][rows]), sd[rows]))
    return out


def _uneven(line: StaffLine, uneven: float, effect: float, own: float, unit: str) -> str:
    more, less = ("back", "fore") if uneven > 0 else ("fore", "back")
    size, sd = (small_length(abs(x), unit).lstrip("+") for x in (effect, own))
    return (
        f"Line {line.name}: the {more} sights are {abs(uneven):.0f} m longer in all than the {less} sights; a "
        f"collimation of 10 sec is {size} there, more than the standard deviation {sd} of the line."
    )


def _balance(
    table: StaffTable, line: StaffLine, back: Array, fore: Array, tilt: tuple[Array, Array], sd: Array
) -> Reduction:
    file, unit = table.cells.rows.file, table.cells.table.units.length
    places = tuple(table.place(i) for i in line.rows)
    uneven = float((back - fore).sum())
    if math.isnan(uneven) or not len(back):
        said = f"Line {line.name}: not every sight has its length, so the balance of the sights cannot be tested."
        return Reduction("sight balance", line.name, file, places, {}, "length", "cannot be tested", said)
    effect, own = LIKELY * uneven, math.sqrt(math.fsum(sd**2))
    values: dict[str, float | None] = {
        "sum_back_lengths": float(back.sum()), "sum_fore_lengths": float(fore.sum()), "imbalance": uneven,
        "greatest_of_a_set_up": float(np.abs(back - fore).max()), "by_10_sec": effect, "sd_rise": own,
        "collimation": float(-(tilt[0] * (back - fore)).sum()) + 0.0,
        "sd_collimation": abs(float((tilt[1] * (back - fore)).sum())),
    }  # fmt: skip
    sentence = _uneven(line, uneven, effect, own, unit) if abs(effect) > own and not tilt[0].any() else ""
    return Reduction("sight balance", line.name, file, places, values, "length", "", sentence)
