"""How often the likely cause of a blunder is named, and how often one is offered where there is none.

    python -m tests.judge.causes_study [COUNT] [SLIP ...]

makes COUNT networks a slip (braced plane networks, level nets, mixed ones; 8 to 30 stations, in space 6 to 12), plants
the slip in a random row where it is at least twice the smallest detectable size, adjusts and looks at the first suspect
and its causes.
"some amount" is an error uniform between 2 and 50 smallest detectable sizes: a cause offered there is an accident.
"""

from __future__ import annotations

import shutil
import sys
import tempfile
from collections import Counter
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError, InputError
from adjust.judge.causes import causes
from tests.judge.blunders_study import shifted
from tests.judge.slipped import IN_SPACE, SORTS, Sort, booked_job, plant
from tests.solver.space import random_space, write

SEED = 20261207
KIND_SETS = (
    ("distances", "directions"), ("distances", "angles"), ("distances", "directions", "angles"),
    ("levelled_lengths",), ("distances", "directions", "levelled_lengths"),
)  # fmt: skip
CONTROL = ("held", "weighted", "free")
SOME = Sort("some amount", ("distance", "direction", "angle", "rise"), None)
LEAST = 2.0


def outcome(sort: Sort, number: int, folder: Path) -> tuple[str, float, bool] | None:
    """Verdict, support of the first cause, and whether it is right; None where the slip cannot be planted there."""
    rng = np.random.default_rng([SEED, number, len(sort.slip)])
    kinds = KIND_SETS[number % len(KIND_SETS)]
    if sort.slip in IN_SPACE:
        mixture = "ground" if sort.slip == "slope-for-horizontal" else "rich"
        job = write(random_space(rng, n=int(rng.integers(6, 13)), mixture=mixture), folder)
    else:
        job = booked_job(rng, folder, int(rng.integers(8, 31)), kinds, CONTROL[number // len(KIND_SETS) % 3])
    before = adjust.assess(adjust.solve(adjust.read(job)))
    at = {before.ids[r]: r for r in range(len(before.ids))}
    if sort is SOME:
        rows = np.flatnonzero(before.reliability.tested & (before.reliability.checked_share > 0.2))
        block = before.solution.network.rows.block
        rows = rows[[before.solution.network.blocks[block[r]].kind != "control" for r in rows]]
        if len(before.ids) != len(before.solution.job.network.rows):
            return None
        r = int(rng.choice(rows))
        size = float(rng.uniform(2, 50) * rng.choice([-1, 1])) * before.smallest_detectable[r]
        wrong, changed = [before.ids[r]], shifted(before.solution.job, np.array([r]), np.array([size]))
    else:
        places = plant(rng, folder, sort)
        if places is None:
            return None
        wrong = [f"{file}:{line}" for file, line in places]
        try:
            changed = adjust.read(job)
        except InputError:  # the reader has caught it: 85 minutes
            return None
    if any(w not in at or not np.isfinite(before.smallest_detectable[at[w]]) for w in wrong):
        return None
    try:
        judged = adjust.assess(adjust.solve(changed))
    except BrasscapError as refusal:
        named = any(w in s for w in wrong for s in refusal.sentences)
        return ("refused, naming it" if named else "refused"), 0.0, False
    first_row = at[wrong[0]]
    moved = abs(judged.solution.design.observed[first_row] - before.solution.design.observed[first_row])
    size = None if sort.slip in ("wrong-station", *IN_SPACE[:1]) else moved
    if size is not None and size < LEAST * before.smallest_detectable[at[wrong[0]]]:
        return None
    if not judged.suspects:
        return ("too small" if size is None else "no suspect"), 0.0, False
    first = judged.suspects[0]
    if judged.ids[first.row] not in wrong:
        group = [judged.ids[r] for r, _, _ in judged.confusable(first)]
        return ("in the group" if any(w in group for w in wrong) else "another reading"), 0.0, False
    found = causes(judged, first)
    if not found:
        return "silent", 0.0, False
    right = found[0].slip == sort.slip
    return ("right" if right else "right among the listed" if any(c.slip == sort.slip for c in found)
            else f"wrong: {found[0].slip}"), found[0].support, right  # fmt: skip


def study(sort: Sort, count: int, place: Path) -> list[tuple[str, float, bool]]:
    """COUNT outcomes."""
    out: list[tuple[str, float, bool]] = []
    number = 0
    while len(out) < count and number < 20 * count:
        folder = place / f"{sort.slip}-{number}"
        one = outcome(sort, number, folder)
        shutil.rmtree(folder, ignore_errors=True)
        out += [one] if one else []
        number += 1
    return out


def main() -> None:
    """Run the study and print its table."""
    count = next((int(a) for a in sys.argv[1:] if a.isdigit()), 200)
    sorts = [s for s in (*SORTS, SOME) if s.slip in sys.argv] or [*SORTS, SOME]
    everything = []
    with tempfile.TemporaryDirectory() as place:
        for sort in sorts:
            found = study(sort, count, Path(place))
            tally = Counter(what for what, _, _ in found)
            print(f"{sort.slip}: {len(found)}: " + ", ".join(f"{n} {w}" for w, n in tally.most_common()), flush=True)
            everything += [(support, right) for what, support, right in found if support > 0]
    for low in (0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 0.99):
        high = {0.5: 0.6, 0.6: 0.7, 0.7: 0.8, 0.8: 0.9, 0.9: 0.95, 0.95: 0.99, 0.99: 1.01}[low]
        here = [right for support, right in everything if low <= support < high]
        if here:
            print(f"support {low:.2f} to {min(high, 1):.2f}: {len(here)} causes, {np.mean(here):.3f} right")


if __name__ == "__main__":
    main()
