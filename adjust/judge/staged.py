"""Blunders stage by stage: the readings alone first, then against control, if control is not what is wrong.

A wrong mark makes the readings about it fail, and the other way round. Where control is more than the datum needs, the
readings are searched in the free stage, which knows nothing of control. The control is then compared without the
readings found; only where it agrees are readings searched in the held stage too, for what the free stage cannot see.
Where there is no free stage, fewer marks than readings are the better explanation: one cause for many beats many.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from adjust.book.settings import Tests
from adjust.errors import NotConverged, Unsolvable
from adjust.judge.blunders import Found, Levels, exactly, find_blunders
from adjust.judge.control import ControlReport, compare_control, yardstick
from adjust.judge.reliability import Reliability, reliability
from adjust.judge.removals import Fit, Removal, removals
from adjust.judge.rows import rows_in, without_rows
from adjust.judge.separable import confusable
from adjust.network import Ints
from adjust.solver.solution import Solution
from adjust.solver.solve import solve


@dataclass(frozen=True)
class Searched:
    """Blunders of a solution, and its control without them."""

    found: Found
    """In the solution's own stage."""
    cleaned: Solution
    """The solution of the job without them; the solution itself where there are none."""
    report: ControlReport
    log: tuple[Removal, ...]


def search(solution: Solution, known: Reliability, tests: Tests) -> Searched:
    """Blunders of the readings alone, the control without them, and then what only the control shows."""
    free = solution.free
    if free is None:
        found = find_blunders(solution, known, tests)
        by_readings = _with_control(solution, known, tests, found, ())
        by_marks = (
            _with_control(solution, known, tests, exactly(solution, known, ()), ()) if found.rows else by_readings
        )
        return by_marks if by_marks.report.failed and _causes(by_marks.report) < len(found.rows) else by_readings
    knows = reliability(free)
    alone = find_blunders(free, knows, tests)
    place = rows_in(free.network, solution.network)
    rows = [int(place[r]) for r in alone.rows]
    levels = Levels.of(tests, int(knows.tested.sum()))
    log = tuple(_placed(step, place) for step in removals(free, alone, levels)[:-1])
    alike = {rows[k]: [int(place[o]) for o in confusable(alone, r)] for k, r in enumerate(alone.rows)}
    found = _best_of_alike(solution, known, rows, alike)
    first = _with_control(solution, known, tests, replace(found, together=alone.together, too_many=alone.too_many), log)
    if alone.too_many or first.report.failed or len(found.rows) < len(rows):
        return first
    again = find_blunders(solution, known, tests, found.rows)
    if again.too_many or set(again.rows) == set(found.rows):
        return first
    return _with_control(solution, known, tests, replace(again, together=again.together or alone.together), log)


def _causes(report: ControlReport) -> int:
    """How many things are wrong by a report of the control."""
    return len(report.released) + len(report.cannot_tell) + (report.scale is not None)


def _best_of_alike(solution: Solution, known: Reliability, rows: list[int], alike: dict[int, list[int]]) -> Found:
    """The set with rows exchanged for ones that the free stage cannot tell from them and the held stage blames more."""
    found = exactly(solution, known, rows)
    for _ in range(len(rows)):
        if not found.rows:
            break
        now = found.model.without(found.rows)
        better = {r: now.better_than(k, alike[r]) for k, r in enumerate(found.rows) if alike.get(r)}
        changed = next(((r, to) for r, to in better.items() if to != r and to not in found.rows), None)
        if changed is None:
            break
        alike[changed[1]] = [*(o for o in alike[changed[0]] if o != changed[1]), changed[0]]
        found = exactly(solution, known, [changed[1] if r == changed[0] else r for r in found.rows])
    return found


def _with_control(
    solution: Solution, known: Reliability, tests: Tests, found: Found, log: tuple[Removal, ...]
) -> Searched:
    cleaned = _cleaned(solution, found)
    figures = known if cleaned is solution else reliability(cleaned)
    report = compare_control(cleaned, figures, yardstick(cleaned, tests.variance_factor == "given"), tests)
    levels = Levels.of(tests, int(known.tested.sum()))
    return Searched(found, cleaned, report, (*log, *removals(solution, found, levels)))


def _cleaned(solution: Solution, found: Found) -> Solution:
    if not found.rows:
        return solution
    job, place = solution.job, rows_in(solution.network, solution.job.network)
    gone = place[list(found.rows)]
    try:
        return solve(replace(job, network=without_rows(job.network, gone)))
    except (Unsolvable, NotConverged):
        return solution


def _placed(step: Removal, place: Ints) -> Removal:
    """A step of the free stage in the numbers of the held one."""

    def fit(one: Fit) -> Fit:
        return replace(one, largest=int(place[one.largest]) if one.largest >= 0 else -1)

    return replace(step, rows=tuple(int(place[r]) for r in step.rows), before=fit(step.before), after=fit(step.after),
                   instead=int(place[step.instead]) if step.instead >= 0 else -1)  # fmt: skip
