"""stations.csv and observations.csv: the record's figures as tables in the job's units.

RFC 4180: comma (semicolon where the decimal mark is a comma), CRLF, a quote doubled inside quotes. The first line is
a comment with the caution; the second names the columns with their units. A spreadsheet takes a cell that begins with
= + - @ for a formula, so such *text* gets an apostrophe in front; numbers stay as they are.
"""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterable
from typing import Any

from adjust.caution import CAUTION
from adjust.record.shown import ANGLE_KINDS, FIXED_PLACES, NUMBER_KINDS, Entry, Shown, fixed
from adjust.units import format_angle

Column = tuple[str, Callable[[Entry], str]]
"""A header and what stands below it for one entry of the record."""

_NUMERAL = re.compile(r"[+-]?\d[\d .,:]*")
"""A number in any notation of the trade: digits, marks and blanks only, so nothing a spreadsheet could execute."""


def safe_text(value: object) -> str:
    """Text that no spreadsheet executes; '' for null."""
    text = "" if value is None else str(value)
    if text[:1] in ("=", "+", "-", "@", "\t", "\r", "\n") and text and not _NUMERAL.fullmatch(text):
        return "'" + text
    return text


def _quoted(cell: str, delimiter: str) -> str:
    """The cell in quotes where RFC 4180 needs them, and where a bare one would read as a comment or lose blanks."""
    bare = not any(mark in cell for mark in (delimiter, '"', "\r", "\n"))
    if bare and not cell.startswith("#") and cell == cell.strip():
        return cell
    return '"' + cell.replace('"', '""') + '"'


def _table(columns: list[Column], entries: Iterable[Entry], shown: Shown) -> str:
    delimiter = ";" if shown.decimal == "," else ","
    rows = [[name for name, _ in columns]] + [[cell(entry) for _, cell in columns] for entry in entries]
    lines = [delimiter.join(_quoted(cell, delimiter) for cell in row) for row in rows]
    return "\r\n".join([f"# {CAUTION}", *lines]) + "\r\n"


def _suffix(unit: str) -> str:
    return unit.replace("-", "_")


def _inside(entry: Entry, path: tuple[str | int, ...]) -> Any:
    """The value at a path of keys and indices; null where any step is null."""
    value: Any = entry
    for step in path:
        if value is None:
            return None
        value = value[step]
    return value


def _text(key: str) -> Column:
    return key, lambda entry: safe_text(entry[key])


def _figure(name: str, path: tuple[str | int, ...], change: Callable[[float], float], places: int, s: Shown) -> Column:
    """A column of numbers: the value at ``path``, changed to the shown unit, with ``places`` decimals."""

    def cell(entry: Entry) -> str:
        value = _inside(entry, path)
        return "" if value is None else s.mark(fixed(change(value), places))

    return name, cell


def _small(name: str, path: tuple[str | int, ...], s: Shown) -> Column:
    return _figure(f"{name}_{_suffix(s.small)}", path, s.in_small, s.small_length_places, s)


def _pure(name: str, s: Shown, places: int = 4) -> Column:
    return _figure(name, (name,), float, places, s)


def _bearing(name: str, path: tuple[str | int, ...], s: Shown) -> Column:
    """A column of directions as the job prints them."""

    def cell(entry: Entry) -> str:
        value = _inside(entry, path)
        return "" if value is None else s.bearing(value, 0)

    return f"{name}_{'quadrant' if s.quadrant else s.angle}", cell


def _ellipse(key: str, s: Shown) -> list[Column]:
    return [
        _small(f"{key}_semi_major", (key, "semi_major"), s),
        _small(f"{key}_semi_minor", (key, "semi_minor"), s),
        _bearing(f"{key}_azimuth", (key, "azimuth"), s),
    ]


_INDEX = {"east": 0, "north": 1, "height": 2}


def _covariance(one: str, other: str, s: Shown) -> Column:
    """A column of covariances in mm² or square feet."""

    def change(value: float) -> float:
        return s.in_small(s.in_small(value))

    path = ("covariance", _INDEX[one], _INDEX[other])
    return _figure(f"covariance_{one}_{other}_{_suffix(s.small)}2", path, change, 2 * s.small_length_places, s)


def _station_columns(s: Shown) -> list[Column]:
    axes = (*s.axes, "height")
    unit = _suffix(s.length)
    return [
        _text("station"), _text("role"), _text("role_height"),
        *[_figure(f"{axis}_{unit}", (axis,), s.in_length, FIXED_PLACES, s) for axis in axes],
        *[_small(f"sd_{axis}", (f"sd_{axis}",), s) for axis in axes],
        *[_covariance(a, b, s) for a, b in ((axes[0], axes[1]), (axes[0], axes[2]), (axes[1], axes[2]))],
        *_ellipse("ellipse", s), *_ellipse("ellipse_confidence", s),
        _figure("confidence", ("ellipse_confidence", "confidence"), float, 4, s),
        _small("circle_confidence", ("circle_confidence",), s),
    ]  # fmt: skip


def stations_csv(record: Entry) -> str:
    """The table of stations in the job's units and axis order; empty cells where nothing is determined."""
    shown = Shown.of(record)
    return _table(_station_columns(shown), record["stations"], shown)


def _for_kinds(column: Column, angles: bool) -> Column:
    """The column filled only for readings of angles, or only for those of lengths."""
    name, cell = column

    def filled(entry: Entry) -> bool:
        return (entry["kind"] in ANGLE_KINDS) == angles and entry["kind"] not in NUMBER_KINDS

    return name, lambda entry: cell(entry) if filled(entry) else ""


def _value(key: str, s: Shown) -> list[Column]:
    """Two columns of a reading's value: in the unit of length, and in the notation of angles."""

    def angle(entry: Entry) -> str:
        value, kind = entry[key], entry["kind"]
        if value is None:
            return ""
        if kind == "zenith_angle":
            return s.mark(format_angle(value, s.angle, 2))
        return s.bearing(value, 2) if kind == "azimuth" else s.circle(value, 2)

    length = _figure(f"{key}_{_suffix(s.length)}", (key,), s.in_length, FIXED_PLACES + 1, s)
    return [_for_kinds(length, False), _for_kinds((f"{key}_{s.angle}", angle), True)]


def _deviation(key: str, s: Shown) -> list[Column]:
    """Two columns of a small amount: of lengths in mm or feet, of angles in seconds or milligon."""
    angle = _figure(f"{key}_{s.small_angle}", (key,), s.in_small_angle, 2, s)
    return [_for_kinds(_small(key, (key,), s), False), _for_kinds(angle, True)]


def _corrections(entry: Entry) -> str:
    """The corrections as the record holds them (JSON), '' where there are none."""
    if not entry["corrections"]:
        return ""
    return safe_text(json.dumps(entry["corrections"], ensure_ascii=False, sort_keys=True))


def _effect(key: str) -> Column:
    return f"external_effect_{key}", lambda entry: safe_text(_inside(entry, ("external_effect", key)))


_NUMBER_KEYS = ("observed", "adjusted", "residual", "sd", "sd_adjusted", "smallest_detectable")


def _numbers(s: Shown) -> list[Column]:
    """Columns of readings that are pure numbers; only tables that hold such a reading have them."""

    def only(name: str, key: str) -> Column:
        cell = _figure(name, (key,), float, 6, s)[1]
        return name, lambda entry: cell(entry) if entry["kind"] in NUMBER_KINDS else ""

    return [only(f"{key}_number", key) for key in _NUMBER_KEYS]


def _observation_columns(s: Shown) -> list[Column]:
    names = ("id", "file", "line", "kind", "part", "at", "from", "to", "first", "second", "set", "booked", "group")
    return [
        *[_text(name) for name in names], ("corrections", _corrections),
        *_value("observed", s), *_value("adjusted", s),
        *_deviation("residual", s), *_deviation("sd", s), *_deviation("sd_adjusted", s),
        _pure("redundancy", s), _pure("checked_share", s), _pure("statistic", s, 3), _pure("critical", s, 3),
        *_deviation("smallest_detectable", s),
        _effect("station"), _effect("part"), _small("external_effect", ("external_effect", "value"), s),
        ("suspect", lambda entry: "yes" if entry["suspect"] else "no"),
    ]  # fmt: skip


def observations_csv(record: Entry) -> str:
    """The table of readings in the job's units; columns of lengths and of angles are filled by kind."""
    shown = Shown.of(record)
    pure = any(entry["kind"] in NUMBER_KINDS for entry in record["observations"])
    columns = _observation_columns(shown) + (_numbers(shown) if pure else [])
    return _table(columns, record["observations"], shown)
