"""Error budgets: what the standard deviation of a reading is made of, and that of a coordinate.

A reading. Its variance is a sum, whose terms are its shares:

    s^2 = (a_1 + a_2 + ...)^2 + b_1^2 + ... + sum_v |J_v s_v|^2

a: the terms of an instrument's linear model, of which each makes up a_i (a_1 + a_2 + ...), in proportion to its size;
b: terms of a root-sum-square, the zenith angle that reduced a slope distance, or the sd as booked; J_v: partials of the
reading by the centring vectors of instrument and targets (adjust.solver.centring), horizontal parts and heights apart.

A coordinate. dx = Q A'P e carries the errors of the readings, of covariance sum_g V_g, into the coordinates:

    Var x = Q A'P [sum_g V_g] P A Q = sum_g Q N_g Q        N_g = sum A*'G_g A* (adjust.judge.moments)

and the shares of the groups in every diagonal entry add up to one, since Q N Q = Q.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.book.stated import AS_BOOKED
from adjust.judge.groupings import CENTRING, Grouping, by_instrument
from adjust.judge.moments import group_parts, normals
from adjust.kinds import KINDS
from adjust.network import PARTS, Array, Block
from adjust.solver.design import State
from adjust.solver.engine import Pattern
from adjust.solver.solution import Solution
from adjust.solver.threads import one_thread

GIVEN_COVARIANCE = "covariance as given"
STATIONS_MOST = 500
"""Stations up to which the coordinates have budgets: Q is formed in full (tests/judge/components_study.py times it)."""


@dataclass(frozen=True)
class Share:
    """One share of a reading's variance."""

    what: str
    sd: float
    """Its own standard deviation, metres or radians."""
    share: float
    """Of the variance of the reading."""
    linear: bool = False
    """Whether it adds to the row's other linear ones before the squares are added."""


@dataclass(frozen=True)
class CoordinateBudget:
    """What the variance of one coordinate comes from."""

    station: str
    part: str
    """east, north, height."""
    sd: float
    """Standard deviation in metres, scaled."""
    shares: tuple[tuple[str, float], ...]
    """Group of readings and its share of the variance, the largest first; where readings of two groups share a given
    covariance each has half of it, and a share may be negative."""


def budget(solution: Solution) -> list[tuple[Share, ...]]:
    """Shares of every scalar row (R,), the stated ones first, then centring; () for conditions."""
    rows, blocks = solution.network.rows, solution.network.blocks
    given = _given_covariances(solution)
    centring = _centring(solution)
    out: list[tuple[Share, ...]] = []
    for r, (b, i, p) in enumerate(zip(rows.block.tolist(), rows.row.tolist(), rows.part.tolist(), strict=True)):
        if solution.design.held[r]:
            out.append(())
            continue
        own = [(GIVEN_COVARIANCE, given[r] ** 0.5, given[r], False)] if r in given else _stated(blocks[b], i, p)
        pieces = own + centring.get(r, [])
        total = sum(variance for _, _, variance, _ in pieces)
        out.append(tuple(Share(what, sd, variance / total, linear) for what, sd, variance, linear in pieces))
    return out


Piece = tuple[str, float, float, bool]
"""What, its own standard deviation, its part of the variance, and whether it is a linear one."""


def _stated(block: Block, i: int, p: int) -> list[Piece]:
    """What the stated standard deviation of part ``p`` of row ``i`` is made of."""
    made = block.makeup
    if made is None:
        sd = float(block.sd[i, p])
        return [(AS_BOOKED, sd, sd * sd, False)]
    here = [(s, float(s.sd[i])) for s in made.sources if s.sd[i]]
    several = sum(s.linear for s, _ in here) > 1
    linear = sum(sd for s, sd in here if s.linear)
    factor = f", times {made.factor:g}" if made.factor != 1 else ""
    counted = (", two pointings" if KINDS[block.kind].pointings == 2 else "") + _mean_of(float(made.count[i]))
    return [
        (s.what + (counted if s.counted else "") + factor, sd, sd * (linear if s.linear else sd), s.linear and several)
        for s, sd in here
    ]


def _mean_of(count: float) -> str:
    if np.isnan(count) or count == 1:
        return ""
    return ", one face only" if count == 0.5 else f", mean of {count:g}"


def _given_covariances(solution: Solution) -> dict[int, float]:
    """Variances of rows with a given covariance."""
    return {
        int(row): float(cluster.covariance[k, k])
        for cluster in solution.network.clusters
        for k, row in enumerate(cluster.rows)
    }


def _centring(solution: Solution) -> dict[int, list[Piece]]:
    """Shares of the centring vectors by scalar row."""
    design = solution.design
    if not design.vectors.any:
        return {}
    effect = (
        design.linearise(State(solution.positions, solution.groups)).by_vector
        * design.vectors.sd[design.vectors.of_row]
    )
    across, up = (effect[:, :, :2] ** 2).sum(axis=2), effect[:, :, 2] ** 2
    found: dict[int, list[Piece]] = {}
    rows, blocks, names = solution.network.rows, solution.network.blocks, solution.names
    for r, slot in np.argwhere(design.vectors.of_row >= 0).tolist():
        block, i = blocks[rows.block[r]], int(rows.row[r])
        sights = KINDS[block.kind].sights
        end = sights[0][0] if slot == 0 else sights[slot - 1][1]
        who = f"of the {'target' if slot else 'instrument'} at {names[block.stations[i, end]]}"
        for what, variance in ((f"centring {who}", across[r, slot]), (f"height {who}", up[r, slot])):
            if variance > 0:
                found.setdefault(r, []).append((what, float(variance) ** 0.5, float(variance), False))
    return found


def station_budget(solution: Solution, scale: float = 1.0) -> tuple[CoordinateBudget, ...]:
    """Shares of the groups of readings in the variance of every unknown coordinate; () above STATIONS_MOST stations."""
    design = solution.design
    numbers = design.unknowns.coordinate
    at = np.argwhere((numbers >= 0) & ~np.isnan(solution.positions))
    if len(np.unique(at[:, 0])) > STATIONS_MOST or not len(at):
        return ()
    by = by_instrument(design)
    grouping = Grouping(CENTRING, by.names, by.of_row, design.vectors.any)
    with one_thread():
        carried = _carried(solution, grouping)
    variance = carried.sum(axis=0)
    out = []
    for station, part in at.tolist():
        number = numbers[station, part]
        total = float(variance[number])
        of = carried[:, number] / total if total > 0 else carried[:, number] * 0
        shares = tuple((grouping.labels[g], float(of[g])) for g in np.argsort(-of, kind="stable") if of[g])
        sd = float(np.sqrt(max(total, 0.0) * scale))
        out.append(CoordinateBudget(solution.names[station], PARTS[part], sd, shares))
    return tuple(out)


def _carried(solution: Solution, grouping: Grouping) -> Array:
    """Diagonals (G, u) of Q N_g Q."""
    count = solution.design.unknowns.count
    q = solution.cofactors.times(np.eye(count))
    pattern = Pattern.of([w.batch.columns for w in solution.whitened], count)
    parts = [group_parts(w, grouping) for w in solution.whitened]
    every = normals(pattern, solution.whitened, parts, grouping.count)
    return np.array([((n.T @ q) * q).sum(axis=0) for n in every])  # N_g = N_g', faster by rows
