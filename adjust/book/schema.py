"""The one table of keys and columns: job.toml, the tables that are no observations, and what every table may have.

Kinds bring their own columns and instrument keys (adjust.kinds); everything else that a job may say stands here.
"""

from __future__ import annotations

from adjust.fields import Field
from adjust.kinds import KINDS, TABLES
from adjust.kinds.base import ABOVE, AIR, OFFSET, REFLECTOR
from adjust.units import JOB_ANGLES, JOB_LENGTHS

REFRACTION = "0.13"
"""Coefficient of refraction where the job gives none, kept fixed: Gauss's mean value from the arc of Hannover (1820s;
quoted from memory, as in every textbook of surveying). Near the ground it may be anything from -1 to 1."""
TURNS = ("right", "left", "deflection-right", "deflection-left")
SURFACES = ("ground", "ground-from", "slope", "ellipsoid", "grid")

JOB = (
    Field("title", "text", "title of the job, printed on every page"),
    Field("client", "text", "for whom the work is done"),
    Field("surveyed", "date", "day of the fieldwork, written 2026-05-14 or as text"),
)
UNITS = (
    Field("length", "choice", "unit of lengths: metre, international foot (0.3048 m), US survey foot (1200/3937 m)",
          required=True, choices=JOB_LENGTHS),
    Field("angle", "choice", "notation of angles; packed is ddd.mmss; mil has 6400 to the circle",
          required=True, choices=JOB_ANGLES),
    Field("decimal", "choice", "decimal mark in the tables", default=".", choices=(".", ",")),
    Field("axis_order", "choice", "order in which coordinates are printed",
          default="east, north", choices=("east, north", "north, east")),
    Field("bearings", "choice", "how directions are printed", default="azimuth", choices=("azimuth", "quadrant")),
)  # fmt: skip
FRAME = (
    Field("plane_height", "length", "height of the local plane on which coordinates and plane distances lie; left out: "
          "the mean of the known heights, else of the starting ones, else 0"),
    Field("refraction", "estimate", "coefficient of refraction of zenith angles; with +- it is estimated, as one "
          'unknown of the job with this value as an observation: "0.13 +- 0.05"', default=REFRACTION),
)  # fmt: skip
DATUM = (
    Field("kind", "choice", "control: the marks of control.csv carry the datum; free: no mark is held. "
          "Left out: control where there is any, else free", choices=("control", "free")),
    Field("stations", "list", "free: the stations that carry the datum; left out: all that have starting values"),
)  # fmt: skip
TESTS = (
    Field("confidence", "number", "confidence of ellipses and intervals", default=0.95, above=0.0),
    Field("significance", "number", "of the overall test, and the whole job's share of false suspects",
          default=0.05, above=0.0),
    Field("outlier", "number", "significance of one reading's test", default=0.001, above=0.0),
    Field("power", "number", "power of one reading's test: sets the smallest blunder it can find",
          default=0.80, above=0.0),
    Field("variance_factor", "choice", "given: the stated standard deviations are trusted; from-residuals: only their "
          "ratios are, and the residuals set the scale", default="given", choices=("given", "from-residuals")),
)  # fmt: skip
TOLERANCE = (
    Field("levelling", "allowance", "largest misclosure of level loops, of runs between known heights, and of the two "
          "runnings of a section", dimension="length"),
    Field("heights", "allowance", "largest misclosure of loops and runs with heights by zenith angles",
          dimension="length"),
    Field("traverse", "allowance", "largest linear misclosure of a traverse after its angles are balanced",
          dimension="length"),
    Field("angular", "allowance", "largest angular misclosure of a traverse or triangle of n angles",
          dimension="angle"),
    Field("rule", "rules", "a published rule and its class, or a list of such: \"usa-levelling-1984: third order\"; "
          "a TOML file of the same form in the job folder is a rule too"),
)  # fmt: skip
APPLIED = ("reflector", "constant", "scale", "atmosphere")
WEATHER = AIR
REFLECTORS = (
    Field("constant", "length", 'added to every distance to it, with its sign and unit: "-30 mm"', required=True),
)
METER = (
    Field("constant", "length", "added to every distance of the instrument, from its calibration: \"0.8 mm\""),
    Field("scale", "ppm", "calibrated scale: parts per million of every distance to add: 1.4"),
    Field("wavelength", "wavelength", "carrier of its distance meter, from its manual: \"658 nm\""),
    Field("zero_weather", "air", "the weather in which its own correction is zero, from its manual: "
          "{ temperature = \"12 C\", pressure = \"1013.25 hPa\", humidity = 60 }"),
)  # fmt: skip
"""Keys of an instrument that measures distances; with them they are corrected."""
REJECTION = (
    Field("direction", "allowance", "largest difference of a set's direction from the mean of the other sets; beyond "
          "it is left out", dimension="angle"),
    Field("zenith", "allowance", "likewise of a zenith angle", dimension="angle"),
    Field("distance", "allowance", "likewise of a distance", dimension="length"),
    Field("horizon", "allowance", "largest horizon closure of a set: only judged", dimension="angle"),
    Field("collimation", "allowance", "largest difference of a 2C from the mean of its station: only judged",
          dimension="angle"),
)  # fmt: skip
"""Limits of `rounds`, declared before the work."""
PAPERS = ("A4", "A3", "A2", "Letter", "Tabloid")
LAYERS = ("grid", "lines", "ellipses", "relative", "names", "inset", "suspects", "left-out")
DRAWING = (
    Field("paper", "choice", "paper of drawing.svg and drawing.pdf; left out: A4, or Letter where lengths are in feet; "
          "Tabloid is 11 by 17 inches", choices=PAPERS),
    Field("orientation", "choice", "auto: as the network is longer or higher", default="auto",
          choices=("auto", "landscape", "portrait")),
    Field("scale", "ratio", 'scale of the plan, "1:500", true on the paper; where the stations do not fit at it, the '
          "drawing takes one that shows them all and warns; left out: the largest round scale that shows all"),
    Field("ellipses", "times", "how many times larger than the plan the confidence ellipses are drawn (in a drawing of "
          'heights: the intervals, than the height axis): "x 2000"; left out: by their size'),
    Field("relative_ellipses", "times", 'the same for relative ellipses: "x 5000"; left out: by their size'),
    Field("layers", "list", "what is drawn beside stations, title, scales and caution; left out: everything",
          choices=LAYERS),
)  # fmt: skip
RECORD = (
    Field("edition", "text", 'edition of this record, and what it replaces: "2, replaces edition 1 of 3 June"'),
    Field("issued", "date", "day on which it is handed over, written 2026-05-20 or as text"),
    Field("place", "text", "where the work lies"),
    Field("purpose", "text", "what the survey is for"),
    Field("accuracy", "text", "the accuracy that is required, and between what"),
    Field("rule", "text", "rule, contract or order that asks for it, with its edition; [tolerance] is what judges"),
    Field("surveyor", "text", "the responsible surveyor"),
    Field("licence", "text", "the surveyor's licence or registration"),
    Field("crew", "text", "who measured, and on which days"),
    Field("datum", "text", "datum of the coordinates and of the heights, and where they come from"),
    Field("epoch", "text", "epoch of the coordinates"),
    Field("projection", "text", "map projection, or how the local plane lies"),
    Field("geoid", "text", "geoid or height model"),
    Field("bearing_basis", "text", "what gives the bearings their north"),
    Field("surface", "text", "grid or ground: where coordinates and printed distances lie, and the factor between"),
    Field("instruments", "text", "instruments and their numbers"),
    Field("calibration", "text", "when and how they were calibrated"),
    Field("methods", "text", "how the measurements were made"),
    Field("criteria", "text", "criteria of rejection that were set before the work"),
    Field("control", "text", "where the control comes from; marks looked for and not found, or found and not used, and "
          "why"),
    Field("conclusions", "text", "the surveyor's conclusions"),
    Field("limits", "text", "what the survey does not cover or say"),
)  # fmt: skip
"""What the surveyor says of the work: shown on the record's page, and used in no computation."""
BOOK_UNITS = tuple(Field(f.name, f.type, f.meaning + " (in this table)", choices=f.choices) for f in UNITS[:3])
BOOK = (
    Field("file", "text", "name of the table; left out: KIND.csv"),
    Field("kind", "choice", "kind of the table; left out: the file's name without its ending"),
    Field("instrument", "text", "the instrument that took the readings; may be left out where only one fits"),
    Field("sd_factor", "number", "factor on every standard deviation of the table, not on centring",
          default=1.0, above=0.0),
    Field("surface", "choice", "where its lengths lie; ground: horizontal at the mean height of the ends; "
          "ground-from: horizontal at the instrument; slope: from instrument to target; grid or left out: on the plane "
          "itself; ellipsoid: not on a local plane", choices=SURFACES),
    Field("reflector", "text", "the reflector of its distances; may be left out where there is only one"),
    Field("applied", "list", "corrections of its distances that the instrument has already made; [] is none. Must be "
          "said where the job has a reflector, weather, or an instrument's constant or scale", choices=APPLIED),
    Field("weather", "air", "temperature, pressure and humidity, or ppm, of its distances where a row has none"),
    Field("units", "table", "units of this table where they differ from the job's: length, angle, decimal"),
    Field("collimation", "text", "staff: the line of sight of the level; peg_test: each sight is corrected by the "
          "two-peg test of its level; none: no correction; or a figure, above level positive: -8 sec, 0.05 mm/m. To "
          "be said where the job has a two-peg test"),
    Field("curvature", "choice", "staff, peg_test: with-refraction: sights are corrected for curvature and for the "
          "`refraction` of [frame]; none: they are not, as is usual with balanced sights", default="none",
          choices=("none", "with-refraction")),
    Field("wire_limit", "length", "staff: largest difference between the half-sum of the wires and the middle reading "
          "(common practice)", default="3 mm"),
    Field("staff_length", "length", "staff, peg_test: readings above it are warned about", default="5 m"),
    Field("sum_back", "lengths", "staff: sum of the back sights as booked, of the whole table or one a page"),
    Field("sum_intermediate", "lengths", "staff: likewise of the intermediate sights"),
    Field("sum_fore", "lengths", "staff: likewise of the fore sights"),
    Field("sum_rise", "lengths", "staff: likewise of the rises"),
    Field("sum_fall", "lengths", "staff: likewise of the falls"),
)  # fmt: skip


CENTRING = (
    Field("centring", "precision", "of the instrument over its mark, per axis: one horizontal vector a set-up, common "
          "to all its readings", dimension="offset"),
    Field("target", "precision", "of a target over its mark, per axis: one horizontal vector a set-up and target",
          dimension="offset"),
    Field("height", "precision", "of instrument and target heights: one a set-up, one a set-up and target",
          dimension="offset"),
)  # fmt: skip
"""Keys of an instrument that belong to the set-up and not to one kind of reading; in this order."""


def instrument_keys() -> tuple[Field, ...]:
    """The keys of [instruments.NAME]: the error models that the kinds ask for, and centring."""
    own = {k.instrument.name: k.instrument for k in KINDS.values() if k.instrument}
    return (*own.values(), *CENTRING, *METER)


SECTIONS: dict[str, tuple[Field, ...]] = {
    "": JOB,
    "units": UNITS,
    "frame": FRAME,
    "datum": DATUM,
    "instruments.*": instrument_keys(),
    "reflectors.*": REFLECTORS,
    "weather": WEATHER,
    "book": BOOK,
    "tests": TESTS,
    "rejection": REJECTION,
    "tolerance": TOLERANCE,
    "drawing": DRAWING,
    "record": RECORD,
}
"""Sections of job.toml; '' is the top, 'instruments.*' every instrument, 'reflectors.*' every reflector, 'book' every
[[book]] block."""

OBSERVATION = (
    Field("sd", "sd", "final standard deviation of this reading: length unit of the table, seconds for dms, deg, "
          "packed and mil, milligon for gon; nothing is added to it"),
    Field("count", "number", "readings meaned in this value: the instrument's figure is divided by its root",
          default=1.0, above=0.0),
    Field("setup", "text", "name of the set-up at the standing station; readings of one set-up share its centring; "
          "left out: one a station and table"),
    Field("use", "choice", "no: left out, with a reason; planned: not measured yet, no value", default="yes",
          choices=("yes", "no", "planned")),
    Field("reason", "text", "why the reading is left out; required with use = no"),
    Field("id", "text", "identification, unique in the job; left out: FILE:LINE"),
    Field("instrument", "text", "the instrument of this row"),
    Field("day", "text", "day of the reading"),
    Field("crew", "text", "who read"),
    Field("note", "text", "anything"),
    Field("page", "text", "page of the field book"),
)  # fmt: skip
"""Columns that every table of observations may have beside its own."""

_SHEET = tuple(f for f in OBSERVATION if f.name not in ("sd", "count"))
TRAVERSE = (
    Field("at", "station", "the occupied station", required=True),
    Field("back", "station", "the backsight; blank where nothing was sighted back"),
    Field("fore", "station", "the foresight; blank at the end of a traverse"),
    Field("angle", "circle", "angle from the backsight to the foresight, turned as `turn` says; blank: none"),
    Field("turn", "choice", "how the angle is turned: right is clockwise; a deflection counts from the prolonged "
          "backsight", default="right", choices=TURNS),
    Field("bearing", "course", "basis bearing or azimuth of the line from `at` to `fore` (to `back` where `fore` is "
          "blank): held without error"),
    Field("distance", "length", "distance from `at` to `fore`, as the `surface` of its [[book]] block says", above=0.0),
    Field("back_distance", "length", "distance from `at` to `back`", above=0.0),
    Field("sd_angle", "sd", "final standard deviation of the angle", dimension="angle"),
    Field("sd_distance", "sd", "final standard deviation of either distance"),
    *_SHEET,
)  # fmt: skip
"""Columns of a traverse as booked: one row a station, up to four readings a row."""

_POINTING = tuple(f for f in OBSERVATION if f.name not in ("sd", "count"))
ROUNDS = (
    Field("at", "station", "the occupied station", required=True),
    Field("to", "station", "the target", required=True),
    Field("set", "text", "name of the set; each file, station and set has one unknown orientation"),
    Field("face", "choice", "face of the instrument: 1 or left with the vertical circle on the left, 2 or right",
          choices=("1", "2", "left", "right"), required=True),
    Field("horizontal_circle", "circle", "reading of the horizontal circle, as booked in this face"),
    Field("zenith_circle", "circle", "reading of the vertical circle, from the zenith through the full circle: below "
          "half a circle in face 1, above it in face 2"),
    Field("slope_distance", "length", "distance from instrument to target", above=0.0),
    *ABOVE,
    *OFFSET,
    REFLECTOR,
    *AIR,
    Field("sd_direction", "sd", "final standard deviation of the set's direction to the target", dimension="angle"),
    Field("sd_zenith", "sd", "final standard deviation of the set's zenith angle", dimension="angle"),
    Field("sd_distance", "sd", "final standard deviation of the set's distance"),
    *_POINTING,
)  # fmt: skip
"""Columns of a total station's raw book: one row a pointing in one face."""
_RAW = tuple(
    Field("use", "choice", "no: the reading of this row is left out, with a reason", default="yes",
          choices=("yes", "no")) if f.name == "use" else f
    for f in _SHEET if f.name != "setup"
)  # fmt: skip
STAFF = (
    Field("line", "text", "name of the levelling line, unique in the job; blank: that of the row above; no such "
          "column: one line, named after the file"),
    Field("station", "station", "where the staff stood. A change point whose name stands in no other table and ends no "
          "line is private to its line: `L1/TP1`", required=True),
    Field("back", "length", "back sight: begins a set-up", required=True),
    Field("intermediate", "length", "intermediate sight: a side shot of the set-up"),
    Field("fore", "length", "fore sight: ends the set-up; that of the next begins in the same row or in the next",
          required=True),
    Field("back_length", "length", "length of the back sight", above=0.0),
    Field("intermediate_length", "length", "length of the intermediate sight", above=0.0),
    Field("fore_length", "length", "length of the fore sight", above=0.0),
    Field("back_upper", "length", "upper wire of the back sight; 100 times the wires' difference is its length"),
    Field("back_lower", "length", "lower wire of the back sight"),
    Field("fore_upper", "length", "upper wire of the fore sight"),
    Field("fore_lower", "length", "lower wire of the fore sight"),
    Field("sd", "sd", "final standard deviation of the rise that ends in this row"),
    *_RAW,
)  # fmt: skip
"""Columns of a level book as booked: one row a position of the staff."""
PEG_TEST = (
    Field("level", "text", "the instrument tested; left out: that of the [[book]] block, or the only one"),
    Field("near_a", "length", "reading on peg A with the level midway between A and B", required=True),
    Field("near_b", "length", "reading on peg B with the level midway", required=True),
    Field("far_a", "length", "reading on peg A with the level far from A, at B or beyond it", required=True),
    Field("far_b", "length", "reading on peg B with the level there", required=True),
    Field("length", "length", "how much longer the sight to A was than that to B when the level stood far: the "
          "distance from A to B where it stood beyond B in line with both", above=0.0),
    Field("near_a_length", "length", "length of that sight; with all four filled the level may stand anywhere, and "
          "`length` is not needed", above=0.0),
    Field("near_b_length", "length", "length of that sight", above=0.0),
    Field("far_a_length", "length", "length of that sight", above=0.0),
    Field("far_b_length", "length", "length of that sight", above=0.0),
    Field("sd", "sd", "standard deviation of one staff reading; left out: by the level's `levelling` figure"),
    *(f for f in OBSERVATION if f.name in ("day", "crew", "note", "page")),
)  # fmt: skip
"""Columns of two-peg tests: one row a test."""

ROLES = ("held", "weighted", "check")
OTHER_TABLES: dict[str, tuple[Field, ...]] = {
    "control": (
        Field("station", "station", "the mark", required=True),
        Field("east", "length", "known east; blank: unknown"),
        Field("north", "length", "known north; blank: unknown"),
        Field("height", "length", "known height; blank: unknown"),
        Field("sd_east", "sd", "standard deviation, for role weighted (and check, if known)"),
        Field("sd_north", "sd", "standard deviation, for role weighted (and check, if known)"),
        Field("sd_height", "sd", "standard deviation, for role weighted (and check, if known)"),
        Field("role", "choice", "held: without error; weighted: with its standard deviations; check: not used, "
              "compared afterwards", default="held", choices=ROLES),
        Field("role_height", "choice", "role of the height where it differs", choices=ROLES),
        Field("note", "text", "anything"),
    ),
    "stations": (
        Field("station", "station", "the station", required=True),
        Field("east", "length", "starting east"),
        Field("north", "length", "starting north"),
        Field("height", "length", "starting height"),
        Field("note", "text", "anything"),
    ),
    "traverse": TRAVERSE,
    "rounds": ROUNDS,
    "staff": STAFF,
    "peg_test": PEG_TEST,
    "booked_names": (
        Field("booked", "text", "the name as it stands in the book", required=True),
        Field("station", "station", "the station that is meant", required=True),
        Field("note", "text", "anything"),
    ),
    "pairs": (
        Field("from", "station", "one end", required=True),
        Field("to", "station", "other end", required=True),
        Field("note", "text", "anything"),
    ),
}  # fmt: skip
"""Tables that are not of one kind of observation."""


def table_names() -> tuple[str, ...]:
    """Every kind a table can be of, in the order of docs."""
    return (*list(OTHER_TABLES)[:2], *TABLES, *list(OTHER_TABLES)[2:])


def columns_of(table: str) -> tuple[Field, ...]:
    """The columns that a table of this kind may have."""
    if table in OTHER_TABLES:
        return OTHER_TABLES[table]
    kind = TABLES[table]
    ends = tuple(Field(name, "station", f"the station `{name}`", required=True) for name in kind.stations)
    return (*ends, *kind.columns, *OBSERVATION)
