"""Starting values from the readings alone: orchestrates heights, the quick start and the careful one.

The quick start makes polar steps from all that is known. If it reaches every station and no reading misfits by more
than a few hundredths of its length (or radian), Gauss-Newton will do the rest. Otherwise each part that it leaves open
is built with care (adjust.graph.plane), from control alone; `stations` rows decide between mirror images and help
where control does not lead.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from adjust.graph.clues import Clues, Places
from adjust.graph.heights import Heights, find_heights
from adjust.graph.misfit import Misfits
from adjust.graph.parts import HEIGHT, PLANE, Part, find_parts
from adjust.graph.polar import Polar
from adjust.graph.words import frame_words, height_words, mirror_words, missing_words
from adjust.network import CHECK, HELD, NEW, WEIGHTED, Array, Ints, Network

if TYPE_CHECKING:
    from adjust.graph.spatial import Found

QUICK = 0.03
"""Misfit up to which the quick start is good enough for Gauss-Newton."""
FRAME = 1000.0
"""Free parts are shifted so that their coordinates are above this."""


@dataclass(frozen=True)
class Start:
    """Starting positions (n, 3), NaN where nothing is asked of a component; group values (g,); sentences of failure."""

    positions: Array
    groups: Array
    failures: tuple[str, ...]
    assumed: tuple[str, ...]
    """Sentences on what the program chose where nothing was given: origin, north, scale, height."""
    doubtful: tuple[tuple[tuple[int, int], float], ...] = ()
    """((block, row), computed minus observed in metres or radians) of readings that the start disagrees with."""
    given: Array = field(default_factory=lambda: np.empty((0, 3)))
    """(n, 3) given coordinates: control and `stations`, NaN where none."""

    mirrors: tuple[Array, ...] = ()
    """(n, 2) east and north of every other solution that the readings do not tell from this one."""

    images: tuple[Array, ...] = ()
    """(n, 3) of every other solution of stations placed in space."""

    @property
    def reference(self) -> Array:
        """Positions (n, 3) to which a free datum refers: given ones as they were given, else the starting ones."""
        use = ~np.isnan(self.positions) & ~np.isnan(self.given)
        return np.where(use, self.given, self.positions)


@dataclass
class _Plane:
    """What has been found in the plane so far."""

    z: Places
    failures: list[str]
    assumed: list[str]
    doubtful: list[tuple[int, float]]
    mirrors: list[Places]


def find_start(network: Network, plane_height: float | None = None) -> Start:
    """Starting values for every component that a reading asks for, from control, `stations` and the readings.

    ``plane_height`` (m) is the job's, if it says one: slope distances of sound readings may differ by it.
    """
    parts = find_parts(network)
    asked = np.zeros((len(network.stations), 2), dtype=bool)
    for part in parts:
        asked |= part.nodes
    clues = Clues.of(network)
    given = network.stations.start
    height = _heights(network, clues, asked[:, HEIGHT], None)
    # before the plane: slope distances that nothing reduces would only mislead it
    hung = _hung(network, clues, parts, height) if clues.slopes else []
    found = _in_space(network, clues, hung, np.full((len(asked), 3), np.nan), plane_height)
    rest = [part for k, part in enumerate(parts) if k not in found]
    plane = _find_plane(network, clues, rest)
    if (clues.zeniths or clues.slopes) and rest:
        # the first round may have lacked heights to reduce slopes, or places to turn zenith angles into rises
        height = _heights(network, clues, asked[:, HEIGHT], plane.z)
        plane = _find_plane(network, clues, rest)
        height = _heights(network, clues, asked[:, HEIGHT], plane.z)
    positions = np.column_stack([plane.z.real, plane.z.imag, height.height])
    if len(found) < len(hung):
        # a rough start in the plane may still lead to the right heights
        guess = positions.copy()
        guess[list(height.origins), 2] = np.nan
        found |= _in_space(network, clues, [k for k in hung if k not in found], guess, plane_height)
    if found:
        return _joined(
            network, clues, {k: (parts[k], one) for k, one in found.items()}, positions, plane, height, asked
        )
    held = network.stations.role == HELD
    positions[held] = given[held]
    positions[~asked[:, PLANE], :2] = np.nan
    positions[~asked[:, HEIGHT], 2] = np.nan
    doubtful = tuple((clues.sources[s], size) for s, size in sorted([*plane.doubtful, *height.doubtful]))
    return Start(
        positions, _orientations(network, clues, plane.z), tuple(plane.failures),
        (*plane.assumed, *height_words(network, height.origins)), doubtful, given,
        tuple(np.column_stack([z.real, z.imag]) for z in plane.mirrors),
    )  # fmt: skip


def _hung(network: Network, clues: Clues, parts: list[Part], height: Heights) -> list[int]:
    """Parts with a known height in which the heights of some stations follow from slope distances alone."""
    fixed = np.isin(network.stations.role[:, 2], (HELD, WEIGHTED))
    sloped = np.zeros(len(fixed), dtype=bool)
    sloped[[e for s in clues.slopes for e in s[:2]]] = True
    hanging = np.isnan(height.height) & sloped
    return [k for k, p in enumerate(parts)
            if (p.nodes[:, HEIGHT] & hanging).any() and (p.nodes[:, HEIGHT] & fixed).any()]  # fmt: skip


def _in_space(network: Network, clues: Clues, parts: list[int], guess: Array,
              plane_height: float | None) -> dict[int, Found]:  # fmt: skip
    """The parts that are placed in space."""
    if not parts:
        return {}
    from adjust.graph.spatial import place_in_space  # only where heights hang on slope distances

    every = find_parts(network)
    tried = {k: place_in_space(network, clues, every[k].nodes, guess, plane_height) for k in parts}
    return {k: found for k, found in tried.items() if found is not None}


def _joined(network: Network, clues: Clues, found: dict[int, tuple[Part, Found]], positions: Array, plane: _Plane,
            height: Heights, asked: np.ndarray) -> Start:  # fmt: skip
    """The start with some parts placed in space and the others in the plane."""
    failures, doubtful = list(plane.failures), dict([*plane.doubtful, *height.doubtful])
    images: list[Array] = []
    placed: set[int] = set()
    for part, one in found.values():
        stations = np.flatnonzero(part.nodes.all(axis=1))
        placed.update(stations.tolist())
        positions[stations] = one.x[stations]
        failures += one.failures
        doubtful |= dict(one.misfits)
    for _, one in found.values():
        images += [np.where(np.isnan(y), positions, y) for y in one.mirrors]
    held = network.stations.role == HELD
    positions[held] = network.stations.start[held]
    positions[~asked[:, PLANE], :2] = np.nan
    positions[~asked[:, HEIGHT], 2] = np.nan
    z = np.asarray(positions[:, 0] + 1j * positions[:, 1])
    return Start(
        positions, _orientations(network, clues, z), tuple(failures),
        (*plane.assumed, *height_words(network, tuple(i for i in height.origins if i not in placed))),
        tuple((clues.sources[s], size) for s, size in sorted(doubtful.items())), network.stations.start,
        tuple(y[:, :2] for y in images) or tuple(np.column_stack([w.real, w.imag]) for w in plane.mirrors),
        tuple(images),
    )  # fmt: skip


def _heights(network: Network, clues: Clues, asked: np.ndarray, z: Places | None) -> Heights:
    given, fixed = network.stations.start[:, 2], network.stations.role[:, 2] == HELD
    if not (clues.zeniths or clues.slopes):
        return find_heights(given, fixed, clues.rises, asked)
    first = z is None
    known = find_heights(given, fixed, clues.rises, asked, begin=False).height
    places = None if z is None else np.column_stack([z.real, z.imag])
    rises = [*clues.rises, *(r._replace(sure=False) for r in clues.reduce(known, places))]
    found = find_heights(given, fixed, rises, asked, begin=not first)
    clues.reduce(found.height, places)
    return found


def _given(network: Network, roles: tuple[int, ...]) -> dict[int, complex]:
    """Stations with given east and north whose roles are among ``roles``."""
    start, role = network.stations.start[:, :2], network.stations.role[:, :2]
    ok = np.isin(role, roles).all(axis=1) & ~np.isnan(start).any(axis=1)
    return {i: complex(*start[i]) for i in np.flatnonzero(ok).tolist()}


def _find_plane(network: Network, clues: Clues, parts: list[Part]) -> _Plane:
    n = len(network.stations)
    out = _Plane(np.full(n, complex(np.nan, np.nan)), [], [], [], [])
    known = _given(network, (NEW, HELD, WEIGHTED, CHECK))
    for i, place in known.items():
        out.z[i] = place
    plane_parts = [np.flatnonzero(part.nodes[:, PLANE]) for part in parts if part.nodes[:, PLANE].any()]
    polar = Polar(clues, {i: (p.real, p.imag) for i, p in known.items()})
    polar.spread()
    for stations in plane_parts:
        if not any(i in known for i in stations.tolist()):
            origin, _ = reference(clues, stations)
            polar.begin(origin, north=not _has_north(clues, stations))
            polar.spread()
    for i, (east, north) in polar.at.items():
        out.z[i] = complex(east, north)
    for stations in plane_parts:
        own = _restricted(clues, stations) if len(plane_parts) > 1 else clues
        if any(math.isnan(out.z[i].real) for i in stations.tolist()) or Misfits(own).worst(out.z) > QUICK:
            _careful(network, own, stations, out)
        elif not any(i in known for i in stations.tolist()):
            _free_frame(network, own, stations, out, _has_north(own, stations), True)
    return out


def _restricted(clues: Clues, stations: Ints) -> Clues:
    """The clues of one part."""
    inside = set(stations.tolist())
    return replace(
        clues,
        lengths=[one for one in clues.lengths if one.i in inside],
        pointings=[p for p in clues.pointings if p.at in inside],
    )


def _has_north(clues: Clues, stations: Ints) -> bool:
    inside = set(stations.tolist())
    return any(p.set == clues.north and p.at in inside for p in clues.pointings)


def reference(clues: Clues, stations: Ints) -> tuple[int, int]:
    """(origin, north) of a part without coordinates: the station with most readings and its first sighted neighbour.

    Its first pointing in the order of the book, else the first pointing to it, else its first length.
    """
    count = dict.fromkeys(stations.tolist(), 0)
    ends = [(p.at, p.to) for p in clues.pointings] + [(one.i, one.j) for one in clues.lengths]
    for i, j in ends:
        if i in count and j in count:
            count[i] += 1
            count[j] += 1
    origin = max(count, key=lambda i: count[i])
    for i, j in ends:
        if i == origin and j != origin:
            return origin, j
    return origin, next((i for i, j in ends if j == origin and i != origin), origin)


def _careful(network: Network, clues: Clues, stations: Ints, out: _Plane) -> None:
    """Build one part with care, and say what cannot be built or what is in doubt."""
    from adjust.graph.careful import place_part  # most jobs never come here

    found = place_part(network, clues, stations, _given(network, (HELD, WEIGHTED)), _given(network, (NEW, CHECK)))
    out.z[stations] = found.built.z[stations]
    missing = stations[np.isnan(out.z[stations])]
    if found.free and not len(missing) and not found.built.mirrors:
        _free_frame(network, clues, stations, out, found.built.oriented, found.built.scaled)
    elif found.free:
        out.assumed += frame_words(network, *reference(clues, stations), found.built.oriented, found.built.scaled, 0j)
    out.doubtful += found.doubtful
    for mirror in found.built.mirrors:
        other = out.z.copy()
        other[list(mirror.stations)] = mirror.there
        out.mirrors.append(other)
    out.failures += missing_words(network, clues, missing, out.z) + mirror_words(network, found.built.mirrors)


def _free_frame(network: Network, clues: Clues, stations: Ints, out: _Plane, oriented: bool, scaled: bool) -> None:
    """Turn and shift a part without coordinates into a frame that reads well, and say so."""
    origin, north = reference(clues, stations)
    z = out.z[stations] - out.z[origin]
    first = out.z[north] - out.z[origin]
    if not oriented and first != 0:
        z = z * (1j * abs(first) / first)
    if not scaled and first != 0:
        z = z * (100.0 / abs(first))
    least = complex(np.nanmin(z.real), np.nanmin(z.imag))
    place = complex(*(FRAME * max(1.0, math.ceil((FRAME / 2 - v) / FRAME)) for v in (least.real, least.imag)))
    out.z[stations] = z + place
    out.assumed += frame_words(network, origin, north, oriented, scaled, place)


def _orientations(network: Network, clues: Clues, z: Places) -> Array:
    """Values (g,) of the group unknowns at the places."""
    if not clues.pointings:
        return np.zeros(len(network.groups))
    with np.errstate(invalid="ignore"):
        turns = Misfits(clues).orientations(z, robust=True)[: len(network.groups)]
    return np.array([math.remainder(t, 2 * math.pi) for t in turns.tolist()], dtype=float)
