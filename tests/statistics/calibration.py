"""How often what Brasscap says is true: every statement of the judge, drawn many times at its stated rate.

    python -m tests.statistics.calibration [DRAWS [WHOLE]] > tables.md

prints the tables of docs/measured.md for DRAWS (20,000) jobs of each network whose readings have errors as stated.
Draws are judged by the program's judge at the linearisation of the job without errors (tests/statistics/draws.py).
WHOLE (2,000) jobs of one network are adjusted completely and judged by their records' entries, and a fortieth as many
of each network are adjusted completely and compared with the same draws at one linearisation.

Every rate has a negative control: errors 5 % larger than stated, or, where the scale is from residuals and hides that,
a judge that takes it 5 % too small; for the lower tail of the overall test, which larger errors only make emptier,
errors 5 % smaller. A control must lie outside the bound that the rate keeps.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

import adjust
from adjust.judge.assess import Judgement
from adjust.judge.staged import unsearched
from adjust.record.places import line_entries, station_entries
from adjust.solver.threads import one_thread
from tests.statistics.draws import MODES, Array, Bench
from tests.statistics.jobs import NETWORKS, network
from tests.statistics.rates import ERRORS, FIVE, Rate, Rates, detection, of_jobs, study

DRAWS, WHOLE = 20_000, 2_000
CONTROL = 4
"""The controls take this part of the draws: they are far off."""
EACH = 6
"""Readings of every draw in which a blunder is sought."""
WHOLE_OF = "plane, held, centring"
SEED = 20261201


@dataclass(frozen=True)
class Result:
    """A rate with its negative control."""

    rate: Rate
    control: Rate

    @property
    def control_fails(self) -> bool:
        """Whether the control lies outside the bound that the rate must keep."""
        r = self.rate
        return not r.low - ERRORS * r.error <= self.control.rate <= r.high + ERRORS * r.error


Results = dict[str, Result]


def together(results: Iterable[Result]) -> Result:
    """One rate of several networks, and of their controls."""
    found = list(results)
    return Result(Rate.all_of([r.rate for r in found]), Rate.all_of([r.control for r in found]))


def calibrate(bench: Bench, mode: str, draws: int, seed: int) -> Results:
    """All rates of a network with their controls."""
    rng = np.random.default_rng(seed)
    errors = bench.clean.errors(rng, draws)
    rates = study(bench, bench.of(errors), mode)
    rates["detection"] = detection(bench, errors, mode, EACH, rng)
    few = bench.clean.errors(rng, -(-draws // CONTROL))
    larger = bench.of(few * (1 + FIVE))
    wrong = study(bench, larger, mode) if mode == "given" else study(bench, bench.of(few), mode, 1 / (1 + FIVE))
    wrong["detection"] = detection(bench, larger.errors, mode, EACH, rng)
    if mode == "given":
        lower = "overall, better than stated"
        wrong[lower] = of_jobs(bench, bench.of(few * (1 - FIVE)), mode, 1.0, 0.0)[lower]
    return {name: Result(rate, wrong[name]) for name, rate in rates.items()}


@dataclass(frozen=True)
class Differences:
    """Largest differences of complete adjustments from draws at one linearisation."""

    statistic: float
    scale: float
    place: float
    """Coordinates, in their standard deviations."""
    misfit: float
    """Misfits of marks, in theirs."""
    verdicts: int
    """Statements that differ, of all suspects, overall tests, marks and exits."""
    of: int


def compare(bench: Bench, count: int, seed: int) -> Differences:
    """``count`` jobs adjusted completely, every other one with a blunder, against the same draws."""
    rng = np.random.default_rng(seed)
    errors = bench.clean.errors(rng, count)
    base = bench.base["given"]
    size = base.reliability.root * 4.13  # just detectable (Baarda 1968), so that flags and none both occur
    row = rng.choice(np.flatnonzero(base.reliability.tested), count)
    errors[np.arange(count), row] += np.where(np.arange(count) % 2, size[row], 0.0)
    draws, most, differ, of = bench.of(errors), np.zeros(4), 0, 0
    fast = [bench.judged(draws, mode) for mode in MODES]
    for e in errors:
        solution = adjust.solve(bench.clean.with_errors(e))
        for mode, judged in zip(MODES, fast, strict=True):
            whole, drawn = _unsearched(adjust.assess(replace(solution, job=bench.job[mode]))), next(judged)
            most = np.maximum(most, _differences(whole, drawn))
            said, again = _statements(whole), _statements(drawn)
            differ, of = differ + sum(a != b for a, b in zip(said, again, strict=True)), of + len(said)
    return Differences(*most.tolist(), differ, of)


def _unsearched(whole: Judgement) -> Judgement:
    """The judgement with no blunder looked for, as the draws are judged."""
    return replace(whole, searched_given=unsearched(whole.solution, whole.reliability, whole.tests))


def _differences(whole: Judgement, drawn: Judgement) -> Array:
    sd = whole.solution.sd
    some = sd > 0
    moved = np.abs(whole.solution.positions - drawn.solution.positions)[some] / sd[some]
    misfits = [abs(a.misfit - b.misfit) / a.sd for a, b in zip(whole.control, drawn.control, strict=True)
               if a.misfit is not None and b.misfit is not None and a.sd]  # fmt: skip
    return np.array([np.nanmax(np.abs(whole.statistic - drawn.statistic)), abs(whole.scale / drawn.scale - 1),
                     moved.max(), max(misfits, default=0.0)])  # fmt: skip


def _statements(judged: Judgement) -> list[object]:
    """Everything a judgement says yes or no to."""
    tests = [(t.verdict, t.better_than_stated) for t in (*judged.overall, *judged.overall_free)]
    return [*judged.suspect.tolist(), *judged.suspect_of_job.tolist(), *tests, *(m.verdict for m in judged.control),
            judged.failed]  # fmt: skip


def whole_jobs(bench: Bench, count: int, factor: float, seed: int) -> dict[str, Rates]:
    """Rates of complete adjustments, by mode, read from the entries of their records."""
    rng = np.random.default_rng(seed)
    found: dict[str, dict[str, list[list[bool]]]] = {mode: {} for mode in MODES}
    for errors in factor * bench.clean.errors(rng, count):
        solution = adjust.solve(bench.clean.with_errors(errors))
        for mode in MODES:
            judged = adjust.assess(replace(solution, job=bench.job[mode]))
            hits = {"ellipse": _stations(bench, judged), "relative ellipse": _lines(bench, judged),
                    "false alarm 0.001": judged.suspect[judged.reliability.tested].tolist(),
                    "exit 1": [judged.failed]}  # fmt: skip
            for name, one in hits.items():
                found[mode].setdefault(name, []).append(one)
    nominal = {"ellipse": 0.95, "relative ellipse": 0.95, "false alarm 0.001": 0.001}
    return {mode: {name: Rate.of(np.array(hits), nominal.get(name, 0.0), nominal.get(name, 1.0))
                   for name, hits in of.items()} for mode, of in found.items()}  # fmt: skip


def _stations(bench: Bench, judged: Judgement) -> list[bool]:
    """Whether each printed confidence ellipse holds the true place."""
    out = []
    for entry in station_entries(judged):
        true = bench.solution.positions[bench.solution.names.index(entry["station"])]
        if entry["ellipse"]["semi_major"]:
            out.append(_holds(entry["ellipse_confidence"], entry["east"] - true[0], entry["north"] - true[1]))
    return out


def _lines(bench: Bench, judged: Judgement) -> list[bool]:
    """Whether each printed relative ellipse holds the true line."""
    out, names = [], bench.solution.names
    for entry in line_entries(judged):
        d = bench.solution.positions[names.index(entry["to"])] - bench.solution.positions[names.index(entry["from"])]
        east, north = (entry["distance"] * f(entry["azimuth"]) for f in (np.sin, np.cos))
        out.append(_holds(entry["ellipse_confidence"], east - d[0], north - d[1]))
    return out


def _holds(ellipse: dict[str, float], east: float, north: float) -> bool:
    s, c = np.sin(ellipse["azimuth"]), np.cos(ellipse["azimuth"])
    along, across = east * s + north * c, east * c - north * s
    return bool((along / ellipse["semi_major"]) ** 2 + (across / ellipse["semi_minor"]) ** 2 <= 1)


COLUMNS = {
    "coverage": ("ellipse", "circle", "relative ellipse", "one dimension"),
    "readings": ("false alarm 0.001", "false alarm 0.05", "reading at the job's level", "suspect in the job",
                 "detection"),
    "overall": ("overall, too large", "overall, better than stated"),
    "marks": (*(f"{what} mark at 0.05" for what in ("held", "weighted", "check")), "check mark at its level"),
}  # fmt: skip
"""The tables and their columns; every rate in them but those of ``BOUNDED`` has one nominal value."""
WEAK = ("check mark at its level", "overall, better than stated")
"""So rare, or with so few to spare so flat, that a single network's control may stay inside; those of all networks
together must not."""


def table(results: dict[str, Results], columns: Iterable[str]) -> list[str]:
    """Rates in percent by network, with the controls in brackets, and a summary of bounds."""
    columns = [c for c in columns if any(c in r for r in results.values())]
    if not columns:
        return []
    lines = ["| network | " + " | ".join(columns) + " |", "|---|" + "---:|" * len(columns)]
    for name, of in results.items():
        if any(c in of for c in columns):
            lines.append(f"| {name} | " + " | ".join(_cell(of.get(c)) for c in columns) + " |")
    whole = [[r[c] for r in results.values() if c in r] for c in columns]
    rows: dict[str, Callable[[list[Result]], str]] = {
        "nominal": lambda rs: _nominal(rs),
        "bound, at most +-": lambda rs: _percent(ERRORS * max(r.rate.error for r in rs)),
        "statements": lambda rs: f"{sum(r.rate.count for r in rs):,}",
        "farthest, in standard errors": lambda rs: f"{max((r.rate.off for r in rs), key=abs):+.1f}",
        "all networks": lambda rs: _cell(together(rs)),
        "inside": lambda rs: f"{sum(r.rate.holds for r in rs)} of {len(rs)}",
        "controls outside": lambda rs: f"{sum(r.control_fails for r in rs)} of {len(rs)}",
    }
    lines += [f"| **{what}** | " + " | ".join(say(rs) for rs in whole) + " |" for what, say in rows.items()]
    return [*lines, ""]


def _cell(result: Result | None) -> str:
    return f"{_percent(result.rate.rate)} ({_percent(result.control.rate)})" if result else ""


def _percent(rate: float) -> str:
    return f"{100 * rate:.2f}" if rate > 0.005 else f"{100 * rate:.4f}"


def _nominal(results: list[Result]) -> str:
    low, high = min(r.rate.low for r in results), max(r.rate.high for r in results)
    return _percent(low) if low == high else f"{_percent(low)} to {_percent(high)}"


def exits(results: dict[str, dict[str, Results]]) -> list[str]:
    """Clean jobs that exit with 1, and any finding of the control, in percent beside the bound that they must keep."""
    names = ("any held or weighted mark", "any check mark", "exit 1")
    heads = [f"{name}, {mode}" for mode in MODES for name in names]
    lines = ["| network | " + " | ".join(heads) + " |", "|---|" + "---:|" * len(heads)]
    for network_name in results[MODES[0]]:
        cells = [results[mode][network_name].get(name) for mode in MODES for name in names]
        shown = (f"{_percent(c.rate.rate)} (at most {_percent(c.rate.high)})" if c else "" for c in cells)
        lines.append(f"| {network_name} | " + " | ".join(shown) + " |")
    return [*lines, ""]


def faults(results: dict[str, dict[str, Results]]) -> list[str]:
    """Rates outside their bounds, and controls inside them."""
    out = []
    for mode, networks in results.items():
        claims = dict.fromkeys(c for of in networks.values() for c in of)
        pooled = {c: together(of[c] for of in networks.values() if c in of) for c in claims}
        for name, of in [*networks.items(), ("all networks", pooled)]:
            for what, result in of.items():
                r, where = result.rate, f"{name}, {mode}, {what}"
                if not r.holds:
                    out.append(f"OFF: {where}: {r.rate:.5f}, wanted {r.low:.5f} to {r.high:.5f}, {r.off:+.1f} errors")
                needed = r.low > 0 and (what not in WEAK or name == "all networks")
                if needed and not result.control_fails:
                    out.append(f"control inside: {where}: {result.control.rate:.5f}, bound of {r.low:.5f} to "
                               f"{r.high:.5f} +- {ERRORS * r.error:.5f}")  # fmt: skip
    return out


def agreement(benches: dict[str, Bench], count: int) -> list[str]:
    """The table of complete adjustments against draws at one linearisation."""
    lines = ["| network | readings | to spare | statistic | variance factor | coordinate | misfit | statements that "
             "differ |", "|---|---:|---:|---:|---:|---:|---:|---:|"]  # fmt: skip
    for number, (name, bench) in enumerate(benches.items()):
        d, total = compare(bench, count, SEED + number), bench.solution.total
        lines.append(f"| {name} | {total.observations} | {total.degrees_of_freedom} | {d.statistic:.0e} | "
                     f"{d.scale:.0e} | {d.place:.0e} | {d.misfit:.0e} | {d.verdicts} of {d.of:,} |")  # fmt: skip
    return [*lines, ""]


def main(draws: int, whole: int) -> int:
    """Print all tables; progress goes to standard error. Returns how many rates and controls are not as they should."""
    begin, results = time.perf_counter(), {mode: dict[str, Results]() for mode in MODES}
    with tempfile.TemporaryDirectory() as place:
        benches = {name: Bench(network(name, Path(place))) for name in NETWORKS}
        for number, (name, bench) in enumerate(benches.items()):
            for mode in MODES:
                results[mode][name] = calibrate(bench, mode, draws, SEED + 100 * number + MODES.index(mode))
            _progress(begin, name)
        for mode in MODES:
            for what, columns in COLUMNS.items():
                shown = table(results[mode], columns)
                if shown:
                    print(f"### {what}, {mode}\n\n" + "\n".join(shown))
        print("### exits\n\n" + "\n".join(exits(results)), flush=True)
        said = faults(results)
        print("\n".join(said) if said else "every rate inside its bound, every control outside", flush=True)
        complete = whole_jobs(benches[WHOLE_OF], whole, 1.0, SEED)
        wrong = whole_jobs(benches[WHOLE_OF], whole // CONTROL, 1 + FIVE, SEED + 1)
        print(f"\n### {whole:,} complete adjustments of {WHOLE_OF}\n")
        for mode in MODES:
            of = {name: Result(rate, wrong[mode][name]) for name, rate in complete[mode].items()}
            print("\n".join(table({mode: of}, of)), flush=True)
        _progress(begin, "complete adjustments")
        print("### largest differences\n\n" + "\n".join(agreement(benches, whole // 40)))
    _progress(begin, "compared")
    return len(said)


def _progress(begin: float, what: str) -> None:
    print(f"{time.perf_counter() - begin:6.0f} s ({time.process_time():.0f} s of one processor) {what}",
          file=sys.stderr, flush=True)  # fmt: skip


if __name__ == "__main__":
    sizes = [int(n) for n in sys.argv[1:3]]
    with one_thread():
        sys.exit(min(main(*sizes, *(DRAWS, WHOLE)[len(sizes) :]), 1))
