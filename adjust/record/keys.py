"""Every key of record.json with its type and meaning; the JSON Schema and docs/formats.md are made from this table.

Types: text, number, integer, flag, object NAME, list NAME (of objects of section NAME), texts, numbers; a trailing ?
means null where there is nothing to say. Lengths are metres, angles radians, whatever the job's units.
"""

from __future__ import annotations

from adjust.fields import Field


def _keys(*rows: tuple[str, str, str]) -> tuple[Field, ...]:
    return tuple(Field(name, kind, meaning, required=True) for name, kind, meaning in rows)


_FIGURES = _keys(
    ("stage", "text", "held: on control; free: relative to the network's own datum"),
    ("converged", "flag", "always true: a record of an unsettled iteration is never written"),
    ("iterations", "integer", "Gauss-Newton iterations"),
    ("observations", "integer", "scalar readings, weighted coordinates included, conditions not"),
    ("unknowns", "integer", "coordinates, orientations and other unknowns"),
    ("conditions", "integer", "readings held without error (basis bearings)"),
    ("datum_missing", "integer", "freedoms of a free network"),
    ("degrees_of_freedom", "integer", "observations + conditions - unknowns + datum_missing"),
    ("weighted_square_sum", "number", "v'Pv"),
    ("variance_factor", "number?", "weighted_square_sum over degrees_of_freedom; null without any"),
    ("overall_test", "object overall_test", "chi-square test of the weighted square sum"),
    ("datum", "text", "what carries the datum, in words"),
)

RECORD: dict[str, tuple[Field, ...]] = {
    "": _keys(
        ("format", "integer", "version of this layout"),
        ("brasscap", "text", "version of the program"),
        ("versions", "object versions", "versions that the numbers depend on"),
        ("caution", "text", "what these results are not"),
        (
            "complete",
            "flag",
            "false: above 20,000 rows only suspects, worst and unchecked are in observations and lines",
        ),
        ("job", "object job", "the job and its input files"),
        ("settings", "object settings", "levels of the tests, datum, instruments and tables as declared"),
        ("units", "object units", "the job's units; the record itself is in metres and radians"),
        ("frame", "object frame", "the frame of the coordinates"),
        ("solution", "object solution", "figures of the adjustment"),
        (
            "free",
            "object? free",
            "the same for the free stage: the readings alone; null where control is no more than the datum needs",
        ),
        ("stations", "list station", "adjusted and held stations in the order of the book"),
        ("side_shots", "list side_shot", "stations that unchecked readings only fix: no verdict counts them"),
        ("lines", "list line", "observed lines in the order of the book, then the pairs"),
        ("observations", "list observation", "one entry a scalar reading, in the order of job.toml, then of rows"),
        ("parameters", "list parameter", "orientations, turns and other unknowns"),
        ("closures", "list any", "loops and runs against tolerance"),
        ("suspects", "list suspect", "readings that fail a test, in order of blame"),
        ("expected_by_chance", "number", "readings of a clean job that the plain test would flag"),
        ("unchecked", "list unchecked", "readings whose errors no test here can see"),
        ("control", "list mark", "control marks compared with the result"),
        ("variance_components", "list any", "scale of the standard deviations by group"),
        ("ledger", "list any", "corrections, one line each"),
        ("reductions", "list any", "reductions of the raw book"),
        ("left_out", "list left_out", "rows with use = no"),
        ("not_measured", "list not_measured", "rows with use = planned"),
        ("warnings", "texts", "sentences to read before using the result"),
    ),
    "versions": _keys(("python", "text", "Python"), ("numpy", "text", "numpy"), ("scipy", "text", "scipy")),
    "job": _keys(
        ("title", "text", "title"),
        ("client", "text", "client"),
        ("surveyed", "text", "day of the fieldwork"),
        ("inputs", "list input", "job.toml and every table read"),
    ),
    "input": _keys(("file", "text", "file name in the job folder"), ("sha256", "text", "SHA-256 of its bytes")),
    "settings": _keys(
        ("confidence", "number", "of ellipses and intervals"),
        ("significance", "number", "of the overall test and of the whole job's false suspects"),
        ("outlier", "number", "of one reading's test"),
        ("power", "number", "of one reading's test"),
        ("variance_factor", "text", "given or from-residuals"),
        ("frame", "object frame_settings", "frame as declared"),
        ("datum", "object datum", "datum as declared"),
        ("instruments", "object any", "error models by instrument and key, as declared"),
        ("books", "list book", "tables in their order"),
    ),
    "datum": _keys(
        ("kind", "text?", "control, free, or null: by what each part has"), ("stations", "texts", "as declared")
    ),
    "frame_settings": _keys(
        ("plane_height", "number?", "height of the plane as declared; null: by the job's heights"),
        ("refraction", "text", "coefficient of refraction, with +- where it is estimated"),
    ),
    "book": _keys(
        ("file", "text", "file"),
        ("kind", "text", "kind"),
        ("instrument", "text?", "instrument of the table"),
        ("sd_factor", "number", "factor on its standard deviations"),
        ("surface", "text?", "where its lengths lie, as declared; null: nothing declared, which is the plane itself"),
        ("units", "object book_units", "its units"),
    ),
    "book_units": _keys(("length", "text", "length"), ("angle", "text", "angle"), ("decimal", "text", "decimal mark")),
    "units": _keys(
        ("length", "text", "m, ft or us-ft"),
        ("angle", "text", "dms, deg, gon, mil or packed"),
        ("decimal", "text", "decimal mark"),
        ("axis_order", "text", "printed order of coordinates"),
        ("bearings", "text", "azimuth or quadrant"),
    ),
    "frame": _keys(
        ("kind", "text", "local plane"),
        ("origin", "text?", "sentence where the program chose an origin"),
        ("plane_height", "number", "height of the plane on which coordinates lie; matters only where heights do"),
        ("radius", "number", "radius of the Earth for curvature and for lengths at height"),
    ),
    "overall_test": _keys(
        ("interval", "numbers?", "limits of the variance factor"),
        ("verdict", "text", "met, not met, cannot be tested"),
        ("better_than_stated", "flag", "below the lower limit: a warning, no failure"),
    ),
    "solution": (*_FIGURES, *_keys(("parts", "list part", "the same figures per uncoupled part"))),
    "free": (
        *_FIGURES,
        *_keys(
            ("parts", "list part", "the same figures per uncoupled part"),
            ("similarity", "object? similarity", "how the free network lies on its control; null below two marks"),
        ),
    ),
    "similarity": _keys(
        ("marks", "integer", "marks with known east and north"),
        ("shift_east", "number", "middle of the known places minus middle of the free ones"),
        ("shift_north", "number", "the same north"),
        ("turn", "number", "clockwise turn from the free network to the control"),
        ("scale_ppm", "number", "scale of the control against the readings, parts per million"),
        ("sd_scale_ppm", "number?", "its standard deviation from the readings; null where nothing is left to compare"),
    ),
    "part": (*_keys(("what", "text", "plane or heights, with stations where there are several")), *_FIGURES),
    "station": _keys(
        ("station", "text", "name"),
        ("role", "text", "new, held, weighted or check, in the plane where it has one"),
        ("role_height", "text", "role of the height"),
        ("east", "number?", "east"),
        ("north", "number?", "north"),
        ("height", "number?", "height"),
        ("sd_east", "number?", "standard deviation"),
        ("sd_north", "number?", "standard deviation"),
        ("sd_height", "number?", "standard deviation"),
        ("covariance", "matrix", "3 x 3 over east, north, height; null where not determined"),
        ("ellipse", "object? ellipse", "standard ellipse"),
        ("ellipse_confidence", "object? ellipse_confidence", "ellipse of the stated confidence"),
        ("circle_confidence", "number?", "radius of the circle of the same confidence, exact"),
    ),
    "ellipse": _keys(
        ("semi_major", "number", "longer half axis"),
        ("semi_minor", "number", "shorter half axis"),
        ("azimuth", "number", "of the longer axis, clockwise from north, in [0, pi)"),
    ),
    "ellipse_confidence": _keys(
        ("semi_major", "number", "longer half axis"),
        ("semi_minor", "number", "shorter half axis"),
        ("azimuth", "number", "of the longer axis, clockwise from north, in [0, pi)"),
        ("confidence", "number", "probability"),
    ),
    "line": _keys(
        ("from", "text", "one end"),
        ("to", "text", "other end"),
        ("distance", "number?", "adjusted distance"),
        ("azimuth", "number?", "adjusted azimuth"),
        ("sd_distance", "number?", "its standard deviation"),
        ("sd_azimuth", "number?", "its standard deviation"),
        ("sd_height_difference", "number?", "standard deviation of the height difference"),
        ("ellipse", "object? ellipse", "standard relative ellipse"),
        ("ellipse_confidence", "object? ellipse_confidence", "relative ellipse of the stated confidence"),
    ),
    "observation": _keys(
        ("id", "text", "given identification, else FILE:LINE"),
        ("file", "text", "table"),
        ("line", "integer", "physical line where the row begins"),
        ("kind", "text", "distance, direction, angle, azimuth, zenith_angle, levelled, control, refraction"),
        ("part", "text?", "east, north, height of a coordinate"),
        ("at", "text?", "standing station, or the mark of a coordinate"),
        ("from", "text?", "station"),
        ("to", "text?", "station"),
        ("first", "text?", "first target of an angle"),
        ("second", "text?", "second target of an angle"),
        ("set", "text?", "set as booked"),
        ("booked", "text", "the value's text as it stands in the book"),
        ("corrections", "list correction", "corrections between booked and observed"),
        ("group", "text", "where its standard deviation comes from: an instrument, sd, or held"),
        ("observed", "number", "value adjusted, reduced from the book"),
        ("adjusted", "number", "observed plus residual"),
        ("residual", "number", "adjusted minus observed"),
        ("sd", "number?", "stated standard deviation; null for a condition"),
        ("sd_adjusted", "number?", "standard deviation of the adjusted value"),
        ("redundancy", "number?", "redundancy number; they sum to the degrees of freedom"),
        ("checked_share", "number?", "share of an error that the other readings can see, 0 to 1"),
        ("statistic", "number?", "one-reading statistic: normal (given) or tau (from-residuals); null where none"),
        ("critical", "number?", "its critical value"),
        ("smallest_detectable", "number?", "smallest blunder the test finds with its power"),
        ("external_effect", "object? external_effect", "coordinate that such a blunder, unseen, moves most"),
        ("suspect", "flag", "fails the plain one-reading test"),
    ),
    "correction": _keys(
        ("name", "text", "what was corrected"), ("value", "number", "amount that was added to the booked value")
    ),
    "external_effect": _keys(
        ("station", "text", "station"), ("part", "text", "east, north or height"), ("value", "number", "movement")
    ),
    "parameter": _keys(
        ("what", "text", "orientation, turn or refraction"),
        ("of", "text", "station and set, or the job"),
        ("value", "number", "value"),
        ("sd", "number?", "standard deviation"),
    ),
    "suspect": _keys(
        ("observation", "text", "id"),
        ("estimated_blunder", "number", "reading minus its estimate from all others"),
        ("sd", "number", "its standard deviation"),
        ("statistic", "number", "one-reading statistic"),
        ("at_job_level", "flag", "fails at the level of the whole job too (exit code 1)"),
        ("likely_causes", "list any", "everyday slips that would explain it"),
        ("cannot_be_told_from", "texts", "readings that no test here can tell from it"),
    ),
    "side_shot": _keys(
        ("station", "text", "station; it stands in stations too"),
        ("east", "number?", "adjusted east"),
        ("north", "number?", "adjusted north"),
        ("height", "number?", "adjusted height"),
        ("sd_east", "number?", "its standard deviation"),
        ("sd_north", "number?", "its standard deviation"),
        ("sd_height", "number?", "its standard deviation"),
        ("readings", "texts", "ids of the readings that fix it"),
    ),
    "unchecked": _keys(("observation", "text", "id"), ("why", "text", "why nothing checks it")),
    "mark": _keys(
        ("station", "text", "mark"),
        ("part", "text", "east, north or height"),
        ("misfit", "number?", "check mark: adjusted minus known; others: estimate of all others minus known"),
        ("sd", "number?", "standard deviation of the misfit"),
        ("verdict", "text", "agrees, disagrees, cannot be judged"),
        ("sentence", "text", "the same in words"),
    ),
    "left_out": _keys(
        ("observation", "text", "id"),
        ("file", "text", "table"),
        ("line", "integer", "line"),
        ("kind", "text", "kind"),
        ("reason", "text", "reason given"),
    ),
    "not_measured": _keys(
        ("observation", "text", "id"), ("file", "text", "table"), ("line", "integer", "line"), ("kind", "text", "kind")
    ),
}
"""Sections of record.json by name; '' is the record itself."""
