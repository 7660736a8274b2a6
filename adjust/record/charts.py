"""Further pages of drawing.pdf: residuals against their law, and the statistics along the book's order.

The statistic of a reading is its residual over the residual's own standard deviation (e'Pv / sqrt(e'Me)). Its law, if
the readings are as stated: the standard normal where the standard deviations are given; from residuals Pope's tau,

    f(t) = G(r/2) / (sqrt(pi r) G((r-1)/2)) (1 - t^2/r)^((r-3)/2)   for t^2 < r,

r degrees of freedom (Pope 1976; adjust.judge.critical has its link to Student's t).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from adjust.caution import CAUTION
from adjust.record.paper import EDGE, Box, Layout, Point
from adjust.record.sheet import BLACK, BLUE, GREY, PALE, VERMILLION, Sheet, draw_badge
from adjust.record.shown import Entry, Shown, count, plain

Array = NDArray[np.float64]

BIN = 0.5
REACH = 4.0
"""Statistics beyond this stand in the outermost bins of the histogram, which say so."""
CEILING = 8.0
"""Statistics beyond this are drawn at the edge of their chart with an arrow and their value."""
ROWS, PER_ROW, MOST_PAGES = 3, 150, 4
"""Charts a page and readings a chart of the book in order; longer books have more readings a chart."""
BADGES = 9


@dataclass(frozen=True)
class Law:
    """The law of one statistic in a job whose readings are as stated."""

    name: str
    density: Callable[[Array], Array]
    quantile: Callable[[Array], Array]


def law_of(record: Entry) -> Law | None:
    """Normal where standard deviations are given, tau from residuals; None where nothing is to spare for a test."""
    from scipy import special

    if record["settings"]["variance_factor"] == "given":
        return Law("standard normal", lambda t: np.asarray(np.exp(-t * t / 2) / math.sqrt(2 * math.pi)), special.ndtri)
    r = record["solution"]["degrees_of_freedom"]
    if r <= 1:
        return None
    factor = math.exp(math.lgamma(r / 2) - math.lgamma((r - 1) / 2)) / math.sqrt(math.pi * r)

    def density(t: Array) -> Array:
        inside = np.abs(t) < math.sqrt(r) * (1 - 1e-9)
        made: Array = np.where(inside, factor * np.where(inside, 1 - t * t / r, 1.0) ** ((r - 3) / 2), 0.0)
        return made

    def quantile(p: Array) -> Array:
        student = special.stdtrit(r - 1, p)
        made: Array = student * np.sqrt(r / (r - 1 + student**2))
        return made

    return Law(f"tau with {r} degrees of freedom", density, quantile)


class Chart:
    """A box of paper with linear axes."""

    def __init__(self, sheet: Sheet, box: Box, x: Point, y: Point) -> None:
        self.sheet, self.box, self.xs, self.ys = sheet, box, x, y

    def at(self, x: float, y: float) -> Point:
        """Where a value lies on the paper."""
        left, bottom, right, top = self.box
        across, up = (x - self.xs[0]) / (self.xs[1] - self.xs[0]), (y - self.ys[0]) / (self.ys[1] - self.ys[0])
        return left + across * (right - left), bottom + up * (top - bottom)

    def frame(self) -> None:
        """The outline."""
        left, bottom, right, top = self.box
        self.sheet.polygon([(left, bottom), (right, bottom), (right, top), (left, top)], linewidth=0.8, zorder=5)

    def ticks(self, xs: list[float], ys: list[float], x_words: str, y_words: str) -> None:
        """Ticks with figures left and below, and the words of the axes."""
        left, bottom, right, top = self.box
        for x in xs:
            at = self.at(x, self.ys[0])
            self.sheet.line([at, (at[0], at[1] - 1.2)], 0.6)
            self.sheet.text((at[0], at[1] - 4.2), f"{x:g}", 6.5, ha="center")
        for y in ys:
            at = self.at(self.xs[0], y)
            self.sheet.line([at, (at[0] - 1.2, at[1])], 0.6)
            self.sheet.text((at[0] - 2.0, at[1]), f"{y:g}", 6.5, ha="right", va="center_baseline")
        self.sheet.text(((left + right) / 2, bottom - 8.2), x_words, 7, ha="center")
        self.sheet.text((left - 8.5, (bottom + top) / 2), y_words, 7, ha="center", va="center", rotation=90)

    def dots(self, points: list[Point], gid: str, marker: str = "o", size: float = 2.6, **more: Any) -> None:
        """Open marks at values."""
        from matplotlib.lines import Line2D

        if points:
            xs, ys = zip(*(self.at(*point) for point in points), strict=True)
            look: dict[str, Any] = {
                "markerfacecolor": "white",
                "markeredgecolor": BLACK,
                "markeredgewidth": 0.7,
                "zorder": 3,
            } | more
            self.sheet.axes.add_artist(
                Line2D(xs, ys, linestyle="none", marker=marker, markersize=size, gid=gid, clip_on=False, **look)
            )

    def level(self, y: float, width: float, **more: Any) -> None:
        """A line from side to side."""
        self.sheet.line([self.at(self.xs[0], y), self.at(self.xs[1], y)], width, **more)


def _page(record: Entry, layout: Layout, heading: str) -> tuple[Sheet, Box]:
    """A sheet with job, heading and caution; the room between them."""
    sheet = Sheet(layout.width, layout.height)
    left, right, y = EDGE, layout.width - EDGE, layout.height - EDGE
    job = record["job"]
    title = sheet.wrap(plain(job["title"] or "Untitled job", 200), right - left - 70, 11, True, most=1)[0]
    sheet.text((left, y - 5), title, 11, bold=True)
    about = [f"For {plain(job['client'], 60)}" if job["client"] else "",
             f"surveyed {plain(job['surveyed'], 30)}" if job["surveyed"] else ""]  # fmt: skip
    sheet.text((right, y - 5), ", ".join(filter(None, about)), 7, ha="right")
    sheet.text((left, y - 11.5), heading, 9, bold=True)
    sheet.line([(left, y - 14), (right, y - 14)], 1.0)
    lines = sheet.wrap(CAUTION, right - left, 6, most=8)
    for i, line in enumerate(lines):
        sheet.text((left, EDGE + 1 + 2.7 * (len(lines) - 1 - i)), line, 6)
    foot = EDGE + 2.5 + 2.7 * len(lines)
    sheet.line([(left, foot), (right, foot)], 0.6)
    return sheet, (left, foot, right, y - 14)


def residual_pages(record: Entry, layout: Layout) -> list[Sheet]:
    """The page of residuals against their law; none where no reading has a statistic."""
    tested = [one for one in record["observations"] if one["statistic"] is not None]
    law = law_of(record)
    if not tested or law is None:
        return []
    sheet, (left, foot, right, top) = _page(record, layout, "Residuals against the law that they should follow")
    values = np.array([one["statistic"] for one in tested])
    low = foot + 52
    if layout.upright:
        middle = (low + top) / 2
        boxes = (left + 12, middle + 14, right - 2, top - 12), (left + 12, low + 12, right - 2, middle - 10)
    else:
        middle = (left + right) / 2
        boxes = (left + 12, low + 12, middle - 6, top - 12), (middle + 12, low + 12, right - 2, top - 12)
    _histogram(Chart(sheet, boxes[0], (-REACH - BIN, REACH + BIN), (0.0, 1.0)), values, law)
    _law_plot(sheet, boxes[1], record, tested, law)
    _by_kind(sheet, tested, record, law, (left, foot, right, low))
    return [sheet]


def _histogram(chart: Chart, values: Array, law: Law) -> None:
    """Counts of the statistics in steps of one half, and what the law lets expect."""
    sheet, n = chart.sheet, len(values)
    edges = np.arange(-REACH - BIN, REACH + BIN + 1e-9, BIN)
    counts = np.histogram(np.clip(values, edges[0] + 1e-9, edges[-1] - 1e-9), edges)[0]
    ts: Array = np.linspace(edges[1], edges[-2], 161, dtype=np.float64)
    curve = n * BIN * law.density(ts)
    chart.ys = (0.0, 1.12 * max(float(counts.max()), float(curve.max()), 1.0))
    for i, found in enumerate(counts.tolist()):
        (x1, y1), (x2, y2) = chart.at(edges[i], 0.0), chart.at(edges[i + 1], found)
        sheet.polygon([(x1, y1), (x2, y1), (x2, y2), (x1, y2)], f"bin-{i}", facecolor="#d9d9d9", linewidth=0.6,
                      hatch="////" if i in (0, len(counts) - 1) else None, zorder=1)  # fmt: skip
    sheet.line([chart.at(t, c) for t, c in zip(ts.tolist(), curve.tolist(), strict=True)], 1.6, "law", color=BLUE,
               zorder=2)  # fmt: skip
    step = max(1, math.ceil(chart.ys[1] / 6))
    chart.ticks([float(t) for t in range(-4, 5)], [float(c) for c in range(0, int(chart.ys[1]) + 1, step)],
                "statistic: residual over its standard deviation", "readings")  # fmt: skip
    chart.frame()
    left, _, _, top = chart.box
    sheet.text((left, top + 6), f"Grey: {count(n, 'reading')}. Line: {law.name} law.", 7)
    sheet.text((left, top + 2), "Hatched, outermost: all that lie beyond 4.", 6.5, color=GREY)


def _law_plot(sheet: Sheet, box: Box, record: Entry, tested: list[Entry], law: Law) -> None:
    """The statistics in order of size over the quantiles of the law at (i - 3/8) / (n + 1/4) (Blom 1958)."""
    ranked = sorted(tested, key=lambda one: float(one["statistic"]))
    n = len(ranked)
    q = law.quantile(np.asarray((np.arange(1, n + 1) - 0.375) / (n + 0.25), dtype=np.float64))
    y = np.array([one["statistic"] for one in ranked])
    most = max(float(np.abs(q).max()) * 1.1, min(float(np.abs(y).max()) * 1.1, CEILING), 1.5)
    chart = Chart(sheet, box, (-most, most), (-most, most))
    sheet.line([chart.at(-most, -most), chart.at(most, most)], 1.2, "law-line", color=BLUE, zorder=1)
    inside = [(float(a), float(b)) for a, b in zip(q, y, strict=True) if abs(b) <= most]
    chart.dots(inside, "ranked")
    numbers = {one["observation"]: i + 1 for i, one in enumerate(record["suspects"][:BADGES])}
    for one, a in zip(ranked, q.tolist(), strict=True):
        value = one["statistic"]
        if abs(value) > most:
            _beyond(chart, a, value)
        if one["id"] in numbers:
            x, up = chart.at(a, max(-most, min(most, value)))
            place = (x - 5, up) if abs(value) <= most else (x - 4, up - math.copysign(2.4, value))
            draw_badge(sheet, numbers[one["id"]], place, 0.8)
    steps = [float(k) for k in range(-int(most), int(most) + 1)]
    chart.ticks(steps, steps, f"expected: {law.name}", "found: the statistics in order of size")
    chart.frame()
    left, _, _, top = box
    sheet.text((left, top + 6), "Good readings lie along the line.", 7)
    beside = "Off at one end: single blunders. Steeper than the line: errors larger than stated; flatter: smaller."
    sheet.text((left, top + 2), sheet.wrap(beside, box[2] - left, 6.5, most=1)[0], 6.5, color=GREY)


def _beyond(chart: Chart, x: float, value: float) -> None:
    """An arrow at the edge with the value that lies outside."""
    edge = chart.ys[1] if value > 0 else chart.ys[0]
    (px, py), down = chart.at(x, edge), -1.0 if value > 0 else 1.0
    chart.sheet.polygon([(px, py), (px - 1.1, py + 2.4 * down), (px + 1.1, py + 2.4 * down)], facecolor=VERMILLION,
                        edgecolor=BLACK, linewidth=0.5, zorder=4)  # fmt: skip
    chart.sheet.text((px + 1.8, py + 2.6 * down - 0.9), f"{value:.1f}", 6.5, path_effects=chart.sheet.halo())


def _by_kind(sheet: Sheet, tested: list[Entry], record: Entry, law: Law, box: Box) -> None:
    """A table by kind of reading, and how to read the page."""
    left, _, right, top = box
    shown, y = Shown.of(record), top - 4
    heads = ("kind", "readings", "root mean square", "largest", "beyond critical")
    xs = [left + 2, left + 46, left + 78, left + 100, left + 128]
    for i, (x, text) in enumerate(zip(xs, heads, strict=True)):
        sheet.text((x, y), text, 7, bold=True, ha="left" if i == 0 else "right")
    kinds = sorted({one["kind"] for one in tested})
    for kind in [*kinds[:6], *(["all"] if len(kinds) > 1 else [])]:
        some = [one for one in tested if kind in ("all", one["kind"])]
        values = np.array([one["statistic"] for one in some])
        y -= 4.2
        cells = (kind.replace("_", " "), str(len(some)), shown.mark(f"{math.sqrt(float(np.mean(values**2))):.2f}"),
                 shown.mark(f"{float(np.abs(values).max()):.2f}"),
                 str(sum(bool(one["suspect"]) for one in some)))  # fmt: skip
        for i, (x, text) in enumerate(zip(xs, cells, strict=True)):
            sheet.text((x, y), text, 7, ha="left" if i == 0 else "right")
    idle = len(record["observations"]) - len(tested)
    critical = tested[0]["critical"]
    words = [
        f"Expected: {law.name}, root mean square 1.",
        f"{count(idle, 'reading')} without a statistic not shown: nothing checks them." if idle else "",
        f"Critical value {shown.mark(format(critical, '.2f'))}; a clean job of this size passes it in "
        f"{shown.mark(format(record['expected_by_chance'], '.2g'))} readings on the average."
        if critical and record["expected_by_chance"] is not None
        else "",
        "The residuals of one network hang together: these pictures are for looking, the tests are in the record.",
    ]
    x = left + 136 if right - left > 220 else left + 2
    y = top - 4 if x > left + 100 else y - 6
    for text in filter(None, words):
        for line in sheet.wrap(text, right - x, 7, most=3):
            sheet.text((x, y), line, 7)
            y -= 3.6


MARKERS = {"distance": "o", "direction": "^", "angle": "v", "azimuth": "D", "levelled": "s", "zenith_angle": "P"}
"""Marks by kind; all others are crosses."""


def order_pages(record: Entry, layout: Layout) -> list[Sheet]:
    """The statistics in the order of the book, with critical lines, the files, and the suspects numbered."""
    rows = record["observations"]
    if not any(one["statistic"] is not None for one in rows):
        return []
    per_row = max(min(PER_ROW, len(rows)), math.ceil(len(rows) / (ROWS * MOST_PAGES)))
    charts = math.ceil(len(rows) / per_row)
    sheets = []
    for first in range(0, charts, ROWS):
        part = f", page {first // ROWS + 1} of {math.ceil(charts / ROWS)}" if charts > ROWS else ""
        sheet, (left, foot, right, top) = _page(record, layout, f"Statistics in the order of the book{part}")
        _kind_legend(sheet, record, (left, foot, right, top))
        height = (top - 10 - foot) / ROWS if charts > 1 else min(top - 10 - foot, 110.0)
        for k in range(first, min(first + ROWS, charts)):
            high = top - 10 - (k - first) * height
            box = (left + 12, high - height + 12, right - 8, high - 8)
            _order_chart(sheet, box, record, k * per_row, min((k + 1) * per_row, len(rows)), per_row)
        sheets.append(sheet)
    return sheets


def _kind_legend(sheet: Sheet, record: Entry, room: Box) -> None:
    left, _, right, top = room
    x = left + 2
    for kind in sorted({one["kind"] for one in record["observations"]}):
        chart = Chart(sheet, (x, top - 5, x + 1, top - 4), (0, 1), (0, 1))
        chart.dots([(0.0, 0.5)], f"legend-{kind}", MARKERS.get(kind, "X"), 4.0)
        word = kind.replace("_", " ")
        sheet.text((x + 2.5, top - 4.5), word, 7, va="center_baseline")
        x += 8 + sheet.width(word, 7)
    words = "dashed: critical value; bar on the zero line: nothing checks the reading"
    sheet.text((right, top - 4.5), words, 6.5, ha="right", va="center_baseline", color=GREY)


def _order_chart(sheet: Sheet, box: Box, record: Entry, first: int, last: int, per_row: int) -> None:
    """Readings first + 1 to last of the book."""
    every = record["observations"]
    rows = every[first:last]
    critical = next((one["critical"] for one in every if one["critical"]), None)
    largest = max((abs(one["statistic"]) for one in every if one["statistic"] is not None), default=0.0)
    most = max(min(largest * 1.15, CEILING), (critical or 3.0) * 1.15)
    chart = Chart(sheet, box, (first + 0.5, first + 0.5 + max(len(rows), min(per_row, 12))), (-most, most))
    chart.level(0.0, 0.6, color=GREY)
    for sign in (1, -1):
        if critical:
            chart.level(
                sign * critical, 1.0, color=VERMILLION, linestyle=(0, (5.0, 2.5)), gid=f"critical-{first}-{sign}"
            )
    small = 3.4 if per_row <= PER_ROW else 1.4
    by_kind: dict[str, list[Point]] = {}
    for i, one in enumerate(rows):
        value, x = one["statistic"], first + 1.0 + i
        if value is None:
            px, py = chart.at(x, 0.0)
            sheet.line([(px, py - 1), (px, py + 1)], 0.8, color=GREY)
        elif abs(value) > most:
            _beyond(chart, x, value)
        else:
            by_kind.setdefault(one["kind"], []).append((x, value))
    for kind, points in by_kind.items():
        chart.dots(points, f"order-{first}-{kind}", MARKERS.get(kind, "X"), small)
    _files(chart, rows, first)
    _numbered(chart, record, rows, first, most)
    step = max(1, round(len(rows) / 10))
    step = next(s for s in (1, 2, 5, 10, 20, 25, 50, 100, 200, 500, 1000, 2000, 5000, 10**6) if s >= step)
    xs = [float(k) for k in range(first + 1, last + 1) if k == first + 1 or (k % step == 0 and k > first + step / 3)]
    chart.ticks(xs, [float(k) for k in range(-int(most), int(most) + 1, 2 if most > 5 else 1)],
                "reading, in the order of the book", "statistic")  # fmt: skip
    if critical:
        x, y = chart.at(chart.xs[1], critical)
        sheet.text((x + 1, y), Shown.of(record).mark(f"{critical:.2f}"), 6.5, va="center_baseline")
    chart.frame()


def _files(chart: Chart, rows: list[Entry], first: int) -> None:
    """A line where each file begins, its name above the chart."""
    top, ends = chart.box[3], [-math.inf, -math.inf]
    for i, one in enumerate(rows):
        if i == 0 or one["file"] != rows[i - 1]["file"]:
            x = chart.at(first + i + 0.5, 0.0)[0]
            if i:
                chart.sheet.line([(x, chart.box[1]), (x, top + 6.5)], 0.8, f"file-{first + i}", color=PALE, zorder=0)
            name = plain(one["file"], 28)
            row = next((row for row in (0, 1) if x + 0.8 > ends[row]), None)
            if row is not None:
                place = (x + 0.8, top + 1.2 + 2.9 * row)
                chart.sheet.text(place, name, 6.5, color=GREY, path_effects=chart.sheet.halo())
                ends[row] = x + 2 + chart.sheet.width(name, 6.5)


def _numbered(chart: Chart, record: Entry, rows: list[Entry], first: int, most: float) -> None:
    """The suspects' numbers beside their points, with their names while there is room."""
    numbers = {one["observation"]: i + 1 for i, one in enumerate(record["suspects"][:BADGES])}
    for i, one in enumerate(rows):
        if one["id"] in numbers and one["statistic"] is not None:
            x, y = chart.at(first + 1.0 + i, max(-most, min(most, one["statistic"])))
            aside = 4.5 if x + 45 < chart.box[2] else -4.5
            if abs(one["statistic"]) > most:
                y, aside = y - math.copysign(2.4, one["statistic"]), aside + (9.0 if aside > 0 else 0.0)
            draw_badge(chart.sheet, numbers[one["id"]], (x + aside, y), 0.8, f"order-suspect-{numbers[one['id']]}")
            chart.sheet.text((x + aside + math.copysign(2.2, aside), y), plain(one["id"], 24), 6.5,
                             ha="left" if aside > 0 else "right", va="center_baseline",
                             path_effects=chart.sheet.halo())  # fmt: skip
