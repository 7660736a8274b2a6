"""job.toml read into frozen settings; every key is held against the schema."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, field
from typing import Any

from adjust.allowances import Allowance
from adjust.atmosphere import Air
from adjust.book import schema
from adjust.book.faults import Faults
from adjust.book.level_keys import LevelBook, level_book
from adjust.book.toml_lines import line_of
from adjust.book.toml_reader import Reader
from adjust.book.weather import Meter, read_air, read_constant, read_meter
from adjust.errors import nearest
from adjust.kinds import KINDS
from adjust.sigmas import Precision
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
    reflector: str = ""
    applied: tuple[str, ...] | None = None
    """Corrections that the instrument has made; None: not said."""
    weather: Air = field(default_factory=Air)
    surface: str = ""
    """Where its lengths are said to lie: grid (the plane itself), ground, ground-from, slope, or '' (nothing said)."""
    line: int = 0
    path: str = ""
    """The block's path among the lines of job.toml: book.0."""
    level: LevelBook = field(default_factory=LevelBook)


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
    meters: dict[str, Meter] = field(default_factory=dict)
    """Of the instruments that say something of their distances."""
    reflectors: dict[str, float] = field(default_factory=dict)
    """Constants in metres by name."""
    weather: Air = field(default_factory=Air)
    allowances: dict[str, Allowance] = field(default_factory=dict)
    """What [tolerance] itself allows, by key."""
    rejection: dict[str, Allowance] = field(default_factory=dict)
    """Limits of `rounds` by key, constants in metres or radians."""
    rules: tuple[str, ...] = ()
    """Rules that [tolerance] names, with their classes."""
    drawing: Drawing = Drawing()
    particulars: dict[str, str] = field(default_factory=dict)
    """What [record] says of the work, by key; a text of blanks says nothing."""
    lines: dict[str, int] = field(default_factory=dict)
    """Line of every key of job.toml by its dotted path."""


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
    r = Reader(text, faults)
    top = r.section("", job, schema.JOB, ignore=tuple(name.partition(".")[0] for name in schema.SECTIONS if name))
    units = r.section("units", job.get("units", {}), schema.UNITS)
    datum = r.section("datum", job.get("datum", {}), schema.DATUM)
    tests = r.section("tests", job.get("tests", {}), schema.TESTS)
    tolerance = r.section("tolerance", job.get("tolerance", {}), schema.TOLERANCE)
    if datum["stations"] and datum["kind"] != "free":
        r.fault(
            "datum.stations", datum["stations"], 'stations carry the datum of a free network only; set kind = "free"'
        )
    instruments, meters = _instruments(r, job.get("instruments", {}))
    job_units = Units(**{**units, "length": units["length"] or "m", "angle": units["angle"] or "dms"})
    return Settings(
        title=top["title"] or "",
        client=top["client"] or "",
        surveyed=top["surveyed"] or "",
        units=job_units,
        datum_kind=datum["kind"] or "",
        datum_stations=tuple(datum["stations"] or ()),
        tests=Tests(**tests),
        instruments=instruments,
        meters=meters,
        reflectors=_reflectors(r, job.get("reflectors", {})),
        weather=read_air(r.section("weather", job.get("weather", {}), schema.WEATHER), r.fault, "weather"),
        books=_books(r, job.get("book"), job_units),
        known_units=bool(units["length"] and units["angle"]),
        frame=_frame(r, job.get("frame", {}), job_units),
        allowances={key: value for key, value in tolerance.items() if key != "rule" and value},
        rejection=_rejection(r, job.get("rejection", {})),
        rules=tolerance["rule"] or (),
        drawing=_drawing(r, job.get("drawing", {})),
        particulars=_particulars(r, job.get("record", {})),
        lines=r.lines,
    )


def _rejection(r: Reader, given: object) -> dict[str, Allowance]:
    """Limits of rounds: plain sizes, for a set has no length and no number of angles."""
    out = {key: value for key, value in r.section("rejection", given, schema.REJECTION).items() if value}
    for key, value in list(out.items()):
        if value.allowable() is None:
            r.fault(f"rejection.{key}", value.text, 'a plain limit is meant, as in "6 sec" or "5 mm"')
            del out[key]
    return out


def _frame(r: Reader, given: object, units: Units) -> Frame:
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


def _drawing(r: Reader, given: object) -> Drawing:
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


def _particulars(r: Reader, given: object) -> dict[str, str]:
    return {key: text for key, text in r.section("record", given, schema.RECORD).items() if text and text.strip()}


def _instruments(r: Reader, given: object) -> tuple[dict[str, dict[str, Precision]], dict[str, Meter]]:
    """Error models by instrument and key, and the distance meters of those that say something of them."""
    if not isinstance(given, dict):
        r.fault("instruments", given, "must hold one table an instrument: [instruments.station-1]")
        return {}, {}
    models, meters = {}, {}
    of_meter = [f.name for f in schema.METER]
    for name, keys in given.items():
        path = f"instruments.{name}"
        found = r.section(path, keys, schema.instrument_keys())
        models[name] = {k: v for k, v in found.items() if v and k not in of_meter}
        if any(found[k] is not None for k in of_meter):
            zero = found["zero_weather"]
            air = None if zero is None else _air(r, f"{path}.zero_weather", zero)
            meters[name] = read_meter(found, air, r.fault, path)
    return models, meters


def _reflectors(r: Reader, given: object) -> dict[str, float]:
    """Constants of the reflectors by name."""
    if not isinstance(given, dict):
        r.fault("reflectors", given, "must hold one table a reflector: [reflectors.round]")
        return {}
    out = {}
    for name, keys in given.items():
        value = r.section(f"reflectors.{name}", keys, schema.REFLECTORS)["constant"]
        try:
            out[name] = 0.0 if value is None else read_constant(value)
        except BadValue as bad:
            r.fault(f"reflectors.{name}.constant", value, str(bad))
    return out


def _air(r: Reader, path: str, given: object) -> Air:
    """Weather written as a table."""
    return read_air(r.section(path, given, schema.WEATHER), r.fault, path)


def _books(r: Reader, given: object, units: Units) -> tuple[Table, ...] | None:
    if given is None:
        return None
    if not isinstance(given, list) or not all(isinstance(b, dict) for b in given):
        r.fault("book", "[book]" if isinstance(given, dict) else given, "write one [[book]] block a table")
        return ()
    tables = [_book(r, f"book.{i}", block, units) for i, block in enumerate(given)]
    return tuple(t for t in tables if t)


def _book(r: Reader, path: str, block: dict[str, Any], units: Units) -> Table | None:
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
    used = Units(**{**units.__dict__, **{k: v for k, v in own.items() if v}})
    return Table(
        file=file or f"{kind}.csv",
        kind=kind,
        units=used,
        instrument=values["instrument"] or "",
        sd_factor=values["sd_factor"],
        reflector=values["reflector"] or "",
        applied=None if values["applied"] is None else tuple(values["applied"]),
        weather=Air() if values["weather"] is None else _air(r, f"{path}.weather", values["weather"]),
        surface=_surface(r, f"{path}.surface", values["surface"] or "", kind),
        line=line_of(r.lines, f"{path}.file"),
        path=path,
        level=level_book(r.fault, path, block, values, kind, used.length),
    )


def _surface(r: Reader, path: str, surface: str, kind: str) -> str:
    """The surface of a table's lengths; '' where none is declared."""
    if kind == "rounds" and not surface:
        return "slope"  # from instrument to target, as the column says
    with_lengths = [k.table for k in KINDS.values() if k.says == "length"] + ["traverse"]
    if surface and kind not in with_lengths:
        r.fault(path, surface, f"only lengths lie on a surface ({', '.join(with_lengths)}); remove the key")
    elif surface == "ellipsoid":
        r.fault(path, surface, "a local plane has no ellipsoid; reduce the lengths to ground, or to the plane (grid)")
    return "" if surface == "ellipsoid" else surface
