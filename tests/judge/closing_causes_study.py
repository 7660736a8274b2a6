"""How often the likely slip of what does not close is named, and how often one is offered for an arbitrary amount.

    python -m tests.judge.closing_causes_study [COUNT] [WHAT ...]

makes COUNT jobs a slip and sort of closure (WHAT: traverse, levels, triangles), plants the slip in the text of a random
row and looks at the closure it goes into whose misclosure is at least twice what is allowed. Traverses are those of
tests.judge.closing (loop and link, by sheet and by sets, 3 to 12 stations, some without a closing angle), with readings
as precise as they say, centring included; level nets of 4 to 14 stations, braced networks of 6 to 12 with their
triangles. "some amount" is an error that makes 2 to 50 times what is allowed. "nothing" is no slip at all.
"""

from __future__ import annotations

import shutil
import sys
import tempfile
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError
from adjust.judge.closures import NOT_MET, Closure, closures
from tests.judge import closing
from tests.judge.closing import CENTRING, SHAPES, TARGET, Made, computed, level_net, random_traverse
from tests.judge.slip_networks import dms, radians
from tests.judge.slipped import SORTS, Sheet, Sort, booked_job, cells, plant

SEED = 20261221
LEAST = 2.0
SOME, NOTHING = Sort("some amount", ("distance", "direction", "angle", "rise"), None, ()), Sort("nothing", (), None, ())
OF_TEXT = ("digits-swapped", "degree-slip", "minute-slip", "round-step", "sign", "other-way", "half-circle",
           "feet-for-metres")  # fmt: skip
ASKED = {
    "traverse": ("digits-swapped", "degree-slip", "minute-slip", "round-step", "other-way", "half-circle",
                 "feet-for-metres"),
    "levels": ("digits-swapped", "round-step", "sign"),
    "triangles": ("digits-swapped", "degree-slip", "minute-slip", "other-way", "half-circle"),
}  # fmt: skip


def traverse(rng: np.random.Generator, folder: Path) -> Path:
    """A traverse whose readings are as precise as they say, booked as a book is."""
    made = random_traverse(rng, SHAPES[int(rng.integers(len(SHAPES)))], folder)
    readings = []
    vectors: dict[tuple[str, int, int], complex] = {}
    for one in made.readings:
        ends = []
        for place, station in enumerate(one.ends):
            key = (one.kind, one.ends[0], -1 if place == 0 else station)
            size = CENTRING if place == 0 else TARGET
            shift = vectors.setdefault(key, size * complex(rng.normal(), rng.normal()))
            ends.append(made.places[station] + shift)
        value = computed(one.kind, tuple(ends)) + float(rng.normal(0, one.sd))
        if one.kind == "direction":
            value -= 0.37 * one.ends[0]
        readings.append(replace(one, value=value if one.kind == "distance" else value % (2 * np.pi)))
    shutil.rmtree(folder)
    closing._write(Made(made.shape, made.places, readings, made.walk, made.back, made.fore, made.bearing), folder)
    text = (folder / "job.toml").read_text().replace('angle = "deg"', 'angle = "dms"')
    (folder / "job.toml").write_text(text)
    for name, column in (("directions", "direction"), ("angles", "angle"), ("azimuths", "azimuth")):
        if (folder / f"{name}.csv").exists():
            sheet = Sheet.of(folder / f"{name}.csv")
            at = sheet.header.index(column)
            for row in sheet.rows:
                row[at] = dms(np.radians(float(row[at])))
            sheet.put(0, column, sheet.get(0, column))
    return folder


def levels(rng: np.random.Generator, folder: Path) -> Path:
    """A level net with rises to a tenth of a millimetre."""
    level_net(rng, folder, int(rng.integers(4, 15)), known=int(rng.integers(1, 3)))
    sheet = Sheet.of(folder / "levelled.csv")
    at = sheet.header.index("rise")
    for row in sheet.rows:
        row[at] = f"{float(row[at]):.4f}"
    sheet.put(0, "rise", sheet.get(0, "rise"))
    return folder


def triangles(rng: np.random.Generator, folder: Path) -> Path:
    """A braced network by directions or angles."""
    kinds = ("distances", str(rng.choice(["directions", "angles"])))
    return booked_job(rng, folder, int(rng.integers(6, 13)), kinds, "held")


MAKERS = {"traverse": traverse, "levels": levels, "triangles": triangles}


def some_amount(rng: np.random.Generator, folder: Path, found: tuple[Closure, ...]) -> tuple[str, int] | None:
    """An arbitrary error in a random row, by what the closures allow."""
    choices = cells(folder, SOME.columns)
    sheet, column = choices[int(rng.integers(len(choices)))]
    i = int(rng.integers(len(sheet.rows)))
    key = {"distance": "linear", "rise": "height"}.get(column, "angle")
    allowed = [one.allowable[key] for one in found if np.isfinite(one.allowable.get(key, np.inf))]
    if not allowed:
        return None
    amount = float(rng.uniform(2, 50) * rng.choice([-1, 1]) * np.median(allowed))
    text = sheet.get(i, column)
    sheet.put(i, column, f"{float(text) + amount:.4f}" if key != "angle" else dms(radians(text) + amount))
    return sheet.path.name, i + 2


def fails(one: Closure) -> bool:
    """Whether a misclosure is at least LEAST times what is allowed."""
    return any(abs(one.misclosure[key]) >= LEAST * most for key, most in one.allowable.items() if key in one.misclosure)


def outcome(what: str, sort: Sort, number: int, folder: Path) -> tuple[str, float, bool] | None:
    """Verdict, support of the first cause, and whether it is right; None where nothing was planted or nothing fails."""
    rng = np.random.default_rng([SEED, number, len(sort.slip), len(what)])
    job = MAKERS[what](rng, folder)
    if sort is NOTHING:
        found = closures(adjust.read(job))
        return ("a cause" if any(one.likely for one in found) else "silent"), 0.0, False
    if sort is SOME:
        place = some_amount(rng, folder, closures(adjust.read(job)))
    else:
        column = ("rise",) if what == "levels" else ("direction", "angle") if what == "triangles" else sort.columns
        made = plant(rng, folder, replace(sort, columns=tuple(c for c in sort.columns if c in column)))
        place = made and (made.file, made.row + 2)
    if not place:
        return None
    file, line = place
    try:
        read = adjust.read(job)
        found = closures(read)
    except BrasscapError:  # the reader has caught it
        return None
    rows = read.network.rows
    names = [read.network.blocks[b].name(i) for b, i in zip(rows.block.tolist(), rows.row.tolist(), strict=True)]
    mine = [one for one in found if one.verdict == NOT_MET and fails(one)
            and any(names[r] == f"{file}:{line}" for r in one.rows)]  # fmt: skip
    if not mine:
        return None
    one = mine[int(np.argmax([max(c.support for c in one.likely) if one.likely else 0.0 for one in mine]))]
    if not one.likely:
        return "silent", 0.0, False
    rights = [cause.slip == sort.slip and cause.place == f"{file}:{line}" for cause in one.likely]
    if rights[0]:
        return "right", one.likely[0].support, True
    support = one.likely[0].support
    if any(rights):
        return "right among the listed", support, False
    if one.likely[0].place == f"{file}:{line}":
        return f"right reading, another slip: {one.likely[0].slip}", support, False
    return f"wrong: {one.likely[0].slip}", support, False


def study(what: str, sort: Sort, count: int, place: Path) -> list[tuple[str, float, bool]]:
    """COUNT outcomes."""
    out: list[tuple[str, float, bool]] = []
    number = 0
    while len(out) < count and number < 20 * count:
        folder = place / f"{what}-{sort.slip}-{number}"
        one = outcome(what, sort, number, folder)
        shutil.rmtree(folder, ignore_errors=True)
        out += [one] if one else []
        number += 1
    return out


def main() -> None:
    """Run the study and print its table."""
    count = next((int(a) for a in sys.argv[1:] if a.isdigit()), 100)
    asked = [w for w in MAKERS if w in sys.argv] or list(MAKERS)
    everything = []
    with tempfile.TemporaryDirectory() as place:
        for what in asked:
            sorts = [s for s in SORTS if s.slip in ASKED[what]]
            for sort in (*sorts, SOME, NOTHING):
                found = study(what, sort, count, Path(place))
                tally = Counter(verdict for verdict, _, _ in found)
                print(f"{what}, {sort.slip}: {len(found)}: "
                      + ", ".join(f"{n} {w}" for w, n in tally.most_common()), flush=True)  # fmt: skip
                everything += [(support, right) for _, support, right in found if support > 0]
    for low, high in ((0.2, 0.5), (0.5, 0.7), (0.7, 0.9), (0.9, 0.99), (0.99, 1.01)):
        here = [right for support, right in everything if low <= support < high]
        if here:
            print(f"support {low:.2f} to {min(high, 1):.2f}: {len(here)} first causes, {np.mean(here):.3f} right")


if __name__ == "__main__":
    main()
