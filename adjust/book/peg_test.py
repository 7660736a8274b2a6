"""The two-peg test: how far the line of sight of a level points above level.

With the collimation c (radians, up positive) and q = (1 - k)/2R for curvature and refraction, a reading at the distance
L is too high by c L + q L^2. Let h be the height of B above A. The two set-ups, called near and far, read

    near_a - near_b = h + c (N_a - N_b) + q (N_a^2 - N_b^2)
    far_a  - far_b  = h + c (F_a - F_b) + q (F_a^2 - F_b^2)

where N and F are the lengths of the sights. Subtracting,

    c = ((far_a - far_b) - (near_a - near_b) - q Q) / D
    D = (F_a - F_b) - (N_a - N_b)        Q = (F_a^2 - F_b^2) - (N_a^2 - N_b^2)

With the level midway first, and then at B or beyond B in line with both, D is the length AB; only that is needed where
curvature is left aside. The standard deviation of c is that of the two height differences, sqrt(s_near^2 + s_far^2)/D,
which is 2 s/D for a standard deviation s of one reading. Common practice; the derivation is above.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.book.cells import Cells
from adjust.book.level_lines import above_the_staff, staff_readings
from adjust.book.reductions import Reduction
from adjust.book.settings import Settings
from adjust.errors import nearest
from adjust.frames import RADIUS_M
from adjust.network import Array
from adjust.units import RHO_SEC

READINGS = ("near_a", "near_b", "far_a", "far_b")
DIFFER = 3.0
"""Standard deviations by which two tests of one level may differ without a word (common practice)."""


@dataclass(frozen=True)
class Tilt:
    """Collimation of a level in radians (up positive) and its standard deviation, None where it is not known."""

    angle: float
    sd: float | None


def bend(refraction: float) -> float:
    """q in the reading error q L^2 of curvature and refraction, one over metres."""
    return (1.0 - refraction) / (2.0 * RADIUS_M)


def collimation(readings: Array, lengths: Array, q: float = 0.0) -> Array:
    """Collimations (n,) in radians of tests with readings (n, 4) and lengths of sights (n, 4), metres.

    Both in the order near on A, near on B, far on A, far on B.
    """
    turned = np.array([-1.0, 1.0, 1.0, -1.0])
    return np.asarray((readings @ turned - q * (lengths**2 @ turned)) / (lengths @ turned))


def the_level(settings: Settings, named: str) -> str:
    """The level that is meant: the one named, else the only instrument that has a figure for levelling, else ''."""
    levels = [name for name, keys in settings.instruments.items() if "levelling" in keys]
    return named or (levels[0] if len(levels) == 1 else "")


def peg_tests(settings: Settings, tables: list[Cells]) -> tuple[dict[str, Tilt], list[Reduction], list[str]]:
    """Collimation by level, from all two-peg tests of the job; what was found; and what needs a look at the book."""
    tests: dict[str, list[Tilt]] = {}
    reductions: list[Reduction] = []
    warnings: list[str] = []
    for cells in tables:
        warnings += above_the_staff(cells, READINGS)
        for level, tilt, reduction in _table(settings, cells):
            tests.setdefault(level, []).append(tilt)
            reductions.append(reduction)
    for level, found in tests.items():
        if _apart(found):
            warnings.append(
                f"the two-peg tests of {level or 'the level'} give {' and '.join(seconds(t.angle) for t in found)}, "
                "more than their standard deviations allow: was it adjusted between? Then name it as two levels."
            )
    return {level: _mean(found) for level, found in tests.items()}, reductions, warnings


def _table(settings: Settings, cells: Cells) -> list[tuple[str, Tilt, Reduction]]:
    use = range(len(cells))
    before = len(cells.faults.all)
    readings = np.stack([staff_readings(cells, column) for column in READINGS], axis=1)
    _check_blanks(cells)
    q = bend(settings.frame.refraction.value) if cells.table.level.curvature else 0.0
    lengths = _lengths(cells)
    sd_reading = cells.sds("sd", "length", use)
    if len(cells.faults.all) > before or not cells.known_units:
        return []
    out = []
    for i, angle in enumerate(collimation(readings, lengths, q)):
        level = the_level(settings, cells.text("level")[i] or cells.table.instrument)
        if settings.instruments and level and level not in settings.instruments:
            cells.fault(i, "level", level, f"no such instrument; {nearest(level, settings.instruments)}")
        sd = _sd(settings, level, float(sd_reading[i]), lengths[i])
        tilt = Tilt(float(angle), sd)
        out.append((level, tilt, _reduction(cells, i, level, tilt)))
    return out


def _check_blanks(cells: Cells) -> None:
    for column in READINGS:
        for i, text in enumerate(cells.text(column)):
            if not text and cells.has(column):
                cells.fault(i, column, "", "a two-peg test has four readings; fill this one")


def _lengths(cells: Cells) -> Array:
    """Lengths of sights (n, 4): all four as booked, else midway and at B."""
    use = range(len(cells))
    columns = [f"{name}_length" for name in READINGS]
    four = np.stack([cells.values(column, use) for column in columns], axis=1)
    between, text = cells.values("length", use), cells.text("length")
    for i in use:
        filled = [bool(cells.text(column)[i]) for column in columns]
        if any(filled) and not all(filled):
            cells.fault(i, columns[filled.index(False)], "", "fill the lengths of all four sights, or none")
        elif text[i] and any(filled):
            cells.fault(i, "length", text[i], "the lengths of the four sights say it already; keep one of them")
        elif not text[i] and not any(filled):
            cells.fault(i, "length", "", "the distance between the pegs is missing; fill it, or all four sights")
        elif cells.table.level.curvature and not any(filled):
            hint = "curvature with refraction needs the lengths of all four sights; fill them, or leave curvature out"
            cells.fault(i, columns[0], "", hint)
        elif any(filled) and abs(four[i] @ [-1, 1, 1, -1]) < 0.1 * np.nanmax(four[i]):
            hint = "near and far set-up have nearly the same difference of sights: nothing shows the collimation"
            cells.fault(i, columns[2], cells.text(columns[2])[i], hint)
    midway = np.stack([between / 2, between / 2, between, np.zeros(len(cells))], axis=1)
    return np.where(np.isnan(four.sum(axis=1))[:, None], midway, four)


def _sd(settings: Settings, level: str, reading: float, lengths: Array) -> float | None:
    """Of c, from the standard deviation of a reading, or from the level's figure for two set-ups of those lengths."""
    turned = abs(float(lengths @ [-1, 1, 1, -1]))
    if not np.isnan(reading):
        return 2.0 * reading / turned
    model = settings.instruments.get(level, {}).get("levelling")
    if model is None:
        return None
    both = np.array([lengths[0] + lengths[1], lengths[2] + lengths[3]])
    return float(np.sqrt((model.sd(2, length=both, setup=np.ones(2)) ** 2).sum())) / turned


def _mean(tests: list[Tilt]) -> Tilt:
    angle = sum(t.angle for t in tests) / len(tests)
    sds = [t.sd for t in tests if t.sd is not None]
    return Tilt(angle, float(np.hypot.reduce(sds)) / len(tests) if len(sds) == len(tests) else None)


def _apart(tests: list[Tilt]) -> bool:
    return any(
        a.sd is not None and b.sd is not None and abs(a.angle - b.angle) > DIFFER * float(np.hypot(a.sd, b.sd))
        for k, a in enumerate(tests)
        for b in tests[:k]
    )


def seconds(angle: float) -> str:
    """'+8.2 sec'."""
    return f"{angle * RHO_SEC:+.1f} sec"


def _reduction(cells: Cells, i: int, level: str, tilt: Tilt) -> Reduction:
    way = "up" if tilt.angle > 0 else "down"
    size = abs(tilt.angle)
    sentence = f"The line of sight points {way} by {size * RHO_SEC:.1f} sec, {size * 1e5:.1f} mm in 100 m."
    return Reduction(
        "two-peg test", level, cells.rows.file, (cells.rows.lines[i],),
        {"collimation": tilt.angle, "sd_collimation": tilt.sd}, "angle", "", sentence,
    )  # fmt: skip
