"""Raw books of a total station, simulated: truth, instrument errors and pointing errors are known."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from adjust.units import TURN, format_angle

SEC = math.pi / 648000


@dataclass
class Book:
    """One station's book: true directions, zenith angles and slopes by target, and what the instrument adds."""

    rng: np.random.Generator
    targets: int = 6
    sets: int = 3
    two_c: float = 34 * SEC
    index: float = -11 * SEC
    pointing: float = 1.0 * SEC
    distance: float = 0.001
    reopen: bool = True
    """The first target is sighted again at the end of each half set."""
    rows: list[dict[str, str]] = field(default_factory=list)

    def __post_init__(self) -> None:
        n = self.targets
        self.names = [f"P{j}" for j in range(1, n + 1)]
        self.direction = np.sort(self.rng.uniform(0, TURN, n) * 0.02 + np.arange(n) * TURN / n)
        self.zenith = self.rng.uniform(math.radians(80), math.radians(100), n)
        self.slope = self.rng.uniform(40, 400, n)
        for s in range(self.sets):
            # circles are moved between the sets; the first one starts beside zero, as booked in the field
            start = (s * TURN / (2 * self.sets) - self.direction[0] + self.rng.uniform(-60, 60) * SEC) % TURN
            order = [*range(n), *([0] if self.reopen else [])]
            for face, walk in ((1, order), (2, order[::-1])):
                self.rows += [self.row(str(s + 1), j, face, start) for j in walk]

    def row(self, in_set: str, j: int, face: int, start: float) -> dict[str, str]:
        """One pointing in one face, rounded to 0.1 second and 0.1 mm as read."""
        c = self.two_c / 2 / math.sin(self.zenith[j])
        e = self.rng.normal(0, self.pointing * math.sqrt(2), 2)
        h = self.direction[j] + start + (c if face == 1 else math.pi - c) + e[0]
        v = (self.zenith[j] if face == 1 else TURN - self.zenith[j]) + self.index + e[1]
        d = self.slope[j] + self.rng.normal(0, self.distance)
        return {
            "at": "S", "set": in_set, "to": self.names[j], "face": str(face),
            "horizontal_circle": format_angle(h % TURN, "dms"), "zenith_circle": format_angle(v, "dms"),
            "slope_distance": f"{d:.4f}",
        }  # fmt: skip

    def csv(self) -> str:
        """The book as a table."""
        columns = list(self.rows[0])
        return "\n".join([",".join(columns), *(",".join(row.get(c, "") for c in columns) for row in self.rows)]) + "\n"


HEAD = """[units]
length = "m"
angle = "dms"
[instruments.s]
direction = "1 sec"
zenith = "1 sec"
distance = "1 mm"
"""
