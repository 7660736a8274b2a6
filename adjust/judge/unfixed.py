"""What nothing fixes, in trade words by station and movement, and the one reading that would cure it.

adjust.solver.defects finds the movements as arrays, adjust.judge.pieces takes them apart into units that move alone;
here each is recognised and told. Where a part has no control its largest rigid piece counts as at rest.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from adjust.graph.parts import HEIGHT, PLANE, listed
from adjust.judge.pieces import Complex, Move, Peeling, Unit, independent, rigid_pieces, separate, similarity, velocity
from adjust.judge.readings import Readings, counted, number, plane_edges
from adjust.network import Array, Ints, Network
from adjust.solver.datum import PartDatum, movements
from adjust.solver.defects import Freedom, Loose, Thin, thin_of
from adjust.solver.solution import Solution

CENTRE = 1e-4
"""A centre of rotation this near a station (as a share of the piece's size) is that station; rounding leaves 1e-8."""
PURE = 1e-5
"""Share of a turn in a scale, or of both in a shift, that still counts as none."""
ON_LINE = 0.05
"""Sine of the angle by which a sight may leave the line it is said to run along; radius' share for the circle."""
MOST = 8


def words(loose: Loose) -> list[str]:
    """A sentence for every free movement, those of the datum first."""
    figure = Figure(loose.freedom)
    sentences = [*loose.others, *(figure.islands() if loose.others else []), *figure.sentences()]
    return list(dict.fromkeys(sentences)) or loose.sentences


def warnings(solution: Solution) -> list[str]:
    """A sentence for every station that is fixed, but only just: bend between WARNED and REFUSED."""
    return nearly(solution, thin_of(solution))


def nearly(solution: Solution, thin: list[Thin]) -> list[str]:
    """The sentences for stations that are fixed only just."""
    freedom = Freedom(solution.network, np.nan_to_num(solution.positions), np.zeros((len(solution.names), 3, 0)), [])
    return [f"{Figure(freedom).thin(t)} (nearly so: its precision along there is only a guess)" for t in thin]


@dataclass(frozen=True)
class Figure:
    """The free movements of a network, ready to be told."""

    freedom: Freedom

    @property
    def network(self) -> Network:
        """The network."""
        return self.freedom.network

    @cached_property
    def z(self) -> Complex:
        """Stations (n,) as complex numbers, from the middle, in units of the extent."""
        xy = self.freedom.positions[:, :2]
        here = np.unique(self.edges) if len(self.edges) else np.arange(len(xy))
        xy = xy - xy[here].mean(axis=0)
        return np.asarray((xy[:, 0] + 1j * xy[:, 1]) / (float(np.abs(xy[here]).max(initial=0.0)) or 1.0))

    @cached_property
    def edges(self) -> Ints:
        """Lines measured along (m, 2)."""
        return plane_edges(self.network)

    @cached_property
    def readings(self) -> Readings:
        """Readings by station."""
        return Readings(self.network)

    def sentences(self) -> list[str]:
        """All sentences in the order of the stations."""
        if self.freedom.partial:
            who = listed(self.network, self.freedom.stations, MOST)
            count = self.freedom.moves.shape[2]
            return [f"nothing fixes {who}: {count} movements or more are free, too many to tell one by one; "
                    "tie some of these to the rest and run it again"]  # fmt: skip
        found: list[tuple[tuple[int, ...], str]] = []
        for one in self.freedom.parts:
            if one.part.nodes[:, PLANE].any():
                found += [(move.own, self.told(move)) for move in self.plane_moves(one)]
            if one.part.nodes[:, HEIGHT].any():
                found += self._heights(one)
        moved = {own[0] for own, _ in found if len(own) == 1}
        found += [((t.station,), self.thin(t)) for t in self.freedom.thin if t.station not in moved]
        return [sentence for _, sentence in sorted(found)]

    def islands(self) -> list[str]:
        """One sentence where several pieces in the plane, or in height, share no reading."""
        out = []
        for component, what in ((PLANE, "in the plane"), (HEIGHT, "in height")):
            pieces = [np.flatnonzero(one.part.nodes[:, component]) for one in self.freedom.parts]
            pieces = [p for p in pieces if len(p)]
            if len(pieces) > 1:
                who = "; ".join(listed(self.network, p) for p in pieces[:MOST])
                more = f"; and {len(pieces) - MOST} more" if len(pieces) > MOST else ""
                out.append(f"islands {what} that share no reading: {who}{more}")
        return out

    def plane_moves(self, one: PartDatum, moves: Array | None = None) -> list[Move]:
        """The movements of a part in the plane, one by one; ``moves`` (n, 2, d) in place of those of the network."""
        nodes = one.part.nodes[:, PLANE]
        moves = self.freedom.moves[:, :2] if moves is None else moves
        moves = independent(np.where(nodes[:, None, None], moves, 0.0))
        if not moves.shape[2]:
            return []
        inside = self.edges[nodes[self.edges].all(axis=1)]
        if one.free and one.null.shape[1]:
            moves = self._from_main(one, moves, inside)
        return [m for block in separate(moves) for m in Peeling(self.z, block, inside).run()] if moves.shape[2] else []

    def _from_main(self, one: PartDatum, moves: Array, edges: Ints) -> Array:
        """The movements against the largest rigid piece of a part without control."""
        whole = movements(one.part, self.freedom.positions) @ one.null
        scaled = moves / np.maximum(np.abs(moves).max(axis=(0, 1)), 1e-300)
        joint = independent(np.concatenate([whole[:, :2], scaled], axis=2))
        pieces = rigid_pieces(self.z, joint, edges, np.zeros(len(self.z), dtype=bool))
        if not pieces:
            return moves
        largest = max(len(p) for p in pieces)
        main = np.array(sorted(next(p for p in pieces if len(p) == largest)), dtype=np.int64)
        v = velocity(joint)
        a, t = similarity(self.z, v, main)
        rest = np.where(one.part.nodes[:, PLANE][:, None], v - (t + a * self.z[:, None]), 0.0)
        return independent(np.stack([rest.real, rest.imag], axis=1))

    def told(self, move: Move) -> str:
        """The sentence of one movement."""
        if len(move.units) > 1:
            return self._flexing(move)
        unit = move.units[0]
        return self._point(move) if len(unit.stations) == 1 else self._body(move, unit)

    # ---- a body

    def _body(self, move: Move, unit: Unit) -> str:
        who = listed(self.network, np.array(move.own), MOST)
        stations = np.array(sorted(unit.stations), dtype=np.int64)
        v = velocity(move.moves)
        motion, about = self.motion_of(move)
        a, _ = similarity(self.z, v, stations)
        return f"nothing fixes {motion} of {who}{about}: {self._cure(a, v, stations)}"

    def motion_of(self, move: Move) -> tuple[str, str]:
        """'the turn' and ' about M1' of the movement of one body."""
        stations = np.array(sorted(move.units[0].stations), dtype=np.int64)
        v = velocity(move.moves)
        a, t = similarity(self.z, v, stations)
        about = ""
        if move.count <= 2 and np.abs(a).max() * self._size(stations) > PURE * np.abs(v[stations]).max():
            about = self._about(a, t, stations)
        return self._motion(a, t, v, stations), about

    def _size(self, stations: Ints) -> float:
        return float(np.abs(self.z[stations] - self.z[stations].mean()).max())

    def _motion(self, a: Complex, t: Complex, v: Complex, stations: Ints) -> str:
        """'the turn', 'the scale', 'the shift along azimuth 34 degrees', or several of them."""
        least = PURE * np.abs(v[stations]).max() / max(self._size(stations), 1e-12)
        parts = np.stack([a.real, a.imag])
        scale, turn = (np.abs(parts) > least).any(axis=1)
        rank = int((np.linalg.svd(parts, compute_uv=False) > least).sum())
        names = [name for name, there in (("turn", turn), ("scale", scale)) if there]
        shifts = len(a) - rank
        if rank == 1 and len(names) == 2:
            names = ["turn together with the scale"]
        if shifts >= 2:
            names.append("position")
        elif shifts == 1 and rank == 0:
            names.append(f"shift along azimuth {_azimuth(t[0])} degrees (or back)")
        elif shifts == 1:
            names.append("shift in one direction")
        return " and ".join(f"the {name}" for name in names)

    def _about(self, a: Complex, t: Complex, stations: Ints) -> str:
        """' about M1' from the centre of rotation -t/a, if it is one for all the movements."""
        k = int(np.argmax(np.abs(a)))
        centre = -t[k] / a[k]
        if len(a) > 1 and np.abs(t + a * centre).max() > CENTRE * np.abs(a).max():
            return ""
        near = int(np.argmin(np.abs(self.z - centre)))
        if abs(self.z[near] - centre) < CENTRE * max(self._size(stations), abs(centre)):
            return f" about {self.network.stations.names[near]}"
        return ""

    def _cure(self, a: Complex, v: Complex, stations: Ints) -> str:
        least = PURE * np.abs(v[stations]).max() / max(self._size(stations), 1e-12)
        scale, turn = np.abs(a.real).max() > least, np.abs(a.imag).max() > least
        if len(a) > 1:
            return f"{number(len(a))} more readings between them and the rest would"
        if turn and not scale:
            return "one angle, pointing or second distance between them and the rest, or an azimuth, would"
        if scale and not turn:
            return "one distance among them would"
        return "one distance or pointing to the rest, across that movement, would"

    # ---- a point

    def _rows(self, station: int, beyond: Iterable[int] = ()) -> list[int]:
        """Readings in the plane at a station that do not only carry something farther on."""
        beyond = set(beyond)
        return [
            r for r in self.readings.at(station, PLANE)
            if not (set(self.readings.stations(r)) & beyond) and self.readings.kind(r) != "control"
        ]  # fmt: skip

    def _point(self, move: Move) -> str:
        station = move.own[0]
        v = move.moves[station]
        rows = self._rows(station, move.before)
        if move.count > 1:
            held = counted([self.readings.kind(r) for r in rows])
            return (f"{self._name(station)} is held by {held} only: nothing fixes its position; "
                    "two more readings to it would")  # fmt: skip
        if np.abs(self.freedom.moves[station, 2]).max(initial=0.0) > PURE * np.abs(self.freedom.moves[station]).max():
            held = counted([self.readings.kind(r) for r in rows])
            return (f"{self._name(station)} is held by {held} only: nothing fixes it in space; "
                    "one more reading to it, such as a zenith angle, would")  # fmt: skip
        return self.loose_point(station, v[:, 0] / np.linalg.norm(v[:, 0]), rows)

    def thin(self, thin: Thin) -> str:
        """The sentence for a station that is fixed only just."""
        return self.loose_point(thin.station, thin.direction, self._rows(thin.station))

    def loose_point(self, station: int, u: Array, rows: list[int]) -> str:
        """The sentence for one station that can move along u (east, north)."""
        name, kinds = self._name(station), [self.readings.kind(r) for r in rows]
        held = counted(kinds)
        across = set(kinds) == {"distance"}
        sight = self._sights(station, rows)
        along = complex(u[0], u[1])
        ends = list(sight)
        if len(ends) == 1 and across:
            return (f"{name} is held by {held} only: nothing fixes it sideways; "
                    f"a pointing, an angle or a distance from another station would")  # fmt: skip
        aligned = all(abs((s.conjugate() * along).real if across else (s.conjugate() * along).imag) < ON_LINE
                      for s in sight.values())  # fmt: skip
        if aligned and across and len(ends) > 1:
            return (f"{name} stands on the line {self._line(station, sight)}: {held} do not fix it sideways; "
                    "a pointing, an angle or a distance from off the line would")  # fmt: skip
        own = all(self.readings.stations(r)[0] == station for r in rows)  # its own sights turn with its circle
        if aligned and ends and not across and not own:
            if len(ends) == 1:
                return f"{name} is held by {held} only: nothing fixes it along that line; a distance would"
            return (f"{name} stands on the line {self._line(station, sight)}: {held} do not fix it along that line; "
                    "a distance would")  # fmt: skip
        if self._on_circle(station, rows, ends):
            who = ", ".join(self._name(i) for i in ends)
            return (f"{name} stands on the circle through {who}: the {held} do not fix it; "
                    "a distance, or a pointing to a station off that circle, would")  # fmt: skip
        return (f"{name} is held by {held} only: nothing fixes it along azimuth {_azimuth(along)} degrees (or back); "
                "one more reading across that would")  # fmt: skip

    def _sights(self, station: int, rows: list[int]) -> dict[int, complex]:
        """Unit vectors from a station to those it shares these readings with."""
        out = {}
        for r in rows:
            for other in self._partners(station, r):
                d = self.z[other] - self.z[station]
                if abs(d) > 0:
                    out[other] = complex(d / abs(d))
        return out

    def _partners(self, station: int, row: int) -> list[int]:
        """The other ends of a reading's sights from or to a station."""
        ends = self.readings.stations(row)
        at_end = len(ends) == 3 and ends[0] != station
        return [ends[0]] if at_end else [i for i in ends if i != station]

    def _line(self, station: int, sight: dict[int, complex]) -> str:
        """The two stations farthest apart of those on one line with a station."""
        along = next(iter(sight.values()))
        where = {i: ((self.z[i] - self.z[station]) * along.conjugate()).real for i in sight}
        first, last = min(where, key=lambda i: where[i]), max(where, key=lambda i: where[i])
        if where[first] * where[last] > 0:
            last = station
        ends = sorted((first, last))
        return "-".join(self._name(i) for i in ends)

    def _on_circle(self, station: int, rows: list[int], ends: list[int]) -> bool:
        """Whether only angles at the station itself are measured, to stations on one circle with it."""
        if len(ends) < 3 or any(self.readings.stations(r)[0] != station for r in rows):
            return False
        if not {self.readings.kind(r) for r in rows} <= {"direction", "angle"}:
            return False
        # inversion about the station turns the circle into a line
        w = 1 / (self.z[ends] - self.z[station])
        d = w - w.mean()
        s = np.linalg.svd(np.stack([d.real, d.imag]), compute_uv=False)
        return bool(s[1] < ON_LINE * s[0])

    # ---- a figure

    def _flexing(self, move: Move) -> str:
        own = set(move.own)
        ends = [j for i, j in self._touching(own) if j not in own]
        corners = list(dict.fromkeys(ends))
        who = listed(self.network, np.array(sorted(own)), MOST)
        between = f" between {listed(self.network, np.array(sorted(corners)), MOST)}" if corners else ""
        if move.count == 1:
            return f"{who} can flex{between}: nothing braces the figure; a diagonal or an angle would"
        return (f"{who} can flex{between} in {number(move.count)} ways: nothing braces the figure; "
                f"{number(move.count)} diagonals or angles would")  # fmt: skip

    def _touching(self, own: set[int]) -> list[tuple[int, int]]:
        """Lines from these stations to others, both ways round."""
        out = []
        for i, j in self.edges[np.isin(self.edges, list(own)).any(axis=1)].tolist():
            out += [(i, j)] if i in own else []
            out += [(j, i)] if j in own else []
        return out

    # ---- heights

    def _heights(self, one: PartDatum) -> list[tuple[tuple[int, ...], str]]:
        """Stations whose heights move while the plane rests."""
        plane = self.freedom.moves[:, :2].reshape(2 * len(self.z), -1)
        if not plane.shape[1]:
            return []
        _, s, vt = np.linalg.svd(plane, full_matrices=True)
        height = self.freedom.moves[:, 2] @ vt[int((s > 1e-7).sum()) :].T
        height = np.where(one.part.nodes[:, HEIGHT][:, None], height, 0.0)
        moves = independent(np.stack([height, np.zeros_like(height)], axis=1))
        out = []
        for block in separate(moves) if moves.shape[2] else ():
            own = np.flatnonzero((np.abs(block) > 1e-6).any(axis=(1, 2)))
            out.append((tuple(own.tolist()), f"nothing fixes the height of {listed(self.network, own, MOST)}: "
                        "one levelled line from there to a known height would"))  # fmt: skip
        return out

    def _name(self, station: int) -> str:
        return self.network.stations.names[station]


def _azimuth(v: complex) -> str:
    """Azimuth of a movement, a whole number of degrees below 180."""
    return f"{math.degrees(math.atan2(v.real, v.imag)) % 180:.0f}"
