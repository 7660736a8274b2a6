"""Slips of where and how: the wrong station, two pointings exchanged, constants, slopes and heights.

What the reading would be is computed from the network without the blunders.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from adjust.judge.effect_words import KNOWN
from adjust.judge.slip_forms import Form, Slipped
from adjust.kinds import KINDS
from adjust.network import Array, Block
from adjust.units import small_length, wrap

BOTH, ONE_ONLY = 20.0, 0.05
"""An exchange makes two readings wrong at once: where both are suspect it explains what else would take two slips (each
of a prior weight of some 0.05), where only one is it explains too much."""
STATIONS_MOST = 2000
"""Other stations tried for each column of a reading."""


def wrong_station(case: Slipped) -> Iterator[Form]:
    """The reading belongs to another station of the job."""
    solution, own = case.solution, case.block.stations[case.i]
    placed = np.flatnonzero(np.isfinite(case.state.positions).any(axis=1))[:STATIONS_MOST]
    for column, name in enumerate(KINDS[case.kind].stations):
        others = np.setdiff1d(placed, own)
        if not len(others):
            continue
        copies = case.block.take(np.full(len(others), case.i))
        stations = copies.stations.copy()
        stations[:, column] = others
        for k, change in _changes(case, replace(copies, stations=stations)):
            told = (f"the {case.noun} is the one {_with(case, name, solution.names[int(others[k])])}, "
                    f"not {solution.names[int(own[column])]}")  # fmt: skip
            yield Form("", change, told, 0)


def _with(case: Slipped, column: str, station: str) -> str:
    return {"at": f"read at {station}", "from": f"from {station}"}.get(column, f"to {station}")


def pointings_swapped(case: Slipped) -> Iterator[Form]:
    """Two pointings of a set in each other's row; the targets of two angles at a station."""
    block, i = case.block, case.i
    same = block.stations[:, 0] == block.stations[i, 0]
    if case.kind == "direction":
        same &= block.group == block.group[i]
    elif case.kind == "angle":
        same &= block.stations[:, 1] == block.stations[i, 1]
    else:
        return
    to = KINDS[case.kind].stations.index("to" if case.kind == "direction" else "second")
    for j in np.flatnonzero(same):
        if j != i and block.stations[j, to] != block.stations[i, to]:
            names = [case.solution.names[int(block.stations[k, to])] for k in (i, int(j))]
            told = f"the readings to {names[0]} and {names[1]} were exchanged ({block.name(int(j))})"
            both = block.name(int(j)) in case.suspects
            change = wrap(float(block.values[i, 0] - block.values[j, 0]))
            yield Form("", change, told, 0, weight=BOTH if both else ONE_ONLY, sd=float(block.sd[j, 0]))


def reflector_constant(case: Slipped) -> Iterator[Form]:
    """A constant of another reflector, forgotten, or taken twice."""
    if case.kind != "distance":
        return
    unit, settings = case.solution.job.settings.units.length, case.solution.job.settings
    own = settings.reflectors.get(case.block.label("reflector", case.i), 0.0)
    known = {abs(c - own): f"the constant of reflector {name}" for name, c in settings.reflectors.items() if c != own}
    if own:
        known[abs(own)] = "its reflector's constant forgotten or taken twice"
    for size in KNOWN:
        known.setdefault(size, "the constant of another reflector")
    for size, told in known.items():
        for way in (1, -1):
            yield Form("", way * size, f"{told} ({small_length(size, unit).lstrip('+')})", 0)


def slope_for_horizontal(case: Slipped) -> Iterator[Form]:
    """A slope distance among horizontal ones, or the other way round."""
    if case.kind != "distance":
        return
    a, b = case.block.stations[case.i]
    rise = case.state.positions[b, 2] - case.state.positions[a, 2]
    if case.block.above is not None:
        rise += float(case.block.above[case.i, 1] - case.block.above[case.i, 0])
    if not math.isfinite(rise):
        return
    booked = float(case.block.values[case.i, 0])
    if case.block.surface == "slope":
        yield Form("", booked - math.hypot(booked, rise), "the horizontal distance was booked for the slope", 0)
    else:
        level = math.sqrt(max(booked**2 - rise**2, 0.0))
        yield Form("", booked - level, "the slope distance was booked for the horizontal one", 0)


def height_forgotten(case: Slipped) -> Iterator[Form]:
    """The height of instrument or target left out, or another one booked."""
    if KINDS[case.kind].on(case.block.surface) is None or not case.block.surface or case.kind == "levelled":
        return
    if "both" not in KINDS[case.kind].touched(case.block.surface):
        return
    used = [b.above for b in case.solution.network.blocks if b.above is not None]
    if not used:
        return
    own = np.zeros(2) if case.block.above is None else case.block.above[case.i]
    unit = case.solution.job.settings.units.length
    for end, what in enumerate(("instrument", "target")):
        heights = np.unique(np.round(np.concatenate([a[:, end] for a in used]), 4))
        heights = heights[np.abs(heights - own[end]) > 1e-4]
        if not len(heights):
            continue
        copies = case.block.take(np.full(len(heights), case.i))
        above = np.tile(own, (len(heights), 1))
        above[:, end] = heights
        for k, change in _changes(case, replace(copies, above=above)):
            told = f"the height of the {what} was forgotten or is another one" if not own[end] or not heights[k] else (
                f"the height of the {what} is that of another sight")  # fmt: skip
            yield Form("", change, f"{told} ({small_length(float(heights[k]), unit).lstrip('+')})", 0)


def _changes(case: Slipped, copies: Block) -> Iterator[tuple[int, float]]:
    """How much larger the reading is than each copy's computed value would have it, near the blunder found."""
    design = case.solution.design
    positions = np.where(np.isnan(case.state.positions), design.unasked, case.state.positions)
    with np.errstate(divide="ignore", invalid="ignore"):
        mine: Array = design.values(case.block.take(np.array([case.i])), positions, case.state.groups)[:, 0]
        others = design.values(copies, positions, case.state.groups)[:, 0]
    for k, value in enumerate(others.tolist()):
        change = float(value - mine[0])
        if math.isfinite(change):
            yield k, wrap(change) if case.wraps else change
