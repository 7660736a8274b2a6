"""Several blunders at once in braced networks: how often all are found, and how often clean networks stay quiet.

    python -m tests.judge.blunders_study [COUNT] [one two three clean] [any]

makes COUNT seeded networks for each number of blunders (8 to 40 stations; distances, directions, angles, levelled
lines; held, weighted, free), adds blunders of 3 to 10 (one alone: 2 to 10) smallest detectable sizes to readings chosen
at random among those of which at least a fifth of an error shows (``WELL``; with ``any`` among all that are checked),
and looks at the suspects. ``found``: the suspects at the job's level are exactly these readings; ``found, and more``:
these, which are blamed first, and others. ``in the groups``: all are, or stand among what their suspect cannot be told
from.
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
from adjust.book.job import Job
from adjust.errors import BrasscapError
from adjust.judge.assess import Judgement
from adjust.judge.separable import confusable
from tests.networks import random_job

SEED = 20261206
KIND_SETS = (
    ("distances", "directions"), ("distances", "angles"), ("distances", "directions", "angles"),
    ("levelled_lengths",), ("distances", "directions", "levelled_lengths"),
)  # fmt: skip
CONTROL = ("held", "weighted", "free")
WELL, ANY = 0.2, 1e-3
SIZES = {1: (2.0, 10.0), 2: (3.0, 10.0), 3: (3.0, 10.0)}


def clean(number: int, folder: Path) -> Job:
    """The job of a number, its readings with their stated errors only."""
    rng = np.random.default_rng([SEED, number])
    n = int(rng.integers(8, 41))
    random_job(rng, folder, n, KIND_SETS[number % len(KIND_SETS)], CONTROL[number // len(KIND_SETS) % 3])
    return adjust.read(folder)


def planted(job: Job, number: int, blunders: int, well: float = WELL) -> tuple[Job, list[int]]:
    """The job with blunders, and their rows."""
    judgement = adjust.assess(adjust.solve(job))
    share = judgement.reliability.checked_share
    rows = job.network.rows
    measured = np.array([job.network.blocks[b].kind != "control" for b in rows.block])
    rng = np.random.default_rng([SEED, number, blunders])
    if len(share) != len(rows):  # a free datum sets weighted control aside
        return job, []
    chosen = rng.choice(np.flatnonzero(measured & (share >= well)), blunders, replace=False)
    size = rng.uniform(*SIZES[blunders], blunders) * rng.choice([-1, 1], blunders)
    return shifted(job, chosen, size * judgement.smallest_detectable[chosen]), chosen.tolist()


def shifted(job: Job, rows: np.ndarray, amounts: np.ndarray) -> Job:
    """The job with amounts added to the readings of scalar rows."""
    at, blocks = job.network.rows, list(job.network.blocks)
    for r, amount in zip(rows.tolist(), amounts.tolist(), strict=True):
        b, i, p = int(at.block[r]), int(at.row[r]), int(at.part[r])
        values = blocks[b].values.copy()
        values[i, p] += amount
        blocks[b] = replace(blocks[b], values=values)
    return replace(job, network=replace(job.network, blocks=tuple(blocks)))


def outcome(number: int, blunders: int, folder: Path, well: float = WELL) -> str:
    """What the judge says of the job of a number."""
    job, rows = clean(number, folder), []
    if blunders:
        job, rows = planted(job, number, blunders, well)
    try:
        judgement = adjust.assess(adjust.solve(job))
    except BrasscapError as refusal:
        return f"refused: {refusal.sentences[0][:60]}"
    return named(judgement, rows)


def named(judgement: Judgement, rows: list[int]) -> str:
    """The verdict in a word."""
    found = list(judgement.blunders.rows)
    if set(found) == set(rows):
        return "found" if rows else "quiet"
    groups = {r: {r, *confusable(judgement.blunders, r)} for r in found}
    if rows and all(any(r in groups[f] for f in found) for r in rows) and len(found) <= len(rows):
        return "in the groups"
    if judgement.blunders.too_many:
        return "too many"
    if set(rows) < set(found):
        first = {s.row for s in judgement.suspects[: len(rows)]} == set(rows)
        return ("found, and more" if first else "found, others first") if rows else "false alarm"
    return "some found, none wrong" if set(found) < set(rows) else "another named"


def main() -> None:
    """Run the study and print its tables."""
    count = next((int(a) for a in sys.argv[1:] if a.isdigit()), 200)
    wanted = [w for w in ("one", "two", "three", "clean") if w in sys.argv] or ["one", "two", "three", "clean"]
    with tempfile.TemporaryDirectory() as place:
        for blunders, word in enumerate(("clean", "one", "two", "three")):
            if word not in wanted:
                continue
            tally: Counter[str] = Counter()
            for number in range(count):
                folder = Path(place) / str(number)
                what = outcome(number, blunders, folder, ANY if "any" in sys.argv else WELL)
                shutil.rmtree(folder, ignore_errors=True)
                tally[what] += 1
                if what not in ("found", "quiet", "in the groups"):
                    print(f"  {word} {number} {KIND_SETS[number % len(KIND_SETS)]}: {what}", flush=True)
            print(f"{word}: {count} networks, seed {SEED}: "
                  + ", ".join(f"{n} {what}" for what, n in tally.most_common()), flush=True)  # fmt: skip


if __name__ == "__main__":
    main()
