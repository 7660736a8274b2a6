"""Slips of what was written: digits, degrees and minutes, round steps, signs, the sense of an angle, feet.

Each function gives the forms the slip can take in one reading: what the book would read, and by how much the reading is
larger as booked. A form that cannot be read as the column's value is none.
"""

from __future__ import annotations

import re
from collections.abc import Iterator

from adjust.book.raw_texts import RawText
from adjust.judge.slip_forms import Form, Written
from adjust.units import ANGLES, LENGTHS, TURN, US_FOOT, format_angle, parse_angle, parse_number, tidy, wrap

DEGREES: dict[str, tuple[float, ...]] = {
    "dms": (1, 10, 100), "packed": (1, 10, 100), "deg": (1, 10, 100), "gon": (1, 10, 100), "mil": (10, 100, 1000),
}  # fmt: skip
"""Steps of a misread whole of each notation, in degrees, gon or mil."""
MINUTES: dict[str, tuple[float, ...]] = {
    "dms": (1, 10, 30),
    "packed": (1, 10, 30),
    "deg": (0.1, 0.5),
    "gon": (0.1, 0.5),
    "mil": (1, 5),
}
"""Steps of the next figure: minutes, tenths of a degree or gon, single mil."""
STEPS = dict.fromkeys(("m", "ft", "us-ft"), (0.1, 0.5, 1.0, 10.0, 100.0))
"""Round steps of a tape, a staff, a display or of typing, in the table's unit."""
_QUADRANT = re.compile(r"([NSns])(\s*)(\d.*?)(\s*)([EWew])")


def digits_swapped(case: Written) -> Iterator[Form]:
    """Two neighbouring digits of one figure exchanged, a decimal mark between them or not."""
    for raw in case.raws:
        text = raw.text
        for match in re.finditer(r"(?=(\d)([.,]?)(\d))", text):
            a, mark, b = match.groups()
            if a != b:
                at = match.start()
                if b == "0" and not mark and not re.search(r"\d$", text[:at]) and text[at + 2 : at + 3].isdigit():
                    continue  # nobody books 021 for 201
                yield from _form(case, raw, text[:at] + b + mark + a + text[at + 2 + len(mark) :])


def degree_slip(case: Written) -> Iterator[Form]:
    """Degrees off by a round number."""
    yield from _angle_steps(case, DEGREES, 1.0)


def minute_slip(case: Written) -> Iterator[Form]:
    """Minutes off by a round number."""
    yield from _angle_steps(case, MINUTES, 1 / 60)


def round_step(case: Written) -> Iterator[Form]:
    """A length off by a round number."""
    for raw in case.raws:
        if raw.field_type == "length":
            unit = raw.units.length
            for step in STEPS[unit]:
                for sign in (1, -1):
                    yield from _form(case, raw, stepped(raw, sign * step * LENGTHS[unit]), f"{step:g} {unit}")


def sign(case: Written) -> Iterator[Form]:
    """A sign left out or put in; the letter of a quadrant."""
    for raw in case.raws:
        text = tidy(raw.text)
        if raw.field_type in ("length", "elevation"):
            other = text[1:] if text[:1] in "+-" else "-" + text
            if text[:1] == "+":
                other = "-" + text[1:]
            yield from _form(case, raw, other, "the sign is the wrong one")
        match = _QUADRANT.fullmatch(text)
        if match:
            north, east = {"N": "S", "S": "N"}[match[1].upper()], {"E": "W", "W": "E"}[match[5].upper()]
            for first, last in ((north, match[5]), (match[1], east), (north, east)):
                other = f"{first}{match[2]}{match[3]}{match[4]}{last}"
                yield from _form(case, raw, other, "the letters of the quadrant are the wrong ones")


def other_way(case: Written) -> Iterator[Form]:
    """An angle turned counter-clockwise and booked as if clockwise."""
    if case.kind == "angle":
        for raw in case.raws:
            if raw.field_type == "circle":
                value = raw.parse(raw.text)
                yield from _form(case, raw, _written(raw, (TURN - value) % TURN))


def half_circle(case: Written) -> Iterator[Form]:
    """Half a circle off: the wrong face, or a line read from its other end."""
    told = "the line was read from its other end, half a circle off" if case.kind == "azimuth" else (
        "the reading is of the other face, half a circle off")  # fmt: skip
    if case.kind in ("direction", "angle", "azimuth"):
        for raw in case.raws:
            if raw.field_type in ("circle", "course") and not _QUADRANT.fullmatch(tidy(raw.text)):
                yield from _form(case, raw, _written(raw, (raw.parse(raw.text) + TURN / 2) % TURN), told)


def feet_for_metres(case: Written) -> Iterator[Form]:
    """A length in feet among metres, or the other way round."""
    for raw in case.raws:
        if raw.field_type != "length" or raw.units.length not in ("m", "ft", "us-ft"):
            continue
        booked, unit = raw.parse(raw.text), raw.units.length
        others = [("ft", LENGTHS["ft"]), ("us-ft", US_FOOT)] if unit == "m" else [("m", 1.0)]
        for name, size in others[:1]:  # the two feet differ by less than any reading of a blunder
            would = booked / LENGTHS[unit] * size
            told = f"the {case.noun} was booked in {'feet' if name == 'ft' else 'metres'}"
            yield Form(f"{would / LENGTHS[unit]:.4f}", raw.factor * (booked - would), told, raw.line)


def _form(case: Written, raw: RawText, other: str | None, told: str = "") -> Iterator[Form]:
    """The form with another text in a cell, if it can be read and changes the reading."""
    change = None if other is None else raw.change(other)
    if other is None or change is None:
        return
    if case.wraps:
        change = wrap(change) if abs(raw.factor) > 0.99 else raw.factor * wrap(change / raw.factor)
    if change:
        yield Form(other, change, told, raw.line, raw.text)


def _angle_steps(case: Written, steps: dict[str, tuple[float, ...]], part: float) -> Iterator[Form]:
    for raw in case.raws:
        if raw.field_type in ("circle", "course", "bearing", "zenith", "elevation"):
            notation = raw.units.angle
            unit = {"gon": ANGLES["gon"], "mil": ANGLES["mil"]}.get(notation, ANGLES["deg"])
            if notation in ("dms", "packed"):
                unit *= part
            for step in steps[notation]:
                for way in (1, -1):
                    yield from _form(case, raw, stepped(raw, way * step * unit))


def stepped(raw: RawText, step: float) -> str | None:
    """The text of a cell with its value changed by a step in SI units, in the notation and with the places it has."""
    text = tidy(raw.text)
    if raw.field_type == "length":
        match = re.fullmatch(r"([+-]?[\d.,]+)(.*)", text)
        if not match:
            return None
        number = parse_number(match[1], raw.units.decimal) + step / LENGTHS[raw.units.length]
        return _decimal(number, _places(match[1]), raw.units.decimal) + match[2]
    match = _QUADRANT.fullmatch(text)
    if match:
        inner = parse_angle(match[3], raw.units.angle, raw.units.decimal) + step
        if not 0 <= inner <= TURN / 4:
            return None
        return f"{match[1]}{match[2]}{_angle_like(match[3], inner, raw)}{match[4]}{match[5]}"
    if re.search(r"[A-Za-z]", text):
        return None
    value = parse_angle(text, raw.units.angle, raw.units.decimal) + step
    if raw.field_type in ("circle", "course"):
        value %= TURN
    return _angle_like(text, value, raw)


def _written(raw: RawText, value: float) -> str | None:
    """A value of a whole circle as the cell would show it."""
    return None if re.search(r"[A-Za-z]", tidy(raw.text)) else _angle_like(tidy(raw.text), value, raw)


def _angle_like(text: str, value: float, raw: RawText) -> str:
    """An angle with the decimals and separators of a text."""
    notation, places = raw.units.angle, _places(text)
    if notation in ("deg", "gon", "mil"):
        return _decimal(value / ANGLES[notation], places, raw.units.decimal)
    if notation == "packed":
        return format_angle(value, notation, max(places - 4, 0)).replace(".", raw.units.decimal)
    degrees, minutes, seconds = format_angle(abs(value), "dms", places).split(" ")
    marks = re.findall(r"[^\d.,+-]+", text)
    marks = [*marks, " ", " "][:2] if len(marks) < 2 else marks
    out = f"{degrees}{marks[0]}{minutes}{marks[1]}{seconds.replace('.', raw.units.decimal)}{''.join(marks[2:])}"
    return f"-{out}" if value < 0 else out


def _places(text: str) -> int:
    """Decimals of the last number of a text."""
    match = re.search(r"[.,](\d+)\D*$", text)
    return len(match[1]) if match else 0


def _decimal(number: float, places: int, mark: str) -> str:
    return f"{number:.{places}f}".replace(".", mark)
