"""Values of legs, turned angles and bearings as they were booked, as linear forms of the readings.

A `Form` is a value with its partials by the scalar rows and by the coordinates of known marks, so that sums of forms
carry their covariance: with b the partials of two forms, C = b Q b', and Q is the full covariance of the readings,

    Q = diag(s^2) + clusters + sum_v J_v diag(s_v^2) J_v'

(the centring vectors of adjust.solver.centring), and of the marks that are not held without error.

Lengths are brought to the plane at the provisional places: with c(D) the value that the frame and the kind compute for
a target at the plane distance D in the same direction, D solves c(D) = booked (Newton); partial 1 / c'(D). Heights are
taken as they are, so a slope carries no share of the zenith angles' precision.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from adjust.book.job import Job
from adjust.frames import LocalPlane, beside
from adjust.graph.parts import find_parts
from adjust.graph.sights import Sights, Way
from adjust.graph.starts import find_start
from adjust.kinds import KINDS
from adjust.network import CHECK, WEIGHTED, Array, Block, Bools, Ints, Network
from adjust.solver.design import Design, State, Unknowns
from adjust.solver.solution import Solution
from adjust.units import TURN, wrap

NEWTON = 4
"""Steps from a provisional length; the curvature of slope lengths makes the first good to millimetres."""


@dataclass(frozen=True)
class Form:
    """A value in metres or radians with its partials by scalar rows and by (station, component) of known marks."""

    value: float
    rows: dict[int, float] = field(default_factory=dict)
    marks: dict[tuple[int, int], float] = field(default_factory=dict)

    def __mul__(self, factor: float) -> Form:
        return Form(factor * self.value, {k: factor * v for k, v in self.rows.items()},
                    {k: factor * v for k, v in self.marks.items()})  # fmt: skip

    def __add__(self, other: Form) -> Form:
        return total([self, other])


def total(forms: list[Form]) -> Form:
    """The sum of some forms."""
    rows: dict[int, float] = {}
    marks: dict[tuple[int, int], float] = {}
    for one in forms:
        for k, v in one.rows.items():
            rows[k] = rows.get(k, 0.0) + v
        for mark, v in one.marks.items():
            marks[mark] = marks.get(mark, 0.0) + v
    return Form(math.fsum(one.value for one in forms), rows, marks)


def mean(forms: list[Form]) -> Form:
    """The plain mean of lengths."""
    return total(forms) * (1 / len(forms))


def mean_angle(forms: list[Form]) -> Form:
    """The plain mean of angles on the circle, in [0, full circle)."""
    first = forms[0].value
    near = [Form(first + wrap(one.value - first), one.rows, one.marks) for one in forms]
    middle = mean(near)
    return Form(middle.value % TURN, middle.rows, middle.marks)


@dataclass(frozen=True)
class Booked:
    """The readings of a job with provisional places of its stations."""

    job: Job
    network: Network
    places: Array
    """(n, 3) metres; NaN where nothing is known."""
    groups: Array

    @classmethod
    def of(cls, what: Job | Solution) -> Booked:
        """Of a job, at its starting values; of a solution, at the adjusted places."""
        if isinstance(what, Job):
            start = find_start(what.network, what.settings.frame.plane_height)
            return cls(what, what.network, start.positions, start.groups)
        return cls(what.job, what.job.network, what.positions, what.groups)

    @cached_property
    def sights(self) -> Sights:
        """Legs, sets, angles and bearings."""
        return Sights.of(self.network)

    @cached_property
    def frame(self) -> LocalPlane:
        """The job's frame."""
        return LocalPlane.of(self.network.stations, self.job.settings.frame.plane_height)

    @cached_property
    def design(self) -> Design:
        """The pattern of the readings, for the partials by their centring."""
        parts = find_parts(self.network)
        coupled = np.any([part.nodes.all(axis=1) for part in parts], axis=0)
        free = np.zeros((len(self.network.stations), 3), dtype=bool)
        return Design(self.network, self.frame, Unknowns.of(self.network, parts, free), np.asarray(coupled))

    @cached_property
    def _heights(self) -> Array:
        """Places with the plane's height where none is known: it only scales ground lengths."""
        out = self.places.copy()
        out[np.isnan(out[:, 2]), 2] = self.frame.plane_height
        return out

    @cached_property
    def observed(self) -> Array:
        """Values (R,): lengths on the plane (NaN where the ends have no places), angles to the marks themselves."""
        return self._plane[0]

    @cached_property
    def _plane(self) -> tuple[Array, Array]:
        """Values (R,) on the plane and their partials (R,) by the readings."""
        rows = self.network.rows
        value, partial = np.empty(len(rows)), np.ones(len(rows))
        for b, block in enumerate(self.network.blocks):
            here = rows.block == b
            i = rows.row[here]
            value[here] = block.values[i, rows.part[here]]
            says = KINDS[block.kind].says
            if says == "length" and (block.surface or block.offset is not None):
                on_plane, by = self._lengths(block)
                value[here], partial[here] = on_plane[i], by[i]
            elif says == "pointings" and block.offset is not None:
                value[here] -= self._aside(block)[i]
        return value, partial

    def _lengths(self, block: Block) -> tuple[Array, Array]:
        """Lengths (m,) of the plane that give the booked ones, and partials by these."""
        (i, j), kind = KINDS[block.kind].sights[0], KINDS[block.kind]
        a, b = self._heights[block.stations[:, i]], self._heights[block.stations[:, j]]
        m, d = len(block), np.hypot(*(b - a)[:, :2].T)
        along = (b - a)[:, :2] / d[:, None]
        by = np.ones(m)
        for _ in range(NEWTON):
            end = np.column_stack([a[:, :2] + d[:, None] * along, b[:, 2]])
            sights = self.frame.sights(
                np.concatenate([a, end]), np.arange(m), np.arange(m, 2 * m), block.surface, block.above
            )
            if block.offset is not None:
                sights, _ = beside(sights, block.offset)
            value, by_sight, _ = kind.on(block.surface)(sights[:, None], np.zeros(m))
            slope = (by_sight[:, 0, 0, :2] * along).sum(axis=1)
            d = d + (block.values[:, 0] - value[:, 0]) / slope
            by = 1 / slope
        return d, by

    def _aside(self, block: Block) -> Array:
        """Angles (m,) by which targets beside their marks read more than the marks."""
        i, j = KINDS[block.kind].sights[0]
        sights = self.frame.sights(self._heights, block.stations[:, i], block.stations[:, j])
        assert block.offset is not None
        moved, _ = beside(sights, block.offset)
        turn = np.arctan2(moved[:, 0], moved[:, 1]) - np.arctan2(sights[:, 0], sights[:, 1])
        return np.asarray((turn + TURN / 2) % TURN - TURN / 2)

    def row(self, row: int) -> Form:
        """One reading."""
        return Form(float(self._plane[0][row]), {row: float(self._plane[1][row])})

    def leg(self, i: int, j: int) -> Form:
        """The length of a leg on the plane, all its lengths meaned."""
        return mean([self.row(r) for r in self.sights.legs[min(i, j), max(i, j)]])

    def turned(self, at: int, back: int, fore: int) -> Form | None:
        """The angle at a station clockwise from back to fore, its ways meaned; None where it was not turned."""
        ways = self.sights.ways(at, back, fore)
        return mean_angle([self._way(way) for way in ways]) if ways else None

    def _way(self, way: Way) -> Form:
        return total([mean_angle([self.row(r) for r in rows]) * sign for rows, sign in way])

    def bearing(self, i: int, j: int) -> Form | None:
        """The measured bearing of a line from ``i``, readings at both ends meaned; None where there is none."""
        ahead = [self.row(r) for r in self.sights.bearings.get((i, j), ())]
        behind = [self.row(r) for r in self.sights.bearings.get((j, i), ())]
        forms = ahead + [Form(one.value + TURN / 2, one.rows) for one in behind]
        return mean_angle(forms) if forms else None

    def known_bearing(self, i: int, j: int) -> Form:
        """The bearing between two known stations, by their coordinates: da/dE = N/D^2, da/dN = -E/D^2."""
        east, north = (float(v) for v in (self.network.stations.known[j] - self.network.stations.known[i])[:2])
        d2 = east * east + north * north
        marks = {(j, 0): north / d2, (j, 1): -east / d2, (i, 0): -north / d2, (i, 1): east / d2}
        return Form(math.atan2(east, north) % TURN, {}, marks)

    def coordinate(self, i: int, component: int) -> Form:
        """A known coordinate."""
        return Form(float(self.network.stations.known[i, component]), {}, {(i, component): 1.0})

    def covariance(self, forms: list[Form]) -> Array:
        """(k, k) covariance of some forms."""
        rows = sorted({row for one in forms for row in one.rows})
        b = np.array([[one.rows.get(row, 0.0) for row in rows] for one in forms]).reshape(len(forms), len(rows))
        chosen = np.array(rows, dtype=np.int64)
        out = (b * self.variance[chosen]) @ b.T
        place = {row: k for k, row in enumerate(rows)}
        for cluster in self.network.clusters:
            inside = [k for k, row in enumerate(cluster.rows.tolist()) if row in place]
            if inside:
                part = b[:, [place[int(cluster.rows[k])] for k in inside]]
                out += part @ cluster.covariance[np.ix_(inside, inside)] @ part.T
        if self.design.vectors.any and len(rows):
            out += self._centring(b, chosen)
        for one, left in enumerate(forms):
            for other, right in enumerate(forms):
                out[one, other] += sum(v * right.marks[m] * self._mark_variance[m] for m, v in left.marks.items()
                                       if m in right.marks)  # fmt: skip
        return np.asarray(out)

    @cached_property
    def variance(self) -> Array:
        """(R,) stated variances, zero for rows of clusters."""
        out = self.design.sd**2
        for cluster in self.network.clusters:
            out[cluster.rows] = 0.0
        return np.asarray(out)

    @cached_property
    def _by_vector(self) -> Array:
        """(R, v, 3) partials by the centring vectors at the provisional places."""
        missing: Bools = np.asarray(np.isnan(self.places[:, :2]).any(axis=1))
        numbers = self.design.linearise(State(self.places, self.groups)).by_vector
        for b, block in enumerate(self.network.blocks):  # a place that is not known tells nothing of its centring
            rows = np.flatnonzero(self.network.rows.block == b)
            lost: Bools = np.asarray(missing[block.stations].reshape(len(block), -1).any(axis=1))
            numbers[rows[lost[self.network.rows.row[rows]]]] = np.nan
        return numbers

    def _centring(self, b: Array, rows: Ints) -> Array:
        of_row, sd = self.design.vectors.of_row[rows], self.design.vectors.sd
        used = np.unique(of_row[of_row >= 0])
        out = np.zeros((len(b), len(b)))
        for component in range(3):
            j = np.zeros((len(b), len(used)))
            for slot in range(of_row.shape[1]):
                here = of_row[:, slot] >= 0
                partial = b[:, here] * self._by_vector[rows[here], slot, component]
                np.add.at(j.T, np.searchsorted(used, of_row[here, slot]), partial.T)
            out += (j * sd[used, component] ** 2) @ j.T
        return out

    @cached_property
    def _mark_variance(self) -> dict[tuple[int, int], float]:
        stations = self.network.stations
        loose = (stations.role == WEIGHTED) | (stations.role == CHECK)
        variance = np.where(loose, np.nan_to_num(stations.known_sd) ** 2, 0.0).tolist()
        return {(i, c): v for i, three in enumerate(variance) for c, v in enumerate(three)}
