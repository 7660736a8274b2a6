"""Random traverses and level nets as job folders, with an independent computation of their closures.

Nothing of ``adjust`` is used here. A traverse is computed with complex numbers (east + i north) straight from its
readings, and the standard deviations of its misclosures by differencing that computation in every reading and the
readings in every centring vector.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
DEG = math.pi / 180
SEC = DEG / 3600
SD_POINTING, SD_CONST, SD_PPM = 3 * SEC, 0.002, 2e-6
CENTRING, TARGET = 0.0012, 0.0015
SHAPES = ("loop sheet", "loop sets", "link sheet", "link sets", "link open", "loop gap")
"""By booked sheet or by sets of directions; a link without a closing direction; a loop without a closing angle."""


@dataclass(frozen=True)
class Reading:
    """A reading: distance or angle (at, back, fore), or direction (at, to); the value as booked, and its set-up."""

    kind: str
    ends: tuple[int, ...]
    value: float
    sd: float


@dataclass(frozen=True)
class Made:
    """A traverse as made: places (n,) east + i north, and its readings."""

    shape: str
    places: NDArray[np.complex128]
    readings: list[Reading]
    walk: list[int]
    """Stations of the traverse in order; a loop repeats the first."""
    back: int
    """Station sighted at the beginning of a link, -1 for none."""
    fore: int
    bearing: float
    """Held bearing of a loop's first leg."""


def azimuth(z: complex) -> float:
    return math.atan2(z.real, z.imag)


def computed(kind: str, ends: tuple[complex, ...]) -> float:
    """A reading between places; a direction is its azimuth."""
    if kind == "distance":
        return abs(ends[1] - ends[0])
    if kind == "direction":
        return azimuth(ends[1] - ends[0])
    return (azimuth(ends[2] - ends[0]) - azimuth(ends[1] - ends[0])) % (2 * math.pi)


def random_traverse(rng: np.random.Generator, shape: str, folder: Path) -> Made:
    """Write a random traverse of 3 to 12 stations and return it with its readings."""
    n, loop = int(rng.integers(3, 13)), shape.startswith("loop")
    angle = np.sort(rng.uniform(0, 2 * math.pi, n)) if rng.random() < 0.5 else 2 * math.pi * np.arange(n) / n
    ring = 400 + 600j + (120 + 30 * n) * rng.uniform(0.6, 1.4, n) * np.exp(1j * angle)
    line = np.cumsum(rng.uniform(60, 180, n) * np.exp(1j * np.cumsum(rng.normal(0, 0.6, n)))) + 500 + 500j
    places = ring if loop else line
    if rng.random() < 0.5:
        places = places[::-1]
    places = np.append(places, [places[0] - 90 + 70j, places[-1] + 110 - 40j])
    walk = [*range(n), 0] if loop else list(range(n))
    back, fore = (-1, -1) if loop else (n, -1 if shape == "link open" else n + 1)
    made = Made(shape, places, [], walk, back, fore, azimuth(places[1] - places[0]) % (2 * math.pi))
    for at, one, other in corners(made):
        if shape == "loop gap" and at == 0:
            continue
        if shape.endswith("sets"):
            _read(rng, made, "direction", (at, one), SD_POINTING)
            _read(rng, made, "direction", (at, other), SD_POINTING)
        else:
            _read(rng, made, "angle", (at, one, other), SD_POINTING * math.sqrt(2))
    for i, j in pairwise(walk):
        for ends in [(i, j), (j, i)][: 1 + int(rng.random() < 0.6)]:
            d = abs(places[j] - places[i])
            _read(rng, made, "distance", ends, SD_CONST + SD_PPM * d)
    _write(made, folder)
    return made


def corners(made: Made) -> list[tuple[int, int, int]]:
    """(at, back, fore) of every angle of the walk."""
    w = made.walk
    if made.shape.startswith("loop"):
        w = [w[-2], *w]
    else:
        w = [*([made.back] if made.back >= 0 else []), *w, *([made.fore] if made.fore >= 0 else [])]
    return [(w[k], w[k - 1], w[k + 1]) for k in range(1, len(w) - 1)]


def _read(rng: np.random.Generator, made: Made, kind: str, ends: tuple[int, ...], sd: float) -> None:
    value = computed(kind, tuple(made.places[list(ends)])) + float(rng.normal(0, 2 * sd))
    if kind == "direction":
        value -= 0.37 * ends[0]  # the circle's zero of this station
    step = 1e-4 if kind == "distance" else 1e-9 * DEG
    booked = round(value / step) * step
    made.readings.append(Reading(kind, ends, booked if kind == "distance" else booked % (2 * math.pi), sd))


def _write(made: Made, folder: Path) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "deg"\n[instruments.one]\ndistance = "2 mm + 2 ppm"\ndirection = "3 sec"\n'
        f'centring = "{1000 * CENTRING} mm"\ntarget = "{1000 * TARGET} mm"\n'
    )
    loop = made.shape.startswith("loop")
    known = [made.walk[0]] if loop else sorted({made.walk[0], made.walk[-1], made.back, made.fore} - {-1})
    text = "".join(f"P{i},{made.places[i].real:.9f},{made.places[i].imag:.9f}\n" for i in known)
    (folder / "control.csv").write_text("station,east,north\n" + text)
    if loop:
        (folder / "azimuths.csv").write_text(f"from,to,azimuth,role\nP0,P1,{made.bearing / DEG:.13f},held\n")
    tables: dict[str, list[str]] = {}
    for one in made.readings:
        columns = {"distance": "from,to,distance", "direction": "at,to,direction", "angle": "at,first,second,angle"}
        value = f"{one.value:.4f}" if one.kind == "distance" else f"{one.value / DEG:.9f}"
        lines = tables.setdefault(f"{one.kind}s.csv", [columns[one.kind]])
        lines.append(",".join([*(f"P{i}" for i in one.ends), value]))
    for file, lines in tables.items():
        (folder / file).write_text("\n".join(lines) + "\n")


def closed(made: Made, values: list[float]) -> tuple[float, complex]:
    """Angular misclosure (NaN where none) and the linear one after an equal balance, from the readings' values."""
    loop = made.shape.startswith("loop")
    angle: dict[tuple[int, ...], float] = {}
    circle: dict[tuple[int, ...], float] = {}
    length: dict[frozenset[int], list[float]] = {}
    for one, value in zip(made.readings, values, strict=True):
        if one.kind == "distance":
            length.setdefault(frozenset(one.ends), []).append(value)
        else:
            (angle if one.kind == "angle" else circle)[one.ends] = value
    for at, back, fore in corners(made):
        if (at, back) in circle:
            angle[at, back, fore] = circle[at, fore] - circle[at, back]
    turned = [angle[c] for c in corners(made) if c in angle]
    first = made.places[made.walk[0]]
    if loop:
        w = _near(sum(turned) - len(turned) * math.pi) if len(turned) == len(made.walk) - 1 else math.nan
        bearing, inner = made.bearing, turned[1:] if not math.isnan(w) else turned
    else:
        start = azimuth(made.places[made.back] - first)
        last = azimuth(made.places[made.fore] - made.places[made.walk[-1]]) if made.fore >= 0 else math.nan
        w = _near(start + sum(turned) + (len(turned) - 1) * math.pi - last) if made.fore >= 0 else math.nan
        share = 0.0 if math.isnan(w) else w / len(turned)
        bearing, inner = start + turned[0] - share, turned[1:]
    share = 0.0 if math.isnan(w) else w / len(turned)
    z = 0j
    for k, (i, j) in enumerate(pairwise(made.walk)):
        if k:
            bearing += inner[k - 1] - share + math.pi
        z += float(np.mean(length[frozenset((i, j))])) * complex(math.sin(bearing), math.cos(bearing))
    return w, z if loop else first + z - made.places[made.walk[-1]]


def _near(value: float) -> float:
    return (value + math.pi) % (2 * math.pi) - math.pi


def deviations(made: Made) -> dict[str, float]:
    """Standard deviations of angle, east, north and linear, by differences of ``closed`` and of the readings."""
    values = [one.value for one in made.readings]
    by_reading = _differences(lambda v: _parts(closed(made, v)), values)
    variance = np.diag([one.sd**2 for one in made.readings]) + _centring(made)
    cov = by_reading @ variance @ by_reading.T
    _, z = closed(made, values)
    u = np.array([0.0, z.real, z.imag]) / abs(z)
    return {"angle": math.sqrt(cov[0, 0]) if not math.isnan(cov[0, 0]) else math.nan, "east": math.sqrt(cov[1, 1]),
            "north": math.sqrt(cov[2, 2]), "linear": math.sqrt(float(u[1:] @ cov[1:, 1:] @ u[1:]))}  # fmt: skip


def _parts(one: tuple[float, complex]) -> Array:
    return np.array([one[0], one[1].real, one[1].imag])


def _differences(f: Callable[[list[float]], Array], at: list[float], step: float = 1e-5) -> Array:
    columns = []
    for k in range(len(at)):
        up, down = list(at), list(at)
        up[k] += step
        down[k] -= step
        columns.append((f(up) - f(down)) / (2 * step))
    return np.array(columns).T


def _centring(made: Made) -> Array:
    """Covariance of the readings by one instrument vector a station and table, one target vector a sight of it."""
    vectors: dict[tuple[str, int, int], list[tuple[int, int]]] = {}
    for row, one in enumerate(made.readings):
        for place, station in enumerate(one.ends):
            key = (one.kind, one.ends[0], -1 if place == 0 else station)
            vectors.setdefault(key, []).append((row, place))
    out, step = np.zeros((len(made.readings),) * 2), 1e-4
    for (_, _, who), touched in vectors.items():
        sd = CENTRING if who < 0 else TARGET
        for direction in (1.0, 1j):
            j = np.zeros(len(made.readings))
            for row, place in touched:
                one, both = made.readings[row], []
                for sign in (1, -1):
                    ends = list(made.places[list(one.ends)])
                    ends[place] += sign * step * direction
                    both.append(computed(one.kind, tuple(ends)))
                change = both[0] - both[1]
                j[row] += (change if one.kind == "distance" else _near(change)) / (2 * step)
            out += sd**2 * np.outer(j, j)
    return out


def level_net(rng: np.random.Generator, folder: Path, n: int, known: int) -> list[tuple[str, str, float, float]]:
    """Write a random level net of ``n`` stations and return its lines (from, to, rise, length in metres)."""
    folder.mkdir(parents=True, exist_ok=True)
    height = rng.uniform(50, 80, n)
    pairs = [(k, int(rng.integers(0, k))) for k in range(1, n)]
    pairs += [(int(i), int(j)) for i, j in rng.integers(0, n, (int(rng.integers(n // 3, n)), 2)) if i != j]
    lines = []
    for i, j in pairs:
        metres = float(rng.integers(100, 3000))
        rise = height[j] - height[i] + rng.normal(0, 0.0012 * math.sqrt(metres / 1000))
        lines.append((f"P{i}", f"P{j}", round(float(rise), 5), metres))
    (folder / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "deg"\n[instruments.level]\nlevelling = "1.2 mm*sqrt(km)"\n'
    )
    marks = "".join(f"P{i},{height[i]:.5f}\n" for i in range(known))
    (folder / "control.csv").write_text("station,height\n" + marks)
    rows = "".join(f"{a},{b},{rise:.5f},{metres:.0f}\n" for a, b, rise, metres in lines)
    (folder / "levelled.csv").write_text("from,to,rise,length\n" + rows)
    return lines
