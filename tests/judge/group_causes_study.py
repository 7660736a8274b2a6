"""One cause for many readings: how often a wrong constant, a table in feet or a wrong height is named as one.

    python -m tests.judge.group_causes_study [COUNT] [constant] [feet] [height]

makes COUNT seeded networks a cause: the constant of one reflector wrong by 17.5, 30 or 34.4 mm in ten distances; one of
two tables of distances booked in feet and read as metres; the height of the instrument at one station wrong by 0.1 m in
all its sights. ``named``: exactly this effect is significant and no reading is blamed besides.
"""

from __future__ import annotations

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
    return job, ("scale", "more_distances.csv")


def height(rng: np.random.Generator, number: int, folder: Path) -> tuple[Path, tuple[str, str]]:
    """The instrument's height at one station wrong by 0.1 m in every sight from it."""
    job = write(random_space(rng, n=int(rng.integers(6, 13))), folder)
    at = str(rng.choice([row[0] for row in Sheet.of(job / "zenith_angle.csv").rows]))
    off = 0.1 * int(rng.choice([-1, 1]))
    for name in ("zenith_angle", "slope", "ground", "ground-from"):
        if (job / f"{name}.csv").exists():
            sheet = Sheet.of(job / f"{name}.csv")
            column = sheet.header.index("instrument_height")
            for row in sheet.rows:
                if row[0] == at:
                    row[column] = repr(float(row[column]) + off)
            sheet.put(0, "instrument_height", sheet.get(0, "instrument_height"))
    return job, ("instrument height", at)


SORTS = {"constant": constant, "feet": feet, "height": height}


def outcome(what: str, number: int, folder: Path) -> str:
    """Verdict on the network of a number."""
    rng = np.random.default_rng([SEED, number, len(what)])
    job, wanted = SORTS[what](rng, number, folder)
    try:
        judged = adjust.assess(adjust.solve(adjust.read(job)))
    except BrasscapError as refusal:
        return f"refused: {refusal.sentences[0][:70]}"
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
            for number in range(count):
                folder = Path(place) / f"{what}-{number}"
                tally[outcome(what, number, folder)] += 1
                shutil.rmtree(folder, ignore_errors=True)
            print(f"{what}: {count}: " + ", ".join(f"{n} {w}" for w, n in tally.most_common()), flush=True)


if __name__ == "__main__":
    main()
