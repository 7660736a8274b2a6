"""Rows of a job that may have one slip in common: lengths of one unit, readings of one occupation, of one sight."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from functools import cached_property
from itertools import islice, product

from adjust.book.job import Job
from adjust.judge.naming import together
from adjust.kinds import KINDS
from adjust.network import Block
from adjust.units import LENGTHS

UNIT, OCCUPIED, SIGHTED = "unit", "station occupied", "station sighted"
STANDING = {"pointings", "length", "zenith"}
"""What kinds say that are read from an instrument standing on a station."""
FOOT = LENGTHS["ft"]
FEWEST = 3
"""Readings of a unit of their own below which single slips say the same."""
TRIED = 16
"""Occupations, and sights, that are tried: every trial takes up to four adjustments."""
SOUND = 0.25
"""A reading that is in no doubt counts a quarter against those that are: not all of the wrong ones show."""
MOST_CHOICES = 200
"""Ways in which the runs of a station in several tables are put together."""


@dataclass(frozen=True)
class Shared:
    """Scalar rows that may have a slip in common."""

    what: str
    """unit, station occupied, station sighted."""
    of: str
    """The name of what they share: more_distances.csv, A, A to B."""
    rows: tuple[int, ...]
    against: frozenset[int] = frozenset()
    """The other readings at the station, and those to it: where they are fewer it is them that look wrong."""
    factor: float = 1.0
    """From the unit booked to the other."""
    column: tuple[tuple[int, int], ...] = ()
    """(block, number of its column of stations that may be another)."""


@dataclass(frozen=True)
class RowsInCommon:
    """A job, and its scalar rows in doubt; empty where none is known."""

    job: Job
    doubtful: frozenset[int]

    def units(self) -> list[Shared]:
        """Lengths and rises by table, instrument, reflector and day, where others of their sort share it not."""
        found: dict[tuple[int, ...], Shared] = {}
        for says in ("length", "rise"):
            groups: dict[tuple[str, str], list[int]] = defaultdict(list)
            every = 0
            for block, i, row in self._rows({says}):
                every += 1
                groups["table", block.file].append(row)
                for of in ("instrument", "reflector", "day"):
                    if block.label(of, i):
                        groups[of, block.label(of, i)].append(row)
            for (_, name), rows in groups.items():
                if FEWEST <= len(rows) < every:
                    factor = FOOT if self.unit(rows[0]) == "m" else 1 / FOOT
                    found.setdefault(tuple(rows), Shared(UNIT, name, tuple(rows), factor=factor))
        return list(found.values())

    def occupations(self) -> list[Shared]:
        """What was read in one go at a station, those with the most readings in doubt first."""
        found, names = {}, self.job.network.stations.names
        for station, tables in self._runs.items():
            every = {r for runs in tables.values() for run in runs for r in run} | set(self._to.get(station, ()))
            for rows in _joined(tables):
                if len(rows) >= 2:
                    column = tuple((b, 0) for b in sorted({self.at(r)[0] for r in rows}))
                    found[rows] = Shared(
                        OCCUPIED, names[station], rows, frozenset(every.difference(rows)), column=column
                    )
        return self._most_doubtful(found.values())

    def sights(self) -> list[Shared]:
        """Two or more readings of one occupation to one target."""
        found = {}
        for one in self._all_together():
            by_target: dict[int, list[int]] = defaultdict(list)
            for r in one:
                block, to = self._target(r)
                if to >= 0:
                    by_target[int(block.stations[self.at(r)[1], to])].append(r)
            for target, rows in by_target.items():
                if 2 <= len(rows) < len(one):
                    column = tuple({self.at(r)[0]: self._target(r)[1] for r in rows}.items())
                    names = self.job.network.stations.names
                    standing = int(self._target(rows[0])[0].stations[self.at(rows[0])[1], 0])
                    of = f"{names[standing]} to {names[target]}"
                    found[tuple(rows)] = Shared(SIGHTED, of, tuple(rows), column=column)
        return self._most_doubtful(found.values())

    def _target(self, row: int) -> tuple[Block, int]:
        """The block of a row, and the number of its column of targets; -1 for none."""
        block = self.job.network.blocks[self.at(row)[0]]
        stations = KINDS[block.kind].stations
        return block, stations.index("to") if "to" in stations else -1

    def _most_doubtful(self, shared: Iterable[Shared]) -> list[Shared]:
        """Those that the readings in doubt make up best, or leave out best; where none is known, the largest."""
        ranked = []
        for one in shared:
            within, beyond = (len(self.doubtful.intersection(rows)) for rows in (one.rows, one.against))
            if not self.doubtful or max(within, beyond) >= 2:
                score = max(n - SOUND * (len(rows) - n) for n, rows in ((within, one.rows), (beyond, one.against)))
                ranked.append((-score, -len(one.rows), one.rows, one))
        return [one for *_, one in sorted(ranked, key=lambda r: r[:3])[:TRIED]]

    @cached_property
    def _to(self) -> dict[int, list[int]]:
        """By station the rows that are sights to it."""
        out: dict[int, list[int]] = defaultdict(list)
        for block, i, row in self._rows(STANDING):
            to = self._target(row)[1]
            if to >= 0:
                out[int(block.stations[i, to])].append(row)
        return out

    @cached_property
    def _runs(self) -> dict[int, dict[int, list[list[int]]]]:
        """By station and block the runs of rows one below the other that were read there in one set-up."""
        out: dict[int, dict[int, list[list[int]]]] = defaultdict(lambda: defaultdict(list))
        last: dict[int, tuple[int, int]] = {}
        for block, i, row in self._rows(STANDING):
            b = self.at(row)[0]
            key = (int(block.stations[i, 0]), int(block.setup[i]) if len(block.setup) else -1)
            runs = out[key[0]][b]
            if last.get(b) == key:
                runs[-1].append(row)
            else:
                runs.append([row])
            last[b] = key
        return out

    def _all_together(self) -> list[tuple[int, ...]]:
        """All rows read at each station."""
        return [next(_joined(tables)) for tables in self._runs.values()]

    def _rows(self, says: set[str]) -> Iterator[tuple[Block, int, int]]:
        """Block, row in it and scalar row of kinds that say this, those held without error aside."""
        rows, blocks = self.job.network.rows, self.job.network.blocks
        for r, (b, i) in enumerate(zip(rows.block.tolist(), rows.row.tolist(), strict=True)):
            if KINDS[blocks[b].kind].says in says and not blocks[b].held[i]:
                yield blocks[b], i, r

    def at(self, row: int) -> tuple[int, int, int]:
        """Block, row in it, and part."""
        rows = self.job.network.rows
        return int(rows.block[row]), int(rows.row[row]), int(rows.part[row])

    def unit(self, row: int) -> str:
        """Unit of length of a row's table."""
        file = self.job.network.blocks[self.at(row)[0]].file
        return next((t.units for t in self.job.tables if t.file == file), self.job.settings.units).length

    def places(self, rows: Iterable[int]) -> str:
        """'angles.csv:3 to 9 and distances.csv:12'."""
        lines: dict[str, list[int]] = defaultdict(list)
        for r in rows:
            b, i, _ = self.at(r)
            lines[self.job.network.blocks[b].file].append(int(self.job.network.blocks[b].line[i]))
        return together([f"{f}:{min(n)}" + (f" to {max(n)}" if max(n) > min(n) else "") for f, n in lines.items()])


def _joined(tables: dict[int, list[list[int]]]) -> Iterator[tuple[int, ...]]:
    """All runs of a station together; of every table all, one or none of its runs."""
    yield tuple(sorted(r for runs in tables.values() for run in runs for r in run))
    choices = [
        [*runs, [r for run in runs for r in run], []] if len(runs) > 1 else [*runs, []] for runs in tables.values()
    ]
    for chosen in islice(product(*choices), MOST_CHOICES):
        yield tuple(sorted(r for run in chosen for r in run))
