"""Make the readings of the demo jobs and of the starter job. They are invented: no such place, no such fieldwork.

Truth coordinates and heights stand below. A reading is the true value plus a normal error whose standard deviation
is the one that the job's own job.toml states, then rounded as an instrument would show it. So the jobs are true to
their own error models, and nothing is tuned. The seed of each job is the day of its (invented) fieldwork.

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
    starter(root / "adjust" / "starter")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else HERE.parent)
