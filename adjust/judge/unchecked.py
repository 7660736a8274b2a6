"""Why nothing checks a reading, and which stations hang on such readings only.

An error in an unchecked reading passes into the coordinates whole, and all other readings agree with the result: the
movement Q A'P e is a free movement of the network without that reading, so it is told like one (adjust.judge.unfixed).
In levelling the reason is a bridge of the graph of lines.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from adjust.graph.parts import HEIGHT, PLANE, listed
from adjust.judge.bridges import bridges
from adjust.judge.pieces import SAME, STILL, Move, Unit, similarity, velocity
from adjust.judge.readings import Readings, counted, kind_word
from adjust.judge.reliability import Reliability
from adjust.judge.unfixed import Figure
from adjust.kinds import KINDS
from adjust.network import HELD, NEW, WEIGHTED, Array, Bools, Ints
from adjust.solver.datum import PartDatum
from adjust.solver.defects import Freedom, as_moves
from adjust.solver.solution import Solution

MOST_WORK = 2_000_000
"""Unchecked readings times lines up to which every movement is followed; beyond it only the first of them are."""
MOST = 8
BODY = 3
"""Stations from which a piece is a body, with a motion of its own."""
FAR_SORTED = 200
"""Stations behind a bridge that are put in order; the nearest are told of, so that long chains cost no more."""


def known_stations(solution: Solution, component: int) -> Bools:
    """Stations (n,) with control in a component, where the datum is not free."""
    role = solution.network.stations.role[:, 2 if component == HEIGHT else 0]
    known = (role == HELD) | (role == WEIGHTED)
    for part in solution.parts:
        if part.datum and part.datum.free:
            known &= ~part.datum.part.nodes[:, component]
    return np.asarray(known)


@dataclass(frozen=True)
class Reason:
    """Why nothing checks a reading: as a sentence, and as what follows "because", '' where nothing is known."""

    why: str
    because: str


@dataclass(frozen=True)
class Unchecked:
    """The unchecked readings of a solution."""

    solution: Solution
    figures: Reliability

    @cached_property
    def rows(self) -> list[int]:
        """Scalar rows that no other reading checks, conditions apart."""
        return [int(r) for r in np.flatnonzero(self._untested)]

    @cached_property
    def _untested(self) -> Bools:
        return np.asarray(~self.figures.tested & ~self.solution.design.held)

    @cached_property
    def _readings(self) -> Readings:
        return Readings(self.solution.network)

    @cached_property
    def _figure(self) -> Figure:
        nothing = np.zeros((len(self.solution.names), 3, 0))
        parts = [p.datum for p in self.solution.parts if p.datum]
        return Figure(Freedom(self.solution.network, np.nan_to_num(self.solution.positions), nothing, parts))

    # ---- why

    @cached_property
    def why(self) -> dict[int, str]:
        """The reason for every unchecked row."""
        return {r: reason.why for r, reason in self.reasons.items()}

    @cached_property
    def reasons(self) -> dict[int, Reason]:
        """The reason for every unchecked row, as a sentence and as a clause."""
        alone = self._alone_in_set()
        levels = self._levels()
        out, followed = {}, []
        for r in self.rows:
            if r in alone:
                gives = "gives that set its orientation and nothing else"
                out[r] = Reason(f"the only reading of its set: it {gives}", f"it is alone in its set and {gives}")
            elif r in levels:
                out[r] = self._only_way(r, levels[r])
            else:
                followed.append(r)
        most = max(1, MOST_WORK // max(1, len(self._figure.edges)))
        moves = self._moves(followed[:most])
        for k, r in enumerate(followed):
            out[r] = self._followed(r, moves[:, :, k]) if k < most else self._short(r)
        return out

    def _alone_in_set(self) -> set[int]:
        design = self.solution.design
        counts = np.bincount(design.local[design.local >= 0], minlength=len(design.network.groups))
        return {r for r in self.rows if design.local[r] >= 0 and counts[design.local[r]] == 1}

    def _short(self, r: int) -> Reason:
        return Reason(f"no other reading would contradict an error in this {self._kind(r)}", "")

    def _kind(self, r: int) -> str:
        return kind_word(self._readings.kind(r))

    def _name(self, station: int) -> str:
        return self.solution.names[station]

    def _levels(self) -> dict[int, Ints]:
        """Far side of every bridge of the graph of rises, by scalar row."""
        network, n = self.solution.network, len(self.solution.names)
        rises = [b for b, block in enumerate(network.blocks) if KINDS[block.kind].says == "rise"]
        rows = np.flatnonzero(np.isin(network.rows.block, rises))
        if not len(rows):
            return {}
        ends = np.array([self._readings.stations(int(r))[:2] for r in rows])
        known = np.flatnonzero(known_stations(self.solution, HEIGHT))
        start = np.concatenate([ends[:, 0], np.full(len(known), n)])
        end = np.concatenate([ends[:, 1], known])
        found = bridges(n + 1, start, end, [n])
        return {int(rows[e]): self._smaller(far, ends[:, 0], ends[:, 1]) if not len(known) else far
                for e, far in found.items() if e < len(rows)}  # fmt: skip

    def _smaller(self, far: Ints, start: Ints, end: Ints) -> Ints:
        """The smaller side of a bridge where nothing tells which side is the near one."""
        every = np.unique(np.concatenate([start, end]))
        near = np.setdiff1d(every, far)
        return near if len(near) < len(far) else far

    def _only_way(self, r: int, far: Ints) -> Reason:
        i, j = self._readings.stations(r)[:2]
        more = f" and {len(far) - FAR_SORTED} beyond them" if len(far) > FAR_SORTED else ""
        line = f"{self._kind(r)} {self._name(i)}-{self._name(j)}"
        way = f"is the only way to {self._listed(far[:FAR_SORTED])}{more}"
        return Reason(f"the {line} {way}", f"it {way}")

    def _listed(self, stations: Ints) -> str:
        return listed(self.solution.network, np.sort(stations), MOST)

    # ---- the movement of an error

    def _moves(self, rows: list[int]) -> Array:
        """Movements (n, 3, m) of the stations for an error in each of the rows, scaled to at most one."""
        moved = self.moved(rows)
        return np.asarray(moved / np.maximum(np.abs(moved).max(axis=(0, 1), initial=0.0), 1e-300))

    def moved(self, rows: list[int]) -> Array:
        """Movements (n, 3, m) of the stations for a unit error in each of the rows, metres per metre or radian."""
        unknowns = self.solution.design.unknowns
        rhs = np.zeros((unknowns.count + 1, len(rows)))
        column = {r: k for k, r in enumerate(rows)}
        for w in self.solution.whitened:
            for b, i in np.argwhere(np.isin(w.batch.rows, rows)).tolist():
                k = column[int(w.batch.rows[b, i])]
                unit = np.zeros(w.l.shape[1])
                unit[i] = 1.0
                factor = w.factor[b]
                # P e = L^-T L^-1 e, and A' L^-T is the whitened row
                whitened = unit / factor[:, 0] if len(unit) == 1 else np.linalg.solve(factor, unit)
                np.add.at(rhs[:, k], w.batch.columns[b], w.reduced[b].T @ whitened)
        return as_moves(unknowns, self.solution.cofactors.times(rhs[:-1]))

    def _followed(self, r: int, moves: Array) -> Reason:
        if self._readings.kind(r) == "control":
            why = f"nothing else fixes {self._name(self._readings.stations(r)[0])} there"
            return Reason(why, why)
        part = next((p.datum for p in self.solution.parts if p.datum and p.rows[r]), None)
        body = self._as_body(part, moves) if part and not part.free else None
        if body:
            return self._into_body(r, body)
        told = self._figure.plane_moves(part, moves[:, :2, None]) if part else []
        if not told:
            return self._short(r)
        own = np.array(sorted(set().union(*(m.own for m in told))))
        if len(own) == 1:
            return self._into_one(r, int(own[0]))
        if len(told) == 1 and len(told[0].units) == 1:
            return self._into_body(r, told[0])
        return self._unseen(r, self._listed(own), "nothing else ties them", f"nothing else ties {self._listed(own)}")

    def _as_body(self, part: PartDatum, moves: Array) -> Move | None:
        """The movement, if all that moves does so as one body: long open traverses are told by this in short time."""
        inside = np.where(part.part.nodes[:, PLANE, None], moves[:, :2], 0.0)
        inside /= max(float(np.linalg.norm(inside)), 1e-300)
        own = np.flatnonzero(np.abs(inside).max(axis=1) >= STILL)
        if len(own) < BODY:
            return None
        z, v = self._figure.z, velocity(inside[:, :, None])
        a, t = similarity(z, v, own)
        if np.abs(v[own] - (t + a * z[own, None])).max() > SAME * np.abs(v[own]).max():
            return None
        return Move(tuple(own.tolist()), (Unit(frozenset(own.tolist())),), inside[:, :, None])

    def _unseen(self, r: int, into: str, how: str, because: str) -> Reason:
        return Reason(f"an error in this {self._kind(r)} goes unseen into {into}: {how}", because)

    def _into_body(self, r: int, move: Move) -> Reason:
        motion, about = self._figure.motion_of(move)
        who = self._listed(np.array(move.own))
        return self._unseen(r, f"{motion} of {who}{about}", "nothing else ties them",
                            f"nothing else prevents {motion} of {who}")  # fmt: skip

    def _into_one(self, r: int, station: int) -> Reason:
        name = self._name(station)
        own = [k for k in self._rows_of(station, PLANE) if self._readings.kind(k) != "control"]
        others = [k for k in own if k != r]
        if not all(self._untested[k] for k in own) or len(own) > 6:
            return self._unseen(r, name, "its other readings do not see that way",
                                f"the other readings of {name} do not see that way")  # fmt: skip
        if r not in own:
            leads = "it orients the set that alone leads there" if self._leads(r, own) else "nothing else checks it"
            return self._unseen(r, name, leads, leads)
        if len(own) > 2:
            why = f"{name} has as many readings as unknowns"
            return Reason(f"{why}: {counted([self._readings.kind(k) for k in own])} fix it but nothing checks them",
                          why)  # fmt: skip
        alone = f"it and {counted([self._readings.kind(k) for k in others])}" if others else "it"
        because = f"{name} hangs on {alone} alone"
        return Reason(f"an error in this {self._kind(r)} goes unseen into {name}, because {because}", because)

    def _leads(self, r: int, rows: list[int]) -> bool:
        """Whether one of these rows shares the orientation of row r."""
        group = self._readings.group(r)
        return group >= 0 and any(self._readings.group(k) == group for k in rows)

    def _rows_of(self, station: int, component: int) -> list[int]:
        return self._readings.at(station, component)

    # ---- side shots

    @cached_property
    def side_shots(self) -> dict[int, list[int]]:
        """New stations that unchecked readings only fix, with those readings."""
        unknowns = self.solution.design.unknowns.coordinate
        role = self.solution.network.stations.role
        out = {}
        for i in self._candidates():
            parts = [c for c, columns in ((PLANE, [0, 1]), (HEIGHT, [2])) if (unknowns[i, columns] >= 0).any()]
            rows = list(dict.fromkeys(r for c in parts for r in self._rows_of(i, c)))
            if rows and (role[i] != WEIGHTED).all() and (role[i] != HELD).all() and self._untested[rows].all():
                out[i] = rows
        return out

    def _candidates(self) -> list[int]:
        """Stations that an unchecked reading touches, in the order of the book."""
        found = {i for r in self.rows for i in self._readings.stations(r)}
        known = known_stations(self.solution, PLANE)
        return sorted(i for i in found if (self.solution.network.stations.role[i] == NEW).any()
                      or not known[i])  # fmt: skip
