"""The panel beside or below the view: what it is, how to read it, what to look at, scales, and the caution."""

from __future__ import annotations

from typing import Any

from adjust.caution import CAUTION
from adjust.record.level_view import LevelView, draw_bar
from adjust.record.net import suspect_readings
from adjust.record.paper import SCREEN, Box, Layout, number, ratio_in_words, scale_in_words
from adjust.record.plan_data import PlanView
from adjust.record.plan_view import FILL, LOOKS, RELATIVE_DASH
from adjust.record.sheet import (
    BLUE,
    GREEN,
    GREY,
    VERMILLION,
    Sheet,
    draw_badge,
    draw_cross,
    draw_symbol,
    drawable,
    round_step,
)
from adjust.record.shown import Entry, Shown, count, plain, reading_in_words
from adjust.record.writing import Writing
from adjust.units import LENGTHS

LISTED = 4
"""Suspects described in the panel."""
View = PlanView | LevelView

_SYMBOLS = {
    "held": "control, held", "weighted": "control, weighted", "check": "check mark, not used", "new": "new station",
    "unchecked": "new, a reading to it is unchecked",
}  # fmt: skip
_LOOK_WORDS = {
    "both": "distance, and direction or angle",
    "distance": "distance only",
    "pointing": "directions or angles only",
    "levelled": "height difference only",
}


def title_of(record: Entry) -> str:
    """The job's title, or a word for none."""
    return plain(record["job"]["title"] or "Untitled job", 200)


class Panel:
    """Writes the panel of a layout around what the view shows."""

    def __init__(self, sheet: Sheet, record: Entry, layout: Layout) -> None:
        self.sheet, self.record, self.layout, self.shown = sheet, record, layout, Shown.of(record)
        self.writing = Writing.of(record)
        self.small = layout.name == SCREEN
        self.column(layout.columns[0])

    def column(self, box: Box) -> None:
        """Go to the top of a column."""
        self.left, _, self.right, top = box
        pad = 2.0 if self.small else 3.0
        self.inner, self.y, self.width = self.left + pad, top - pad, self.right - self.left - 2 * pad

    def fill(self, view: View | None) -> None:
        """Write the panel: in one column from top and foot, or in several side by side."""
        layout = self.layout
        left, right = layout.columns[0][0], layout.columns[-1][2]
        top = layout.columns[0][3]
        foot = self._caution(layout.caution)
        self.sheet.polygon([(left, layout.caution[1]), (right, layout.caution[1]), (right, top), (left, top)],
                           linewidth=1.0)  # fmt: skip
        for box in layout.columns[1:]:
            self.sheet.line([(box[0], foot), (box[0], top)], 0.6)
        last = layout.columns[-1]
        self._heading()
        self._facts(view)
        if len(layout.columns) == 2:
            self._suspects(foot)
        if len(layout.columns) > 1:
            self.column(layout.columns[1])
        if view is not None:
            self._legend(view, first=len(layout.columns) > 1)
        if len(layout.columns) == 3:
            self.y -= 1.5
            self._all(self._notes(view))
            self.column(last)
        ceiling = self._scales(view, last, foot)
        if len(layout.columns) != 2:
            self._suspects(ceiling)

    def _scales(self, view: View | None, box: Box, foot: float) -> float:
        inner, self.inner = self.inner, box[0] + (2.0 if self.small else 3.0)
        ceiling = foot
        if isinstance(view, PlanView):
            ceiling = self._plan_scales(view, box, foot)
        elif isinstance(view, LevelView):
            ceiling = self._level_scales(view, foot)
        self.inner = inner
        return ceiling

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

    def _section(self, name: str, rule: bool = True) -> None:
        if rule:
            self.y -= 2.4
            self._rule(self.y)
            self.y -= 1.6
        self._write(name, 7.5, bold=True)
        self.y -= 0.6

    def _heading(self) -> None:
        job = self.record["job"]
        self._write(title_of(self.record), 10 if self.small else 11, bold=True, most=3)
        self.y -= 0.8
        if job["client"]:
            self._write(f"For {plain(job['client'], 80)}", 8)
        if job["surveyed"]:
            self._write(f"Surveyed {plain(job['surveyed'], 40)}", 8)

    def _facts(self, view: View | None) -> None:
        record, solution = self.record, self.record["solution"]
        self._section("Adjustment")
        frame = plain(record["frame"]["kind"], 40)
        frame += f", {plain(record['frame']['origin'], 120)}" if record["frame"]["origin"] else ""
        facts = [
            f"{count(len(record['stations']), 'station')}, {count(solution['observations'], 'reading')}, "
            f"{solution['degrees_of_freedom']} to spare",
            f"Datum: {plain(solution['datum'], 90)}",
            *([f"Frame: {frame}; N is its north axis"] if isinstance(view, PlanView) else []),
            f"Unit: {self.shown.length}; confidence {self._confidence()}",
            *([] if len(self.layout.columns) == 3 else self._notes(view)),
            *(
                f"Overall test, {plain(part['what'], 40)}: {part['overall_test']['verdict']}"
                for part in solution["parts"][:3]
            ),
        ]
        if not solution["converged"]:
            facts.insert(0, "NOT SETTLED: do not use this drawing")
        self._all(facts)

    def _notes(self, view: View | None) -> list[str]:
        """What is not drawn, or not as it is."""
        return [*filter(None, [self.writing.note(), self._unread()]), *(view.notes if view else [])]

    def _all(self, facts: list[str]) -> None:
        """The sentences, as far as there is room above the caution."""
        size, foot = 6.5 if self.small else 7.0, self.layout.caution[3] + 4
        for i, fact in enumerate(facts):
            if self.y - 0.48 * size * len(self.sheet.wrap(fact, self.width, size, most=4)) < foot:
                self._write(f"and {len(facts) - i} more, see record.json", size)
                return
            self._write(fact, size, most=4)
            self.y -= 0.4

    def _unread(self) -> str:
        job = self.record["job"]
        texts = [title_of(self.record), job["client"], job["surveyed"], *(one["file"] for one in job["inputs"])]
        lacking = any(text and not drawable(plain(text, 200)) for text in texts)
        return "A question mark may stand for a sign that this font lacks; record.json has it." if lacking else ""

    def _confidence(self) -> str:
        return f"{100 * self.record['settings']['confidence']:g} %"

    def _row(self, text: str) -> float:
        """A line of the legend; the height of its symbol."""
        y = self.y - 2.0
        size = 6.5 if self.small else 7.0
        for i, line in enumerate(self.sheet.wrap(text, self.width - 14, size, most=2)):
            self.sheet.text((self.inner + 14, y - 2.7 * i), line, size, va="center_baseline")
            self.y -= 4.3 if i == 0 else 2.7
        return y

    def _legend(self, view: View, first: bool) -> None:
        self._section("Legend", rule=not first)
        self.y -= 1.0
        for symbol in view.symbols:
            draw_symbol(self.sheet, symbol, (self.inner + 6, self._row(_SYMBOLS[symbol])))
        for look in view.looks:
            width, dash, colour = LOOKS[look]
            words = view.words if isinstance(view, LevelView) else _LOOK_WORDS[look]
            self._stroke(words, width, dash, colour)
        if view.left_out:
            y = self._stroke("reading left out", 0.8, (0, (2.0, 2.0)), GREY)
            draw_cross(self.sheet, (self.inner + 6, y), gid="legend-left-out")
        if view.suspects and suspect_readings(self.record):
            self._stroke("suspect reading, numbered", 2.0, "-", VERMILLION)
        if isinstance(view, PlanView):
            self._ellipse_rows(view)
        elif view.magnification:
            draw_bar(self.sheet, (self.inner + 6, self._row(f"confidence interval, {self._confidence()}")), 1.7, 1.0)

    def _stroke(self, words: str, width: float, dash: Any, colour: str) -> float:
        y = self._row(words)
        self.sheet.line([(self.inner, y), (self.inner + 12, y)], width, color=colour, linestyle=dash)
        return y

    def _ellipse_rows(self, view: PlanView) -> None:
        if view.magnification:
            y = self._row(f"confidence ellipse, {self._confidence()}")
            self.sheet.ellipse((self.inner + 6, y), (3.4, 1.5), 1.2, edgecolor=BLUE, facecolor=FILL)
        if view.relative:
            y = self._row(f"relative ellipse, {self._confidence()}")
            self.sheet.ellipse((self.inner + 6, y), (3.4, 1.5), 1.2, edgecolor=GREEN, linestyle=RELATIVE_DASH,
                               linewidth=1.0)  # fmt: skip
        if view.pairs:
            self._stroke("pair asked for, not measured", 0.7, (0, (1.0, 3.0)), GREEN)
        if view.inset:
            y = self._row(f"A: inset at {ratio_in_words(view.inset, self.shown)}")
            x = self.inner + 6
            self.sheet.polygon([(x - 1.7, y - 1.7), (x + 1.7, y - 1.7), (x + 1.7, y + 1.7), (x - 1.7, y + 1.7)])

    def _suspects(self, foot: float) -> None:
        """The first suspects in words, as many as find room above ``foot``."""
        suspects = self.record["suspects"]
        if not suspects or self.y < foot + 18:
            return
        by_id = {one["id"]: one for one in self.record["observations"]}
        self._section(count(len(suspects), "suspect reading"), rule=self.y < self.layout.columns[0][3] - 5)
        listed = 0
        for one in suspects[:LISTED]:
            if one["observation"] in by_id and self.y > foot + 9:
                listed += 1
                self._suspect(listed, one, by_id[one["observation"]])
        if len(suspects) > listed:
            self._write(f"and {len(suspects) - listed} more, see the record", 6.5, indent=6)

    def _suspect(self, badge: int, suspect: Entry, reading: Entry) -> None:
        self.y -= 0.6
        draw_badge(self.sheet, badge, (self.inner + 2, self.y - 2.2), 0.8)
        much = self.shown.too_much(suspect["estimated_blunder"], suspect["sd"], reading["kind"])
        words = reading_in_words(self.writing.reading(reading), 10)
        self._write(f"{plain(reading['id'], 30)}: {words}, {much}", 6.5, most=3, indent=6)

    def _caution(self, box: Box) -> float:
        """The caution at the foot of the panel; the height above it."""
        left, bottom, right, _ = box
        pad = 2.0 if self.small else 3.0
        lines = self.sheet.wrap(CAUTION, right - left - 2 * pad, 6, most=12)
        y = bottom + 2.2 + 2.7 * (len(lines) - 1)
        top = max(y + 3.4, box[3])
        self.sheet.line([(left, top), (right, top)], 0.6)
        for line in lines:
            self.sheet.text((left + pad, y), line, 6)
            y -= 2.7
        return top

    def _plan_scales(self, view: PlanView, box: Box, foot: float) -> float:
        """Scale bars and the north arrow above ``foot``; the height above them."""
        unit = self.shown.length
        mm = LENGTHS[unit] * 1000 / view.scale
        x, y = self.inner, foot + 3.5
        for times, colour, words, gid in (
            (view.relative, GREEN, "Relative ellipses", "relative-scale"),
            (view.magnification, BLUE, f"Ellipses ({self._confidence()})", "ellipse-scale"),
        ):
            if times:
                y = self._ellipse_scale(view, times, colour, words, gid, y)
        length = round_step(min(38.0, self.width - 18) / mm)
        y += 1.5
        self._bar(x, y, length * mm)
        self.sheet.text((x, y + 2.6), "0", 6.5, ha="center" if not self.small else "left")
        self.sheet.text(
            (x + length * mm, y + 2.6), f"{self._round(length)} {unit}", 6.5, ha="center", gid="scale-bar-text"
        )
        words = scale_in_words(view.scale, self.shown, self.layout)
        lines = self.sheet.wrap(words, self.width - 14, 8, True)
        for i, line in enumerate(reversed(lines)):
            self.sheet.text((x, y + 6.4 + 3.6 * i), line, 8, bold=True)
        self._north(box[2] - 6.5, y - 2)
        top = y + max(20.5, 8 + 3.6 * len(lines))
        self.sheet.line([(box[0], top), (box[2], top)], 0.6)
        return top

    def _ellipse_scale(self, view: PlanView, times: float, colour: str, words: str, gid: str, y: float) -> float:
        """The bar of one family of ellipses with its words; the height above it."""
        x, small = self.inner, self.shown.in_small(1.0)
        each = 1000 / view.scale * times / small  # mm of paper for one small unit, magnified
        length = round_step(30 / each)
        self.sheet.line([(x, y), (x + length * each, y)], 1.6, gid=gid, color=colour)
        for end in (x, x + length * each):
            self.sheet.line([(end, y - 1), (end, y + 1)], 1.2, color=colour)
        self.sheet.text((x + length * each + 2, y), f"{self._round(length)} {self.shown.small}", 7,
                        va="center_baseline", gid=f"{gid}-text")  # fmt: skip
        said = f"{words} drawn {self._round(times)} times larger"
        if view.inset:
            said += f", in the inset {self._round(float(f'{times * view.inset / view.scale:.4g}'))} times"
        lines = self.sheet.wrap(said, self.width, 6.5)
        for i, line in enumerate(reversed(lines)):
            self.sheet.text((x, y + 2.2 + 2.9 * i), line, 6.5)
        return y + 4.6 + 2.9 * len(lines)

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
        self.sheet.text((x, y + 18.0), "N", 9, bold=True, ha="center")

    def _level_scales(self, view: LevelView, foot: float) -> float:
        """The scale of the confidence bars above ``foot``; the height above it."""
        if not view.magnification:
            return foot
        each = view.mm_per_metre * view.magnification / self.shown.in_small(1.0)
        length = round_step(18 / each)
        x, y = self.inner + 4, foot + 4 + length * each / 2
        draw_bar(self.sheet, (x, y), length * each / 2, 1.2, "bar-scale")
        self.sheet.text((x + 4, y), f"{self._round(length)} {self.shown.small}", 7, va="center_baseline",
                        gid="bar-scale-text")  # fmt: skip
        y += length * each / 2 + 3
        times = self._round(view.magnification)
        words = f"Intervals ({self._confidence()}) drawn {times} times larger than the height axis"
        lines = self.sheet.wrap(words, self.width, 6.5)
        for i, line in enumerate(reversed(lines)):
            self.sheet.text((self.inner, y + 3.2 * i), line, 6.5)
        top = y + 3.2 * len(lines) + 1.5
        self.sheet.line([(self.left, top), (self.right, top)], 0.6)
        return top
