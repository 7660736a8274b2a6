"""Pictures of single readings: residuals by kind against their law, and the statistics in the order of the book.

The statistic of a reading is its residual over the residual's own standard deviation (e'Pv / sqrt(e'Me)); its law is
that of adjust.record.charts: the standard normal, or Pope's tau where the standard deviations come from residuals.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from adjust.record.charts import BIN, CEILING, REACH, Law, law_of
from adjust.record.live_texts import Texts
from adjust.record.paper import Point
from adjust.record.picture_svg import WIDTH, Axes, Canvas, place, round_values
from adjust.record.shown import Entry, Shown, plain

MOST_KINDS, NUMBERED = 6, 9
TOGETHER = 1500
"""Readings above which the order of the book is drawn by columns, each from its least to its greatest statistic."""


def tested(record: Entry) -> list[Entry]:
    """The readings that have a statistic."""
    return [one for one in record["observations"] if one["statistic"] is not None]


def residual_picture(record: Entry, texts: Texts) -> tuple[str, str] | None:
    """Drawing and words; None where nothing was tested."""
    rows, law = tested(record), law_of(record)
    if not rows or law is None:
        return None
    kinds = sorted({one["kind"] for one in rows}, key=lambda kind: (-sum(one["kind"] == kind for one in rows), kind))
    canvas = Canvas(46.0 + 112.0 * min(len(kinds), MOST_KINDS))
    shown = Shown.of(record)
    for i, kind in enumerate(kinds[:MOST_KINDS]):
        _histogram(
            canvas, 112.0 * i, kind, [float(one["statistic"]) for one in rows if one["kind"] == kind], law, shown, texts
        )
    canvas.text((WIDTH / 2, canvas.height - 6), texts("pictures.residuals_axis"), anchor="m")
    beyond = sum(bool(one["suspect"]) for one in rows)
    values = np.array([one["statistic"] for one in rows])
    rms = shown.mark(f"{math.sqrt(float(np.mean(values**2))):.2f}")
    law_name = texts("pictures.normal" if record["settings"]["variance_factor"] == "given" else "pictures.tau")
    return (
        canvas.svg(texts("pictures.residuals_title"), "residuals"),
        texts("pictures.residuals_words", count=len(rows), rms=rms, beyond=beyond, law=law_name),
    )


def _histogram(
    canvas: Canvas, top: float, kind: str, values: list[float], law: Law, shown: Shown, texts: Texts
) -> None:
    """One kind: its counts in steps of one half, the law's curve, and arrows for what lies beyond."""
    edges = np.arange(-REACH - BIN, REACH + BIN + 1e-9, BIN)
    counts = np.histogram(np.clip(values, edges[0] + 1e-9, edges[-1] - 1e-9), edges)[0]
    ts = np.linspace(-REACH, REACH, 65)
    curve = len(values) * BIN * law.density(ts)
    most = max(float(counts.max()), float(curve.max()), 1.0)
    axes = Axes((16.0, top + 26, WIDTH - 16, top + 92), (float(edges[0]), float(edges[-1])), (0.0, most))
    for i, found in enumerate(counts.tolist()):
        if found:
            (x1, y1), (x2, y2) = axes.at(float(edges[i]), 0.0), axes.at(float(edges[i + 1]), found)
            outer = i in (0, len(counts) - 1)
            span = texts("pictures.beyond") if outer else f"{edges[i]:g} … {edges[i + 1]:g}"
            canvas.rect((x1, y2, x2, y1), "count outer" if outer else "count", shown.mark(f"{span}: {found}"))
    canvas.line([axes.at(t, c) for t, c in zip(ts.tolist(), curve.tolist(), strict=True)], "law")
    axes.level(canvas, 0.0, "axis")
    for t in range(-4, 5, 2):
        canvas.text((axes.at(t, 0.0)[0], top + 109), f"{t}".replace("-", "−"), anchor="m")
    rms = shown.mark(f"{math.sqrt(sum(v * v for v in values) / len(values)):.2f}")
    largest = shown.mark(f"{max(map(abs, values)):.1f}")
    canvas.text(
        (16, top + 18),
        texts(
            "pictures.residuals_kind",
            kind=texts(f"pictures.kind_{kind}") if f"pictures.kind_{kind}" in texts.found else kind.replace("_", " "),
            count=len(values),
            rms=rms,
            largest=largest,
        ),
    )


def order_picture(record: Entry, texts: Texts) -> tuple[str, str] | None:
    """Statistics along the book's order with the limit; None where nothing was tested."""
    rows = record["observations"]
    if not tested(record):
        return None
    critical = next((float(one["critical"]) for one in rows if one["critical"]), None)
    largest = max(abs(one["statistic"]) for one in tested(record))
    most = max(min(largest * 1.1, CEILING), (critical or 3.0) * 1.25)
    canvas, shown = Canvas(330.0), Shown.of(record)
    axes = Axes((34.0, 50.0, WIDTH - 46, 280.0), (0.5, max(len(rows), 8) + 0.5), (-most, most))
    _files(canvas, axes, rows)
    axes.level(canvas, 0.0, "axis")
    if critical:
        for sign in (1, -1):
            axes.level(canvas, sign * critical, "limit")
        x, y = axes.at(axes.xs[1], critical)
        canvas.text((x + 4, y + 5), shown.mark(f"{critical:.2f}"))
    _points(canvas, axes, rows, most)
    _numbered(canvas, axes, record, most, shown)
    for value in round_values(-most, most, 8):
        canvas.text((28, axes.at(0.5, value)[1] + 5), f"{value:g}".replace("-", "−"), anchor="e")
    last = max(len(rows), 8)
    for k in sorted({1, *(int(v) for v in round_values(0, len(rows), 6) if v >= 0.06 * last)}):
        canvas.text((axes.at(k, 0)[0], 298), str(k), anchor="m")
    canvas.text((WIDTH / 2, 322), texts("pictures.order_axis"), anchor="m")
    words = texts(
        "pictures.order_words",
        count=len(rows),
        beyond=sum(bool(one["suspect"]) for one in rows),
        limit=shown.mark(f"{critical:.2f}") if critical else texts("pictures.no_limit"),
        idle=len(rows) - len(tested(record)),
    )
    return canvas.svg(texts("pictures.order_title"), "order"), words


def _points(canvas: Canvas, axes: Axes, rows: Sequence[Entry], most: float) -> None:
    """Dots, or columns where dots would be one blot; a stroke on the zero line where nothing checks the reading."""
    inside = [
        (i + 1.0, float(one["statistic"]))
        for i, one in enumerate(rows)
        if one["statistic"] is not None and abs(one["statistic"]) <= most
    ]
    if len(rows) > TOGETHER:
        canvas.path("".join(_columns(axes, inside)), "columns")
    else:
        canvas.dots((axes.at(*one) for one in inside), "dots" if len(rows) <= 300 else "dots small")
    idle = [axes.at(i + 1.0, 0.0) for i, one in enumerate(rows) if one["statistic"] is None]
    canvas.path("".join(f"M{place((x, y - 6))}v12" for x, y in idle[:TOGETHER]), "idle")


def _columns(axes: Axes, points: list[Point]) -> list[str]:
    """From least to greatest in each column of two units."""
    columns: dict[int, list[float]] = {}
    for x, y in points:
        px, py = axes.at(x, y)
        columns.setdefault(int(px // 2), []).append(py)
    return [f"M{place((2.0 * k + 1, max(ys) + 0.8))}V{min(ys) - 0.8:.1f}" for k, ys in sorted(columns.items())]


def _files(canvas: Canvas, axes: Axes, rows: Sequence[Entry]) -> None:
    """A line where each table begins, and its name where there is room."""
    end = [-math.inf, -math.inf]
    for i, one in enumerate(rows):
        if i == 0 or one["file"] != rows[i - 1]["file"]:
            x = axes.at(i + 0.5, 0.0)[0]
            name = plain(one["file"], 22)
            canvas.line([(x, axes.box[1] - 6), (x, axes.box[3])], "file")
            row = next((row for row in (0, 1) if x > end[row]), None)
            if row is not None and x + 8.6 * len(name) < WIDTH:
                canvas.text((x + 3, axes.box[1] - 12 - 18 * row), name)
                end[row] = x + 8.6 * len(name) + 10


def _numbered(canvas: Canvas, axes: Axes, record: Entry, most: float, shown: Shown) -> None:
    """The first suspects with their number; an arrow with the figure where one lies beyond the picture."""
    numbers = {one["observation"]: i + 1 for i, one in enumerate(record["suspects"])}
    for i, one in enumerate(record["observations"]):
        value = one["statistic"]
        if value is None or (abs(value) <= most and numbers.get(one["id"], NUMBERED + 1) > NUMBERED):
            continue
        x, y = axes.at(i + 1.0, max(-most, min(most, value)))
        down = math.copysign(1.0, value)
        if abs(value) > most:
            canvas.path(f"M{place((x, y))}l-5 {10 * down:.0f}h10Z", "beyond", shown.mark(f"{value:.1f}"))
        else:
            canvas.dots([(x, y)], "blamed")
        if numbers.get(one["id"], NUMBERED + 1) <= NUMBERED:
            figure = f" ({shown.mark(f'{value:.1f}')})" if abs(value) > most else ""
            aside = x > WIDTH - 130
            canvas.text(
                (x + (-9 if aside else 9), y + 6 + 5 * down),
                f"{numbers[one['id']]}{figure}",
                "number",
                "e" if aside else "",
            )
