"""One cause for many readings: how often a wrong constant, a table in feet or a wrong height is named as one.

    python -m tests.judge.group_causes_study [COUNT] [constant] [feet] [height] [target] [occupied] [sighted]

makes COUNT seeded networks a cause: the constant of one reflector wrong by 17.5, 30 or 34.4 mm in ten distances; one of
two tables of distances booked in feet and read as metres; the height of the instrument at one station wrong by 0.1 m in
all its sights; the height of the target at one station so in all sights to it; all readings of one station booked under
the name of another; both readings of one sight booked to another target. ``named``: exactly this effect is significant
and no reading is blamed besides.
"""

from __future__ import annotations

import contextlib
import shutil
import sys
import tempfile
from collections import Counter
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError
from tests.judge.slipped import Sheet, booked_job
from tests.solver.space import random_space, write

SEED = 20261208
CONTROL = ("held", "weighted", "free")
CONSTANTS_M = (0.0175, 0.030, 0.0344)


def constant(rng: np.random.Generator, number: int, folder: Path) -> tuple[Path, tuple[str, str]]:
    """Ten distances to a reflector of their own, all wrong by a constant."""
    job = booked_job(rng, folder, int(rng.integers(8, 31)), ("distances", "directions"), CONTROL[number % 3])
    sheet = Sheet.of(job / "distances.csv")
    wrong = set(rng.choice(len(sheet.rows), 10, replace=False).tolist())
    off = float(rng.choice(CONSTANTS_M)) * int(rng.choice([-1, 1]))
    sheet.header.append("reflector")
    for i, row in enumerate(sheet.rows):
        row.append("small" if i in wrong else "round")
        if i in wrong:
            at = sheet.header.index("distance")
            row[at] = f"{float(row[at]) + off:.4f}"
    sheet.put(0, "reflector", sheet.get(0, "reflector"))
    text = (job / "job.toml").read_text()
    text = text.replace('file = "distances.csv"', 'file = "distances.csv"\napplied = ["reflector"]')
    (job / "job.toml").write_text(
        text + '[reflectors.round]\nconstant = "0 mm"\n[reflectors.small]\nconstant = "0 mm"\n'
    )
    return job, ("constant", "reflector small")


def feet(rng: np.random.Generator, number: int, folder: Path) -> tuple[Path, tuple[str, str]]:
    """A third of the distances in a table of their own, in feet without a word of it."""
    job = booked_job(rng, folder, int(rng.integers(8, 31)), ("distances", "directions"), CONTROL[number % 3])
    sheet = Sheet.of(job / "distances.csv")
    third = len(sheet.rows) // 3
    other = Sheet(job / "more_distances.csv", list(sheet.header), sheet.rows[:third])
    sheet.rows = sheet.rows[third:]
    at = sheet.header.index("distance")
    for row in other.rows:
        row[at] = f"{float(row[at]) / 0.3048:.3f}"
    for one in (sheet, other):
        one.put(0, "distance", one.get(0, "distance"))
    text = (job / "job.toml").read_text()
    (job / "job.toml").write_text(
        text + '[[book]]\nfile = "more_distances.csv"\nkind = "distances"\ninstrument = "station"\n'
    )
    return job, ("unit", "more_distances.csv")


def height(rng: np.random.Generator, number: int, folder: Path) -> tuple[Path, tuple[str, str]]:
    """The instrument's height at one station wrong by 0.1 m in every sight from it."""
    return _one_height(rng, folder, "instrument", 0)


def target(rng: np.random.Generator, number: int, folder: Path) -> tuple[Path, tuple[str, str]]:
    """The target's height at one station wrong by 0.1 m in every sight to it."""
    return _one_height(rng, folder, "target", 1)


def _one_height(rng: np.random.Generator, folder: Path, what: str, end: int) -> tuple[Path, tuple[str, str]]:
    job = write(random_space(rng, n=int(rng.integers(6, 13))), folder)
    station = str(rng.choice([row[end] for row in Sheet.of(job / "zenith_angle.csv").rows]))
    _raise(job, f"{what}_height", end, station, 0.1 * int(rng.choice([-1, 1])))
    return job, (f"{what} height", station)


def _raise(job: Path, column: str, end: int, station: str, off: float) -> None:
    """Add to the heights of instrument or target of all sights from or to a station."""
    for name in ("zenith_angle", "slope", "ground", "ground-from"):
        if (job / f"{name}.csv").exists():
            sheet = Sheet.of(job / f"{name}.csv")
            at = sheet.header.index(column)
            for row in sheet.rows:
                if row[end] == station:
                    row[at] = repr(float(row[at]) + off)
            sheet.put(0, column, sheet.get(0, column))


def occupied(rng: np.random.Generator, number: int, folder: Path) -> tuple[Path, tuple[str, str]]:
    """All readings of one station booked under the name of another."""
    kinds = (("distances", "directions"), ("distances", "angles"))[number % 2]
    job = booked_job(rng, folder, int(rng.integers(8, 31)), kinds, CONTROL[number % 3])
    sheets = {name: Sheet.of(job / f"{name}.csv") for name in kinds}
    order = {at: k for k, at in enumerate(dict.fromkeys(row[0] for row in sheets[kinds[1]].rows))}
    sheets["distances"].rows.sort(key=lambda row: order.get(row[0], len(order)))  # as the evening's book has them
    standing = {name: "at" if "at" in sheet.header else "from" for name, sheet in sheets.items()}
    rows = [(name, i) for name, sheet in sheets.items() for i in range(len(sheet.rows))]
    names = sorted({sheets[name].get(i, standing[name]) for name, i in rows})
    true = str(rng.choice(names))
    mine = [(name, i) for name, i in rows if sheets[name].get(i, standing[name]) == true]
    ends = {cell for name, i in mine for cell in sheets[name].rows[i]}
    others = [n for n in names if n not in ends]
    if not others or len(mine) < 3:
        raise Unfit
    wrong = str(rng.choice(others))
    for name, i in mine:
        sheets[name].put(i, standing[name], wrong)
    return job, ("station occupied", wrong)


def sighted(rng: np.random.Generator, number: int, folder: Path) -> tuple[Path, tuple[str, str]]:
    """Direction and distance of one sight booked to another target."""
    job = booked_job(rng, folder, int(rng.integers(8, 31)), ("distances", "directions"), CONTROL[number % 3])
    pointings, lengths = Sheet.of(job / "directions.csv"), Sheet.of(job / "distances.csv")
    ends = ("at" if "at" in lengths.header else "from", "to")
    sights = {tuple(lengths.get(i, c) for c in ends): i for i in range(len(lengths.rows))}
    both = [i for i in range(len(pointings.rows)) if (pointings.get(i, "at"), pointings.get(i, "to")) in sights]
    if not both:
        raise Unfit
    i = int(rng.choice(both))
    at, to = pointings.get(i, "at"), pointings.get(i, "to")
    seen = {pointings.get(k, "to") for k in range(len(pointings.rows)) if pointings.get(k, "at") == at} | {at}
    others = sorted({row[pointings.header.index("to")] for row in pointings.rows} - seen)
    if not others:
        raise Unfit
    wrong = str(rng.choice(others))
    lengths.put(sights[at, to], "to", wrong)
    pointings.put(i, "to", wrong)
    return job, ("station sighted", f"{at} to {wrong}")


class Unfit(Exception):
    """The network of a number does not allow the slip."""


SORTS = {"constant": constant, "feet": feet, "height": height, "target": target, "occupied": occupied,
         "sighted": sighted}  # fmt: skip


def outcome(what: str, number: int, folder: Path) -> str:
    """Verdict on the network of a number."""
    rng = np.random.default_rng([SEED, number, len(what)])
    job, wanted = SORTS[what](rng, number, folder)
    try:
        judged = adjust.assess(adjust.solve(adjust.read(job)))
    except BrasscapError as refusal:
        first = refusal.sentences[0]
        named = "Likeliest slip" in first and all(name in first for name in wanted[1].split(" to "))
        return "named, as it cannot be adjusted" if named else f"refused: {first[:70]}"
    found = [(e.what, e.of) for e in judged.systematic if e.verdict == "significant"]
    blamed = [s for s in judged.suspects if s.at_job_level]
    if wanted not in found:
        return f"not named, {len(blamed)} readings blamed" + (f", {found[0]} named" if found else "")
    return "named" if len(found) == 1 and not blamed else "named, and more"


def main() -> None:
    """Run the study and print its table."""
    count = next((int(a) for a in sys.argv[1:] if a.isdigit()), 100)
    with tempfile.TemporaryDirectory() as place:
        for what in [w for w in SORTS if w in sys.argv] or SORTS:
            tally: Counter[str] = Counter()
            number = 0
            while tally.total() < count:
                folder = Path(place) / f"{what}-{number}"
                with contextlib.suppress(Unfit):
                    tally[outcome(what, number, folder)] += 1
                shutil.rmtree(folder, ignore_errors=True)
                number += 1
            print(f"{what}: {count}: " + ", ".join(f"{n} {w}" for w, n in tally.most_common()), flush=True)


if __name__ == "__main__":
    main()
