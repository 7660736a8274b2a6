"""What can be said of a job before it is adjusted: what hangs together, what is unfixed, what nothing checks."""

from __future__ import annotations

from collections import Counter

import numpy as np

from adjust.book.job import Job
from adjust.errors import Unsolvable
from adjust.graph.parts import listed
from adjust.judge.reliability import reliability
from adjust.network import HELD, WEIGHTED
from adjust.solver.design import State
from adjust.solver.engine import SingularPattern
from adjust.solver.solution import Solution
from adjust.solver.solve import free_movements, prepare, solution_at
from adjust.solver.threads import one_thread


def check(job: Job) -> list[str]:
    """Sentences about a job, in the order in which a surveyor would ask.

    Raises Unsolvable where the readings leave something free.
    """
    with one_thread():
        ready = prepare(job)
        here = ready.iteration.at(State(ready.start.positions, ready.start.groups))
        try:
            cofactors = ready.iteration.cofactors(here)
        except SingularPattern as singular:
            raise Unsolvable(free_movements(ready, singular)) from None
        at_start = solution_at(job, ready, here, cofactors, 0)
        return [*_contents(job), *_parts(at_start), *_unchecked(at_start), *job.warnings]


def _contents(job: Job) -> list[str]:
    """How much of what was read."""
    counts = Counter[str]()
    for block in job.network.blocks:
        counts[block.kind.replace("_", " ")] += len(block)
    role = job.network.stations.role
    marks = int(((role == HELD) | (role == WEIGHTED)).any(axis=1).sum())
    kinds = ", ".join(f"{n} {kind}" for kind, n in counts.items())
    lines = [f"{len(job.network.stations)} stations, {marks} of them control; readings: {kinds}."]
    for aside, word in ((job.left_out, "left out"), (job.planned, "planned, not measured")):
        if aside:
            lines.append(
                f"{len(aside)} {word}: "
                + "; ".join(f"{a.observation}{f' ({a.reason})' if a.reason else ''}" for a in aside[:5])
            )
    return lines


def _parts(solution: Solution) -> list[str]:
    """Each part with its degrees of freedom and datum."""
    lines = []
    for part in solution.parts:
        assert part.datum is not None
        datum = "free datum" if part.datum.free else "datum from control"
        who = listed(solution.network, part.datum.part.stations)
        lines.append(f"{part.what}: {who}; {part.observations} readings, {part.unknowns} unknowns, "
                     f"{part.degrees_of_freedom} to spare; {datum}.")  # fmt: skip
    return lines


def _unchecked(solution: Solution) -> list[str]:
    """Readings that no other reading checks."""
    figures = reliability(solution)
    rows, blocks = solution.network.rows, solution.network.blocks
    bad = np.flatnonzero(~figures.tested & ~solution.design.held).tolist()
    if not bad:
        return ["Every reading is checked by others."]
    names = [
        f"{blocks[rows.block[r]].name(int(rows.row[r]))} ({blocks[rows.block[r]].kind.replace('_', ' ')})" for r in bad
    ]
    more = f" and {len(names) - 12} more" if len(names) > 12 else ""
    return [f"{len(names)} readings are checked by no other: {', '.join(names[:12])}{more}."]
