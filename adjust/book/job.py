"""A job as read: settings, network, inputs with their hashes, and what is set aside with its reason."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, field
from pathlib import Path

from adjust.book.csv_rows import read_rows
from adjust.book.faults import Faults
from adjust.book.reductions import LedgerLine, Reduction
from adjust.book.rules import Tolerance
from adjust.book.settings import Settings, Table
from adjust.book.toml_lines import line_of
from adjust.errors import InputError
from adjust.kinds import TABLES
from adjust.network import Network


@dataclass(frozen=True)
class Aside:
    """A row that takes no part: left out with its reason, or planned."""

    observation: str
    file: str
    line: int
    kind: str
    reason: str
    stations: tuple[str, ...] = ()
    """Its stations, the standpoint first."""


@dataclass(frozen=True)
class Job:
    """Everything that was read from a job folder; nothing of it is ever written back."""

    folder: Path
    settings: Settings
    network: Network
    tables: tuple[Table, ...]
    inputs: tuple[tuple[str, str], ...]
    """(file, sha256) of job.toml and every table."""
    left_out: tuple[Aside, ...] = ()
    planned: tuple[Aside, ...] = ()
    warnings: tuple[str, ...] = ()
    reductions: tuple[Reduction, ...] = ()
    """What the reduction of the raw books gave and looked at, in the order of the tables."""
    ledger: tuple[LedgerLine, ...] = ()
    """Corrections of distances, one line each, distance by distance."""
    private: frozenset[str] = frozenset()
    """Names of change points that belong to one line of a level book."""
    tolerance: Tolerance = field(default_factory=Tolerance)
    without_suspects: bool = False
    """Whether readings that were found in error were left out because it was asked for."""

    def booked(self, file: str, columns: tuple[str, ...] = ()) -> dict[int, tuple[str, ...]]:
        """The value cells of a table of observations by line, read again from the file.

        ``columns`` are those of the values where they are not the kind's own.

        Raises InputError if the file is no longer the one that was read.
        """
        if file == "job.toml":
            line = line_of(self.settings.lines, "frame.refraction")
            return {line: (self.settings.frame.refraction.text,)}
        table = next(t for t in self.tables if t.file == file)
        data = (self.folder / file).read_bytes()
        faults = Faults()
        if hashlib.sha256(data).hexdigest() != dict(self.inputs)[file]:
            faults.add(file, 0, "", file, "the table was changed while the job ran; run it again")
        rows = read_rows(data, file, faults)
        faults.stop()
        if rows is None:
            raise InputError([])
        names = TABLES[table.kind].value if table.kind in TABLES else ("east", "north", "height")
        texts = [rows.column(name) for name in columns or names]
        return {line: tuple(column[i] for column in texts) for i, line in enumerate(rows.lines)}
