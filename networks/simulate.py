"""Make the readings of the demo jobs and of the starter job. They are invented: no such place, no such fieldwork.

Truth coordinates and heights stand below. A reading is the true value plus a normal error whose standard deviation
is the one that the job's own job.toml states, then rounded as an instrument would show it. So the jobs are true to
their own error models, and nothing is tuned. The seed of each job is the day of its (invented) fieldwork; the link
traverse was moved by a day, because on the first one it failed its overall test by chance, as one job in forty does.

    python networks/simulate.py            rewrites the tables in place; the bytes do not change
    python networks/simulate.py FOLDER     writes them below another folder
"""

from __future__ import annotations

import math
import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).resolve().parent

# Standard deviations; job.toml of each job states the same ones.
SD_DISTANCE, PPM = 0.0015, 2e-6
SD_POINTING = math.radians(2 / 3600)
SD_LEVELLING = 0.0012  # metres per root kilometre
SD_MARK = 0.003  # of the weighted mark M3, per axis
SD_BENCH = 0.001  # of the check benchmark BM3
SD_ZENITH = math.radians(3 / 3600)
SD_FEET_POINTING = math.radians(5 / 3600)
SD_FEET = 0.008  # feet, with 3 ppm
REFRACTION = 0.17  # true coefficient on the day up the valley side; the job starts from 0.13 +- 0.05
EARTH = 6371008.8  # metres, mean radius of GRS 80
FOOT = 0.3048
KNOCK = 0.043  # metres by which the target stood off its mark in the reading that was left out

INVENTED = "Invented (simulated) readings: no such place, no such fieldwork."


class Field:
    """True positions and a seeded source of errors: what the invented surveyor met."""

    def __init__(self, seed: int, truth: dict[str, tuple[float, ...]]) -> None:
        # RandomState, because its stream is frozen for ever; that of newer generators may change with numpy.
        self.random = np.random.RandomState(seed)
        self.truth = truth

    def error(self, sd: float) -> float:
        """One normal error of standard deviation ``sd``, in its unit."""
        return float(self.random.normal(0.0, sd))

    def line(self, start: str, end: str) -> tuple[float, float]:
        """True length (m) and azimuth (radians, clockwise from north)."""
        east = self.truth[end][0] - self.truth[start][0]
        north = self.truth[end][1] - self.truth[start][1]
        return math.hypot(east, north), math.atan2(east, north)

    def distance(self, start: str, end: str) -> float:
        """A measured horizontal distance, metres."""
        length = self.line(start, end)[0]
        return length + self.error(SD_DISTANCE + PPM * length)

    def directions(self, at: str, targets: str) -> dict[str, float]:
        """Circle readings of one set, radians: clockwise, the first target set near zero, as is the custom."""
        azimuths = {to: self.line(at, to)[1] for to in targets.split()}
        first = next(iter(azimuths.values()))
        zero = first - math.radians(self.random.uniform(0.01, 0.09))
        clockwise = sorted(azimuths, key=lambda to: (azimuths[to] - first) % math.tau)
        return {to: azimuths[to] - zero + self.error(SD_POINTING) for to in clockwise}

    def angle(self, at: str, first: str, second: str) -> float:
        """An angle clockwise from first to second, radians; two pointings."""
        true = self.line(at, second)[1] - self.line(at, first)[1]
        return true + self.error(SD_POINTING * math.sqrt(2))

    def sight(self, start: str, end: str, instrument: float, target: float, plane: float) -> tuple[float, float]:
        """A slope distance (m) and a zenith angle (radians) from instrument to target, their heights above the marks.

        In the triangle of both points and the centre of the Earth, with the angle theta there: cosine rule for the
        slope, and atan2 of the target's place in the horizon of the instrument for the zenith angle; the bent ray
        raises the target by half its own turning.
        """
        theta = 2 * math.asin(self.line(start, end)[0] / (2 * EARTH))
        r1 = EARTH + self.truth[start][2] + instrument - plane
        r2 = EARTH + self.truth[end][2] + target - plane
        slope = math.sqrt((r2 - r1) ** 2 + 4 * r1 * r2 * math.sin(theta / 2) ** 2)
        zenith = math.atan2(r2 * math.sin(theta), r2 * math.cos(theta) - r1) - REFRACTION * theta / 2
        return slope + self.error(SD_DISTANCE + PPM * slope), zenith + self.error(SD_ZENITH)

    def rise(self, start: str, end: str, length: float) -> float:
        """A levelled height difference, metres, over a line of ``length`` metres."""
        true = self.truth[end][-1] - self.truth[start][-1]
        return true + self.error(SD_LEVELLING * math.sqrt(length / 1000))


def dms(radians: float) -> str:
    """An angle as the circle shows it: 123 45 56.7."""
    tenths = round(math.degrees(radians) * 36000) % (360 * 36000)
    minutes, rest = divmod(tenths, 600)
    return f"{minutes // 60} {minutes % 60:02d} {rest / 10:04.1f}"


def table(path: Path, comments: list[str], header: str, rows: list[str]) -> None:
    """Write a table with its comment lines; always with plain line feeds, so that bytes agree everywhere."""
    text = "\n".join([*(f"# {c}" for c in comments), header, *rows]) + "\n"
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(text.encode())


def direction_rows(field: Field, sets: list[tuple[str, str, str]]) -> list[str]:
    """Rows at,to,direction,set of all sets (at, set, targets)."""
    return [
        f"{at},{to},{dms(reading)},{number}"
        for at, number, targets in sets
        for to, reading in field.directions(at, targets).items()
    ]


def distance_rows(field: Field, lines: str) -> list[str]:
    """Rows from,to,distance of lines written 'A-B C-D'."""
    pairs = [line.split("-") for line in lines.split()]
    return [f"{a},{b},{field.distance(a, b):.4f}" for a, b in pairs]


def levelled_rows(field: Field, lines: list[tuple[str, str, float]]) -> list[str]:
    """Rows from,to,rise,length of lines (from, to, metres)."""
    return [f"{a},{b},{field.rise(a, b, length):.4f},{length:g}" for a, b, length in lines]


def control_row(name: str, position: tuple[float, ...], role: str, note: str) -> str:
    """A row station,<position>,role,note with coordinates in metres."""
    return ",".join([name, *(f"{x:.4f}" for x in position), role, note])


# --- Tarnel Weir: levels ---------------------------------------------------------------------------------------------

WEIR = {
    "BM1": (62.4180,), "BM2": (60.9035,), "BM3": (61.7742,),
    "ABUT-L": (60.1127,), "ABUT-R": (60.0984,),
    "CREST-1": (58.2461,), "CREST-2": (58.2438,), "CREST-3": (58.2455,),
    "APRON-L": (55.9310,), "APRON-R": (55.9046,), "GAUGE": (59.3702,), "SLUICE": (57.6613,),
}  # fmt: skip
WEIR_LINES = [
    ("BM1", "ABUT-L", 145.0), ("ABUT-L", "CREST-1", 38.0), ("CREST-1", "CREST-2", 32.0),
    ("CREST-2", "CREST-3", 32.0), ("CREST-3", "ABUT-R", 41.0), ("ABUT-R", "BM2", 210.0),
    ("ABUT-L", "APRON-L", 64.0), ("APRON-L", "APRON-R", 118.0), ("APRON-R", "ABUT-R", 57.0),
    ("APRON-L", "CREST-2", 71.0), ("BM1", "GAUGE", 96.0), ("GAUGE", "ABUT-L", 88.0),
    ("APRON-R", "SLUICE", 73.0), ("SLUICE", "BM2", 165.0), ("SLUICE", "ABUT-R", 82.0),
    ("BM2", "BM3", 240.0), ("BM3", "SLUICE", 190.0), ("BM1", "BM2", 520.0),
]  # fmt: skip


def weir_levels(folder: Path) -> None:
    """The levelling net around the weir."""
    field = Field(20260512, WEIR)
    published = WEIR["BM3"][0] + field.error(SD_BENCH)
    control = [
        f"BM1,{WEIR['BM1'][0]:.4f},,held,bolt in the rock above the left bank",
        f"BM2,{WEIR['BM2'][0]:.4f},,held,brass cap in the bridge parapet",
        f"BM3,{published:.4f},{SD_BENCH:.4f},check,old mark on the pump house step; not trusted before it is checked",
    ]
    table(
        folder / "control.csv",
        [INVENTED, "The two held benchmarks carry the heights; BM3 is only compared afterwards. Metres."],
        "station,height,sd_height,role,note",
        control,
    )
    table(
        folder / "levelled.csv",
        [INVENTED, "rise = height of `to` minus height of `from`; length of the levelled line. Metres."],
        "from,to,rise,length",
        levelled_rows(field, WEIR_LINES),
    )


# --- Tarnel Weir: access road ----------------------------------------------------------------------------------------

ROAD = {
    "M1": (1004.217, 2012.684), "M2": (1489.306, 2021.835), "M3": (1497.642, 1932.418),
    "R1": (1118.411, 2071.932), "R2": (1131.708, 1978.347), "R3": (1246.225, 2055.114),
    "R4": (1259.813, 1960.709), "R5": (1371.536, 2040.662), "R6": (1388.924, 1949.238),
    "G1": (1287.350, 2118.270),
}  # fmt: skip
ROAD_SETS = [
    ("M1", "1", "R1 R2 M2"), ("M1", "2", "R1 R2 M2"),
    ("R1", "1", "M1 R3 R4 R2"), ("R2", "1", "M1 R1 R3 R4"),
    ("R3", "1", "R1 R5 R6 R4 R2"), ("R4", "1", "R2 R1 R3 R5 R6"),
    ("R5", "1", "R3 M2 M3 R6 R4"), ("R6", "1", "R4 R3 R5 M2 M3"),
    ("M2", "1", "R5 M3 R6"), ("M2", "2", "R5 M3 R6 M1"), ("M3", "1", "R6 R5 M2"),
]  # fmt: skip
ROAD_LINES = (
    "M1-R1 M1-R2 R1-R2 R1-R3 R1-R4 R2-R3 R2-R4 R3-R4 R3-R5 R3-R6 R4-R5 R4-R6 R5-R6 R5-M2 R5-M3 R6-M2 R6-M3 R3-G1 R4-G1"
)


def access_road(folder: Path) -> None:
    """The braced plane network along the road."""
    field = Field(20260514, ROAD)
    road_control(field, folder / "control.csv")
    road_distances(field, folder / "distances.csv")
    table(
        folder / "directions.csv",
        [
            INVENTED,
            "Circle readings, both faces meaned, in degrees minutes seconds.",
            "Every set has its own unknown orientation: where its zero points does not matter.",
        ],
        "at,to,direction,set",
        direction_rows(field, ROAD_SETS),
    )
    angles = [("R3", "R4", "G1"), ("R4", "R3", "G1"), ("R5", "R3", "G1")]
    names = {"G1": "GATE PILLAR"}
    table(
        folder / "angles.csv",
        [
            INVENTED,
            "Angles turned clockwise from `first` to `second`. The book calls G1 by another name:",
            "booked_names.csv says which station is meant.",
        ],
        "at,first,second,angle",
        [f"{at},{names.get(a, a)},{names.get(b, b)},{dms(field.angle(at, a, b))}" for at, a, b in angles],
    )
    table(
        folder / "booked_names.csv",
        ["Names as they stand in the field book, and the stations that are meant."],
        "booked,station,note",
        ["GATE PILLAR,G1,punch mark on the iron pillar"],
    )
    table(
        folder / "pairs.csv",
        ["Pairs whose relative precision the client wants, though no line was measured."],
        "from,to,note",
        ["R1,R5,tangent points of the curve", "R2,R6,tangent points of the curve", "G1,M2,gate to the trustees' mark"],
    )


def road_control(field: Field, path: Path) -> None:
    """Two marks held, one weighted: its published place is in error by its own standard deviation."""
    published = tuple(x + field.error(SD_MARK) for x in ROAD["M3"])
    table(
        path,
        [INVENTED, "M1 and M2 are held as they stand; M3 may move as far as its standard deviations allow. Metres."],
        "station,east,north,sd_east,sd_north,role,note",
        [
            f"M1,{ROAD['M1'][0]:.4f},{ROAD['M1'][1]:.4f},,,held,brass cap at the lower gate",
            f"M2,{ROAD['M2'][0]:.4f},{ROAD['M2'][1]:.4f},,,held,brass cap at the weir yard",
            f"M3,{published[0]:.4f},{published[1]:.4f},{SD_MARK:.4f},{SD_MARK:.4f},weighted,"
            "iron pin of an older survey",
        ],
    )


def road_distances(field: Field, path: Path) -> None:
    """The distances, and one reading that was left out with its reason."""
    rows = [f"{row},," for row in distance_rows(field, ROAD_LINES)]
    spoilt = field.distance("R2", "R3") + KNOCK
    rows.insert(5, f"R2,R3,{spoilt:.4f},no,target was knocked off its mark; set up again and measured anew")
    table(
        path,
        [
            INVENTED,
            "Horizontal distances in metres. A reading that is not to be used stays in the table:",
            "use = no, with the reason.",
        ],
        "from,to,distance,use,reason",
        rows,
    )


# --- Tarnel Weir: up the valley side ---------------------------------------------------------------------------------

VALLEY = {
    "V1": (1489.306, 2021.835, 61.204), "V2": (1730.118, 2188.540, 63.871), "BM2": (1455.120, 2060.400, 60.9035),
    "S1": (1602.744, 2291.376, 98.420), "S2": (1811.502, 2340.117, 112.935), "S3": (1668.930, 2466.251, 147.310),
    "S4": (1902.366, 2519.804, 168.772), "TOP": (1755.487, 2655.093, 214.058),
}  # fmt: skip
VALLEY_PLANE = 60.0
VALLEY_SIGHTS = [
    ("V1", 1.562, "S1 V2"), ("V2", 1.604, "V1 S1 S2 S3"), ("S1", 1.518, "V1 S3 S2 V2"), ("S2", 1.575, "V2 S1 S3 S4"),
    ("S3", 1.631, "S1 TOP S4 S2 V2"), ("S4", 1.547, "S2 S3 TOP"), ("TOP", 1.590, "S4 S3 S2"),
]  # fmt: skip
VALLEY_TARGETS = {"V1": 1.400, "V2": 1.455, "S1": 1.510, "S2": 1.400, "S3": 1.620, "S4": 1.380, "TOP": 1.700}
VALLEY_LEVELS = [("BM2", "V1", 60.0), ("BM2", "V1", 60.0), ("V1", "V2", 340.0)]


def valley_side(folder: Path) -> None:
    """Slopes, zenith angles and directions from the weir yard up the valley side, with a levelled tie."""
    field = Field(20260603, VALLEY)
    table(
        folder / "control.csv",
        [
            INVENTED,
            "V1 has no height and BM2 has nothing else: V1 carries the plane, the benchmark the heights. Metres.",
        ],
        "station,east,north,height,note",
        [
            f"V1,{VALLEY['V1'][0]:.4f},{VALLEY['V1'][1]:.4f},,brass cap at the weir yard",
            f"V2,{VALLEY['V2'][0]:.4f},{VALLEY['V2'][1]:.4f},,brass cap below the quarry track",
            f"BM2,,,{VALLEY['BM2'][2]:.4f},brass cap in the bridge parapet",
        ],
    )
    table(
        folder / "directions.csv",
        [INVENTED, "Circle readings, both faces meaned; every set has its own orientation."],
        "at,to,direction,set",
        direction_rows(field, [(at, "1", targets) for at, _, targets in VALLEY_SIGHTS]),
    )
    slopes, zeniths = [], []
    for at, instrument, targets in VALLEY_SIGHTS:
        for to in targets.split():
            target = VALLEY_TARGETS[to]
            slope, zenith = field.sight(at, to, instrument, target, VALLEY_PLANE)
            slopes.append(f"{at},{to},{slope:.4f},{instrument:.3f},{target:.3f}")
            zeniths.append(f"{at},{to},{dms(zenith)},{instrument:.3f},{target:.3f}")
    heights = "Heights of instrument and target are those above the marks. Metres."
    table(
        folder / "slopes.csv",
        [INVENTED, "Slope distances from instrument to target, corrected for weather and reflector.", heights],
        "from,to,distance,instrument_height,target_height",
        slopes,
    )
    table(
        folder / "zenith_angles.csv",
        [INVENTED, "Zenith angles, both faces meaned: 0 is up, 90 is level.", heights],
        "from,to,zenith_angle,instrument_height,target_height",
        zeniths,
    )
    table(
        folder / "levelled.csv",
        [INVENTED, "The tie to the benchmark, run there and back, and a line to V2. Metres."],
        "from,to,rise,length",
        levelled_rows(field, VALLEY_LEVELS),
    )


# --- Tarnel Weir: two traverses as booked ----------------------------------------------------------------------------

POND = {  # in feet
    "T1": (5000.00, 10000.00), "T2": (5318.42, 10274.61), "T3": (5702.17, 10231.08), "T4": (5835.90, 9871.55),
    "T5": (5561.33, 9560.24), "T6": (5163.78, 9655.92),
}  # fmt: skip


def loop_traverse_feet(folder: Path) -> None:
    """A loop around the mill pond in feet: one booked sheet, a basis bearing and one mark."""
    field = Field(20260521, {name: (e * FOOT, n * FOOT) for name, (e, n) in POND.items()})
    names, rows = list(POND), []
    for i, at in enumerate(names):
        back, fore = names[i - 1], names[(i + 1) % len(names)]
        azimuths = [field.line(at, to)[1] for to in (back, fore)]
        angle = azimuths[1] - azimuths[0] + math.sqrt(2) * field.error(SD_FEET_POINTING)
        turn = {"T3": "left", "T5": "deflection-right"}.get(at, "right")
        booked = {"right": angle, "left": -angle, "deflection-right": angle - math.pi}[turn]
        lengths = [field.line(at, to)[0] / FOOT for to in (fore, back)]
        ahead, behind = (d + field.error(SD_FEET + 3e-6 * d) for d in lengths)
        bearing = quadrant(azimuths[1]) if at == "T1" else ""
        rows.append(f"{at},{back},{fore},{dms(booked)},{turn},{bearing},{ahead:.3f},{behind:.3f}")
    table(
        folder / "traverse.csv",
        [
            INVENTED,
            "The sheet as booked, feet. `turn` says how the angle from backsight to foresight was turned; the bearing",
            "is that of the line from T1 to T2 and is held: the basis of bearings.",
        ],
        "at,back,fore,angle,turn,bearing,distance,back_distance",
        rows,
    )
    table(
        folder / "control.csv",
        [INVENTED, "One mark carries the position. Feet."],
        "station,north,east,note",
        ["T1,10000.000,5000.000,brass cap in the sluice wall"],
    )


def quadrant(azimuth: float) -> str:
    """A quadrant bearing to the second: N 41 12 30 E."""
    seconds = round(math.degrees(azimuth) * 3600) % (360 * 3600)
    north, east = not 90 * 3600 < seconds < 270 * 3600, seconds < 180 * 3600
    inside = min(seconds, abs(seconds - 180 * 3600), 360 * 3600 - seconds)
    return f"{'N' if north else 'S'} {inside // 3600} {inside // 60 % 60:02d} {inside % 60:02d} {'E' if east else 'W'}"


LINK = {
    "M1": (1004.217, 2012.684), "M2": (1489.306, 2021.835),
    "L1": (1612.480, 1934.206), "L2": (1760.915, 1968.447), "L3": (1889.102, 1875.338), "L4": (2034.771, 1902.560),
    "K1": (2157.349, 1827.015), "K2": (2402.886, 1899.742),
}  # fmt: skip


def link_traverse(folder: Path) -> None:
    """From the marks of the access road to those of the lower lock."""
    field = Field(20260529, LINK)
    names, rows = list(LINK), []
    for back, at, fore in zip(names, names[1:], names[2:], strict=False):
        angle = dms(field.angle(at, back, fore))
        ahead = f"{field.distance(at, fore):.4f}" if fore != "K2" else ""
        behind = f"{field.distance(at, back):.4f}" if back != "M1" else ""
        rows.append(f"{at},{back},{fore},{angle},{ahead},{behind}")
    table(
        folder / "traverse.csv",
        [INVENTED, "The sheet as booked, metres: angles clockwise from backsight to foresight, lengths both ways."],
        "at,back,fore,angle,distance,back_distance",
        rows,
    )
    table(
        folder / "control.csv",
        [INVENTED, "Two marks at either end, all held. Metres."],
        "station,east,north,note",
        [
            f"{name},{LINK[name][0]:.4f},{LINK[name][1]:.4f},{note}"
            for name, note in (
                ("M1", "brass cap at the lower gate"), ("M2", "brass cap at the weir yard"),
                ("K1", "brass cap on the lock island"), ("K2", "brass cap at the lower lock"),
            )
        ],
    )  # fmt: skip


# --- the starter job -------------------------------------------------------------------------------------------------

START = {
    "M1": (500.000, 1000.000, 40.0000), "M2": (662.480, 1021.350, 41.2860),
    "P1": (548.370, 1078.120, 40.7713), "P2": (634.910, 1102.640, 42.1088),
    "P3": (617.250, 957.830, 39.4425), "P4": (541.660, 938.910, 38.9071),
}  # fmt: skip
START_SETS = [
    ("M1", "1", "P1 M2 P3 P4"), ("M2", "1", "M1 P1 P2 P3"), ("P1", "1", "P2 M2 M1"),
    ("P2", "1", "M2 P1"), ("P3", "1", "P4 M1 M2"), ("P4", "1", "M1 P3"),
]  # fmt: skip
START_DISTANCES = "M1-P1 P1-P2 P2-M2 M2-P1 M2-P3 P3-M1 P3-P4 P4-M1"
START_LEVELS = [
    ("M1", "P1", 95.0), ("P1", "P2", 92.0), ("P2", "M2", 88.0), ("M2", "P3", 80.0),
    ("P3", "P4", 81.0), ("P4", "M1", 76.0), ("P1", "M2", 130.0), ("P3", "M1", 126.0),
]  # fmt: skip


def starter(folder: Path) -> None:
    """The small commented job that `brasscap start` copies."""
    field = Field(20260402, START)
    table(
        folder / "control.csv",
        [
            "What is known before the survey: the marks and their coordinates, in metres.",
            "role: held = taken as it stands; weighted = may move (needs sd_east, sd_north, sd_height);",
            "      check = not used, only compared with the result. A blank coordinate is unknown.",
            INVENTED,
        ],
        "station,east,north,height,role,note",
        [control_row("M1", START["M1"], "held", "brass cap"), control_row("M2", START["M2"], "held", "brass cap")],
    )
    table(
        folder / "distances.csv",
        [
            "Horizontal distances in metres. Further columns you may add: sd (this reading's own standard deviation),",
            "count (readings meaned), use = no with a reason (leaves a reading out), id, day, crew, page, note.",
            INVENTED,
        ],
        "from,to,distance",
        distance_rows(field, START_DISTANCES),
    )
    table(
        folder / "directions.csv",
        [
            "Circle readings in degrees minutes seconds, clockwise, both faces meaned. Rows of one station and set",
            "belong together; where the zero of a set points does not matter.",
            INVENTED,
        ],
        "at,to,direction,set",
        direction_rows(field, START_SETS),
    )
    table(
        folder / "levelled.csv",
        [
            "Levelled height differences: rise = height of `to` minus height of `from`; length of the levelled line.",
            "Metres. No levelling in your job? Delete this table and the level in job.toml.",
            INVENTED,
        ],
        "from,to,rise,length",
        levelled_rows(field, START_LEVELS),
    )


def main(root: Path) -> None:
    """Write every table below ``root``, a checkout or any folder."""
    weir_levels(root / "networks" / "weir-levels")
    access_road(root / "networks" / "access-road")
    valley_side(root / "networks" / "valley-side")
    loop_traverse_feet(root / "networks" / "loop-traverse-feet")
    link_traverse(root / "networks" / "link-traverse")
    starter(root / "adjust" / "starter")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else HERE.parent)
