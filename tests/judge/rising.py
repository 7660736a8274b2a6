"""Random nets of zenith angles, lengths and levelled lines as job folders, with an independent computation of heights.

Nothing of ``adjust`` is used here. Two marks and the centre of the sphere are a triangle, in which a zenith angle, with
the ray's own turning (k theta / 2) taken off, gives the target's radius by the sine rule for every angle at the centre;
that one is sought with which the length is right. Standard deviations are by differencing that in every reading and
the readings in every vector of centring and heights.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

Array = NDArray[np.float64]
RADIUS = 6371008.8
"""Mean radius (2a + b)/3 of GRS 80, metres."""
PLANE = 100.0
SEC = math.pi / 180 / 3600
SD_ZENITH, SD_LENGTH, SD_PER_M = 3 * SEC, 0.002, 0.0012 / math.sqrt(1000)
CENTRING, TARGET, HEIGHT = 0.0012, 0.0015, 0.0008
K, SD_K = 0.13, 0.05
ZENITH, SLOPE, GROUND, LEVELLED = "zenith_angles", "slopes", "grounds", "levelled"


@dataclass(frozen=True)
class Reading:
    """A reading from one station to another with heights above the marks, or a levelled line of a length."""

    table: str
    at: int
    to: int
    value: float
    sd: float
    instrument: float = 0.0
    target: float = 0.0
    length: float = 0.0


@dataclass
class Net:
    """Places (n, 3) east, north, height, known heights, and readings; each is exact until ``noisy`` draws errors."""

    places: Array
    known: list[int]
    readings: list[Reading] = field(default_factory=list)
    k_known: bool = False
    """Whether the coefficient of refraction is kept; else it has a standard deviation."""


def seen(a: Array, b: Array, one: Reading, k: float) -> float:
    """What a reading is between two marks at (east, north, height), by the triangle with the centre of the sphere."""
    if one.table == LEVELLED:
        return float(b[2] - a[2])
    d = math.hypot(b[0] - a[0], b[1] - a[1])
    h1, h2 = a[2] + one.instrument - PLANE, b[2] + one.target - PLANE
    if one.table == GROUND:
        return d * (1 + (h1 + h2) / 2 / RADIUS)
    theta = 2 * math.asin(d / (2 * RADIUS))
    across, up = (RADIUS + h2) * math.sin(theta), (RADIUS + h2) * math.cos(theta) - (RADIUS + h1)
    return math.hypot(across, up) if one.table == SLOPE else math.atan2(across, up) - k * theta / 2


def rise_of(z: Reading, value: float, s: Reading, length: float, height: float, k: float) -> float:
    """Height of the target's mark less that of the instrument's, which is ``height``: the distance on the plane is
    sought at which the ray's target has the length."""

    def target(d: float) -> float:
        theta = 2 * math.asin(d / (2 * RADIUS))
        chord, r1 = value + k * theta / 2, RADIUS + height + z.instrument - PLANE
        return r1 * math.sin(chord) / math.sin(chord - theta) - RADIUS + PLANE - z.target

    def longer(d: float) -> float:
        a, b = np.array([0.0, 0.0, height]), np.array([0.0, d, target(d)])
        return (seen(a, b, s, k) if s.at == z.at else seen(b, a, s, k)) - length

    return target(float(brentq(longer, 0.05 * length, length + 1, xtol=1e-10))) - height


def random_net(rng: np.random.Generator) -> Net:
    """A net of 4 to 7 stations on a hillside, exact."""
    n = int(rng.integers(4, 8))
    ring = np.sort(rng.uniform(0, 2 * math.pi, n))
    away = rng.uniform(120, 260, n)
    places = np.column_stack(
        [1000 + away * np.sin(ring), 2000 + away * np.cos(ring), np.round(rng.uniform(80, 150, n), 6)]
    )
    net = Net(
        places, sorted(rng.choice(n, int(rng.integers(1, 4)), replace=False).tolist()), [], bool(rng.random() < 0.4)
    )
    pairs = {(int(rng.integers(0, k)), k) for k in range(1, n)}
    pairs |= {tuple(sorted(rng.choice(n, 2, replace=False).tolist())) for _ in range(n)}
    stands = np.round(rng.uniform(1.4, 1.7, n), 4)
    for i, j in sorted(pairs):
        sort = rng.random()
        for a, b in ((i, j), (j, i)) if sort < 0.5 else ((i, j),) if sort < 0.75 else ():
            target = float(rng.choice([1.3, 1.5, 2.0]))
            for _ in range(int(rng.integers(1, 4))):
                _add(net, Reading(ZENITH, a, b, 0.0, SD_ZENITH, float(stands[a]), target))
            table = SLOPE if rng.random() < 0.7 else GROUND
            if rng.random() < 0.7 or (a, b) == (i, j):
                other = target if rng.random() < 0.7 else 1.6
                _add(net, Reading(table, a, b, 0.0, SD_LENGTH, float(stands[a]), other))
        if sort >= 0.75 or rng.random() < 0.25:
            far = float(np.round(np.hypot(*(places[j] - places[i])[:2])))
            _add(net, Reading(LEVELLED, i, j, 0.0, SD_PER_M * math.sqrt(far), length=far))
    return net


def _add(net: Net, one: Reading) -> None:
    value = seen(net.places[one.at], net.places[one.to], one, K)
    net.readings.append(Reading(one.table, one.at, one.to, value, one.sd, one.instrument, one.target, one.length))


def vectors(net: Net) -> dict[tuple[str, int, int], list[int]]:
    """Readings of each vector: of an instrument (table, station, -1), of a target (table, station, target)."""
    out: dict[tuple[str, int, int], list[int]] = {}
    for row, one in enumerate(net.readings):
        if one.table != LEVELLED:
            for who in (-1, one.to):
                out.setdefault((one.table, one.at, who), []).append(row)
    return out


def noisy(rng: np.random.Generator, net: Net) -> list[float]:
    """Values with errors of all sizes: of the readings, of centring and heights, of refraction."""
    k = K if net.k_known else K + float(rng.normal(0, SD_K))
    moved = {key: rng.normal(0, [CENTRING if key[2] < 0 else TARGET] * 2 + [HEIGHT]) for key in vectors(net)}
    out, none = [], np.zeros(3)
    for one in net.readings:
        a = net.places[one.at] + moved.get((one.table, one.at, -1), none)
        b = net.places[one.to] + moved.get((one.table, one.at, one.to), none)
        out.append(seen(a, b, one, k) + float(rng.normal(0, one.sd)))
    return out


def write(net: Net, values: list[float], folder: Path) -> list[float]:
    """Write the job; the values as they stand in it."""
    folder.mkdir(parents=True, exist_ok=True)
    k = f"{K}" if net.k_known else f"{K} +- {SD_K}"
    books = "".join(f'[[book]]\nfile = "{t}.csv"\n' + (f'kind = "distances"\nsurface = "{on}"\n' if on else "")
                    for t, on in ((ZENITH, ""), (SLOPE, "slope"), (GROUND, "ground"), (LEVELLED, ""))
                    if any(one.table == t for one in net.readings))  # fmt: skip
    (folder / "job.toml").write_text(
        f'[units]\nlength = "m"\nangle = "deg"\n[frame]\nplane_height = {PLANE}\nrefraction = "{k}"\n'
        '[instruments.one]\ndistance = "2 mm"\nzenith = "3 sec"\n'
        f'centring = "{1000 * CENTRING} mm"\ntarget = "{1000 * TARGET} mm"\nheight = "{1000 * HEIGHT} mm"\n'
        f'[instruments.level]\nlevelling = "1.2 mm*sqrt(km)"\n[[book]]\nfile = "control.csv"\n[[book]]\n'
        f'file = "stations.csv"\n{books}'
    )
    rows = [f"P{i},{e:.4f},{n:.4f},{h:.6f}" for i, (e, n, h) in enumerate(net.places.tolist())]
    (folder / "stations.csv").write_text("station,east,north,height\n" + "\n".join(rows) + "\n")
    marks = [f"P{i},{net.places[i, 2]:.6f}" for i in net.known]
    (folder / "control.csv").write_text("station,height\n" + "\n".join(marks) + "\n")
    tables: dict[str, list[str]] = {}
    booked = []
    for one, value in zip(net.readings, values, strict=True):
        heights = f",{one.instrument:.4f},{one.target:.4f}"
        name = {ZENITH: "zenith_angle", LEVELLED: "rise"}.get(one.table, "distance")
        head = f"from,to,{name}" + (",length" if one.table == LEVELLED else ",instrument_height,target_height")
        text = f"{math.degrees(value):.10f}" if one.table == ZENITH else f"{value:.6f}"
        booked.append(math.radians(float(text)) if one.table == ZENITH else float(text))
        more = f",{one.length:.0f}" if one.table == LEVELLED else heights
        tables.setdefault(one.table, [head]).append(f"P{one.at},P{one.to},{text}{more}")
    for table, lines in tables.items():
        (folder / f"{table}.csv").write_text("\n".join(lines) + "\n")
    return booked


def by_angles(net: Net, values: list[float], i: int, j: int, k: float = K) -> float:
    """Height of j less that of i by the zenith angles between them: lengths meaned, then angles, then ways."""
    ways = []
    for a, b, sign in ((i, j, 1.0), (j, i, -1.0)):
        lengths = [(s, v) for s, v in zip(net.readings, values, strict=True)
                   if s.table in (SLOPE, GROUND) and {s.at, s.to} == {a, b}]  # fmt: skip
        of = [
            float(np.mean([rise_of(z, v, s, length, float(net.places[a, 2]), k) for s, length in lengths]))
            for z, v in zip(net.readings, values, strict=True)
            if z.table == ZENITH and (z.at, z.to) == (a, b) and lengths
        ]
        ways += [sign * float(np.mean(of))] if of else []
    return float(np.mean(ways)) if ways else math.nan


Line = tuple[int, int, int]
"""From, to, and the levelled reading or -1."""


def misclosure(net: Net, values: list[float], walk: list[Line], k: float = K) -> float:
    """Of lines walked one after the other, from and to a known height, or round."""
    total = 0.0
    for i, j, row in walk:
        if row < 0:
            total += by_angles(net, values, i, j, k)
        else:
            total += values[row] if net.readings[row].at == i else -values[row]
    first, last = walk[0][0], walk[-1][1]
    return total + (0.0 if first == last else float(net.places[first, 2] - net.places[last, 2]))


def deviation(net: Net, values: list[float], walk: list[Line]) -> float:
    """Standard deviation of a misclosure, by differences."""
    by = np.array(_differences(lambda v: misclosure(net, v, walk), values))
    variance = float(((by * [one.sd for one in net.readings]) ** 2).sum())
    for (_, _, who), rows in vectors(net).items():
        sds = [CENTRING if who < 0 else TARGET] * 2 + [HEIGHT]
        for component, sd in enumerate(sds):
            step, share = np.zeros(3), 0.0
            step[component] = 0.01
            for row in rows:
                one = net.readings[row]
                a, b = net.places[one.at], net.places[one.to]
                ends = [(a + s * step, b) if who < 0 else (a, b + s * step) for s in (1, -1)]
                share += by[row] * (seen(*ends[0], one, K) - seen(*ends[1], one, K)) / 0.02
            variance += (share * sd) ** 2
    if not net.k_known:
        variance += (
            SD_K * (misclosure(net, values, walk, K + 0.01) - misclosure(net, values, walk, K - 0.01)) / 0.02
        ) ** 2
    return math.sqrt(variance)


def _differences(f: Callable[[list[float]], float], at: list[float]) -> list[float]:
    out = []
    for k in range(len(at)):
        step = 1e-6 if at[k] < math.pi else 1e-3
        up, down = list(at), list(at)
        up[k] += step
        down[k] -= step
        out.append((f(up) - f(down)) / (2 * step))
    return out


def walked(net: Net, names: list[str], ids: list[str]) -> list[Line]:
    """The lines of a closure by its stations and the ids of its readings: FILE:LINE."""
    lines = [int(i.partition(":")[2]) for i in ids if i.startswith(f"{LEVELLED}.csv")]
    levelled = [row for row, one in enumerate(net.readings) if one.table == LEVELLED]
    left = [levelled[line - 2] for line in lines]
    out = []
    for i, j in pairwise(int(name[1:]) for name in names):
        row = next((r for r in left if {net.readings[r].at, net.readings[r].to} == {i, j}), -1)
        if row >= 0 and not (len(names) == 3 and out and out[0][2] < 0 and len(left) == 0):
            left.remove(row)
        out.append((i, j, row))
    return out
