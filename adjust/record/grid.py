"""Ticks and crosses of the plan at round coordinates, in the job's unit."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from adjust.record.paper import Box
from adjust.record.sheet import GREY, PALE, Sheet, round_step
from adjust.record.shown import Shown
from adjust.units import LENGTHS

if TYPE_CHECKING:
    from adjust.record.plan_data import Ground


def draw_grid(sheet: Sheet, shown: Shown, ground: Ground, frame: Box) -> None:
    """Small crosses inside, ticks and figures along the frame."""
    unit = LENGTHS[shown.length] * 1000 / ground.scale  # mm of paper for one unit
    left, bottom, right, top = frame
    step = round_step(min(62.0, (right - left) / 2.5) / unit)
    columns, rows = (_round_lines(ground, frame, axis, step, unit, shown) for axis in (0, 1))
    crosses = [cross for x, _ in columns for y, _ in rows for cross in ([(x - 1.2, y), (x + 1.2, y)],
                                                                        [(x, y - 1.2), (x, y + 1.2)])]  # fmt: skip
    sheet.lines(crosses, 0.5, "grid", edgecolor=PALE, zorder=0.5)
    for x, value in columns:
        for y, up in ((bottom, 1), (top, -1)):
            sheet.line([(x, y), (x, y + 1.8 * up)], 0.5, color=GREY)
        text = f"{_figure(shown, value, step)} E"
        if x + 1.3 + sheet.width(text, 5.5) < right:
            sheet.text((x + 0.8, bottom + 1.0), text, 5.5, color=GREY, gid=f"grid-east-{value:g}")
    for y, value in rows:
        for x, inward in ((left, 1), (right, -1)):
            sheet.line([(x, y), (x + 1.8 * inward, y)], 0.5, color=GREY)
        text = f"{_figure(shown, value, step)} N"
        if y + 1.3 + sheet.width(text, 5.5) < top:
            sheet.text(
                (left + 1.0, y + 0.8), text, 5.5, color=GREY, rotation=90, va="bottom", gid=f"grid-north-{value:g}"
            )


def _figure(shown: Shown, value: float, step: float) -> str:
    places = max(0, -math.floor(math.log10(step)))
    return shown.mark(f"{value + 0.0:.{places}f}")


def _round_lines(
    ground: Ground, frame: Box, axis: int, step: float, unit: float, shown: Shown
) -> list[tuple[float, float]]:
    """Paper position (mm) and value of the round coordinates inside the frame."""
    low, high = frame[axis] + 6, frame[axis + 2] - 6
    middle, centre = (ground.frame[axis] + ground.frame[axis + 2]) / 2, ground.centre[axis] / LENGTHS[shown.length]
    first, last = (
        math.ceil((centre + (low - middle) / unit) / step),
        math.floor((centre + (high - middle) / unit) / step),
    )
    return [(middle + (k * step - centre) * unit, k * step) for k in range(first, last + 1)]
