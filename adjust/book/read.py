"""A job folder read into a Job: job.toml first, then every table in its order; all faults at once."""

from __future__ import annotations

import hashlib
from pathlib import Path

import numpy as np

from adjust.book import schema
from adjust.book.cells import Cells
from adjust.book.csv_rows import read_rows
from adjust.book.faults import Faults
from adjust.book.job import Job
from adjust.book.marks import Marks
from adjust.book.names import near_duplicates
from adjust.book.observations import Observations
from adjust.book.settings import Settings, Table, read_settings
from adjust.errors import InputError
from adjust.kinds import TABLES
from adjust.network import Network


def read(path: str | Path) -> Job:
    """Read the job at ``path`` (its folder or its job.toml).

    Raises InputError with every fault found.
    """
    folder = _folder(Path(path))
    faults = Faults()
    data = _bytes(folder / "job.toml", "job.toml", 0, faults)
    settings = read_settings(_text(data, faults), faults) if data is not None else None
    if settings is None:
        faults.stop()
        raise InputError([])
    tables = _tables(folder, settings, faults)
    reader = _JobReader(folder, settings, faults)
    reader.inputs.append(("job.toml", hashlib.sha256(data or b"").hexdigest()))
    return reader.read(tables)


def _folder(path: Path) -> Path:
    faults = Faults()
    if path.name == "job.toml" and path.is_file():
        return path.parent
    if not path.exists():
        faults.add(str(path), 0, "", path.name, "no such folder; name a job folder or its job.toml")
    elif not path.is_dir():
        faults.add(str(path), 0, "", path.name, "not a job; name a job folder or its job.toml")
    elif not (path / "job.toml").is_file():
        faults.add(str(path / "job.toml"), 0, "", "", "no job.toml in the folder; 'brasscap start DIR' writes one to begin from")
    faults.stop()
    return path


def _bytes(path: Path, file: str, line: int, faults: Faults) -> bytes | None:
    try:
        return path.read_bytes()
    except OSError as error:
        where = ("job.toml", line) if line else (file, 0)
        hint = "no such table in the job folder" if isinstance(error, FileNotFoundError) else f"cannot be read: {error.strerror}"
        faults.add(*where, "book.file" if line else "", file, hint)
        return None


def _text(data: bytes, faults: Faults) -> str:
    try:
        return data.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        faults.add("job.toml", data[: error.start].count(b"\n") + 1, "", "", "not UTF-8; save it as UTF-8")
        faults.stop()
        raise


def _tables(folder: Path, settings: Settings, faults: Faults) -> list[Table]:
    """The tables to read: those of the [[book]] blocks, or every KIND.csv in the folder."""
    if settings.books is None:
        return [
            Table(f"{kind}.csv", kind, settings.units) for kind in schema.table_names() if (folder / f"{kind}.csv").is_file()
        ]
    inside = []
    root = folder.resolve()
    for table in settings.books:
        if (folder / table.file).resolve().is_relative_to(root):
            inside.append(table)
        else:
            faults.add("job.toml", table.line, "book.file", table.file, "lies outside the job folder; copy the table into it")
    return inside


class _JobReader:
    """Gathers stations and blocks table by table."""

    def __init__(self, folder: Path, settings: Settings, faults: Faults) -> None:
        self.folder, self.settings, self.faults = folder, settings, faults
        self.inputs: list[tuple[str, str]] = []
        self.warnings: list[str] = []

    def read(self, tables: list[Table]) -> Job:
        cells = [c for c in map(self._cells, tables) if c]
        booked = self._booked_names([c for c in cells if c.table.kind == "booked_names"])
        marks = Marks(self.faults, booked)
        for kind in ("control", "stations"):
            for one in cells:
                if one.table.kind == kind:
                    marks.add(one)
        observations = Observations(self.settings, marks, self.faults, booked)
        for one in cells:
            if one.table.kind in TABLES:
                observations.add(one)
        pairs = [pair for one in cells if one.table.kind == "pairs" for pair in self._pairs(one, marks, booked)]
        self._check_datum(marks)
        self._warn(tables, marks)
        if not self.faults.all and not any(len(b) for b in observations.blocks):
            self.faults.add("job.toml", 0, "", "", "the job has no readings; add a table such as distances.csv or levelled.csv")
        self.faults.stop()
        return self._job(tables, marks, observations, pairs)

    def _job(self, tables: list[Table], marks: Marks, observations: Observations, pairs: list[tuple[int, int]]) -> Job:
        blocks = [*observations.blocks, *marks.weighted()]
        order = {t.file: i for i, t in enumerate(tables)}
        blocks.sort(key=lambda b: order[b.file])
        network = Network(
            marks.stations(), tuple(blocks), tuple(observations.groups), pairs=np.array(pairs, dtype=np.int64).reshape(-1, 2)
        )
        return Job(
            self.folder, self.settings, network, tuple(tables), tuple(self.inputs),
            tuple(observations.left_out), tuple(observations.planned), tuple(self.warnings),
        )  # fmt: skip

    def _cells(self, table: Table) -> Cells | None:
        data = _bytes(self.folder / table.file, table.file, table.line, self.faults)
        if data is None:
            return None
        self.inputs.append((table.file, hashlib.sha256(data).hexdigest()))
        rows = read_rows(data, table.file, self.faults)
        return Cells(rows, table, self.faults, self.settings.known_units) if rows else None

    def _booked_names(self, tables: list[Cells]) -> dict[str, str]:
        out: dict[str, str] = {}
        for cells in tables:
            use = range(len(cells))
            names = cells.names("station", use, {})
            for i, booked in enumerate(cells.text("booked")):
                if not booked:
                    cells.fault(i, "booked", "", "the name as booked is missing")
                elif out.setdefault(booked, names[i]) != names[i]:
                    cells.fault(i, "booked", booked, f"already stands for {out[booked]}; one booked name means one station")
        return out

    def _pairs(self, cells: Cells, marks: Marks, booked: dict[str, str]) -> list[tuple[int, int]]:
        use = range(len(cells))
        starts, ends = cells.names("from", use, booked), cells.names("to", use, booked)
        found = []
        for i, ends_of in enumerate(zip(starts, ends, strict=True)):
            for column, name in zip(("from", "to"), ends_of, strict=True):
                if name and name not in marks.index:
                    cells.fault(i, column, name, "no such station in the job")
            if ends_of[0] == ends_of[1]:
                cells.fault(i, "to", ends_of[1], "both ends are the same station")
            elif all(name in marks.index for name in ends_of):
                found.append((marks.index[ends_of[0]], marks.index[ends_of[1]]))
        return found

    def _check_datum(self, marks: Marks) -> None:
        for name in self.settings.datum_stations:
            if name not in marks.index:
                self.faults.add("job.toml", 0, "datum.stations", name, "no such station in the job")
        if self.settings.datum_kind == "control" and not marks.has_datum():
            hint = 'no mark has role held or weighted in the control table; add control or set kind = "free"'
            self.faults.add("job.toml", 0, "datum.kind", "control", hint)

    def _warn(self, tables: list[Table], marks: Marks) -> None:
        for group in near_duplicates(marks.names):
            self.warnings.append(f"{' and '.join(group)} look alike: one station under two names? booked_names.csv can join them.")
        named = {t.file for t in tables}
        for kind in schema.table_names():
            if f"{kind}.csv" not in named and (self.folder / f"{kind}.csv").is_file():
                self.warnings.append(f"{kind}.csv lies in the folder, but no [[book]] block names it: it was not read.")

