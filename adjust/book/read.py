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
from adjust.book.rounds import add_rounds
from adjust.book.rules import resolve
from adjust.book.settings import Settings, Table, read_settings
from adjust.book.staff import add_staff, compare_sections, level_books
from adjust.book.toml_lines import line_of
from adjust.book.traverse import add_traverse
from adjust.errors import InputError, nearest
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
        faults.add(
            str(path / "job.toml"),
            0,
            "",
            "",
            "no job.toml in the folder; 'brasscap start DIR' writes one to begin from",
        )
    faults.stop()
    return path


def _bytes(path: Path, file: str, line: int, faults: Faults) -> bytes | None:
    try:
        return path.read_bytes()
    except OSError as error:
        where = ("job.toml", line) if line else (file, 0)
        if isinstance(error, FileNotFoundError):
            tables = sorted(other.name for other in path.parent.glob("*.csv"))
            hint = f"no such table in the job folder; {nearest(path.name, tables)}"
        elif isinstance(error, IsADirectoryError):
            hint = "a folder; name the table itself"
        else:
            hint = f"cannot be read: {error.strerror}"
        faults.add(*where, "book.file" if line else "", file, hint)
        return None


def _text(data: bytes, faults: Faults) -> str:
    try:
        return data.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        shown = data.split(b"\n")[line - 1].decode("latin-1").strip()
        faults.add("job.toml", line, "", shown, "not UTF-8; save it as UTF-8")
        faults.stop()
        raise


def _tables(folder: Path, settings: Settings, faults: Faults) -> list[Table]:
    """The tables to read: those of the [[book]] blocks, or every KIND.csv in the folder."""
    if settings.books is None:
        files = {kind: f"{kind}.csv" for kind in schema.table_names() if (folder / f"{kind}.csv").is_file()}
        tables = [Table(file, kind, settings.units) for kind, file in files.items()]
    else:
        tables = list(settings.books)
    kept: dict[Path, Table] = {}
    for table in tables:
        real, hint = _inside(folder, table.file)
        if not hint and real in kept:
            hint = f"the same table as {kept[real].file} of another [[book]] block; name it once"
        if hint:
            where = ("job.toml", table.line, "book.file") if settings.books is not None else (table.file, 0, "")
            faults.add(*where, table.file, hint)
        else:
            kept[real] = table
    return list(kept.values())


def _inside(folder: Path, file: str) -> tuple[Path, str]:
    """Where a table really lies, and what is wrong with that ('' if it lies in the folder)."""
    if not file.isprintable():
        return folder, "a control character in the name of a file; remove it"
    if Path(file).is_absolute():
        return folder, "an absolute path; copy the table into the job folder and write its name only"
    try:
        real = (folder / file).resolve()
    except (OSError, RuntimeError):  # a link that leads to itself, a name too long
        return folder, "cannot be found; copy the table into the job folder"
    outside = not real.is_relative_to(folder.resolve())
    return real, "lies outside the job folder; copy the table into it" if outside else ""


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
        observations.tolerance, files = resolve(
            self.settings.allowances, self.settings.rules, line_of(self.settings.lines, "tolerance.rule"), self.folder,
            self.faults,
        )  # fmt: skip
        self.inputs += files
        levels = level_books(observations, cells)
        for one in cells:
            if one.table.kind in TABLES:
                observations.add(one)
            elif one.table.kind == "staff":
                add_staff(observations, one, levels)
            elif one.table.kind == "traverse":
                add_traverse(observations, one)
            elif one.table.kind == "rounds":
                add_rounds(observations, one)
        compare_sections(observations, levels)
        pairs = [pair for one in cells if one.table.kind == "pairs" for pair in self._pairs(one, marks, booked)]
        self._check_datum(marks)
        self._warn(tables, [name for name in marks.names if name not in levels.private])
        if not self.faults.all and not any(len(b) for b in observations.blocks):
            self.faults.add(
                "job.toml", 0, "", "", "the job has no readings; add a table such as distances.csv or levelled.csv"
            )
        self.faults.stop()
        return self._job(tables, marks, observations, pairs, frozenset(levels.private))

    def _job(
        self, tables: list[Table], marks: Marks, observations: Observations, pairs: list[tuple[int, int]],
        private: frozenset[str],
    ) -> Job:  # fmt: skip
        blocks = [*observations.settings_blocks(), *observations.blocks, *marks.weighted()]
        order = {t.file: i for i, t in enumerate(tables)}
        blocks.sort(key=lambda b: order.get(b.file, -1))  # job.toml itself comes first
        network = Network(
            marks.stations(),
            tuple(blocks),
            tuple(observations.groups),
            pairs=np.array(pairs, dtype=np.int64).reshape(-1, 2),
        )
        return Job(
            self.folder, self.settings, network, tuple(tables), tuple(self.inputs),
            tuple(observations.left_out), tuple(observations.planned), (*self.warnings, *observations.warnings),
            tuple(observations.reductions), tuple(observations.ledger), private, observations.tolerance,
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
                    cells.fault(
                        i, "booked", booked, f"already stands for {out[booked]}; one booked name means one station"
                    )
        return out

    def _pairs(self, cells: Cells, marks: Marks, booked: dict[str, str]) -> list[tuple[int, int]]:
        use = range(len(cells))
        starts, ends = cells.names("from", use, booked), cells.names("to", use, booked)
        found = []
        for i, ends_of in enumerate(zip(starts, ends, strict=True)):
            for column, name in zip(("from", "to"), ends_of, strict=True):
                if name and name not in marks.index:
                    cells.fault(i, column, name, f"no such station in the job; {nearest(name, marks.names)}")
            if ends_of[0] and ends_of[0] == ends_of[1]:
                cells.fault(i, "to", ends_of[1], "both ends are the same station")
            elif all(name in marks.index for name in ends_of):
                found.append((marks.index[ends_of[0]], marks.index[ends_of[1]]))
        return found

    def _check_datum(self, marks: Marks) -> None:
        for name in self.settings.datum_stations:
            if name not in marks.index:
                line = line_of(self.settings.lines, "datum.stations")
                hint = f"no such station in the job; {nearest(name, marks.names)}"
                self.faults.add("job.toml", line, "datum.stations", name, hint)
        if self.settings.datum_kind == "control" and not marks.has_datum():
            hint = 'no mark has role held or weighted in the control table; add control or set kind = "free"'
            self.faults.add("job.toml", line_of(self.settings.lines, "datum.kind"), "datum.kind", "control", hint)

    def _warn(self, tables: list[Table], names: list[str]) -> None:
        for group in near_duplicates(names):
            self.warnings.append(
                f"{' and '.join(group)} look alike: one station under two names? booked_names.csv can join them."
            )
        named = {t.file for t in tables}
        for kind in schema.table_names():
            if f"{kind}.csv" not in named and (self.folder / f"{kind}.csv").is_file():
                self.warnings.append(f"{kind}.csv lies in the folder, but no [[book]] block names it: it was not read.")
