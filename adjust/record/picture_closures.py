"""Pictures of what closes: bars of misclosures against their tolerance, and a levelled run with the band of heights.

A bar's length is |misclosure| over what is allowed; the band is the height ± multiplier · standard deviation, enlarged.
"""

from __future__ import annotations

import math
from typing import Any

from adjust.record.level_view import multiplier
from adjust.record.live_texts import Texts
from adjust.record.picture_svg import WIDTH, Axes, Canvas, place, places_of, round_values
from adjust.record.sheet import nearest_step
from adjust.record.shown import Entry, Shown, plain
from adjust.units import LENGTHS

MOST_BARS, REACH = 12, 2.0
"""Bars at the most, the worst first; a bar ends with an arrow at this multiple of its limit."""
MOST_NAMES = 9


def bars_of(record: Entry) -> list[tuple[float, Entry, str]]:
    """(misclosure over limit, closure, what) of all that has a limit, the worst first."""
    found = []
    for one in record["closures"]:
        for what, limit in one["allowable"].items():
            miss = one["misclosure"].get(what)
            if miss is not None and limit:
                found.append((abs(float(miss)) / float(limit), one, what))
    return sorted(found, key=lambda row: -row[0])


def closure_picture(record: Entry, texts: Texts) -> tuple[str, str] | None:
    """Closures against tolerance; None where none has a limit."""
    every = bars_of(record)
    if not every:
        return None
    rows = every[:MOST_BARS]
    canvas, shown = Canvas(50.0 * len(rows) + 30), Shown.of(record)
    axes = Axes((8.0, 0.0, WIDTH - 30, canvas.height), (0.0, REACH), (0.0, 1.0))
    limit = axes.at(1.0, 0.0)[0]
    for i, (share, one, what) in enumerate(rows):
        _bar(canvas, axes, 50.0 * i, share, one, what, shown, texts)
    canvas.path("".join(f"M{place((limit, 50.0 * i + 21))}v22" for i in range(len(rows))), "limit-mark")
    canvas.text((limit, canvas.height - 6), texts("pictures.closures_limit"), anchor="m")
    over = sum(1 for row in every if row[0] > 1)
    untested = sum(1 for one in record["closures"] if one["verdict"] == "cannot be tested")
    return (
        canvas.svg(texts("pictures.closures_title"), "closure-bars"),
        texts("pictures.closures_words", drawn=len(rows), all=len(every), over=over, untested=untested),
    )


def _bar(
    canvas: Canvas, axes: Axes, top: float, share: float, one: Entry, what: str, shown: Shown, texts: Texts
) -> None:
    """Words of the closure, its bar below them, hatched where it is over the limit."""
    first, last = (
        plain(one["stations"][0], 10),
        plain(one["stations"][-2 if one["stations"][0] == one["stations"][-1] else -1], 10),
    )
    words = texts(
        f"pictures.closures_{what}",
        kind=one["kind"],
        first=first,
        last=last,
        amount=amount(shown, one["misclosure"][what], what),
        limit=amount(shown, one["allowable"][what], what),
    )
    x0, x1 = axes.at(0.0, 0)[0], axes.at(min(share, REACH), 0)[0]
    canvas.rect((x0, top + 24, max(x1, x0 + 1), top + 40), "bar over" if share > 1 else "bar", f"{share:.2f}")
    if share > REACH:
        canvas.path(f"M{place((x1 + 4, top + 22))}l12 10l-12 10Z", "beyond", f"{share:.1f}")
    canvas.text((x0, top + 18), words)


def amount(shown: Shown, value: float, what: str) -> str:
    """The size of a misclosure with its unit."""
    if what == "angle":
        return f"{shown.mark(f'{abs(shown.in_small_angle(value)):.1f}')} {shown.small_angle}"
    places = 1 if shown.small == "mm" else 4
    return f"{shown.mark(f'{abs(shown.in_small(value)):.{places}f}')} {shown.small}"


def longest_run(record: Entry) -> list[Entry]:
    """Stations of the levelled walk with most stations, runs before loops; empty where there is none with heights."""
    heights = {one["station"]: one for one in record["stations"] if one["height"] is not None}
    walks = [
        one
        for one in record["closures"]
        if one["kind"] in ("level run", "level loop")
        and len(one["stations"]) > 2
        and heights.keys() >= set(one["stations"])
    ]
    best = max(walks, key=lambda one: (one["kind"] == "level run", len(one["stations"])), default=None)
    return [heights[name] for name in best["stations"]] if best else []


def profile_picture(record: Entry, texts: Texts) -> tuple[str, str] | None:
    """Heights along a levelled run with the band of their intervals; None without such a run or its deviations."""
    run = longest_run(record)
    half = [multiplier(record) * (one["sd_height"] or 0.0) for one in run]
    if not run or not max(half):
        return None
    canvas, shown = Canvas(350.0), Shown.of(record)
    unit = LENGTHS[shown.length]
    heights = [one["height"] / unit for one in run]
    span = max(max(heights) - min(heights), 0.01)
    times = max(nearest_step(0.12 * span * unit / max(half)), 1.0)
    band = [h * times / unit for h in half]
    low, high = (
        min(h - b for h, b in zip(heights, band, strict=True)),
        max(h + b for h, b in zip(heights, band, strict=True)),
    )
    axes = Axes((64.0, 30.0, WIDTH - 24, 268.0), (0.0, len(run) - 1.0), (low, high))
    _heights(canvas, axes, low, high, shown)
    upper = [axes.at(i, h + b) for i, (h, b) in enumerate(zip(heights, band, strict=True))]
    lower = [axes.at(i, h - b) for i, (h, b) in enumerate(zip(heights, band, strict=True))]
    canvas.path("M" + " ".join(place(one) for one in (*upper, *reversed(lower))) + "Z", "band")
    points = [axes.at(i, h) for i, h in enumerate(heights)]
    canvas.line(points, "walk")
    canvas.dots(points, "dots" if len(run) <= 60 else "dots small")
    _run_names(canvas, axes, run)
    canvas.text((8, 20), texts("pictures.profile_axis", unit=shown.length))
    percent = f"{100 * record['settings']['confidence']:g}"
    canvas.text((WIDTH / 2, 342), texts("pictures.profile_band", percent=percent, times=f"{times:g}"), anchor="m")
    worst: Any = max(run, key=lambda one: one["sd_height"] or 0.0)
    words = texts(
        "pictures.profile_words",
        first=plain(run[0]["station"]),
        last=plain(run[-1]["station"]),
        count=len(run),
        worst=plain(worst["station"]),
        sd=f"{shown.small_sd(worst['sd_height'])} {shown.small}",
    )
    return canvas.svg(texts("pictures.profile_title"), "profile"), words


def _heights(canvas: Canvas, axes: Axes, low: float, high: float, shown: Shown) -> None:
    values = round_values(low, high, 5)
    for value in values:
        axes.level(canvas, value, "grid")
        canvas.text((58, axes.at(0.0, value)[1] + 5), shown.mark(f"{value:.{places_of(values)}f}"), anchor="e")


def _run_names(canvas: Canvas, axes: Axes, run: list[Entry]) -> None:
    """Names below, as many as have room, in two rows by turns."""
    every = math.ceil((len(run) - 1) / (MOST_NAMES - 1)) or 1
    wanted = list(range(0, len(run) - 1, every))
    wanted = [i for i in wanted if len(run) - 1 - i >= every * 0.7] + [len(run) - 1]
    for k, i in enumerate(wanted):
        x, name = axes.at(i, axes.ys[0])[0], plain(run[i]["station"], 14)
        canvas.line([(x, 268), (x, 274)], "axis")
        reach = 4.4 * len(name)
        canvas.text((min(max(x, reach + 2), WIDTH - reach - 2), 292 + 20 * (k % 2)), name, anchor="m")
