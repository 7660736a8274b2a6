"""What an error in each reading could do unseen, in one sentence: its smallest detectable size, and where it goes.

With the smallest detectable blunder b of a reading and its external effect Q A'P e b (adjust.judge.reliability), an
error below b may go unseen, for the test finds it more seldom than its power says, and would move the station named by
up to that. Where nothing checks the reading b is infinite, and the movement Q A'P e of a unit error stands in its
place. Why so is said where it is known: what alone ties the station (adjust.judge.unchecked), the one closure that
checks a chain (adjust.judge.chains), or that the others check the reading only weakly: then the redundancy rho, the
share of an error that its own residual shows.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from adjust.graph.parts import HEIGHT, PLANE
from adjust.judge.assess import Judgement
from adjust.judge.chains import Chain, chains
from adjust.judge.readings import Readings, counted, kind_word
from adjust.kinds import KINDS
from adjust.network import PARTS, Array
from adjust.units import ANGLES, LENGTHS, rough, rough_angle, rough_length, small_angle_unit

WEAK = 0.1
"""Checked share below which a reading counts as weakly checked: the common grading of redundancy shares calls one to
ten per cent bad (practice of engineering surveys; from memory)."""
WHOLE = 0.005
"""An error goes into a station metre for metre if a metre moves it by one metre to within this."""
FEW = 4
"""Readings that tell of a station up to which they are counted out."""
CHUNK = 256
MOST_FOLLOWED = 4000
"""Unchecked readings whose movements are followed; of more, the rest is said to pass into the coordinates."""
NOTHING_M = 1e-9
"""Movement for a unit error below which a reading moves no station: rounding."""
UP_PART = 2


def limits(judgement: Judgement) -> list[str]:
    """One sentence for every scalar row (R,); '' for conditions."""
    return _Limits(judgement).sentences()


@dataclass(frozen=True)
class _Limits:
    """The sentences of a judgement."""

    judgement: Judgement

    def sentences(self) -> list[str]:
        """All of them, in the order of the rows."""
        held = self.judgement.solution.design.held.tolist()
        tested = self.judgement.reliability.tested.tolist()
        return ["" if held[r] else self._checked(r) if tested[r] else self._unchecked(r) for r in range(len(held))]

    @cached_property
    def _readings(self) -> Readings:
        return Readings(self.judgement.solution.network)

    @cached_property
    def _names(self) -> tuple[str, ...]:
        return self.judgement.solution.names

    # ---- what it is

    def _called(self, r: int) -> str:
        """'this distance', 'the given height of BM1'."""
        rows, kind = self._readings.network.rows, self._readings.kind(r)
        if kind == "control":
            return f"the given {PARTS[rows.part[r]]} of {self._names[self._readings.stations(r)[0]]}"
        return "this coefficient of refraction" if kind == "refraction" else f"this {kind_word(kind)}"

    def _size(self, r: int, value: float) -> str:
        """An amount of the reading's own unit."""
        units = self.judgement.solution.job.settings.units
        dimension = KINDS[self._readings.kind(r)].dimension
        if dimension == "length":
            return rough_length(value, units.length)
        return rough_angle(value, units.angle) if dimension == "angle" else rough(value)

    def _length(self, metres: float) -> str:
        return rough_length(metres, self.judgement.solution.job.settings.units.length)

    # ---- checked

    def _checked(self, r: int) -> str:
        smallest, what = float(self._smallest[r]), self._called(r)
        if not smallest > 0:
            return f"What error in {what} could be seen cannot be told: there are too few readings to spare."
        station = int(self.judgement.effect_station[r])
        unseen = f"An error below {self._size(r, smallest)} in {what} may go unseen"
        if station < 0:
            return f"{unseen}; it would move no station."
        part = PARTS[self.judgement.effect_part[r]]
        moves = f"it would move {self._names[station]} by up to {self._length(float(self._effect[r]))} in {part}"
        because = self._because(r)
        return f"{unseen}; {moves}{f', because {because}' if because else ''}."

    @cached_property
    def _smallest(self) -> Array:
        return np.nan_to_num(self.judgement.smallest_detectable)

    @cached_property
    def _effect(self) -> Array:
        return np.abs(np.nan_to_num(self.judgement.effect))

    @cached_property
    def _chain(self) -> dict[int, Chain]:
        return {r: one for one in chains(self.judgement.solution) for r in one.rows}

    def _because(self, r: int) -> str:
        """Why an error in a checked reading could be that large; '' where it is well checked."""
        if r in self._chain:
            return f"only the closure of {self._chain[r].walk} checks it"
        share = float(self.judgement.reliability.checked_share[r])
        if share >= WEAK:
            return ""
        shows = min(max(float(self.judgement.reliability.redundancy[r]), 0.0), 1.0)
        some = f"{_per_cent(shows)} per cent of an error shows"
        few = self._few(r)
        return f"{few}: {some}" if few else f"the others check it only weakly, {some}"

    def _few(self, r: int) -> str:
        """'P7 hangs on it, two angles and one distance' where few readings tell of the station that is moved."""
        station, part = int(self.judgement.effect_station[r]), int(self.judgement.effect_part[r])
        own = self._readings.at(station, HEIGHT if part == UP_PART else PLANE)
        if r not in own or len(own) > FEW:
            return ""
        others = counted([self._readings.kind(k) for k in own if k != r])
        return f"{self._names[station]} hangs on it{',' if ' and ' in others else ' and'} {others}"

    # ---- unchecked

    def _unchecked(self, r: int) -> str:
        start = f"No error in {self._called(r)} could be seen, however large; it "
        because = self.judgement.unchecked.reasons[r].because
        return f"{start}{self._goes(r)}{f', because {because}' if because else ''}."

    def _goes(self, r: int) -> str:
        """'goes into P7 metre for metre', 'moves P7 by 0.52 mm for every sec'."""
        if r not in self._followed:
            return "passes into the coordinates"
        station, plane, height = self._followed[r]
        size = height if height > plane else plane
        if size <= NOTHING_M:
            return "moves no station"
        name = self._names[station]
        who = f"the height of {name}" if height > plane else name
        units = self.judgement.solution.job.settings.units
        dimension = KINDS[self._readings.kind(r)].dimension
        if dimension == "length" and abs(size - 1) <= WHOLE:
            unit = "metre" if units.length == "m" else "foot"
            return f"goes into {who} {unit} for {unit}"
        if dimension == "angle":
            small = small_angle_unit(units.angle)
            return f"moves {who} by {self._length(size * ANGLES[small])} for every {small}"
        if dimension == "length":
            per = "metre" if units.length == "m" else "foot"
            return f"moves {who} by {self._length(size * LENGTHS[units.length])} for every {per}"
        return f"moves {who} by {self._length(size / 100)} for every 0.01"

    @cached_property
    def _followed(self) -> dict[int, tuple[int, float, float]]:
        """(station moved most, its movement in the plane, in height) for a unit error in each unchecked row."""
        unchecked, out = self.judgement.unchecked, {}
        rows = unchecked.rows[:MOST_FOLLOWED]
        for first in range(0, len(rows), CHUNK):
            some = rows[first : first + CHUNK]
            moved = unchecked.moved(some)
            plane, height = np.hypot(moved[:, 0], moved[:, 1]), np.abs(moved[:, 2])
            most = np.maximum(plane, height)
            # stations that move alike but for rounding: the first in the order of the book
            station = (most >= most.max(axis=0) * (1 - 1e-6)).argmax(axis=0)
            for k, (r, i) in enumerate(zip(some, station.tolist(), strict=True)):
                out[r] = (i, float(plane[i, k]), float(height[i, k]))
        return out


def _per_cent(share: float) -> str:
    """A share in per cent, one figure below ten."""
    per_cent = 100 * share
    return f"{per_cent:.0f}" if per_cent >= 1 else f"{per_cent:.1g}"
