"""Raw books with exactly one booking error each, and what would be right to say of it.

Everything is invented and made without the program that reads it. A total station's book: three known points and three
new ones in 300 m, every point sighted from five of them in one to three sets of both faces, slopes without the
reflector's constant. A level book: forward and back between two bench marks over three lasting marks, and a third line
from one of the marks to another bench mark, with the page sums of the field book.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

import numpy as np

from adjust.units import TURN, format_angle, parse_circle

SEC = math.pi / 648000
RADIUS, REFRACTION = 6371008.8, 0.13
SORTS = ("face", "page sum", "1 minute in a set", "wrong staff column", "unbalanced sights", "constant applied twice",
         "metre misread")  # fmt: skip
Row = dict[str, str]


@dataclass
class Book:
    """One book on its way into a folder: its rows, its job file, and the error in it."""

    file: str
    rows: list[Row]
    head: str
    control: str
    sums: dict[str, dict[str, float]] = field(default_factory=dict)
    stations: str = ""
    error: str = "none"
    lines: set[int] = field(default_factory=set)
    """Lines of the table that hold the error; empty where it has none of its own."""
    words: tuple[str, ...] = ()
    """Words that one sentence must hold instead, where there is no line."""

    def line(self, k: int) -> int:
        """Physical line of row ``k``."""
        return k + 2

    def put(self, folder: Path) -> Path:
        """The job folder."""
        folder.mkdir(parents=True)
        columns = list(self.rows[0])
        text = [",".join(columns), *(",".join(row[c] for c in columns) for row in self.rows)]
        (folder / self.file).write_text("\n".join(text) + "\n", "utf-8")
        sums = "".join(
            f"{key} = {{ {', '.join(f'{page!r} = {total:.4f}' for page, total in pages.items())} }}\n".replace("'", '"')
            for key, pages in self.sums.items()
        )
        (folder / "job.toml").write_text(self.head + sums, "utf-8")
        (folder / "control.csv").write_text(self.control, "utf-8")
        if self.stations:
            (folder / "stations.csv").write_text(self.stations, "utf-8")
        return folder


ROUNDS = """title = "A book of rounds"
[units]
length = "m"
angle = "dms"
[datum]
kind = "control"
[frame]
plane_height = 60.0
[instruments.total-station]
direction = "1.5 sec"
zenith = "2 sec"
distance = "1.5 mm"
[reflectors.round]
constant = "{constant:.1f} mm"
[rejection]
direction = "8 sec"
zenith = "10 sec"
distance = "6 mm"
[[book]]
file = "control.csv"
[[book]]
file = "rounds.csv"
applied = []
"""


def rounds(rng: np.random.Generator, twice: bool = False, circles_only: bool = False) -> Book:
    """A total station's book; ``twice``: its distances hold the reflector's constant already."""
    constant = float(rng.choice([-34.4, -17.5, 22.0, 11.3]))
    names = ["K1", "K2", "K3", "S1", "S2", "S3"]
    places = {n: _place(rng, k) for k, n in enumerate(names)}
    two_c, index, sets = rng.uniform(-40, 40) * SEC, rng.uniform(-20, 20) * SEC, int(rng.integers(1, 4))
    reopen = bool(rng.integers(2))
    rows: list[Row] = []
    for at in ("K1", "K2", "S1", "S2", "S3"):
        hi = round(rng.uniform(1.45, 1.6), 3)
        ht = {to: round(rng.uniform(1.4, 1.6), 3) for to in names}
        order = sorted((to for to in names if to != at), key=lambda to: _bearing(places[at], places[to]))
        shift = int(rng.integers(len(order)))
        order = order[shift:] + order[:shift]
        for s in range(sets):
            zero = _bearing(places[at], places[order[0]]) - s * TURN / (2 * sets) - rng.uniform(10, 600) * SEC
            walk = [*order, *(order[:1] if reopen else [])]
            for face, half in ((1, walk), (2, walk[::-1])):
                for to in half:
                    slope, zenith = _ray(places[at], places[to], hi, ht[to])
                    c = two_c / 2 / math.sin(zenith)
                    e = rng.normal(0, 1, 3) * (1.5 * SEC * math.sqrt(2), 2 * SEC * math.sqrt(2), 0.0015)
                    h = _bearing(places[at], places[to]) - zero + (c if face == 1 else math.pi - c) + e[0]
                    v = (zenith if face == 1 else TURN - zenith) + index + e[1]
                    shown = slope + e[2] - (0.0 if twice else constant / 1000)
                    rows.append({
                        "at": at, "to": to, "set": str(s + 1), "face": str(face),
                        "horizontal_circle": format_angle(h % TURN, "dms"), "zenith_circle": format_angle(v, "dms"),
                        "slope_distance": f"{shown:.4f}", "instrument_height": f"{hi:.3f}",
                        "target_height": f"{ht[to]:.3f}",
                    })  # fmt: skip
    control = "station,east,north,height\n" + "".join(
        f"{n},{','.join(f'{x:.4f}' for x in places[n])}\n" for n in names[:3]
    )
    head = ROUNDS.format(constant=constant)
    if circles_only:
        rows = [{k: v for k, v in row.items() if k in ("at", "to", "set", "face", "horizontal_circle")} for row in rows]
        head = head.replace("applied = []\n", "")
        head = head[: head.index("[reflectors")] + head[head.index("[rejection") :]
        control = "station,east,north\n" + "".join(f"{n},{places[n][0]:.4f},{places[n][1]:.4f}\n" for n in names[:3])
    book = Book("rounds.csv", rows, head, control)
    book.words = (f"{constant:+.1f} mm", "applied twice")
    return book


def _place(rng: np.random.Generator, k: int) -> tuple[float, float, float]:
    """Six points around a middle, by turns outside and inside, at heights of up to 10 m."""
    turn, far = k * TURN / 6 + rng.uniform(-0.25, 0.25), rng.uniform(110, 170)
    return (round(2000 + far * math.sin(turn), 4), round(5000 + far * math.cos(turn), 4),
            round(60 + rng.uniform(-5, 5), 4))  # fmt: skip


def _bearing(a: tuple[float, ...], b: tuple[float, ...]) -> float:
    return math.atan2(b[0] - a[0], b[1] - a[1]) % TURN


def _ray(a: tuple[float, ...], b: tuple[float, ...], hi: float, ht: float) -> tuple[float, float]:
    """True slope and apparent zenith angle: the triangle with the centre of the Earth."""
    theta = 2 * math.asin(math.hypot(b[0] - a[0], b[1] - a[1]) / (2 * RADIUS))
    r1, r2 = RADIUS + a[2] + hi - 60.0, RADIUS + b[2] + ht - 60.0
    slope = math.sqrt((r2 - r1) ** 2 + 4 * r1 * r2 * math.sin(theta / 2) ** 2)
    return slope, math.atan2(r2 * math.sin(theta), r2 * math.cos(theta) - r1) - REFRACTION * theta / 2


LEVELS = """title = "A level book"
[units]
length = "m"
angle = "dms"
[datum]
kind = "control"
[instruments.level]
levelling = "1.8 mm*sqrt(km)"
[[book]]
file = "control.csv"
[[book]]
file = "stations.csv"
[[book]]
file = "staff.csv"
"""
LINES = {"forward": "BM1 A B C BM2", "back": "BM2 C B A BM1", "third": "B D BM3"}
HEIGHTS = {"BM1": 62.418, "A": 60.231, "B": 58.884, "C": 60.051, "BM2": 61.771, "D": 60.442, "BM3": 61.21}
PAGE = 9
"""Rows a page."""


def levels(rng: np.random.Generator, uneven: str = "") -> Book:
    """A level book; on the line ``uneven`` back sights are 10 to 20 m longer, and the level points 12 to 20" off."""
    tilt = (rng.uniform(12, 20) * rng.choice([-1, 1]) if uneven else rng.uniform(-2, 2)) * SEC
    rows: list[Row] = []
    for line, marks in LINES.items():
        points = [(m, HEIGHTS[m]) for m in marks.split()]
        way = points[:1]
        for (_, before), (mark, height) in pairwise(points):
            n = int(rng.integers(3, 6))
            steps = [before + (height - before) * k / n + rng.uniform(-0.35, 0.35) for k in range(1, n)]
            way += [(f"TP{len(rows) + len(way) + k}", h) for k, h in enumerate(steps)] + [(mark, height)]
        new = [dict.fromkeys(("line", "station", "back", "intermediate", "fore", "back_length", "fore_length"), "")
               | {"station": name} for name, _ in way]  # fmt: skip
        new[0]["line"] = line
        for k, ((_, a), (_, b)) in enumerate(pairwise(way)):
            ahead = rng.uniform(20, 32)
            behind = ahead + (rng.uniform(10, 20) if line == uneven else rng.uniform(-1.5, 1.5))
            sight = max(a, b) + rng.uniform(0.4, 1.6)
            new[k] |= _sight(rng, "back", sight - a, behind, tilt)
            new[k + 1] |= _sight(rng, "fore", sight - b, ahead, tilt)
        rows += new
    for k, row in enumerate(rows):
        row["page"] = str(k // PAGE + 1)
    control = "station,height\n" + "".join(f"{n},{HEIGHTS[n]:.4f}\n" for n in ("BM1", "BM2", "BM3"))
    book = Book("staff.csv", rows, LEVELS, control, stations="station\nA\nB\nC\nD\n")
    book.sums = page_sums(rows)
    return book


def _sight(rng: np.random.Generator, side: str, reading: float, length: float, tilt: float) -> Row:
    shown = reading + tilt * length + rng.normal(0, 0.0003 * math.sqrt(length / 30))
    return {side: f"{shown:.4f}", f"{side}_length": f"{length:.1f}"}


def page_sums(rows: list[Row]) -> dict[str, dict[str, float]]:
    """Sums of back and fore sights of every page, as the field book has them."""
    pages = list(dict.fromkeys(row["page"] for row in rows))
    return {
        f"sum_{side}": {p: math.fsum(float(r[side]) for r in rows if r["page"] == p and r[side]) for p in pages}
        for side in ("back", "fore")
    }


# --- one error each ---------------------------------------------------------------------------------------------------


def face(rng: np.random.Generator, k: int) -> Book:
    """The face of one row; in every other book without zenith circles, which would tell it alone."""
    book = rounds(rng, circles_only=bool(k % 2))
    i = int(rng.integers(len(book.rows)))
    book.rows[i]["face"] = "2" if book.rows[i]["face"] == "1" else "1"
    return _wrong(book, "face", i)


def page_sum(rng: np.random.Generator, k: int) -> Book:
    """By turns: a reading left out of a sum or added twice, a slip of adding, two digits swapped in copying."""
    book = levels(rng)
    side = str(rng.choice(["back", "fore"]))
    i = int(rng.choice([i for i, row in enumerate(book.rows) if row[side]]))
    row = book.rows[i]
    sums = book.sums[f"sum_{side}"]
    if k % 4 < 2:
        sums[row["page"]] += float(row[side]) * (-1 if k % 4 else 1)
    elif k % 4 == 2:
        sums[row["page"]] += float(rng.choice([-1, -0.1, 0.1, 1]))
    else:
        text = row[side]
        at = next((c for c in (4, 3, 2) if text[c] != text[c + 1]), 4)  # in the decimals
        row[side] = text[:at] + text[at + 1] + text[at] + text[at + 2 :]
        if row[side] == text:
            row[side] = f"{float(text) + 0.09:.4f}"
    if k % 4 != 2:
        return _wrong(book, "page sum", i)
    book.lines = {book.line(j) for j, r in enumerate(book.rows) if r["page"] == row["page"]}
    book.error, book.words = "page sum", (f"page {row['page']} does not add up", f"sum of {side} sights")
    return book


def minute(rng: np.random.Generator, k: int) -> Book:
    """One circle reading of one face misread by a minute; in every third book the zenith circle."""
    book = rounds(rng)
    i = int(rng.integers(len(book.rows)))
    column = "zenith_circle" if k % 3 == 2 else "horizontal_circle"
    value = parse_circle(book.rows[i][column], "dms") + 60 * SEC * float(rng.choice([-1, 1]))
    book.rows[i][column] = format_angle(value % TURN, "dms")
    return _wrong(book, "1 minute in a set", i)


def column(rng: np.random.Generator, k: int) -> Book:
    """By turns: the sights of a change point exchanged in the field, in copying; a fore sight as an intermediate."""
    book = levels(rng)
    both = [i for i, r in enumerate(book.rows) if r["back"] and r["fore"]
            and abs(float(r["back"]) - float(r["fore"])) > 0.02]  # fmt: skip
    i = int(rng.choice(both))
    row = book.rows[i]
    if k % 3 == 2:
        row["intermediate"], row["fore"] = row["fore"], ""
    else:
        row["back"], row["fore"] = row["fore"], row["back"]
        if k % 3 == 0:
            book.sums = page_sums(book.rows)
    return _wrong(book, "wrong staff column", i)


def unbalanced(rng: np.random.Generator, k: int) -> Book:
    """Back sights longer than fore sights all along a line, with a level out of adjustment and no correction."""
    line = list(LINES)[k % 3]
    book = levels(rng, uneven=line)
    book.error, book.words = "unbalanced sights", (f"Line {line}", "longer in all")
    return book


def constant(rng: np.random.Generator, k: int) -> Book:
    """The reflector's constant in distances that had it already."""
    book = rounds(rng, twice=True)
    book.error = "constant applied twice"
    return book


def metre(rng: np.random.Generator, k: int) -> Book:
    """By turns: one slope distance, one staff reading in the field, one staff reading in copying, wrong by a metre."""
    if k % 2 == 0:
        book = rounds(rng)
        i, where = int(rng.integers(len(book.rows))), "slope_distance"
    else:
        book = levels(rng)
        where = str(rng.choice(["back", "fore"]))
        i = int(rng.choice([i for i, row in enumerate(book.rows) if row[where]]))
    value = float(book.rows[i][where])
    book.rows[i][where] = f"{value + (1 if value < 1.05 else float(rng.choice([-1, 1]))):.4f}"
    if k % 4 == 1:
        book.sums = page_sums(book.rows)
    return _wrong(book, "metre misread", i)


def _wrong(book: Book, error: str, i: int) -> Book:
    book.error, book.lines, book.words = error, {book.line(i)}, ()
    return book


MAKERS: dict[str, Callable[[np.random.Generator, int], Book]] = dict(
    zip(SORTS, (face, page_sum, minute, column, unbalanced, constant, metre), strict=True)
)


def wrong_book(sort: str, k: int) -> Book:
    """Book ``k`` of a sort; the same every time."""
    return MAKERS[sort](np.random.default_rng([2029, SORTS.index(sort), k]), k)


def sound_book(k: int) -> Book:
    """A book without an error, by turns of both instruments."""
    rng = np.random.default_rng([2029, 99, k])
    return levels(rng) if k % 2 else rounds(rng)
