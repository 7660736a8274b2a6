"""What the pictures of the page are written with: an svg of fixed width, classes for looks, two axes.

    x = left + (value - low) / (high - low) · (right - left);  y likewise from bottom to top

Figures are written with one decimal, so that the same record gives the same bytes.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from itertools import pairwise

from adjust.record.live_texts import number, safe
from adjust.record.paper import Box, Point
from adjust.record.sheet import round_step

WIDTH = 560.0
"""Units across. Type is 16 units: 10 pixels high where the picture is 360 wide, 18 at the widest."""
TYPE = 16.0


@dataclass
class Canvas:
    """The parts of one picture, written in their order."""

    height: float
    parts: list[str] = field(default_factory=list)

    def text(self, at: Point, text: str, look: str = "", anchor: str = "") -> None:
        """One line of text; ``anchor`` m middle, e end."""
        classes = " ".join(filter(None, (look, anchor and f"a-{anchor}")))
        name = f' class="{classes}"' if classes else ""
        self.parts.append(f'<text x="{number(at[0], 1)}" y="{number(at[1], 1)}"{name}>{safe(text)}</text>')

    def path(self, data: str, look: str, title: str = "") -> None:
        """A path of one look; nothing where there are no data."""
        if data:
            inside = f"><title>{safe(title)}</title></path>" if title else "/>"
            self.parts.append(f'<path class="{look}" d="{data}"{inside}')

    def line(self, points: Sequence[Point], look: str, title: str = "") -> None:
        """A line through the points."""
        self.path("M" + " ".join(place(one) for one in points), look, title)

    def rect(self, box: Box, look: str, title: str = "") -> None:
        """A box: left, top, right, bottom."""
        left, top, right, bottom = box
        self.path(f"M{place((left, top))}H{number(right, 1)}V{number(bottom, 1)}H{number(left, 1)}Z", look, title)

    def dots(self, points: Iterable[Point], look: str) -> None:
        """Round dots: strokes without length, which their round ends make visible."""
        self.path("".join(f"M{place(one)}h0" for one in points), look)

    def svg(self, label: str, look: str) -> str:
        """The whole element."""
        return (
            f'<svg class="chart {look}" viewBox="0 0 {number(WIDTH)} {number(self.height, 1)}" role="img" '
            f'aria-label="{safe(label)}">{"".join(self.parts)}</svg>'
        )


def place(at: Point) -> str:
    """'12.3 45.6'."""
    return f"{number(at[0], 1)} {number(at[1], 1)}"


@dataclass(frozen=True)
class Axes:
    """A box (left, top, right, bottom) with linear axes."""

    box: Box
    xs: Point
    ys: Point

    def at(self, x: float, y: float) -> Point:
        """Where a value lies."""
        left, top, right, bottom = self.box
        across, up = (x - self.xs[0]) / (self.xs[1] - self.xs[0]), (y - self.ys[0]) / (self.ys[1] - self.ys[0])
        return left + across * (right - left), bottom - up * (bottom - top)

    def level(self, canvas: Canvas, y: float, look: str) -> None:
        """A line from side to side."""
        canvas.line([self.at(self.xs[0], y), self.at(self.xs[1], y)], look)


def round_values(low: float, high: float, most: int) -> list[float]:
    """Round values between two others, ``most`` or fewer."""
    step = round_step((high - low) / most)
    while (high - low) / step > most:
        step = round_step(step * 2.5)
    return [i * step for i in range(math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9) + 1)]


def places_of(values: Sequence[float]) -> int:
    """Decimals that tell round values apart."""
    step = min((b - a for a, b in pairwise(values)), default=1.0)
    return max(0, -math.floor(math.log10(step) + 1e-9))
