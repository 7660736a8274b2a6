"""Study: weak networks with one slip in the text of the book that are refused, and whether reading and slip are named.

    python -m tests.judge.refusing_study [COUNT] [some]

Networks of ``tests.networks`` (6 to 12 stations, 20 to 60 % of the readings kept, no starting coordinates) get one
gross slip in the text of a random row. Of those that do not settle or have no start are counted: the wrong reading
named, and its likeliest slip right, silent or wrong. With ``some`` the error is any angle or 20 to 2,000 m: a slip
named there is an accident.
"""

from __future__ import annotations

import sys
import tempfile
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError, InputError, NotConverged, Unsolvable
from adjust.network import NEW
from tests.graph.starts_study import _thinned
from tests.judge.slip_networks import dms, radians
from tests.judge.slipped import SORTS, Sort, booked_job, plant
from tests.judge.unsettled_study import Wrong

SEED = 20261222
MIXES = (("distances", "directions"), ("distances", "angles"), ("angles", "azimuths", "distances"),
         ("directions", "distances", "angles"))  # fmt: skip
GROSS = {"digits-swapped": "two digits were swapped", "degree-slip": "the degrees were misread",
         "other-way": "turned the other way round", "half-circle": "half a circle off",
         "feet-for-metres": "booked in feet"}  # fmt: skip
"""Slips, and what their sentences say."""


def any_amount(rng: np.random.Generator, column: str, text: str) -> str:
    """The text of a reading that is off by an arbitrary amount."""
    if column == "distance":
        return f"{float(text) + float(rng.uniform(20, 2000)):.4f}"
    return dms((radians(text) + float(rng.uniform(0.3, 2 * np.pi - 0.3))) % (2 * np.pi))


SOME = Sort("some amount", ("distance", "direction", "angle"), any_amount, ())


def refused_by(number: int, folder: Path, some: bool = False) -> Wrong | None:
    """The network of a number with its slip; None where none can be planted, or its reading was thinned out."""
    rng = np.random.default_rng([SEED, number])
    sort = SOME if some else next(s for s in SORTS if s.slip == list(GROSS)[number % len(GROSS)])
    n, mix = int(rng.integers(6, 13)), MIXES[int(rng.integers(len(MIXES)))]
    job = booked_job(rng, folder / str(number), n, mix, str(rng.choice(["held", "free"])))
    made = plant(rng, job, sort)
    if made is None:
        return None
    file, line = made.file, made.row + 2
    try:
        read = adjust.read(job)
    except InputError:
        return None
    stations = read.network.stations
    start = np.where(stations.role == NEW, np.nan, stations.start)
    network = _thinned(
        replace(read.network, stations=replace(stations, start=start)), rng, float(rng.uniform(0.2, 0.6))
    )
    names = {block.name(i) for block in network.blocks for i in range(len(block))}
    return Wrong(replace(read, network=network), (f"{file}:{line}",), sort.slip) if f"{file}:{line}" in names else None


def outcome(number: int, folder: Path, some: bool = False) -> str | None:
    """Verdict on a network; None where it is not refused."""
    wrong = refused_by(number, folder, some)
    if wrong is None:
        return None
    try:
        adjust.solve(wrong.job)
    except (NotConverged, Unsolvable) as refusal:
        kind = "not settled" if isinstance(refusal, NotConverged) else "no start"
        about = [s for s in refusal.sentences if f"{wrong.names[0]} (" in s]
        if not about:
            return f"{kind}, reading not named" + (
                ", a slip elsewhere" if "Likeliest" in str(refusal.sentences) else ""
            )
        _, said, slip = about[0].partition("Likeliest slip")
        if not said:
            return f"{kind}, reading named, no slip"
        return f"{kind}, reading named, " + (
            f"slip right: {wrong.what}" if GROSS.get(wrong.what, "none") in slip else "slip wrong")  # fmt: skip
    except BrasscapError:
        return None
    except ZeroDivisionError:
        return "an internal error while a start was looked for"
    return None


def main() -> None:
    """Run the study and print its table."""
    tally: Counter[str] = Counter()
    count, some = next((int(a) for a in sys.argv[1:] if a.isdigit()), 300), "some" in sys.argv
    for number in range(count):
        with tempfile.TemporaryDirectory() as folder:
            what = outcome(number, Path(folder), some)
        tally[what or "not refused, or nothing planted"] += 1
    print(f"{count} networks, seed {SEED}:")
    for what, n in tally.most_common():
        print(f"  {n} {what}")


if __name__ == "__main__":
    main()
