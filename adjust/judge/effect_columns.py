"""Effects that many readings could share, each as one column of errors: what it would add to every reading.

constant of distances      1         of a reflector or an instrument, metres
scale of distances         D         of an instrument, of one of its days, a pure number
refraction                 dz/dk     of all zenith angles or of a day's (adjust.kinds.zenith_angle), a change of k
zenith index               1         of an instrument or of one of its days, radians
staff scale                rise      of a level or a table, a pure number
orientation                1         of a table of azimuths without a turn of their own, radians
instrument height          dr/dh     of all sights from a station, and of those with one booked height (common_heights)
target height              dr/dh     of all sights to a station, and of those with one booked height
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from adjust.kinds import KINDS
from adjust.network import Array, Bools, Ints, Network
from adjust.solver.solution import Solution

FEWEST = 3
"""Readings below which nothing is called common to them: of two that differ either may be wrong."""
MOST = 60
"""Effects that are tested; with more the ones of single days go first, then those of the fewest readings. Each costs
one more right-hand side of a solved system, and each is one more chance of a false one."""
CONSTANT, SCALE, REFRACTION = "constant", "scale", "refraction"
INDEX, STAFF, ORIENTATION = "zenith index", "staff scale", "orientation"
INSTRUMENT_HEIGHT, TARGET_HEIGHT = "instrument height", "target height"
DIMENSION = {CONSTANT: "length", SCALE: "ratio", REFRACTION: "number", INDEX: "angle", STAFF: "ratio",
             ORIENTATION: "angle", INSTRUMENT_HEIGHT: "length", TARGET_HEIGHT: "length"}  # fmt: skip
REFLECTOR, INSTRUMENT, TABLE, DAY, ALL = "reflector", "instrument", "table", "day", "all"
SET_UP = "set-up"
STEP_M = 1e-3
"""Metres over which a reading is differenced by a height: the second derivative is below 1e-2 per metre at 10 m."""
FAILING = 2
"""Readings of a set-up that must fail before its heights are looked at: every set-up has two, and each is one more
chance of a false one."""


@dataclass(frozen=True)
class Effect:
    """One column of errors: ``values`` (k,) a unit of the effect adds to the scalar ``rows`` (k,), ascending."""

    what: str
    by: str
    """What the rows have in common: reflector, instrument, table, day, all."""
    of: str
    """The name of it: round, station-3, station-3 on 2026-05-14, distances.csv; '' for all."""
    rows: Ints
    values: Array
    also: tuple[tuple[str, str], ...] = ()
    """(by, of) of others with the very same readings."""

    def times(self, matrix: Array) -> Array:
        """e'X for X (R, ...)."""
        return np.asarray(self.values @ matrix[self.rows])


def effects(network: Network, by_group: Array, adjusted: Array) -> tuple[list[Effect], int]:
    """The effects to test, and how many are left out; ``by_group`` (R,) partials by the group unknowns, ``adjusted``
    (R,) readings: with those observed a blunder would make a scale of its own."""
    found = [e for e in _joined(_all(_Rows(network, by_group, adjusted))) if len(e.rows) >= FEWEST]
    ranked = sorted(range(len(found)), key=lambda k: (found[k].by == DAY, -len(found[k].rows), k))
    kept = sorted(ranked[:MOST])
    return [found[k] for k in kept], len(found) - len(kept)


def common_heights(solution: Solution, failing: Bools) -> list[Effect]:
    """Heights of instruments and targets at the set-ups of which two readings fail their own tests (R,)."""
    network, design = solution.network, solution.design
    positions = np.where(np.isnan(solution.positions), design.unasked, solution.positions)
    found: dict[tuple[str, int, float | None], list[tuple[int, float]]] = {}
    for b, block in enumerate(network.blocks):
        if block.above is None or "both" not in KINDS[block.kind].touched(block.surface):
            continue
        rows = network.rows.of_block(b, len(block))
        for end, what in enumerate((INSTRUMENT_HEIGHT, TARGET_HEIGHT)):
            higher = block.above.copy()
            higher[:, end] += STEP_M
            by = (design.values(replace(block, above=higher), positions, solution.groups)
                  - design.values(block, positions, solution.groups))[:, 0] / STEP_M  # fmt: skip
            for i in np.flatnonzero(rows >= 0).tolist():
                for height in (None, round(float(block.above[i, end]), 4)):
                    key = (what, int(block.stations[i, end]), height)
                    found.setdefault(key, []).append((int(rows[i]), float(by[i])))
    out = []
    for (what, station, _), pairs in found.items():
        rows, values = (np.array(column) for column in zip(*sorted(pairs), strict=True))
        if len(rows) >= FEWEST and failing[rows].sum() >= FAILING:
            out.append(Effect(what, SET_UP, solution.names[station], rows.astype(np.int64), values.astype(float)))
    return list(_joined(out))


def _joined(found: Iterable[Effect]) -> list[Effect]:
    """Columns with the same readings and numbers are one; the name of a reflector leads, then that of an instrument."""
    out: dict[tuple[str, bytes, bytes], Effect] = {}
    for one in found:
        key = (one.what, one.rows.tobytes(), one.values.tobytes())
        first = out.get(key)
        if first is None:
            out[key] = one
        elif first.by == TABLE:
            out[key] = replace(one, also=((first.by, first.of), *first.also))
        else:
            out[key] = replace(first, also=(*first.also, (one.by, one.of)))
    return list(out.values())


class _Rows:
    """Scalar rows by what they say, with their labels as arrays (R,)."""

    def __init__(self, network: Network, by_group: Array, adjusted: Array) -> None:
        rows, blocks = network.rows, network.blocks
        self.by_group, self.values = by_group, adjusted
        self.says = np.array([KINDS[b.kind].says for b in blocks], dtype=object)[rows.block]
        self.turns = np.array(["turn" in KINDS[b.kind].fixes for b in blocks], dtype=bool)[rows.block]
        self.table = np.array([b.file for b in blocks], dtype=object)[rows.block]
        self.group, self.held = np.full(len(rows), -1), np.zeros(len(rows), dtype=bool)
        self.labels = {of: np.full(len(rows), "", dtype=object) for of in (REFLECTOR, INSTRUMENT, DAY)}
        for b, block in enumerate(blocks):
            here = np.flatnonzero(rows.block == b)
            i = rows.row[here]
            self.group[here], self.held[here] = block.group[i], block.held[i]
            for of, names in self.labels.items():
                if of in block.labels:
                    names[here] = np.array(block.labels[of], dtype=object)[i]

    def split(self, what: str, chosen: Bools, column: Array, label: str) -> Iterator[Effect]:
        """An effect for each name of ``label`` among the ``chosen`` rows (R,); rows without one go by their table."""
        named = self.labels[label] != ""
        for by, names, here in ((label, self.labels[label], chosen & named), (TABLE, self.table, chosen & ~named)):
            for name in dict.fromkeys(names[here].tolist()):
                yield _effect(what, by, name, here & (names == name), column)

    def tables(self, what: str, chosen: Bools, column: Array) -> Iterator[Effect]:
        """An effect for each table where there are several: one of them may be in another unit."""
        names = list(dict.fromkeys(self.table[chosen].tolist()))
        for name in names if len(names) > 1 else []:
            yield _effect(what, TABLE, name, chosen & (self.table == name), column)

    def days(self, what: str, chosen: Bools, column: Array, apart: bool) -> Iterator[Effect]:
        """An effect for each day where there are several, of each instrument where ``apart``."""
        instruments = self.labels[INSTRUMENT] if apart else np.full(len(chosen), "", dtype=object)
        for name in dict.fromkeys(instruments[chosen].tolist()):
            here = chosen & (instruments == name)
            days = dict.fromkeys(self.labels[DAY][here].tolist())
            if len(days) < 2:  # the only day is that of the instrument itself
                continue
            for day in filter(None, days):
                of = f"{name} on {day}" if name else day
                yield _effect(what, DAY, of, here & (self.labels[DAY] == day), column)


def _effect(what: str, by: str, of: str, chosen: Bools, column: Array) -> Effect:
    rows = np.flatnonzero(chosen)
    return Effect(what, by, of, rows, column[rows])


def _all(r: _Rows) -> Iterator[Effect]:
    """All effects, the same ones of a wider group before those of a narrower."""
    one = np.ones(len(r.values))
    length, zenith, rise = (~r.held & (r.says == says) for says in ("length", "zenith", "rise"))
    yield from r.split(CONSTANT, length, one, REFLECTOR)
    yield from r.split(CONSTANT, length, one, INSTRUMENT)
    yield from r.split(SCALE, length, r.values, INSTRUMENT)
    yield from r.days(SCALE, length, r.values, apart=True)
    yield from r.tables(SCALE, length, r.values)
    if (zenith & (r.group < 0)).any():
        yield _effect(REFRACTION, ALL, "", zenith & (r.group < 0), r.by_group)
    yield from r.days(REFRACTION, zenith, r.by_group, apart=False)
    yield from r.split(INDEX, zenith, one, INSTRUMENT)
    yield from r.days(INDEX, zenith, one, apart=True)
    yield from r.split(STAFF, rise, r.values, INSTRUMENT)
    bearing = ~r.held & r.turns & (r.group < 0)
    for table in dict.fromkeys(r.table[bearing].tolist()):
        yield _effect(ORIENTATION, TABLE, table, bearing & (r.table == table), one)
