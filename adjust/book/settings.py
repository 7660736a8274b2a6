"""job.toml read into frozen settings; every key is held against the schema."""

from __future__ import annotations

import datetime
import json
import re
import tomllib
from dataclasses import dataclass, field
from typing import Any

from adjust.book import schema
from adjust.book.faults import Faults
from adjust.book.toml_lines import key_lines, line_of
from adjust.errors import nearest
from adjust.fields import Field
from adjust.kinds import KINDS
from adjust.sigmas import Precision, parse_precision
from adjust.units import BadValue, parse_estimate, parse_length, parse_ratio, parse_times


@dataclass(frozen=True)
class Units:
    """Units and notations of the job or of one table."""

    length: str
    angle: str
    decimal: str = "."
    axis_order: str = "east, north"
    bearings: str = "azimuth"


@dataclass(frozen=True)
class Tests:
    """Levels of the tests."""

    confidence: float = 0.95
    significance: float = 0.05
    outlier: float = 0.001
    power: float = 0.80
    variance_factor: str = "given"


@dataclass(frozen=True)
class Estimate:
    """A pure number as written, with its standard deviation where it is to be estimated."""

    value: float
    sd: float | None
    text: str


@dataclass(frozen=True)
class Frame:
    """What [frame] says of the local plane; ``plane_height`` in metres, None: by the job's heights."""

    plane_height: float | None = None
    refraction: Estimate = Estimate(float(schema.REFRACTION), None, schema.REFRACTION)


@dataclass(frozen=True)
class Drawing:
    """What [drawing] asks for; None and '': the drawing chooses."""

    paper: str = ""
    orientation: str = "auto"
    scale: float | None = None
    """N of 1:N."""
    ellipses: float | None = None
    """Times larger than the plan."""
    relative_ellipses: float | None = None
    layers: tuple[str, ...] = schema.LAYERS


@dataclass(frozen=True)
class Table:
    """One [[book]] block: which file, of which kind, in which units, by which instrument."""

    file: str
    kind: str
    units: Units
    instrument: str = ""
    sd_factor: float = 1.0
    surface: str = ""
    """Where its lengths are said to lie: grid (the plane itself), ground, ground-from, slope, or '' (nothing said)."""
    line: int = 0
    path: str = ""
    """The block's path among the lines of job.toml: book.0."""


@dataclass(frozen=True)
class Settings:
    """What job.toml says."""

    title: str
    client: str
    surveyed: str
    units: Units
    datum_kind: str
    """control, free, or '': control for every part that has some, else free."""
    datum_stations: tuple[str, ...]
    tests: Tests
    instruments: dict[str, dict[str, Precision]]
    books: tuple[Table, ...] | None
    """None: no [[book]] block, every KIND.csv of the folder is read."""
    known_units: bool
    """False: the units are missing, so values are not read (the fault is already noted)."""
    frame: Frame = Frame()
    drawing: Drawing = Drawing()
    lines: dict[str, int] = field(default_factory=dict)
    """Line of every key of job.toml by its dotted path."""


class _Reader:
    def __init__(self, text: str, faults: Faults) -> None:
        self.faults = faults
        self.lines = key_lines(text)

    def fault(self, path: str, found: object, hint: str) -> None:
        shown = re.sub(r"^book\.\d+", "book", path)  # the line tells which block
        self.faults.add("job.toml", line_of(self.lines, path), shown, _shown(found), hint)

    def section(
        self, path: str, given: object, fields: tuple[Field, ...], ignore: tuple[str, ...] = ()
    ) -> dict[str, Any]:
        """Values of a section by key, defaults where absent or wrong."""
        values = {f.name: f.default for f in fields}
        if not isinstance(given, dict):
            form = 'units = { length = "ft" }' if path.startswith("book.") else f"[{path}]"
            self.fault(path, given, f"must be a table: {form}")
            return values
        known = {f.name: f for f in fields}
        for key, value in given.items():
            where = f"{path}.{key}" if path else key
            if key in known:
                values[key] = self.value(where, value, known[key])
            elif key not in ignore:
                self.fault(where, key, f"an unknown key; {nearest(key, [*known, *ignore])}")
        for f in fields:
            if f.required and f.name not in given:
                choices = " | ".join(f'"{c}"' for c in f.choices)
                self.fault(f"{path}.{f.name}", "", f"missing; write {f.name} = {choices} under [{path}]")
        return values

    def value(self, path: str, value: object, field: Field) -> Any:
        if field.type == "number":
            return self.number(path, value, field)
        if field.type == "date" and isinstance(value, datetime.date):
            return value.isoformat()
        if field.type == "list":
            if isinstance(value, list) and all(isinstance(v, str) for v in value):
                return self.chosen(path, value, field) if field.choices else value
            if field.choices:
                self.fault(path, value, f'must be a list: ["{field.choices[0]}", "{field.choices[1]}"]')
                return field.default
            self.fault(path, value, 'must be a list of station names: ["M1", "M2"]')
            return field.default
        if field.type == "table":
            return value
        if field.type == "precision":
            return self.precision(path, value, field)
        if field.type in ("length", "estimate") and isinstance(value, int | float) and not isinstance(value, bool):
            return repr(value)
        if not isinstance(value, str):
            date = field.type == "date"
            self.fault(path, value, "write a day like 2026-05-14" if date else "must be a text in quotes")
            return field.default
        if field.choices and value not in field.choices:
            self.fault(path, value, "use one of " + ", ".join(f'"{c}"' for c in field.choices))
            return field.default
        return value

    def chosen(self, path: str, value: list[str], field: Field) -> list[str]:
        """The entries that are known."""
        for one in value:
            if one not in field.choices:
                self.fault(path, one, f"an unknown layer; {nearest(one, field.choices)}")
        return [one for one in value if one in field.choices]

    def number(self, path: str, value: object, field: Field) -> Any:
        if isinstance(value, bool) or not isinstance(value, int | float):
            self.fault(path, value, "must be a number")
        elif field.above is not None and not value > field.above:
            self.fault(path, value, f"must be above {field.above:g}")
        elif path.startswith("tests.") and not value < 1:
            self.fault(path, value, "a probability; write it between 0 and 1, as in 0.05 for 5 per cent")
        elif not value < 1e300:
            self.fault(path, value, "must be a finite number")
        else:
            return float(value)
        return field.default

    def precision(self, path: str, value: object, field: Field) -> Precision | None:
        try:
            return parse_precision(value, field.dimension)
        except BadValue as bad:
            self.fault(path, value, str(bad))
            return None


_TOML_HINTS = {
    "invalid value": 'no value; write texts in quotes, as in length = "m"',
    "cannot overwrite a value": "the key stands twice; keep one",
    "cannot declare": "the section stands twice; join the two",
    "unterminated string": "a text is opened with a quote and not closed; close it",
    "invalid date": "no day of the calendar; write it like 2026-05-14",
}
"""What to do about the complaints of the standard TOML reader, by their first words."""


def _toml_hint(message: str) -> str:
    return next((hint for words, hint in _TOML_HINTS.items() if message.startswith(words)), message)


def read_settings(text: str, faults: Faults) -> Settings | None:
    """Settings from the text of job.toml; None where it is no TOML (the fault is noted)."""
    try:
        job = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        message = str(error)
        line = int(message.rpartition("line ")[2].partition(",")[0]) if "line " in message else max(1, text.count("\n"))
        shown = text.split("\n")[line - 1].strip() if line <= text.count("\n") + 1 else ""
        faults.add("job.toml", line, "", shown, f"not TOML: {_toml_hint(message.partition(' (at')[0].lower())}")
        return None
    r = _Reader(text, faults)
    top = r.section("", job, schema.JOB, ignore=("units", "datum", "instruments", "book", "tests", "frame", "drawing"))
    units = r.section("units", job.get("units", {}), schema.UNITS)
    datum = r.section("datum", job.get("datum", {}), schema.DATUM)
    tests = r.section("tests", job.get("tests", {}), schema.TESTS)
    if datum["stations"] and datum["kind"] != "free":
        r.fault(
            "datum.stations", datum["stations"], 'stations carry the datum of a free network only; set kind = "free"'
        )
    job_units = Units(**{**units, "length": units["length"] or "m", "angle": units["angle"] or "dms"})
    return Settings(
        title=top["title"] or "",
        client=top["client"] or "",
        surveyed=top["surveyed"] or "",
        units=job_units,
        datum_kind=datum["kind"] or "",
        datum_stations=tuple(datum["stations"] or ()),
        tests=Tests(**tests),
        instruments=_instruments(r, job.get("instruments", {})),
        books=_books(r, job.get("book"), job_units),
        known_units=bool(units["length"] and units["angle"]),
        frame=_frame(r, job.get("frame", {}), job_units),
        drawing=_drawing(r, job.get("drawing", {})),
        lines=r.lines,
    )


def _frame(r: _Reader, given: object, units: Units) -> Frame:
    texts = r.section("frame", given, schema.FRAME)
    height, estimate = None, Frame.refraction
    try:
        height = parse_length(texts["plane_height"], units.length) if texts["plane_height"] else None
    except BadValue as bad:
        r.fault("frame.plane_height", texts["plane_height"], str(bad))
    try:
        estimate = Estimate(*parse_estimate(texts["refraction"]), texts["refraction"])
    except BadValue as bad:
        r.fault("frame.refraction", texts["refraction"], str(bad))
    return Frame(height, estimate)


def _drawing(r: _Reader, given: object) -> Drawing:
    values = r.section("drawing", given, schema.DRAWING)
    parsed: dict[str, float | None] = {}
    for key, parse in (("scale", parse_ratio), ("ellipses", parse_times), ("relative_ellipses", parse_times)):
        try:
            parsed[key] = parse(values[key]) if values[key] is not None else None
        except BadValue as bad:
            parsed[key] = None
            r.fault(f"drawing.{key}", values[key], str(bad))
    layers = schema.LAYERS if values["layers"] is None else tuple(values["layers"])
    return Drawing(values["paper"] or "", values["orientation"], layers=layers, **parsed)


def _shown(value: object) -> str:
    """A value as it is written in TOML, near enough to be found again."""
    return value if isinstance(value, str) else json.dumps(value, default=str, ensure_ascii=False)


def _instruments(r: _Reader, given: object) -> dict[str, dict[str, Precision]]:
    if not isinstance(given, dict):
        r.fault("instruments", given, "must hold one table an instrument: [instruments.station-1]")
        return {}
    return {
        name: {k: v for k, v in r.section(f"instruments.{name}", keys, schema.instrument_keys()).items() if v}
        for name, keys in given.items()
    }


def _books(r: _Reader, given: object, units: Units) -> tuple[Table, ...] | None:
    if given is None:
        return None
    if not isinstance(given, list) or not all(isinstance(b, dict) for b in given):
        r.fault("book", "[book]" if isinstance(given, dict) else given, "write one [[book]] block a table")
        return ()
    tables = [_book(r, f"book.{i}", block, units) for i, block in enumerate(given)]
    return tuple(t for t in tables if t)


def _book(r: _Reader, path: str, block: dict[str, Any], units: Units) -> Table | None:
    kinds = schema.table_names()
    values = r.section(path, block, schema.BOOK)
    own = r.section(f"{path}.units", values["units"], schema.BOOK_UNITS) if values["units"] is not None else {}
    file, kind = values["file"], values["kind"]
    if not file and not kind:
        r.fault(path, "", "name a file or a kind")
        return None
    if kind and kind not in kinds:
        r.fault(f"{path}.kind", kind, f"an unknown kind of table; {nearest(kind, kinds)}")
        return None
    if not kind:
        kind = file.replace("\\", "/").rpartition("/")[2].rpartition(".")[0]
        if kind not in kinds:
            r.fault(
                f"{path}.file", file, f"the file's name does not tell its kind; add kind = ...; {nearest(kind, kinds)}"
            )
            return None
    used = {k: v for k, v in own.items() if v}
    return Table(
        file=file or f"{kind}.csv",
        kind=kind,
        units=Units(**{**units.__dict__, **used}),
        instrument=values["instrument"] or "",
        sd_factor=values["sd_factor"],
        surface=_surface(r, f"{path}.surface", values["surface"] or "", kind),
        line=line_of(r.lines, f"{path}.file"),
        path=path,
    )


def _surface(r: _Reader, path: str, surface: str, kind: str) -> str:
    """The surface of a table's lengths; '' where none is declared."""
    with_lengths = [k.table for k in KINDS.values() if k.says == "length"] + ["traverse"]
    if surface and kind not in with_lengths:
        r.fault(path, surface, f"only lengths lie on a surface ({', '.join(with_lengths)}); remove the key")
    elif surface == "ellipsoid":
        r.fault(path, surface, "a local plane has no ellipsoid; reduce the lengths to ground, or to the plane (grid)")
    return "" if surface == "ellipsoid" else surface
