"""The raw level book reduced to rises, one reading a set-up, and one an intermediate sight.

    rise = (back - c L_b - q L_b^2) - (fore - c L_f - q L_f^2)
         = back - fore - c (L_b - L_f) - q (L_b^2 - L_f^2)

with the lengths L of the sights, the collimation c of the level (adjust.book.peg_test) and q = (1 - k)/2R for curvature
and refraction; both corrections vanish where the sights balance, and are made only where the job declares them. The
length of the reading is L_b + L_f and its set-ups are one, so that error models per root distance and per root set-up
both hold. Change points are stations of the network, so a suspect is one set-up of the book.

An intermediate sight is back - intermediate likewise. It shares the back sight with the fore sight of its set-up, which
is left out of account: independent readings, as common practice has it. That is exact for a side shot.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from adjust.book.cells import Cells
from adjust.book.level_keys import NONE, PEG_TEST
from adjust.book.level_lines import SIGHTS, Shot, StaffTable, above_the_staff, read_staff
from adjust.book.level_names import lasting_names, private, said_elsewhere
from adjust.book.level_page import booking, check_pages, page_checks
from adjust.book.level_sections import Legs, balances, sections
from adjust.book.level_wires import wire_reductions
from adjust.book.observations import Observations
from adjust.book.peg_test import Tilt, bend, peg_tests, the_level
from adjust.book.reductions import Reduction
from adjust.book.sheet import Sheet
from adjust.book.toml_lines import line_of
from adjust.kinds import KINDS
from adjust.network import Array, Ints

COLLIMATION, CURVATURE = "collimation", "curvature and refraction"


@dataclass
class LevelBooks:
    """All level books of a job, taken apart before any is reduced: which names last depends on all of them."""

    tables: dict[str, StaffTable]
    lasting: set[str]
    tilts: dict[str, Tilt]
    unread: bool
    """Whether there are two-peg tests of which none could be read; their faults are told."""
    legs: list[Legs] = field(default_factory=list)
    private: set[str] = field(default_factory=set)
    """Names of change points that are private to their line."""


def level_books(observations: Observations, cells: list[Cells]) -> LevelBooks:
    """Every level book and two-peg test among the tables of the job."""
    booked = observations.booked
    seen: dict[str, str] = {}
    staffs = [c for c in cells if c.table.kind == "staff"]
    tables = {c.rows.file: read_staff(c, booked, seen) for c in staffs}
    elsewhere = said_elsewhere(cells, booked) | set(observations.settings.datum_stations)
    lasting, warnings = lasting_names(tables.values(), elsewhere) if tables else (set(), [])
    pegs = [c for c in cells if c.table.kind == "peg_test"]
    tilts, reductions, apart = peg_tests(observations.settings, pegs)
    observations.reductions += reductions
    observations.warnings += warnings + apart
    return LevelBooks(tables, lasting, tilts, bool(pegs) and not tilts)


def add_staff(observations: Observations, cells: Cells, books: LevelBooks) -> None:
    """Take over one level book: its readings, and what its reduction has to say."""
    table = books.tables[cells.rows.file]
    used = set(observations.used("staff", SIGHTS, cells))
    shots = {shot.row: shot for line in table.lines for shot in line.shots}
    use = [i for i in sorted(shots) if i in used]
    reduced = _Reduced(observations, table, books, shots, use)
    observations.warnings += above_the_staff(cells, SIGHTS)
    check_pages(observations, table)
    if use:
        held = np.zeros(len(cells), dtype=bool)
        observations.take(cells, reduced.sheet(), use, lambda rows: reduced.values, held)
    if observations.faults.all or not use:
        return
    block = observations.blocks[-1]
    chosen = np.array(use)
    amounts = tuple((name, amount[chosen]) for name, amount in reduced.corrections if amount[chosen].any())
    observations.blocks[-1] = block = replace(block, corrections=amounts, booked_at=reduced.booked_at(use))
    sd = np.full(len(cells), np.nan)
    sd[chosen] = block.sd[:, 0]
    tell(observations, reduced, books, sd)


class _Reduced:
    """Rises (n,) of the rows that end a height difference, with what they were made from."""

    def __init__(
        self, observations: Observations, table: StaffTable, books: LevelBooks, shots: dict[int, Shot], use: list[int]
    ) -> None:
        self.observations, self.table, self.books, self.shots = observations, table, books, shots
        n = len(table.cells)
        self.of_line = {i: line.name for line in table.lines for i in line.rows}
        self.names = [self._name(i) for i in range(n)]
        self.back_length, self.ahead_length, self.raw = np.full((3, n), np.nan)
        for i, shot in shots.items():
            self.back_length[i] = table.length["back"][shot.back]
            self.ahead_length[i] = table.length[shot.sight][i]
            self.raw[i] = table.reading["back"][shot.back] - table.reading[shot.sight][i]
        self.tilt, self.tilt_sd = self._tilts(use)
        self.corrections = (
            (COLLIMATION, self._correction(use, self.tilt, 1)), (CURVATURE, self._correction(use, self._bends(), 2)),
        )  # fmt: skip
        self.values = self.raw + self.corrections[0][1] + self.corrections[1][1]

    def _name(self, i: int) -> str:
        name = self.table.stations[i]
        if not name or name in self.books.lasting:
            return name
        own = private(self.of_line[i], name)
        self.books.private.add(own)
        return own

    def _tilts(self, use: list[int]) -> tuple[Array, Array]:
        """Collimation (n,) that each row is corrected by, and its standard deviation; zero where there is none."""
        cells, level = self.table.cells, self.table.cells.table.level
        out, sd = np.zeros((2, len(cells)))
        missing: set[str] = set()
        named = cells.text("instrument")
        for i in use:
            name = the_level(self.observations.settings, named[i] or cells.table.instrument)
            if level.tilt is not None:
                out[i] = level.tilt
            elif level.collimation == PEG_TEST and name in self.books.tilts:
                out[i], sd[i] = self.books.tilts[name].angle, self.books.tilts[name].sd or 0.0
            elif self.books.unread:
                continue
            elif level.collimation == PEG_TEST or (not level.collimation and name in self.books.tilts):
                missing.add(name)
        for name in sorted(missing):
            self._undeclared(name)
        return out, sd

    def _undeclared(self, name: str) -> None:
        table, observations = self.table.cells.table, self.observations
        if table.level.collimation:
            hint = (
                f"no two-peg test of {name or 'the level'} in the job; add peg_test.csv, state the figure, or say none"
            )
        else:
            hint = (
                f'a two-peg test of {name or "the level"} stands in the job; say collimation = "{PEG_TEST}" '
                f'to correct by it, or "{NONE}", in the [[book]] block of {table.file}'
            )
        where = line_of(observations.settings.lines, f"{table.path}.collimation") if table.path else 0
        observations.faults.add("job.toml", where, "book.collimation", table.level.collimation, hint)

    def _bends(self) -> Array:
        """q (n,) of curvature and refraction, zero where sights are not corrected for it."""
        refraction = self.observations.settings.frame.refraction.value
        return np.full(len(self.raw), bend(refraction) if self.table.cells.table.level.curvature else 0.0)

    def _correction(self, use: list[int], factor: Array, power: int) -> Array:
        """Metres (n,) to add to the rises; a sight without its length is a fault where a correction needs it."""
        for i in use:
            if factor[i]:
                self._need(self.shots[i].back, "back", self.back_length[i])
                self._need(i, self.shots[i].sight, self.ahead_length[i])
        amount = -factor * (self.back_length**power - self.ahead_length**power)
        return np.where(factor == 0, 0.0, amount) + 0.0  # no minus zero

    def _need(self, i: int, sight: str, length: float) -> None:
        if np.isnan(length):
            hint = 'the correction of collimation or curvature needs the length of this sight; fill it or say "none"'
            self.table.cells.fault(i, f"{sight}_length", self.table.cells.text(f"{sight}_length")[i], hint)

    def sheet(self) -> Sheet:
        """Where the readings stand: from the station of the back sight to that of the row."""
        n = len(self.names)
        standing = [self.names[self.shots[i].back] if i in self.shots else "" for i in range(n)]
        fill = "the lengths of both sights; fill them or the wires, or give sd"
        corrected = (self.tilt != 0) | (self._bends() != 0)  # their missing lengths are told already
        length = self.length()
        return Sheet(
            KINDS["levelled"], ("station", "station"), SIGHTS, names=(standing, self.names),
            sizes={"length": np.where(corrected & np.isnan(length), 1.0, length), "setups": np.ones(n)},
            wanting={"length": ("fore_length", fill)},
        )  # fmt: skip

    def booked_at(self, use: list[int]) -> Ints:
        """Physical lines (m, 3) of the back, intermediate and fore sight behind each reading, 0 where there is none."""
        at = np.zeros((len(use), 3), dtype=np.int64)
        for k, i in enumerate(use):
            at[k, 0] = self.table.place(self.shots[i].back)
            at[k, SIGHTS.index(self.shots[i].sight)] = self.table.place(i)
        return at

    def length(self) -> Array:
        """Lengths (n,) of the readings, both sights."""
        return np.asarray(self.back_length + self.ahead_length)


def tell(observations: Observations, reduced: _Reduced, books: LevelBooks, sd: Array) -> None:
    """What the reduction of one level book has to say, in the order of an evening."""
    table = reduced.table
    known = {n: observations.marks.known[i][2] for n, i in observations.marks.index.items()}
    names = tuple(reduced.names)
    told = booking(table, names, known)
    told += page_checks(table)
    told += wire_reductions(table.cells, table.wires, names)
    told += _set_ups(reduced, sd)
    lengths = (reduced.back_length, reduced.ahead_length)
    balance = balances(table, lengths, (reduced.tilt, reduced.tilt_sd), sd)
    legs = Legs(table, names, reduced.values, reduced.length(), sd)
    books.legs.append(legs)
    observations.reductions += told + balance
    observations.warnings += [r.sentence for r in told if r.verdict == "not met" and r.sentence]
    declared = table.cells.table.level.collimation not in ("", NONE)
    observations.warnings += [] if declared else [r.sentence for r in balance if r.sentence and not r.verdict]


def compare_sections(observations: Observations, books: LevelBooks) -> None:
    """Sections that were levelled more than once, over all level books of the job."""
    if books.legs and not observations.faults.all:
        rule = observations.tolerance.limits.get("level sections")
        found = sections(books.legs, books.lasting, observations.settings.tests.significance, rule)
        observations.reductions += found
        observations.warnings += [r.sentence for r in found if r.verdict == "not met"]


def _set_ups(reduced: _Reduced, sd: Array) -> list[Reduction]:
    """One entry a reading: what was booked and what was added."""
    table = reduced.table
    out = []
    for i, shot in sorted(reduced.shots.items()):
        if np.isnan(sd[i]):
            continue
        values: dict[str, float | None] = {
            "back": float(table.reading["back"][shot.back]), shot.sight: float(table.reading[shot.sight][i]),
            "back_length": _known(reduced.back_length[i]), f"{shot.sight}_length": _known(reduced.ahead_length[i]),
        }  # fmt: skip
        values |= {name.replace(" ", "_"): float(amount[i]) for name, amount in reduced.corrections}
        values |= {"rise": float(reduced.values[i]), "sd": float(sd[i])}
        what = "set-up" if shot.fore else "side shot"
        of = f"{reduced.of_line[i]}: {reduced.names[shot.back]} to {reduced.names[i]}"
        lines = tuple(sorted({table.place(shot.back), table.place(i)}))
        out.append(Reduction(what, of, table.cells.rows.file, lines, values, "length"))
    return out


def _known(x: float) -> float | None:
    return None if np.isnan(x) else float(x)
