"""What can be said of a job before it is adjusted: what hangs together, what is unfixed, what nothing checks."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np

from adjust.book.job import Job
from adjust.errors import Unsolvable
from adjust.graph.parts import listed
from adjust.judge import unfixed
from adjust.judge.closures import closures
from adjust.judge.evening import book_lines, closure_lines, ledger_lines, not_closed
from adjust.judge.readings import Readings
from adjust.judge.reliability import Reliability, reliability
from adjust.judge.systematic import constants_twice, systematic
from adjust.judge.tolerances import declared_rule
from adjust.judge.unchecked import Unchecked
from adjust.network import HELD, WEIGHTED
from adjust.solver.defects import Freedom, Loose
from adjust.solver.settle import first_look
from adjust.solver.solution import Solution
from adjust.solver.solve import prepare, solution_at
from adjust.solver.threads import one_thread

MOST_SHOWN = 40
"""Unchecked readings told one by one."""


@dataclass(frozen=True)
class Look:
    """What was seen before an adjustment: sentences, and whether something does not close or meet a limit."""

    lines: list[str]
    failed: bool


def check(job: Job) -> list[str]:
    """Sentences about a job, in the order in which a surveyor would ask.

    Raises Unsolvable where the readings leave something free.
    """
    return look(job).lines


def look(job: Job) -> Look:
    """Look at a job: the book, what closes, what hangs together, what nothing checks.

    Raises Unsolvable where the readings leave something free; nothing is said of closures then.
    """
    found = closures(job, declared_rule(job))
    failed = not_closed(found) > 0 or any(one.verdict == "not met" for one in job.reductions)
    evening = [*book_lines(job), *ledger_lines(job), *closure_lines(job, found)]
    with one_thread():
        try:
            ready = prepare(job)
            here, cofactors = first_look(ready)
        except Loose as loose:
            raise Unsolvable(unfixed.words(loose)) from None
        at_start = solution_at(job, ready, here, cofactors, 0)
        figures = reliability(at_start)
        shared = systematic(at_start, figures, job.settings.tests)
        lines = [*_contents(job), *evening, *_parts(at_start), *_islands(at_start), *_unchecked(at_start, figures),
                 *unfixed.warnings(at_start), *constants_twice(shared), *job.warnings]  # fmt: skip
        return Look(lines, failed)


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


def _islands(solution: Solution) -> list[str]:
    """Pieces in the plane, or in height, that share no reading with one another."""
    parts = [p.datum for p in solution.parts if p.datum]
    nothing = np.zeros((len(solution.names), 3, 0))
    figure = unfixed.Figure(Freedom(solution.network, solution.positions, nothing, parts))
    return [f"{one[0].upper()}{one[1:]}." for one in figure.islands()]


def _unchecked(solution: Solution, figures: Reliability) -> list[str]:
    """Readings that no other reading checks, with the reason, and the stations that hang on such readings only."""
    found = Unchecked(solution, figures)
    if not found.rows:
        return ["Every reading is checked by others."]
    readings = Readings(solution.network)
    some = found.rows[:MOST_SHOWN]
    lines = [f"{_count(len(found.rows), 'reading')} checked by no other:"]
    lines += [f"  {readings.name(r)}: {found.why[r]}." for r in some]
    lines += [f"  and {len(found.rows) - len(some)} more."] if len(found.rows) > len(some) else []
    if found.side_shots:
        who = listed(solution.network, np.array(list(found.side_shots)), 12)
        lines.append(f"Side shots, fixed by unchecked readings only: {who}.")
    return lines


def _count(n: int, what: str) -> str:
    return f"{n} {what} is" if n == 1 else f"{n} {what}s are"
