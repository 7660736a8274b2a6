"""Slips of where and how: the wrong station, two pointings exchanged, constants, slopes and heights.

What the reading would be is computed from the network without the blunders.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from adjust.book.raw_texts import raw_texts
from adjust.judge.effect_words import KNOWN
from adjust.judge.slip_forms import FARTHEST, Form, Slipped
from adjust.kinds import KINDS
from adjust.network import Array, Block
from adjust.units import LENGTHS, small_length, wrap

if TYPE_CHECKING:
    from adjust.judge.leaving_out import Model

BOTH, ONE_ONLY = 20.0, 0.05
"""An exchange makes two readings wrong at once: where both are suspect it explains what else would take two slips (each
of a prior weight of some 0.05), where only one is it explains too much."""
NOT_IN_JOB = 0.1
"""Share of the weight of a wrong station for a point that is not in the job; common practice."""
FORGOTTEN = 10.0
"""Weight of a blank height among booked ones against that of a height booked for a sight that had none, or had that of
another sight: blanks are what is forgotten; common practice."""
NO_INSTRUMENT = 0.1
"""Weight of an instrument height booked where there was none: its other sights have it too; common practice."""
WIDER, SPREAD_M = 1.5, 0.1
"""A forgotten height may lie outside those in use: this many times their spread, at least 0.1 m; common practice."""
NEAREST = 50
"""Other stations, those nearest to the reading, whose own uncertainty is computed."""
LEAST_SHARE = 0.1
"""A miss is never surer than this share of the blunder's own standard deviation: rounding feigns no perfect fit."""
STATIONS_MOST = 2000
"""Other stations tried for each column of a reading."""


def wrong_station(case: Slipped) -> Iterator[Form]:
    """The reading belongs to another station of the job, or to none of them.

    How far the other station is from where the reading puts it is as uncertain as the network is there: see ``_miss``.
    A single reading to an unknown point can take any value, so nothing tells it from some other amount. Only where all
    readings of the sight fail together and no station fits, one unknown point explains what else takes a slip in each.
    """
    solution, own = case.solution, case.block.stations[case.i]
    placed = np.flatnonzero(np.isfinite(case.state.positions).any(axis=1))[:STATIONS_MOST]
    count, fits = 0, False
    for column, name in enumerate(KINDS[case.kind].stations):
        others = np.setdiff1d(placed, own)
        if not len(others):
            continue
        copies = case.block.take(np.full(len(others), case.i))
        stations = copies.stations.copy()
        stations[:, column] = others
        copies = replace(copies, stations=stations)
        found = list(_changes(case, copies))
        sds = _miss(case, copies, found)
        count += len(found)
        for k, change in found:
            told = (f"the {case.noun} is the one {_with(case, name, solution.names[int(others[k])])}, "
                    f"not {solution.names[int(own[column])]}")  # fmt: skip
            miss = case.blunder - change
            fits |= k in sds and abs(wrap(miss) if case.wraps else miss) < FARTHEST * sds[k]
            yield Form("", change, told, 0, miss_sd=sds.get(k))
    if case.sight and not fits:
        target = solution.names[int(own[-1])]
        told = (f"no reading of this sight to {target} fits (also {', '.join(case.sight)}): it was to another point, "
                "one that is not in the job")  # fmt: skip
        weight = NOT_IN_JOB * BOTH ** len(case.sight) * (count + 1)  # not divided among the other stations
        yield Form("", case.blunder, told, 0, weight=weight, any_amount=True)


def _with(case: Slipped, column: str, station: str) -> str:
    return {"at": f"read at {station}", "from": f"from {station}"}.get(column, f"to {station}")


def _miss(case: Slipped, copies: Block, found: list[tuple[int, float]]) -> dict[int, float]:
    """Standard deviations of b - c for the nearest of other stations, by their place in ``found``.

    With the rows S left out, U = Q A'P E_S and K as in adjust.judge.leaving_out, the coordinates without them are
    x - U b, and x is not correlated with b. So with d the partials of the copy minus those of the reading itself

        var(b - c) = (K^-1)_bb + 2 (K^-1 U'd)_b + d'Q d + d'U K^-1 U'd
    """
    if case.model is None or not found:
        return {}
    away = {k: abs(wrap(case.blunder - c) if case.wraps else case.blunder - c) for k, c in found}
    near = sorted(away, key=lambda k: away[k])[:NEAREST]
    design, model = case.solution.design, case.model
    positions = np.where(np.isnan(case.state.positions), design.unasked, case.state.positions)
    own = case.block.take(np.full(1, case.i))
    cut = copies.take(np.array(near))
    d = np.zeros((design.unknowns.count + 1, len(near)))
    for block, sign in ((cut, 1.0), (own, -1.0)):
        by = np.nan_to_num(design.partials(block, positions, case.state.groups)[:, 0])
        columns = design.block_columns(block)
        at = np.broadcast_to(np.arange(len(near))[:, None], (len(near), columns.shape[1]))
        np.add.at(d, (np.broadcast_to(columns, at.shape), at), sign * np.broadcast_to(by, at.shape))
    d = d[:-1]
    without = model.without(case.left_out)
    along = without.covariance @ (_moved(model, case.left_out).T @ d)
    own_variance = without.covariance[0, 0]
    across = (along * np.linalg.solve(without.covariance, along)).sum(axis=0)
    variance = own_variance + 2 * along[0] + (d * model.influence.cofactors.times(d)).sum(axis=0) + across
    sd = case.sd * np.sqrt(np.maximum(variance / own_variance, 0.0))
    return {k: float(max(s, LEAST_SHARE * case.sd)) for k, s in zip(near, sd, strict=True)}


def _moved(model: Model, rows: Sequence[int]) -> Array:
    """U (u, k): how an error of one in each of the rows moves the unknowns while it is in."""
    errors = np.zeros((len(model.m), len(rows)))
    errors[list(rows), np.arange(len(rows))] = 1.0
    load = np.zeros((len(model.influence.cofactors.reduced) + 1, len(rows)))
    for w in model.influence.whitened:
        z = np.linalg.solve(w.factor, errors[w.batch.rows])
        np.add.at(load, w.batch.columns, w.reduced.transpose(0, 2, 1) @ z)
    return np.asarray(model.influence.cofactors.times(load[:-1]))


def pointings_swapped(case: Slipped) -> Iterator[Form]:
    """Two pointings of a set in each other's row, in a raw book also those of one face; the targets of two angles."""
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
            weight = BOTH if block.name(int(j)) in case.suspects else ONE_ONLY
            sd = float(block.sd[j, 0])
            yield Form("", wrap(float(block.values[i, 0] - block.values[j, 0])), told, 0, weight=weight, sd=sd)
            yield from _exchanged_in_a_face(case, int(j), names, weight, sd)


def _exchanged_in_a_face(case: Slipped, j: int, names: list[str], weight: float, sd: float) -> Iterator[Form]:
    """Two readings of one face in each other's row of a raw book; the mean of the faces has a part of that."""
    other_raws = raw_texts(case.solution.job, case.block, j)
    if len(case.raws) < 2 or len(other_raws) != len(case.raws):
        return
    for mine, other in zip(case.raws, other_raws, strict=True):
        change = mine.change(other.text)
        if change is not None:
            told = f"in one face the readings to {names[0]} and {names[1]} were exchanged (line {other.line})"
            change = mine.factor * wrap(change / mine.factor)
            yield Form(other.text, change, told, mine.line, mine.text, weight=weight, sd=sd)


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
    surface = case.block.surface
    if surface:
        told = "the horizontal distance was booked for the slope" if surface == "slope" else (
            "the slope distance was booked for the horizontal one")  # fmt: skip
        other = replace(case.block.take(np.full(1, case.i)), surface="ground-from" if surface == "slope" else "slope")
        for _, change in _changes(case, other):
            yield Form("", change, told, 0)
    else:
        level = math.sqrt(max(booked**2 - rise**2, 0.0))
        yield Form("", booked - level, "the slope distance was booked for the horizontal one", 0)


def height_forgotten(case: Slipped) -> Iterator[Form]:
    """The height of instrument or target left out, or another one booked.

    What was left out is one of the heights that this crew uses: their mean with their spread. Where a height is booked
    the sight may have had none, or the height is that of another sight.
    """
    if KINDS[case.kind].on(case.block.surface) is None or not case.block.surface or case.kind == "levelled":
        return
    if "both" not in KINDS[case.kind].touched(case.block.surface):
        return
    used = [b.above for b in case.solution.network.blocks if b.above is not None]
    own = np.zeros(2) if case.block.above is None else case.block.above[case.i]
    forms: list[Form] = []
    for end, what in enumerate(("instrument", "target")):
        heights = np.unique(np.round(np.concatenate([a[:, end] for a in used]), 4)) if used else np.zeros(0)
        heights = heights[(np.abs(heights - own[end]) > 1e-4) & (heights != 0)]
        if own[end]:
            forms += _another_height(case, end, what, own, heights)
        elif len(heights):
            forms += _no_height(case, end, what, own, heights)
    weights = sum(form.weight for form in forms)
    yield from (replace(form, weight=form.weight * len(forms) / weights) for form in forms)


def _no_height(case: Slipped, end: int, what: str, own: Array, heights: Array) -> Iterator[Form]:
    """Nothing is booked: the height is one of about ``heights`` (h,), which the blunder tells."""
    mean, spread = float(heights.mean()), max(WIDER * float(heights.std()), SPREAD_M)
    change = dict(_changes(case, _with_heights(case, end, own, [mean])))
    if 0 not in change or not change[0]:
        return
    by = change[0] / mean
    height = mean + (case.blunder - change[0]) / by
    told = f"the height of the {what} was forgotten (about {_height(case, height, 2)})"
    yield Form("", change[0], told, 0, weight=FORGOTTEN, sd=abs(by) * spread)


def _another_height(case: Slipped, end: int, what: str, own: Array, heights: Array) -> Iterator[Form]:
    """A height is booked where the sight had none, or that of another sight."""
    for k, change in _changes(case, _with_heights(case, end, own, [0.0, *heights.tolist()])):
        told = f"the sight had no height of the {what}"
        if k:
            told = f"the height of the {what} is that of another sight ({_height(case, float(heights[k - 1]), 4)})"
        yield Form("", change, told, 0, weight=1 / len(heights) if k else (NO_INSTRUMENT, 1.0)[end])


def _height(case: Slipped, height: float, places: int) -> str:
    unit = case.solution.job.settings.units.length
    text = f"{height / LENGTHS[unit]:.{places}f}"
    return f"{text.rstrip('0') if places > 2 else text} {unit}"


def _with_heights(case: Slipped, end: int, own: Array, heights: list[float]) -> Block:
    """Copies of the reading with other heights at one end."""
    above = np.tile(own, (len(heights), 1))
    above[:, end] = heights
    return replace(case.block.take(np.full(len(heights), case.i)), above=above)


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
