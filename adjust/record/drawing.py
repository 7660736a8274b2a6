"""drawing.svg and drawing.png: the network on one landscape A4 sheet, with a panel that says how to read it.

The same record gives the same bytes: matplotlib's own defaults whatever the user's settings, its bundled fonts, a
fixed salt for the ids, no date. pyplot takes no part, so nothing outside is changed.
"""

from __future__ import annotations

import io
import warnings
from typing import Any

from adjust.caution import CAUTION
from adjust.record.level_view import LevelView, draw_bar, draw_levels
from adjust.record.plan_view import LOOKS, PlanView, draw_plan, scale_in_words, suspect_readings
from adjust.record.sheet import (
    BLUE,
    GREY,
    PAPER,
    VERMILLION,
    Box,
    Sheet,
    draw_badge,
    draw_symbol,
    number,
    round_step,
)
from adjust.record.shown import Entry, Shown, count, plain, reading_in_words
from adjust.units import LENGTHS

EDGE = 10.0
PANEL = 62.0
FRAME: Box = (EDGE, EDGE, PAPER[0] - EDGE - PANEL - 3, PAPER[1] - EDGE)
LISTED = 4
"""Suspects described in the panel."""


def draw(record: Entry) -> dict[str, bytes]:
    """The drawing's files, 'drawing.svg' and 'drawing.png' (A4 at 160 dots an inch), from the record alone."""
    import matplotlib as mpl

    with mpl.rc_context(), warnings.catch_warnings():
        mpl.rcdefaults()
        mpl.rcParams.update({"svg.hashsalt": "brasscap", "svg.fonttype": "path"})
        # a name in a script the bundled font lacks shows as boxes: no reason to stop or to write to the terminal
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from font")
        sheet = Sheet()
        _Panel(sheet, record).fill(_view(sheet, record))
        return {"drawing.svg": _svg(sheet, record), "drawing.png": _png(sheet, record)}


def _view(sheet: Sheet, record: Entry) -> PlanView | LevelView | None:
    left, bottom, right, top = FRAME
    sheet.polygon([(left, bottom), (right, bottom), (right, top), (left, top)], linewidth=1.0)
    if any(one["east"] is not None and one["north"] is not None for one in record["stations"]):
        return draw_plan(sheet, record, FRAME)
    if any(one["height"] is not None for one in record["stations"]):
        return draw_levels(sheet, record, FRAME)
    sheet.text(((left + right) / 2, (bottom + top) / 2), "No station has coordinates.", 10, ha="center")
    return None


def _title(record: Entry) -> str:
    return plain(record["job"]["title"] or "Untitled job", 200)


def _svg(sheet: Sheet, record: Entry) -> bytes:
    stream = io.BytesIO()
    about = {"Date": None, "Creator": "Brasscap", "Title": _title(record), "Description": CAUTION}
    sheet.figure.savefig(stream, format="svg", metadata=about)
    return stream.getvalue()


def _png(sheet: Sheet, record: Entry) -> bytes:
    stream = io.BytesIO()
    about = {"Software": "Brasscap", "Title": _title(record), "Description": CAUTION}
    sheet.figure.savefig(stream, format="png", metadata=about)
    return stream.getvalue()


_SYMBOLS = {
    "held": "control, held", "weighted": "control, weighted", "check": "check mark, not used", "new": "new station",
    "unchecked": "new, a reading to it is unchecked",
}  # fmt: skip
_LOOK_WORDS = {
    "distance": "distance measured",
    "pointing": "directions or angles only",
    "levelled": "levelled only",
}


class _Panel:
    """The column at the right: what it is, how to read it, what to look at; scales and caution at its foot."""

    def __init__(self, sheet: Sheet, record: Entry) -> None:
        self.sheet, self.record, self.shown = sheet, record, Shown.of(record)
        self.left, self.right = FRAME[2] + 3, PAPER[0] - EDGE
        self.inner, self.y = self.left + 3.0, PAPER[1] - EDGE - 3.0
        self.width = self.right - self.left - 6.0

    def fill(self, view: PlanView | LevelView | None) -> None:
        """Write the panel around what the view shows."""
        left, bottom, right, top = self.left, EDGE, self.right, PAPER[1] - EDGE
        self.sheet.polygon([(left, bottom), (right, bottom), (right, top), (left, top)], linewidth=1.0)
        foot = self._caution()
        if isinstance(view, PlanView):
            foot = self._plan_scales(view, foot)
        elif isinstance(view, LevelView):
            foot = self._level_scales(view, foot)
        self._heading()
        self._facts(view)
        if view is not None:
            self._legend(view)
        self._suspects(foot)

    def _write(
        self, text: str, size: float, bold: bool = False, most: int = 2, indent: float = 0.0, **more: Any
    ) -> None:
        """Wrapped lines at the cursor, which moves down."""
        for line in self.sheet.wrap(text, self.width - indent, size, bold, most):
            self.y -= size * 0.44
            self.sheet.text((self.inner + indent, self.y), line, size, bold, **more)
            self.y -= size * 0.04

    def _rule(self, y: float) -> None:
        self.sheet.line([(self.left, y), (self.right, y)], 0.6)

    def _section(self, name: str) -> None:
        self.y -= 2.4
        self._rule(self.y)
        self.y -= 1.6
        self._write(name, 7.5, bold=True)
        self.y -= 0.6

    def _heading(self) -> None:
        job = self.record["job"]
        self._write(_title(self.record), 11, bold=True, most=3)
        self.y -= 0.8
        if job["client"]:
            self._write(f"For {plain(job['client'], 80)}", 8)
        if job["surveyed"]:
            self._write(f"Surveyed {plain(job['surveyed'], 40)}", 8)

    def _facts(self, view: PlanView | LevelView | None) -> None:
        record, solution = self.record, self.record["solution"]
        self._section("Adjustment")
        frame = plain(record["frame"]["kind"], 40)
        frame += f", {plain(record['frame']['origin'], 120)}" if record["frame"]["origin"] else ""
        facts = [
            f"{count(len(record['stations']), 'station')}, {count(solution['observations'], 'reading')}, "
            f"{solution['degrees_of_freedom']} to spare",
            f"Datum: {plain(solution['datum'], 90)}",
            *([f"Frame: {frame}"] if isinstance(view, PlanView) else []),
            *(
                f"Overall test, {plain(part['what'], 40)}: {part['overall_test']['verdict']}"
                for part in solution["parts"][:3]
            ),
        ]
        if view is not None and view.hidden:
            without = "plane coordinates" if isinstance(view, PlanView) else "a height"
            facts.append(f"not drawn: {count(view.hidden, 'station')} without {without}")
        if not solution["converged"]:
            facts.insert(0, "NOT SETTLED: do not use this drawing")
        for fact in facts:
            self._write(fact, 7)
            self.y -= 0.5

    def _row(self, text: str) -> float:
        """A line of the legend; the height of its symbol."""
        y = self.y - 2.0
        self.sheet.text((self.inner + 14, y), text, 7, va="center_baseline")
        self.y -= 4.5
        return y

    def _legend(self, view: PlanView | LevelView) -> None:
        self._section("Legend")
        self.y -= 1.2
        confidence = f"{100 * self.record['settings']['confidence']:g} %"
        for symbol in view.symbols:
            draw_symbol(self.sheet, symbol, (self.inner + 6, self._row(_SYMBOLS[symbol])))
        for look in view.looks:
            words = "levelled line" if isinstance(view, LevelView) else _LOOK_WORDS[look]
            width, dash = LOOKS[look]
            y = self._row(words)
            self.sheet.line([(self.inner, y), (self.inner + 12, y)], width, color=GREY, linestyle=dash)
        if isinstance(view, PlanView) and view.ellipses:
            y = self._row(f"confidence ellipse, {confidence}")
            self.sheet.ellipse(
                (self.inner + 6, y), (3.4, 1.5), 1.2, edgecolor=BLUE, facecolor=(0.0, 0.447, 0.698, 0.10)
            )
        if isinstance(view, LevelView) and view.magnification:
            draw_bar(self.sheet, (self.inner + 6, self._row(f"confidence interval, {confidence}")), 1.7, 1.0)
        if suspect_readings(self.record):
            y = self._row("suspect reading, numbered")
            self.sheet.line([(self.inner, y), (self.inner + 12, y)], 1.8, color=VERMILLION)

    def _suspects(self, foot: float) -> None:
        """The first suspects in words, as many as find room above ``foot``."""
        suspects = self.record["suspects"]
        if not suspects or self.y < foot + 24:
            return
        by_id = {one["id"]: one for one in self.record["observations"]}
        self._section(count(len(suspects), "suspect reading"))
        listed = 0
        for one in suspects[:LISTED]:
            if one["observation"] in by_id and self.y > foot + 14:
                listed += 1
                self._suspect(listed, one, by_id[one["observation"]])
        if len(suspects) > listed:
            self._write(f"and {len(suspects) - listed} more, see the record", 6.5, indent=6)

    def _suspect(self, badge: int, suspect: Entry, reading: Entry) -> None:
        self.y -= 0.6
        draw_badge(self.sheet, badge, (self.inner + 2, self.y - 2.2), 0.8)
        much = self.shown.too_much(suspect["estimated_blunder"], suspect["sd"], reading["kind"])
        self._write(f"{plain(reading['id'], 30)}: {reading_in_words(reading, 10)}, {much}", 6.5, most=3, indent=6)

    def _caution(self) -> float:
        """The caution at the foot; the height above it."""
        lines = self.sheet.wrap(CAUTION, self.width, 6, most=12)
        y = EDGE + 3 + 2.7 * (len(lines) - 1)
        top = y + 4.0
        self._rule(top)
        for line in lines:
            self.sheet.text((self.inner, y), line, 6)
            y -= 2.7
        return top

    def _plan_scales(self, view: PlanView, foot: float) -> float:
        """Both scale bars and the north arrow above ``foot``; the height above them."""
        unit = self.shown.length
        mm = LENGTHS[unit] * 1000 / view.scale
        x, y = self.inner, foot + 5.5
        if view.magnification:
            small = self.shown.in_small(1.0)
            each = 1000 / view.scale * view.magnification / small  # mm of paper for one small unit, magnified
            length = round_step(32 / each)
            self.sheet.line([(x, y), (x + length * each, y)], 1.6, gid="ellipse-scale", color=BLUE)
            for end in (x, x + length * each):
                self.sheet.line([(end, y - 1), (end, y + 1)], 1.2, color=BLUE)
            self.sheet.text(
                (x + length * each + 2, y), f"{self._round(length)} {self.shown.small}", 7, va="center_baseline"
            )
            confidence = f"{100 * self.record['settings']['confidence']:g} %"
            times = f"Ellipses ({confidence}) drawn {self._round(view.magnification)} times larger"
            self.sheet.text((x, y + 2.6), times, 6.5)
            y += 11
        length = round_step(38 / mm)
        self._bar(x, y, length * mm)
        self.sheet.text((x, y + 2.8), "0", 6.5, ha="center")
        self.sheet.text((x + length * mm, y + 2.8), f"{self._round(length)} {unit}", 6.5, ha="center")
        for i, line in enumerate(reversed(self.sheet.wrap(scale_in_words(view.scale, self.shown), 42, 7))):
            self.sheet.text((x, y + 6.6 + 3.2 * i), line, 7)
        self._north(self.right - 6.5, y - 3)
        self._rule(y + 19.5)
        return y + 19.5

    def _round(self, value: float) -> str:
        return self.shown.mark(number(value))

    def _bar(self, x: float, y: float, length: float) -> None:
        """The plan's scale bar: an outline of exactly ``length`` mm with every second quarter filled."""
        for k in (0, 2):
            a, b = x + k * length / 4, x + (k + 1) * length / 4
            self.sheet.polygon([(a, y), (b, y), (b, y + 1.6), (a, y + 1.6)], facecolor="black", linewidth=0.0)
        self.sheet.polygon(
            [(x, y), (x + length, y), (x + length, y + 1.6), (x, y + 1.6)], gid="scale-bar", linewidth=0.6
        )

    def _north(self, x: float, y: float) -> None:
        """North of the plane's axes, which the sheet has upwards."""
        self.sheet.line([(x, y), (x, y + 15)], 1.0, gid="north")
        self.sheet.polygon([(x, y + 17), (x - 2.2, y + 9.5), (x, y + 11)], facecolor="black")
        self.sheet.polygon([(x, y + 17), (x + 2.2, y + 9.5), (x, y + 11)], facecolor="white")
        self.sheet.text((x, y + 18.2), "N", 9, bold=True, ha="center")

    def _level_scales(self, view: LevelView, foot: float) -> float:
        """The scale of the confidence bars above ``foot``; the height above it."""
        if not view.magnification:
            return foot
        each = view.mm_per_metre * view.magnification / self.shown.in_small(1.0)
        length = round_step(18 / each)
        x, y = self.inner + 4, foot + 4 + length * each / 2
        draw_bar(self.sheet, (x, y), length * each / 2, 1.2, "bar-scale")
        self.sheet.text((x + 4, y), f"{self._round(length)} {self.shown.small}", 7, va="center_baseline")
        confidence = f"{100 * self.record['settings']['confidence']:g} %"
        y += length * each / 2 + 3
        self.sheet.text((self.inner, y), "than the height axis", 6.5)
        times = f"Intervals ({confidence}) drawn {self._round(view.magnification)} times larger"
        self.sheet.text((self.inner, y + 3.2), times, 6.5)
        self._rule(y + 8)
        return y + 8
