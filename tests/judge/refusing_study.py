"""Study: weak networks with one slip in the text of the book that are refused, and whether reading and slip are named.

    python -m tests.judge.refusing_study [COUNT]

Networks of ``tests.networks`` (6 to 12 stations, 20 to 60 % of the readings kept, no starting coordinates) get one
gross slip in the text of a random row. Of those that do not settle or have no start are counted: the wrong reading
named, and its likeliest slip right, silent or wrong.
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
from tests.judge.slipped import SORTS, booked_job, plant, tables
from tests.judge.unsettled_study import Wrong

SEED = 20261222
MIXES = (("distances", "directions"), ("distances", "angles"), ("angles", "azimuths", "distances"),
         ("directions", "distances", "angles"))  # fmt: skip
GROSS = {"digits-swapped": "two digits were swapped", "degree-slip": "the degrees were misread",
         "other-way": "turned the other way round", "half-circle": "half a circle off",
         "feet-for-metres": "booked in feet"}  # fmt: skip
"""Slips, and what their sentences say."""


def refused_by(number: int, folder: Path) -> Wrong | None:
    """The network of a number with its slip; None where none can be planted, or its reading was thinned out."""
    rng = np.random.default_rng([SEED, number])
    sort = next(s for s in SORTS if s.slip == list(GROSS)[number % len(GROSS)])
    n, mix = int(rng.integers(6, 13)), MIXES[int(rng.integers(len(MIXES)))]
    job = booked_job(rng, folder / str(number), n, mix, str(rng.choice(["held", "free"])))
    here = replace(sort, columns=tuple(c for c in sort.columns if tables(job, c)))
    places = plant(rng, job, here) if here.columns else None
    if not places:
        return None
    ((file, line),) = places
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


def outcome(number: int, folder: Path) -> str | None:
    """Verdict on a network; None where it is not refused."""
    wrong = refused_by(number, folder)
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
        return f"{kind}, reading named, " + (f"slip right: {wrong.what}" if GROSS[wrong.what] in slip else "slip wrong")
    except BrasscapError:
        return None
    return None


def main() -> None:
    """Run the study and print its table."""
    tally: Counter[str] = Counter()
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 300
    for number in range(count):
        with tempfile.TemporaryDirectory() as folder:
            what = outcome(number, Path(folder))
        tally[what or "not refused, or nothing planted"] += 1
    print(f"{count} networks, seed {SEED}:")
    for what, n in tally.most_common():
        print(f"  {n} {what}")


if __name__ == "__main__":
    main()
