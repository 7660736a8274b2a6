"""Blunders stage by stage: the readings alone first, then against control, if control is not what is wrong.

A wrong mark makes the readings about it fail, and the other way round. Where control is more than the datum needs, the
readings are searched in the free stage, which knows nothing of control. The control is then compared without the
readings found; only where it agrees are readings searched in the held stage too, for what the free stage cannot see.
Before all this effects common to many readings are tested (adjust.judge.systematic), in competition with the errors of
single readings; what is significant is taken off the readings for the search, for ten distances with a wrong constant
are one cause and no ten blunders.
Where there is no free stage, fewer marks than readings are the better explanation: one cause for many beats many.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from adjust.book.settings import Tests
from adjust.errors import NotConverged, Unsolvable
from adjust.judge.blunders import Found, Levels, exactly, find_blunders, gross_rows
from adjust.judge.control import ControlReport, compare_control, yardstick
from adjust.judge.effect_columns import SCALE, STAFF
from adjust.judge.effect_words import Finding, Systematic
from adjust.judge.mix_ups import MixUp, name_mixed_up, unit_mixed_up
from adjust.judge.reliability import Reliability, reliability
from adjust.judge.removals import Fit, Removal, removals
from adjust.judge.rows import rows_in, without_rows
from adjust.judge.separable import confusable
from adjust.judge.systematic import findings, words_of
from adjust.kinds import KINDS
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
    systematic: tuple[Systematic, ...] = ()
    """Effects common to many readings, tested together with single ones."""
    shared: bool = False
    """Whether one of them is significant: the readings are then searched without it."""


def search(solution: Solution, known: Reliability, tests: Tests) -> Searched:
    """Effects common to many readings first, for one cause beats many; then blunders and control besides."""
    mixed = unit_mixed_up(solution, known)
    gross = [] if mixed else gross_rows(solution, known, tests)
    mixed = mixed or name_mixed_up(solution, gross)
    if mixed:
        return _without_mix_up(solution, known, tests, mixed)
    return _searched(solution, known, tests, gross)


def _searched(solution: Solution, known: Reliability, tests: Tests, gross: list[int]) -> Searched:
    """The same without a unit or a name mixed up."""
    held = _without(solution, gross)
    stages = [held, held.free] if held.free else [held]
    found = {id(s): findings(s, known if s is solution else reliability(s), tests) for s in stages}
    for stage in stages:
        shared = [f for f in found[id(stage)][0] if f.is_significant and not _of_control(stage, f)]
        corrected = _corrected(solution, stage, shared) if shared else None
        if corrected is None:
            continue
        besides = _blunders_and_control(corrected, reliability(corrected), tests)
        if besides.found.too_many:
            continue  # the rest does not fit without it either, so it explains nothing
        if stage is stages[-1] or not besides.report.failed:
            return _with_effects(solution, known, tests, besides, words_of(stage, *found[id(stage)]))
        # a wrong mark makes an effect of its own: only what the readings alone show of it counts
    searched = _blunders_and_control(solution, known, tests)
    words = words_of(held, *found[id(held)])
    if searched.report.failed and stages[-1] is not held:
        # what a wrong mark feigns is left out, but for scales, which stay as the other explanation of what disagrees
        whole = {(f.effect.what, f.effect.of) for f in found[id(held)][0] if _of_control(held, f)}
        on_control = {(w.what, w.of): w for w in words if (w.what, w.of) in whole}
        words = tuple(on_control.get((w.what, w.of), w) for w in words_of(stages[-1], *found[id(stages[-1])]))
    return replace(searched, systematic=words)


def _without_mix_up(solution: Solution, known: Reliability, tests: Tests, mixed: MixUp) -> Searched:
    """The effects and the control as they are once a unit or a name is put right; single readings are judged then."""
    known_then = reliability(mixed.solution)
    besides = _searched(mixed.solution, known_then, tests, gross_rows(mixed.solution, known_then, tests))
    rows, blocks = mixed.solution.network.rows, mixed.solution.network.blocks
    still = [blocks[rows.block[r]].name(int(rows.row[r])) for r in besides.found.rows]
    return Searched(exactly(solution, known, ()), besides.cleaned, besides.report, (),
                    (mixed.as_effect(still), *besides.systematic), shared=True)  # fmt: skip


def _of_control(solution: Solution, f: Finding) -> bool:
    """Whether it is the scale of all distances or all rises on control: whether marks are wrong, its report weighs."""
    says = {SCALE: "length", STAFF: "rise"}.get(f.effect.what)
    count = sum(len(b) for b in solution.network.blocks if KINDS[b.kind].says == says)
    return len(f.effect.rows) == count and solution.free is not None


def _with_effects(
    solution: Solution, known: Reliability, tests: Tests, besides: Searched, words: tuple[Systematic, ...]
) -> Searched:
    """What was found besides the effects, in the solution that still has them."""
    levels = Levels.of(tests, int(known.tested.sum()))
    rows = exactly(solution, known, besides.found.rows)
    log = (*besides.log[:-1], *removals(solution, rows, levels)) if rows.rows else ()
    rows = replace(rows, together=besides.found.together, too_many=besides.found.too_many)
    return Searched(rows, besides.cleaned, besides.report, log, words, shared=True)


def _corrected(solution: Solution, sound: Solution, shared: list[Finding]) -> Solution | None:
    """The network without the effects found in the ``sound`` one; None where it does not settle."""
    job = solution.job
    place, rows, blocks = rows_in(sound.network, job.network), job.network.rows, list(job.network.blocks)
    for f in shared:
        for r, error in zip(place[f.effect.rows].tolist(), (f.effect.values * (f.value or 0.0)).tolist(), strict=True):
            b, at = int(rows.block[r]), (int(rows.row[r]), int(rows.part[r]))
            values = blocks[b].values.copy()
            values[at] -= error
            blocks[b] = replace(blocks[b], values=values)
    try:
        return solve(replace(job, network=replace(job.network, blocks=tuple(blocks))))
    except (Unsolvable, NotConverged):
        return None


def _blunders_and_control(solution: Solution, known: Reliability, tests: Tests) -> Searched:
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
    cleaned = _without(solution, found.rows)
    figures = known if cleaned is solution else reliability(cleaned)
    report = compare_control(cleaned, figures, yardstick(cleaned, tests.variance_factor == "given"), tests)
    levels = Levels.of(tests, int(known.tested.sum()))
    return Searched(found, cleaned, report, (*log, *removals(solution, found, levels)))


def unsearched(solution: Solution, known: Reliability, tests: Tests) -> Searched:
    """The control compared with all readings, and no blunder looked for."""
    return _with_control(solution, known, tests, exactly(solution, known, ()), ())


def _without(solution: Solution, rows: Sequence[int]) -> Solution:
    """The solution of the job without some rows; the same where there are none, or where it does not settle."""
    if not rows:
        return solution
    job = solution.job
    gone = rows_in(solution.network, job.network)[list(rows)]
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
