"""Networks with constructed defects, and whether each is named by station and movement.

    PYTHONPATH=. python tests/judge/defects_study.py [COUNT] [FIRST SEED]

makes COUNT (200) jobs, prints every one that is not named rightly with its sentences, and a table by sort of defect.
A job has a sound middle (a jittered grid of distances, pointings or both, with two known marks or free) and defects
hung on it; readings carry a normal error, starting coordinates are off by up to 0.3 m.
"""

from __future__ import annotations

import math
import re
import sys
import tempfile
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError, Unsolvable
from adjust.judge.unfixed import MOST, warnings

SD_M, SD_SEC = 0.002, 3.0
FORBIDDEN = re.compile(r"matrix|singular|\brank\b|pivot|eigen|\bnull\b", re.IGNORECASE)


@dataclass
class Sheet:
    """A job in the making; ``wanted`` are the movements that must be told."""

    rng: np.random.Generator
    at: dict[str, complex] = field(default_factory=dict)
    distances: list[tuple[str, str]] = field(default_factory=list)
    sets: list[tuple[str, list[str]]] = field(default_factory=list)
    angles: list[tuple[str, str, str]] = field(default_factory=list)
    azimuths: list[tuple[str, str]] = field(default_factory=list)
    levelled: list[tuple[str, str]] = field(default_factory=list)
    known: list[str] = field(default_factory=list)
    known_heights: list[str] = field(default_factory=list)
    kind: str = ""
    wanted: list[tuple[str, tuple[str, ...], str]] = field(default_factory=list)
    used: set[str] = field(default_factory=set)
    places: int = 0

    def new(self, where: complex) -> str:
        """A new station."""
        name = f"S{len(self.at) + 1}"
        self.at[name] = where
        return name

    def free_station(self) -> str:
        """A station of the middle on which nothing hangs yet."""
        left = [n for n in self.middle if n not in self.used]
        name = left[int(self.rng.integers(len(left)))]
        self.used.add(name)
        return name

    def neighbours(self, count: int) -> list[str]:
        """Stations of the middle near one another on which nothing hangs yet."""
        first = self.free_station()
        near = sorted((n for n in self.middle if n not in self.used), key=lambda n: abs(self.at[n] - self.at[first]))
        self.used |= set(near[: count - 1])
        return [first, *near[: count - 1]]

    def outside(self) -> complex:
        """A place beyond the middle, another one each time."""
        self.places += 1
        turn = self.rng.uniform(0, 0.6) + 2.4 * self.places
        return 900.0 * complex(math.cos(turn), math.sin(turn))

    def error(self) -> float:
        """A standard normal error."""
        return float(self.rng.standard_normal())

    def want(self, movement: str, stations: list[str], about: str = "") -> None:
        """Expect a movement."""
        self.wanted.append((movement, tuple(stations), about))

    # ---- pieces

    def grid(self, n: int, middle: complex, style: str) -> list[str]:
        """A sound piece of n stations on a jittered grid; style distances, both or pointings."""
        side = math.ceil(math.sqrt(n))
        cells = [complex(k % side, k // side) * 120 for k in range(n)]
        shift = middle - sum(cells) / n
        names = [self.new(c + shift + complex(*self.rng.uniform(-25, 25, 2))) for c in cells]
        self.brace(names, style)
        return names

    def brace(self, names: list[str], style: str, reach: float = 265.0) -> None:
        """Measure among stations so that the piece is rigid; pointings alone leave its scale open."""
        lines = [(a, b) for i, a in enumerate(names) for b in names[i + 1 :] if abs(self.at[a] - self.at[b]) < reach]
        if style in ("distances", "both"):
            self.distances += lines
        if style in ("both", "pointings"):
            for a in names:
                targets = [b for line in lines for b in line if a in line and b != a]
                if len(targets) > 1:
                    self.sets.append((a, targets))

    # ---- files

    def write(self, folder: Path) -> Path:
        """The job's folder."""
        head = '[units]\nlength = "m"\nangle = "deg"\n'
        head += f'[datum]\nkind = "{self.kind}"\n' if self.kind else ""
        (folder / "job.toml").write_text(head)
        e = {n: (z.real, z.imag, 50 + 0.01 * z.real) for n, z in self.at.items()}
        control = [f"{n},{e[n][0]!r},{e[n][1]!r},{e[n][2] if n in self.known_heights else ''}" for n in self.known]
        control += [f"{n},,,{e[n][2]!r}" for n in self.known_heights if n not in self.known]
        stations = [f"{n},{x + self.rng.uniform(-0.3, 0.3)!r},{y + self.rng.uniform(-0.3, 0.3)!r}"
                    for n, (x, y, _) in e.items()]  # fmt: skip
        tables = {
            "control": ("station,east,north,height", control),
            "stations": ("station,east,north", stations if self.distances or self.sets else []),
            "distances": ("from,to,distance,sd", [
                f"{a},{b},{abs(self.at[a] - self.at[b]) + SD_M * self.error()!r},{SD_M}" for a, b in self.distances]),
            "directions": ("at,to,set,direction,sd", [
                row for k, one in enumerate(self.sets) for row in self._set(k, *one)]),
            "angles": ("at,first,second,angle,sd", [
                f"{a},{b},{c},{self._degrees(self._azimuth(a, c) - self._azimuth(a, b))},{SD_SEC}"
                for a, b, c in self.angles]),
            "azimuths": ("from,to,azimuth,sd", [f"{a},{b},{self._degrees(self._azimuth(a, b))},{SD_SEC}"
                                                for a, b in self.azimuths]),
            "levelled": ("from,to,rise,sd", [f"{a},{b},{e[b][2] - e[a][2] + 0.001 * self.error()!r},0.001"
                                             for a, b in self.levelled]),
        }  # fmt: skip
        for name, (header, rows) in tables.items():
            if rows:
                (folder / f"{name}.csv").write_text("\n".join([header, *rows]) + "\n")
        return folder

    def _azimuth(self, a: str, b: str) -> float:
        d = self.at[b] - self.at[a]
        return math.atan2(d.real, d.imag)

    def _degrees(self, radians: float) -> str:
        return repr((math.degrees(radians) + SD_SEC / 3600 * self.error()) % 360)

    def _set(self, k: int, a: str, targets: list[str]) -> list[str]:
        zero = self.rng.uniform(0, 2 * math.pi)
        return [f"{a},{b},s{k},{self._degrees(self._azimuth(a, b) - zero)},{SD_SEC}" for b in targets]

    middle: list[str] = field(default_factory=list)


def spur_distance(s: Sheet) -> None:
    a = s.free_station()
    p = s.new(s.outside())
    s.distances.append((a, p))
    s.want("held by one distance only: nothing fixes it sideways", [p])


def spur_pointing(s: Sheet) -> None:
    a, b, c = s.neighbours(3)
    p = s.new(s.outside())
    s.sets.append((a, [b, c, p]))
    s.want("held by one pointing only: nothing fixes it along that line", [p])


def hinge(s: Sheet) -> None:
    a = s.free_station()
    _piece_at(s, a, int(s.rng.integers(3, 7)), "turn", str(s.rng.choice(["distances", "both"])))


def _piece_at(s: Sheet, a: str, n: int, movement: str, style: str) -> list[str]:
    """A sound piece that shares station ``a`` with what is there."""
    away = s.outside()
    names = s.grid(n, away, "none")
    pull = s.at[a] + 150 * (away - s.at[a]) / abs(away - s.at[a])
    nearest = min(names, key=lambda m: abs(s.at[m] - s.at[a]))
    shift = pull - s.at[nearest]
    for m in names:
        s.at[m] += shift
    s.brace([a, *names], style, math.inf)
    s.want(movement, names, a)
    return names


def quadrilateral(s: Sheet) -> None:
    a, b = s.neighbours(2)
    out = s.outside()
    step = 130 * out / abs(out)
    c, d = (s.new(s.at[x] + step + complex(*s.rng.uniform(-20, 20, 2))) for x in (b, a))
    s.distances += [(b, c), (c, d), (d, a)]
    s.want("flex", [c, d], ", ".join(_order(s, [a, b])))


def chain(s: Sheet) -> None:
    a, b = s.neighbours(2)
    out = s.outside()
    n = int(s.rng.integers(3, 6))
    names = [s.new(s.at[a] + (s.at[b] - s.at[a]) * (k + 1) / (n + 1) + 0.2 * out * math.sin(math.pi * (k + 1) / (n + 1))
                   + complex(*s.rng.uniform(-9, 9, 2))) for k in range(n)]  # fmt: skip
    walk = [a, *names, b]
    s.distances += list(pairwise(walk))
    s.want("flex", names, ", ".join(_order(s, [a, b])))


def missing_orientation(s: Sheet) -> None:
    a = s.free_station()
    out = s.outside()
    names = [s.new(s.at[a] + out / 900 * d * complex(math.cos(t), math.sin(t)))
             for d, t in zip((150, 220, 180), (-0.5, 0.1, 0.7), strict=True)][: int(s.rng.integers(2, 4))]  # fmt: skip
    s.sets.append((a, names))
    s.distances += [(a, n) for n in names]
    s.want("turn", names, a)


def missing_scale(s: Sheet) -> None:
    a, b = s.neighbours(2)
    names = _piece_at(s, a, int(s.rng.integers(3, 6)), "scale", "pointings")
    s.sets.append((a, [b, *names]))


def shift(s: Sheet) -> None:
    a = s.free_station()
    names = s.grid(int(s.rng.integers(3, 6)), s.outside(), "both")
    s.azimuths += [(names[0], names[1]), (s.middle[0], s.middle[1])]
    s.distances.append((a, names[0]))
    s.want("shift", names)


def two_known_targets(s: Sheet) -> None:
    a, b = s.neighbours(2)
    p = s.new(s.outside())
    s.sets.append((p, [a, b]))
    s.want("held by two pointings only: nothing fixes it along azimuth", [p])


def between_two_distances(s: Sheet) -> None:
    a, b = s.neighbours(2)
    p = s.new(s.at[a] + (s.at[b] - s.at[a]) * float(s.rng.uniform(0.3, 0.7)))
    s.distances += [(a, p), (b, p)]
    s.want(f"stands on the line {'-'.join(_order(s, [a, b]))}: two distances do not fix it sideways", [p])


def along_two_pointings(s: Sheet) -> None:
    a, b, c, d = s.neighbours(4)
    p = s.new(s.at[a] + (s.at[b] - s.at[a]) * float(s.rng.uniform(0.3, 0.7)))
    s.sets += [(a, [c, d, p]), (b, [c, d, p])]
    s.want(f"stands on the line {'-'.join(_order(s, [a, b]))}: two pointings do not fix it along that line", [p])


def danger_circle(s: Sheet) -> None:
    a, b, c = s.neighbours(3)
    za, zb, zc = s.at[a], s.at[b], s.at[c]
    w = (zc - za) / (zb - za)
    middle = (zb - za) * (w - abs(w) ** 2) / (2j * w.imag) + za
    radius = abs(za - middle)
    turns = sorted(math.atan2((z - middle).imag, (z - middle).real) for z in (za, zb, zc))
    gaps = [(turns[(k + 1) % 3] - turns[k]) % (2 * math.pi) for k in range(3)]
    k = int(np.argmax(gaps))
    t = turns[k] + gaps[k] * float(s.rng.uniform(0.35, 0.65))
    p = s.new(middle + radius * complex(math.cos(t), math.sin(t)))
    s.sets.append((p, [a, b, c]))
    s.want(f"stands on the circle through {', '.join([a, b, c])}: the three pointings do not fix it", [p])


def spur_on_spur(s: Sheet) -> None:
    a = s.free_station()
    p = s.new(s.outside())
    q = s.new(s.at[p] + complex(*s.rng.uniform(40, 90, 2)))
    s.distances += [(a, p), (p, q)]
    for x in (p, q):
        s.want("held by one distance only: nothing fixes it sideways", [x])


def chain_of_pieces(s: Sheet) -> None:
    a = s.free_station()
    first = _piece_at(s, a, 4, "turn", "both")
    hinge_two = max(first, key=lambda m: abs(s.at[m] - s.at[a]))
    _piece_at(s, hinge_two, 3, "turn", "distances")


def figure_on_piece(s: Sheet) -> None:
    """A flexible quadrilateral on a piece that turns."""
    a = s.free_station()
    first = _piece_at(s, a, 4, "turn", "both")
    b, c = sorted(first, key=lambda m: -abs(s.at[m] - s.at[a]))[:2]
    away = s.at[b] - s.at[a]
    p, q = (s.new(s.at[x] + 110 * away / abs(away) + complex(*s.rng.uniform(-15, 15, 2))) for x in (b, c))
    s.distances += [(b, p), (p, q), (q, c)]
    s.want("flex", [p, q], ", ".join(_order(s, [b, c])))


def several(s: Sheet) -> None:
    for make in s.rng.permutation(np.array([spur_distance, hinge, quadrilateral, missing_orientation, chain]))[:3]:
        make(s)


HUNG: list[Callable[[Sheet], None]] = [
    spur_distance, spur_pointing, hinge, quadrilateral, chain, missing_orientation, missing_scale, shift,
    two_known_targets, between_two_distances, along_two_pointings, danger_circle, spur_on_spur, chain_of_pieces,
    figure_on_piece, several,
]  # fmt: skip


# ---- defects of the datum: the whole of a piece moves


def one_mark(s: Sheet) -> None:
    s.known = s.known[:1]
    s.kind = "control"
    s.want("turn", list(s.at), s.known[0])


def one_mark_no_scale(s: Sheet) -> None:
    s.known, s.kind, s.distances, s.sets = s.known[:1], "control", [], []
    s.brace(s.middle, "pointings")
    s.azimuths.append((s.middle[0], s.middle[1]))
    s.want("scale", list(s.at), s.known[0])


def island(s: Sheet) -> None:
    s.kind = "control"
    names = s.grid(int(s.rng.integers(3, 7)), s.outside(), "both")
    s.want("position", names)


def no_known_height(s: Sheet) -> None:
    s.kind = "control"
    names = [n for n in s.middle if n not in s.known]
    s.levelled += list(zip(names, [*names[1:], names[0]], strict=True))
    s.want("height", names)


def one_known_height_too_few(s: Sheet) -> None:
    s.kind = "control"
    first, second = s.middle[: len(s.middle) // 2], s.middle[len(s.middle) // 2 :]
    for names in (first, second):
        s.levelled += list(pairwise(names))
    s.known_heights = [first[0]]
    s.want("height", second)


def one_mark_and_spurs(s: Sheet) -> None:
    """The datum and the figure at once."""
    one_mark(s)
    spur_distance(s)
    hinge(s)
    s.wanted[0] = ("turn", tuple(s.at), s.known[0])


DATUM: list[Callable[[Sheet], None]] = [
    one_mark, one_mark_no_scale, island, no_known_height, one_known_height_too_few, one_mark_and_spurs,
]  # fmt: skip
SORTS = [*HUNG, *DATUM]


def _order(s: Sheet, names: list[str]) -> list[str]:
    """In the order of the stations in the job: the known marks, then as named."""
    order = {n: k for k, n in enumerate([*s.known, *s.known_heights, *s.at][::-1])}
    return sorted(names, key=lambda n: -order[n])


def sound(seed: int, least: int = 4) -> Sheet:
    """A sound job of 4 to 32 stations, held at two marks or (a third) free."""
    rng = np.random.default_rng(seed)
    s = Sheet(rng)
    free = seed % 3 == 2
    n = max(int(rng.integers(4, 33)), FREE_LEAST if free else least)
    s.middle = s.grid(n, 0j, str(rng.choice(["distances", "both"])))
    s.known = [] if free else [str(m) for m in rng.choice(s.middle, 2, replace=False)]
    return s


FREE_LEAST, SEVERAL_LEAST = 9, 8
"""Stations of a free middle, so that it is larger than what hangs on it, and where several defects find a place."""


def defective(seed: int) -> tuple[str, Sheet]:
    """A job with one sort of defect, and its name."""
    make = SORTS[seed % len(SORTS)]
    s = sound(seed, SEVERAL_LEAST if make is several else 4)
    if make in DATUM and not s.known:
        s.known = s.middle[:2]
    make(s)
    return make.__name__, s


def matches(sentence: str, wanted: tuple[str, tuple[str, ...], str], s: Sheet) -> bool:
    """Whether a sentence tells the wanted movement of the wanted stations."""
    movement, names, about = wanted

    def listed(most: int) -> str:
        order = _order(s, list(names))
        return ", ".join(order[:most]) + (f" and {len(order) - most} more" if len(order) > most else "")

    if movement == "flex":
        return sentence.startswith(f"{listed(MOST)} can flex between {about}")
    if movement in ("turn", "scale"):
        heads = [f"nothing fixes the {movement} of {listed(most)} about {about}:" for most in (MOST, 5)]
        return any(sentence.startswith(h) for h in heads)
    if movement in ("position", "height"):
        return any(sentence.startswith(f"nothing fixes the {movement} of {listed(most)}:") for most in (MOST, 5))
    if movement == "shift":
        return bool(
            re.match(rf"nothing fixes the shift along azimuth \d+ degrees \(or back\) of {listed(MOST)}:", sentence)
        )
    return sentence.startswith(f"{names[0]} ") and movement in sentence


def told(sheet: Sheet) -> list[str]:
    """The sentences of a refusal, or the warnings of a solution that is fixed only just."""
    with tempfile.TemporaryDirectory() as folder:
        job = adjust.read(sheet.write(Path(folder)))
        try:
            return warnings(adjust.solve(job))
        except Unsolvable as refused:
            return refused.sentences
        except BrasscapError as failed:
            return failed.sentences


def judged(sheet: Sheet) -> tuple[bool, list[str]]:
    """Whether every wanted movement is told once, and nothing else; the sentences."""
    sentences = told(sheet)
    rest = [s for s in sentences if not s.startswith("islands ")]
    for one in sheet.wanted:
        found = next((s for s in rest if matches(s, one, sheet)), None)
        if found is None:
            return False, sentences
        rest.remove(found)
    return not rest and not any(FORBIDDEN.search(s) for s in sentences), sentences


def study(count: int, first: int) -> int:
    """Print what went wrong and a table; the number of failures."""
    good, bad = Counter[str](), Counter[str]()
    for seed in range(first, first + count):
        name, sheet = defective(seed)
        right, sentences = judged(sheet)
        (good if right else bad)[name] += 1
        if not right:
            print(f"seed {seed} {name}: wanted {sheet.wanted}, known {sheet.known}")
            for one in sentences:
                print("   ", one)
    for make in SORTS:
        print(f"{make.__name__:28} {good[make.__name__]:4} named, {bad[make.__name__]:3} not")
    print(f"{sum(good.values())} of {count} named rightly")
    return sum(bad.values())


if __name__ == "__main__":
    given = [int(a) for a in sys.argv[1:]]
    sys.exit(1 if study(given[0] if given else 200, given[1] if len(given) > 1 else 0) else 0)
