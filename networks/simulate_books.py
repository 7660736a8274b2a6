"""Make the raw books of the demo jobs, as a surveyor books them in the field. They are invented, like those of
simulate.py, whose truth-and-error habits this file follows.

    python networks/simulate_books.py            rewrites the tables in place; the bytes do not change
    python networks/simulate_books.py FOLDER     writes them below another folder
"""

from __future__ import annotations

import math
import sys
from itertools import pairwise
from pathlib import Path

from simulate import EARTH, HERE, INVENTED, SD_DISTANCE, Field, dms, table

SD_FACE = math.radians(1.5 / 3600) * math.sqrt(2)  # one pointing in one face; job.toml states both faces meaned
SD_FACE_ZENITH = math.radians(2 / 3600) * math.sqrt(2)
PILLARS_K = 0.13
PILLARS_PLANE = 60.0


class TotalStation(Field):
    """A field with an instrument that has its collimation, its index and its circle wherever it was turned to."""

    def __init__(self, seed: int, truth: dict[str, tuple[float, ...]], two_c: float, index: float) -> None:
        super().__init__(seed, truth)
        self.two_c, self.index = math.radians(two_c / 3600), math.radians(index / 3600)

    def pointing(self, at: str, to: str, face: int, zero: float, heights: tuple[float, float]) -> tuple[float, ...]:
        """Horizontal circle, zenith circle (radians) and slope (m) in one face with the circle turned by ``zero``."""
        slope, zenith = self.ray(at, to, heights)
        azimuth = self.line(at, to)[1]
        collimation = self.two_c / 2 / math.sin(zenith)
        horizontal = azimuth - zero + (collimation if face == 1 else math.pi - collimation)
        vertical = (zenith if face == 1 else math.tau - zenith) + self.index
        return (
            (horizontal + self.error(SD_FACE)) % math.tau,
            vertical + self.error(SD_FACE_ZENITH),
            slope + self.error(SD_DISTANCE),
        )

    def ray(self, at: str, to: str, heights: tuple[float, float]) -> tuple[float, float]:
        """True slope (m) and apparent zenith angle (radians); the triangle with the centre of the Earth."""
        theta = 2 * math.asin(self.line(at, to)[0] / (2 * EARTH))
        r1 = EARTH + self.truth[at][2] + heights[0] - PILLARS_PLANE
        r2 = EARTH + self.truth[to][2] + heights[1] - PILLARS_PLANE
        slope = math.sqrt((r2 - r1) ** 2 + 4 * r1 * r2 * math.sin(theta / 2) ** 2)
        return slope, math.atan2(r2 * math.sin(theta), r2 * math.cos(theta) - r1) - PILLARS_K * theta / 2


# --- Tarnel Weir: the pillars beside the spillway ---------------------------------------------------------------------

PILLARS: dict[str, tuple[float, ...]] = {
    "K1": (2104.3180, 5310.7420, 66.9210), "K2": (2391.0460, 5268.1130, 71.4485), "K3": (2237.6610, 5522.9090, 83.7040),
    "S1": (2190.4410, 5358.2270, 61.3120), "S2": (2247.9030, 5341.6080, 61.2985), "S3": (2306.1270, 5350.0150, 61.3050),
    "S4": (2251.3360, 5421.7740, 58.1190),
}  # fmt: skip
OCCUPIED = {
    "K1": "K2 S3 S2 S1 S4 K3", "K2": "K1 S2 S1 S3 S4 K3", "S1": "K1 K3 S4 S3 S2 K2", "S2": "K1 S1 K3 S4 S3 K2",
    "S3": "K2 S2 S1 K1 S4 K3", "S4": "K3 K2 S3 S2 S1 K1",
}  # fmt: skip
WEATHER = {"K1": (14.5, 1004.8), "K2": (16.0, 1004.3), "S1": (17.5, 1005.4), "S2": (19.0, 1005.3), "S3": (20.5, 1005.1),
           "S4": (21.0, 1005.2)}  # fmt: skip
HUMIDITY = 62.0
ROUND = -0.0344  # metres, the reflector's constant
CARRIER_UM = 0.658
ZERO = (12.0, 1013.25, 60.0)  # the weather in which the instrument's own correction is zero
FOG = ("S2", "2", "K3", 2)  # the face that could not be read
BUMPED = ("S4", "3", "S1")  # the tripod was bumped


def refractivity(temperature: float, pressure: float, humidity: float) -> float:
    """Group refractivity of air in ppm (IAG 1999; vapour by Buck 1981), written here once more for the simulation."""
    group = 287.6155 + 4.88660 / CARRIER_UM**2 + 0.06800 / CARRIER_UM**4
    kelvin = 273.15 + temperature
    saturated = (1.0007 + 3.46e-6 * pressure) * 6.1121 * math.exp(17.502 * temperature / (240.97 + temperature))
    return 273.15 / 1013.25 * group * pressure / kelvin - 11.27 * saturated * humidity / 100 / kelvin


def as_shown(slope: float, at: str) -> float:
    """What the instrument shows for a true slope: nothing is applied in it."""
    here, zero = refractivity(*WEATHER[at], HUMIDITY), refractivity(*ZERO)
    return slope / (1 + (zero - here) * 1e-6 / (1 + here * 1e-6)) - ROUND


def pillars(folder: Path) -> None:
    """Six stations, three sets in both faces, the first target sighted again at the end of each half set."""
    field = TotalStation(20260618, PILLARS, two_c=-22.0, index=9.0)
    rows = []
    for at, targets in OCCUPIED.items():
        hi = round(1.48 + 0.12 * field.random.uniform(), 3)
        first, *rest = targets.split()
        start = field.line(at, first)[1]
        clockwise = [first, *sorted(rest, key=lambda to: (field.line(at, to)[1] - start) % math.tau)]
        heights = {to: round(1.45 + 0.15 * field.random.uniform(), 3) for to in clockwise}
        for number in ("1", "2", "3"):
            zero = start - math.radians(60 * (int(number) - 1) + field.random.uniform(0.01, 0.2))
            half = [*clockwise, first]
            for face, walk in ((1, half), (2, half[::-1])):
                for to in walk:
                    h, v, d = field.pointing(at, to, face, zero, (hi, heights[to]))
                    if (at, number, to, face) == FOG:
                        continue
                    use = (
                        "no,tripod bumped while reading; the pointing was repeated"
                        if ((at, number, to) == BUMPED and face == 1)
                        else ","
                    )
                    shift = math.radians(74 / 3600) if use.startswith("no") else 0.0
                    rows.append(
                        pointing_row(at, to, number, face, (h + shift, v, as_shown(d, at)), (hi, heights[to]), use)
                    )
                    if shift:
                        h, v, d = field.pointing(at, to, face, zero, (hi, heights[to]))
                        rows.append(pointing_row(at, to, number, face, (h, v, as_shown(d, at)), (hi, heights[to]), ","))
    header = (
        "at,to,set,face,horizontal_circle,zenith_circle,slope_distance,instrument_height,target_height,"
        "temperature,pressure,use,reason"
    )
    table(folder / "rounds.csv", [INVENTED, "One row is one pointing in one face, as booked."], header, rows)
    marks = [f"{name},{','.join(f'{x:.4f}' for x in PILLARS[name])}" for name in ("K1", "K2", "K3")]
    table(folder / "control.csv", [INVENTED], "station,east,north,height", marks)


def pointing_row(
    at: str, to: str, number: str, face: int, reading: tuple[float, ...], heights: tuple[float, float], use: str
) -> str:
    """One row of the raw book; circles to 0.1 second, slopes to 0.1 mm."""
    h, v, d = reading
    temperature, pressure = WEATHER[at]
    return (f"{at},{to},{number},{face},{dms(h)},{dms(v)},{d:.4f},{heights[0]:.3f},{heights[1]:.3f},"
            f"{temperature:g},{pressure:g},{use}")  # fmt: skip


# --- Tarnel Weir: levels along the river ------------------------------------------------------------------------------

RIVER = {"BM1": 62.4180, "BM4": 64.9375, "RB1": 60.2310, "RB2": 58.8842, "RB3": 60.0514, "RB4": 61.7706,
         "LB1": 60.4425, "LB2": 59.1147, "LB3": 60.8098}  # fmt: skip
RIVER_LINES = [
    ("forward", "BM1 RB1 RB2 RB3 RB4 BM4"),
    ("back", "BM4 RB4 RB3 RB2 RB1 BM1"),
    ("left-bank", "BM1 LB1 LB2 LB3 BM4"),
    ("crossing", "LB2 RB2"),
]
SECTION_SETUPS = {"BM1 RB1": 5, "RB1 RB2": 6, "RB2 RB3": 6, "RB3 RB4": 7, "BM4 RB4": 5, "BM1 LB1": 6, "LB1 LB2": 7,
                  "LB2 LB3": 6, "BM4 LB3": 8, "LB2 RB2": 3}  # fmt: skip
SD_READING = 0.0003  # metres: one staff reading at 30 m
COLLIMATION = math.radians(12 / 3600)  # the line of sight points up by 12 seconds
STEEP = ("left-bank", "LB3", "BM4")  # a section where the fore sights had to stay short


class Level(Field):
    """A level whose line of sight points up, and a staff read to the tenth of a millimetre."""

    def reading(self, height_of_sight: float, height: float, length: float) -> float:
        """What the staff shows."""
        return (
            height_of_sight - height + math.tan(COLLIMATION) * length + self.error(SD_READING * math.sqrt(length / 30))
        )

    def set_up(self, height: float, ahead: float, lengths: tuple[float, float]) -> tuple[float, float]:
        """Back and fore reading between two heights."""
        sight = max(height, ahead) + 0.4 + 1.2 * self.random.uniform()
        return self.reading(sight, height, lengths[0]), self.reading(sight, ahead, lengths[1])


def river(folder: Path) -> None:
    """Forward and back along the right bank, once along the left, and a tie across: 400 readings and their lengths."""
    field = Level(20260701, {name: (height,) for name, height in RIVER.items()})
    rows = []
    for line, marks in RIVER_LINES:
        rows += level_line(field, line, marks.split())
    header = "line,station,back,fore,back_length,fore_length"
    table(folder / "staff.csv", [INVENTED, "One row is one position of the staff."], header, rows)
    near, far = 25.0, 2.0
    a, b = 60.0, 60.732
    peg = [field.reading(61.9, h, d) for h, d in ((a, near), (b, near), (a, 50 + far), (b, far))]
    cells = ",".join(f"{x:.4f}" for x in peg)
    table(folder / "peg_test.csv", [INVENTED], "near_a,near_b,far_a,far_b,length", [f"{cells},50"])
    marks = [f"{name},{RIVER[name]:.4f}" for name in ("BM1", "BM4")]
    table(folder / "control.csv", [INVENTED], "station,height", marks)
    lasting = [name for name in RIVER if name not in ("BM1", "BM4")]
    table(folder / "stations.csv", ["Lasting marks; every other change point belongs to its line."], "station", lasting)


def level_line(field: Level, line: str, marks: list[str]) -> list[str]:
    """Rows of one line: every change point has the fore sight of one set-up and the back sight of the next."""
    rows, point = [], 0
    pending = ""  # the fore sight that waits for the back sight of the next set-up
    for first, last in pairwise(marks):
        n = SECTION_SETUPS[" ".join(sorted((first, last)))]
        here, step = RIVER[first], (RIVER[last] - RIVER[first]) / n
        name = first
        for k in range(n):
            ahead = RIVER[last] if k == n - 1 else here + step + field.random.uniform(-0.35, 0.35)
            long = 24 + 8 * field.random.uniform()
            short = 9 if (line, first, last) == STEEP else long + field.random.uniform(-1.5, 1.5)
            lengths = (round(long, 1), round(short, 1))
            back, fore = field.set_up(here, ahead, lengths)
            fore_of, fore_length = pending.split(",") if pending else ("", "")
            rows.append(f"{line},{name},{back:.4f},{fore_of},{lengths[0]:.1f},{fore_length}")
            pending = f"{fore:.4f},{lengths[1]:.1f}"
            point += 1
            name, here = (last, RIVER[last]) if k == n - 1 else (f"TP{point}", ahead)
    fore_of, fore_length = pending.split(",")
    return [*rows, f"{line},{marks[-1]},,{fore_of},,{fore_length}"]


def main(root: Path) -> None:
    """Write every table below ``root``, a checkout or any folder."""
    pillars(root / "networks" / "spillway-pillars")
    river(root / "networks" / "river-levels")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else HERE.parent)
