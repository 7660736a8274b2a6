"""What the starting coordinates found wrong: readings they disagree with, and what contradicts where there are none.

Where the readings lead to no start, three things are looked for. Two lengths r, s to a station from two known ones a
distance d apart meet only if the longest of r, s, d is no longer than the other two together. Readings that the start,
as far as it goes, disagrees with are named. Else readings are left out one at a time, and those are named without which
the rest leads to a start that they disagree with; at the most TRIED starts are made. What is named gets its likely
slips where the others can be adjusted without it (adjust.judge.causes_of_refusals).
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import combinations

import numpy as np

from adjust.book.job import Job
from adjust.errors import Unsolvable
from adjust.graph.agreement import AGREES
from adjust.graph.clues import Clues
from adjust.graph.misfit import Misfits
from adjust.graph.starts import Start, find_start
from adjust.judge.causes_of_refusals import start_causes
from adjust.judge.naming import amount, called, together
from adjust.judge.slips_asked import told as slip_words
from adjust.kinds import KINDS
from adjust.network import Block, Bools, Network
from adjust.solver.solution import Solution
from adjust.units import LENGTHS

TRIED = 12
"""Readings left out in turn: a start that fails takes a second in small networks of angles."""
LARGE = 300
"""Readings in the plane above which nothing is left out: every start would take long."""
MOST_NAMED = 5

Place = tuple[int, int]
"""Block and row of a reading."""


def doubtful_sentences(solution: Solution, job: Job) -> list[tuple[int, str]]:
    """(scalar row of the solution, sentence) of every reading that the starting coordinates disagreed with."""
    network, out = solution.network, []
    number = {id(block): b for b, block in enumerate(network.blocks)}
    for (b, i), size in solution.doubtful:
        block = job.network.blocks[b]
        if id(block) in number:  # a free datum sets control aside
            row = int(network.rows.of_block(number[id(block)], len(block))[i])
            out.append((row, _doubtful(job, (b, i), size)))
    return out


def _doubtful(job: Job, place: Place, size: float) -> str:
    b, i = place
    return (f"Already the starting coordinates disagree with {called(job, job.network.blocks[b], i)}: it is "
            f"{_off(job, job.network.blocks[b], size)} for where the other readings lead.")  # fmt: skip


def _off(job: Job, block: Block, size: float) -> str:
    """'12 m too long', '4 degrees off' for computed minus observed."""
    about = f"about {amount(job, block, size)}"
    if KINDS[block.kind].says != "length":
        return f"{about} off"
    return f"{about} too {'short' if size > 0 else 'long'}"


def start_words(job: Job, refusal: Unsolvable) -> list[str]:
    """The sentences of a refusal, and after those of a start that failed the readings that contradict each other."""
    start = find_start(job.network)
    if not start.failures or list(start.failures) != refusal.sentences:
        return refusal.sentences
    found = _Contradictions(job, start)
    return [*refusal.sentences, *(found.apart() or found.disagreeing() or found.left_out())]


@dataclass(frozen=True)
class _Contradictions:
    """A job and its failed start."""

    job: Job
    start: Start

    @property
    def network(self) -> Network:
        """The network as booked."""
        return self.job.network

    @cached_property
    def _clues(self) -> Clues:
        return Clues.of(self.network)

    def _called(self, place: Place) -> str:
        return called(self.job, self.network.blocks[place[0]], place[1])

    def _metres(self, metres: float) -> str:
        unit = self.job.settings.units.length
        return f"{metres / LENGTHS[unit]:.2f} {unit}"

    # ---- lengths that do not meet

    def apart(self) -> list[str]:
        """Pairs of lengths that do not meet, one sentence for each station without a start."""
        z = self.start.positions[:, 0] + 1j * self.start.positions[:, 1]
        to: dict[int, list[tuple[int, float, int]]] = defaultdict(list)
        for one in self._clues.lengths:
            for i, j in ((one.i, one.j), (one.j, one.i)):
                if np.isfinite(z[i]) and not np.isfinite(z[j]):
                    to[j].append((i, one.metres, one.source))
        out = []
        for station, lengths in to.items():
            for (i, r, first), (j, s, second) in combinations(lengths, 2):
                sides = (abs(z[i] - z[j]), r, s)
                lacks = 2 * max(sides) - sum(sides)
                if i != j and lacks > AGREES * max(sides):
                    out.append(self._do_not_meet(station, (i, j), (first, second), float(sides[0]), float(lacks)))
                    break
        return out[:MOST_NAMED]

    def _do_not_meet(self, station: int, ends: tuple[int, int], sources: tuple[int, int], line: float,
                     lacks: float) -> str:  # fmt: skip
        names = self.network.stations.names
        who = together([self._called(self._clues.sources[s]) for s in sources])
        i, j = (names[k] for k in ends)
        return (f"{who} do not meet at {names[station]}: {i} and {j} stand {self._metres(line)} apart, and "
                f"{self._metres(lacks)} is lacking to a triangle; one of them, or a coordinate, is wrong")  # fmt: skip

    # ---- readings that the start disagrees with

    def disagreeing(self) -> list[str]:
        """Readings that the failed start, as far as it goes, disagrees with."""
        return [" ".join(t for t in (_doubtful(self.job, place, size), self._slips(*self._placed(place))) if t)
                for place, size in self.start.doubtful[:MOST_NAMED]]  # fmt: skip

    def _slips(self, network: Network, place: Place) -> str:
        """'Likeliest slip: ... Look at FILE:LINE.' of a reading that the others can do without; '' where none fits."""
        return slip_words(start_causes(replace(self.job, network=network), place, _less(network, place)))

    def _placed(self, place: Place) -> tuple[Network, Place]:
        """The network as far as the start goes, begun there, and where a reading stands in it."""
        lost: Bools = np.isnan(self.start.positions[:, 0])
        here, blocks = place, []
        for b, block in enumerate(self.network.blocks):
            away: Bools = np.asarray(lost[block.stations].reshape(len(block), -1).any(axis=1))
            keep = ~away if KINDS[block.kind].says in ("length", "pointings") else np.ones(len(block), dtype=bool)
            blocks.append(block.take(np.flatnonzero(keep)))
            here = (b, int(keep[: place[1]].sum())) if b == place[0] else here
        stations = replace(self.network.stations, start=self.start.positions)
        return replace(self.network, blocks=tuple(blocks), stations=stations, clusters=()), here

    # ---- readings left out

    def left_out(self) -> list[str]:
        """Readings without which the others lead to a start that disagrees with them, and with the fewest others."""
        trials = [t for t in (self._without(one) for one in self._candidates()[:TRIED]) if t is not None]
        fewest = min((left for left, _, _ in trials), default=0)
        best = [(words, place) for left, words, place in trials if left == fewest][:MOST_NAMED]
        named = [(words, self._slips(self.network, place)) for words, place in best]
        return [f"{words}. {slips}" if slips else words for words, slips in named]

    def _candidates(self) -> list[Place]:
        """Readings in the plane at the stations without a start, then the others; none in large jobs."""
        ends = [(one.i, one.j, one.source) for one in self._clues.lengths]
        ends += [(p.at, p.to, p.source) for p in self._clues.pointings]
        missing = np.isnan(self.start.positions[:, 0])
        order = sorted(ends, key=lambda e: -int(missing[e[0]]) - int(missing[e[1]]))
        sources = list(dict.fromkeys(s for _, _, s in order))
        return [self._clues.sources[s] for s in sources] if len(sources) <= LARGE else []

    def _without(self, place: Place) -> tuple[int, str, Place] | None:
        """(readings still doubtful, sentence, place) of a start without a reading; None where it fails or fits it."""
        start = find_start(_less(self.network, place))
        size = None if start.failures else self._misfit(start, place)
        if size is None:
            return None
        off = _off(self.job, self.network.blocks[place[0]], size)
        return len(start.doubtful), (f"without {self._called(place)} the other readings lead to starting coordinates, "
                                     f"for which it is {off}: check it in the book"), place  # fmt: skip

    def _misfit(self, start: Start, place: Place) -> float | None:
        """Computed minus observed of a reading, metres or radians, if it is grossly off; else None."""
        misfits = Misfits(self._clues)
        z = start.positions[:, 0] + 1j * start.positions[:, 1]
        with np.errstate(invalid="ignore"):
            m = misfits.all(z)
            lengths = np.abs(z[misfits.j] - z[misfits.i]) - misfits.metres
        size = np.concatenate([lengths, m[len(lengths) :]])
        mine = np.flatnonzero((misfits.source == self._clues.sources.index(place)) & (np.abs(m) > AGREES))
        return float(size[mine[np.abs(size[mine]).argmax()]]) if len(mine) else None


def _less(network: Network, place: Place) -> Network:
    """The network without a reading, for a start."""
    b, i = place
    left = network.blocks[b].take(np.delete(np.arange(len(network.blocks[b])), i))
    return replace(network, blocks=(*network.blocks[:b], left, *network.blocks[b + 1 :]), clusters=())
