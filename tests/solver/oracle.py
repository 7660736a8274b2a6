"""An independent adjustment on dense matrices, from the plain arrays of tests.networks alone.

Unknowns are all coordinates that a reading or a weighted mark asks for and that are not held, then one value for every
group (orientations are kept as unknowns, nothing is eliminated). The residual of a reading is computed minus observed.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

import adjust
from adjust.book.job import Job
from adjust.network import Cluster
from adjust.solver.solution import Solution
from tests.networks import Array, Ints, Made

ANGULAR = ("direction", "angle", "azimuth")


def with_clusters(job: Job, made: Made) -> Job:
    """The job with the correlations that its files cannot say."""
    clusters = tuple(Cluster(rows, covariance) for rows, covariance in made.clusters)
    return replace(job, network=replace(job.network, clusters=clusters))


def solved(made: Made) -> Solution:
    """The adjustment under test, with the clusters of the made job."""
    return adjust.solve(with_clusters(adjust.read(made.folder), made))


def order(made: Made, solution: Solution) -> Ints:
    """Number in the solution of every station of the made job."""
    index = solution.network.stations.index
    return np.array([index[name] for name in made.names])


def positions(made: Made, solution: Solution) -> Array:
    """Adjusted positions (n, 3) in the order of the made job."""
    return solution.positions[order(made, solution)]


@dataclass(frozen=True)
class Dense:
    """Numbers of the unknowns: coordinates (n, 3), -1 where held or not asked for; then the groups."""

    made: Made
    coordinate: Ints
    count: int

    @classmethod
    def of(cls, made: Made) -> Dense:
        """Number the unknowns of a job."""
        r, asked = made.readings, np.zeros(made.truth.shape, dtype=bool)
        for kind, stations, part in zip(r.kind, r.stations, r.part, strict=True):
            parts = [part] if kind == "control" else [2] if kind == "levelled" else [0, 1]
            for s in stations[stations >= 0]:
                asked[s, parts] = True
        asked[made.role[:, 0] == "held"] = False
        coordinate = np.full(asked.shape, -1, dtype=np.int64)
        coordinate[asked] = np.arange(asked.sum())
        return cls(made, coordinate, int(asked.sum()) + made.groups)

    @property
    def first_group(self) -> int:
        """Number of the first group unknown."""
        return self.count - self.made.groups

    def computed(self, xyz: Array, groups: Array) -> Array:
        """Computed readings (R,)."""
        r = self.made.readings
        return np.array([
            _value(kind, xyz, s, part, groups[g] if g >= 0 else 0.0)
            for kind, s, g, part in zip(r.kind, r.stations.tolist(), r.group, r.part, strict=True)
        ])  # fmt: skip

    def residuals(self, xyz: Array, groups: Array) -> Array:
        """Computed minus observed (R,), angles within half a circle."""
        v = self.computed(xyz, groups) - self.made.readings.value
        angular = np.isin(self.made.readings.kind, ANGULAR)
        v[angular] = np.array([math.remainder(x, math.tau) for x in v[angular]])
        return v

    def jacobian(self, xyz: Array) -> Array:
        """Partials (R, u) of the computed readings, by hand from the geometry of circles and lines."""
        r = self.made.readings
        J = np.zeros((len(r), self.count + 1))
        for row, (kind, s, g, part) in enumerate(zip(r.kind, r.stations.tolist(), r.group, r.part, strict=True)):
            for station, component, d in _partials(kind, xyz, s, part):
                J[row, self.coordinate[station, component]] += d
            J[:, -1] = 0.0
            if g >= 0:
                J[row, self.first_group + g] = -1.0
        return J[:, :-1]

    def groups_at(self, xyz: Array) -> Array:
        """Best group values for positions: weighted circular means of azimuth minus reading."""
        r, out = self.made.readings, np.zeros(self.made.groups)
        for g in range(self.made.groups):
            rows = np.flatnonzero(r.group == g)
            turned = self.computed(xyz, np.zeros(self.made.groups))[rows] - r.value[rows]
            first = turned[0]
            rest = np.array([math.remainder(t - first, math.tau) for t in turned])
            w = 1 / r.sd[rows] ** 2
            out[g] = first + (w * rest).sum() / w.sum()
        return out

    def covariance(self) -> Array:
        """Full covariance (R, R) of the readings."""
        C = np.diag(self.made.readings.sd**2)
        for rows, block in self.made.clusters:
            C[np.ix_(rows, rows)] = block
        return C

    def unpack(self, x: Array) -> tuple[Array, Array]:
        """Positions and groups for unknowns x (u,) counted from the starting positions."""
        xyz = self.made.start.copy()
        inside = self.coordinate >= 0
        xyz[inside] += x[self.coordinate[inside]]
        return xyz, x[self.first_group :]

    def movements(self, xyz: Array, groups: bool = True) -> dict[str, Array]:
        """Movements (u,) by name that no angle or ratio of distances notices; turns also add to the groups."""
        zero, out = np.zeros(self.count), {}
        inside = self.coordinate[:, 0] >= 0
        if inside.any():
            east, north = self.coordinate[inside, 0], self.coordinate[inside, 1]
            d = (xyz[inside, :2] - xyz[inside, :2].mean(axis=0)) / 100.0
            for name, by_east, by_north in (("shift east", 1, 0), ("shift north", 0, 1), ("turn", d[:, 1], -d[:, 0]),
                                            ("scale", d[:, 0], d[:, 1])):  # fmt: skip
                out[name] = zero.copy()
                out[name][east], out[name][north] = by_east, by_north
            out["turn"][self.first_group :] = groups / 100.0
        up = self.coordinate[:, 2]
        if (up >= 0).any():
            out["height"] = zero.copy()
            out["height"][up[up >= 0]] = 1.0
        return out

    def free_movements(self, xyz: Array, groups: bool = True) -> Array:
        """The movements (u, d) that the kinds of readings leave free: a distance fixes scale, an azimuth the turn.

        Azimuths of a set with a turn of its own fix nothing, but the sets made here stand beside true ones.
        """
        fixed = {"scale": "distance", "turn": "azimuth"}
        kept = [v for name, v in self.movements(xyz, groups).items() if fixed.get(name) not in self.made.readings.kind]
        return np.array(kept).T


def _azimuth(xyz: Array, i: int, j: int) -> float:
    return math.atan2(xyz[j][0] - xyz[i][0], xyz[j][1] - xyz[i][1])


def _value(kind: str, xyz: Array, s: list[int], part: int, group: float) -> float:
    if kind == "distance":
        return math.hypot(xyz[s[1]][0] - xyz[s[0]][0], xyz[s[1]][1] - xyz[s[0]][1])
    if kind in ("direction", "azimuth"):
        return _azimuth(xyz, s[0], s[1]) - group
    if kind == "angle":
        return _azimuth(xyz, s[0], s[2]) - _azimuth(xyz, s[0], s[1])
    if kind == "levelled":
        return float(xyz[s[1]][2] - xyz[s[0]][2])
    return float(xyz[s[0]][part])


def _turns(xyz: Array, i: int, j: int, sign: float) -> list[tuple[int, int, float]]:
    """Partials of an azimuth: a step across the line turns it by 1 / D."""
    a, D = _azimuth(xyz, i, j), math.hypot(xyz[j][0] - xyz[i][0], xyz[j][1] - xyz[i][1])
    east, north = sign * math.cos(a) / D, -sign * math.sin(a) / D
    return [(j, 0, east), (j, 1, north), (i, 0, -east), (i, 1, -north)]


def _partials(kind: str, xyz: Array, s: list[int], part: int) -> list[tuple[int, int, float]]:
    """(station, component, partial) of one reading."""
    if kind == "distance":
        a = _azimuth(xyz, s[0], s[1])
        return [(s[1], 0, math.sin(a)), (s[1], 1, math.cos(a)), (s[0], 0, -math.sin(a)), (s[0], 1, -math.cos(a))]
    if kind in ("direction", "azimuth"):
        return _turns(xyz, s[0], s[1], 1.0)
    if kind == "angle":
        return _turns(xyz, s[0], s[2], 1.0) + _turns(xyz, s[0], s[1], -1.0)
    if kind == "levelled":
        return [(s[1], 2, 1.0), (s[0], 2, -1.0)]
    return [(s[0], part, 1.0)]
