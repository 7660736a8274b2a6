"""Variance components against many draws of errors: their mean, their standard deviation, the level of the verdict.

    python -m tests.judge.components_study [DRAWS]     full study, 2,000 draws a line
    python -m tests.judge.components_study time        a network of 300 stations: components and budgets in adjustments

Errors are drawn for the true covariance, groups larger than stated or not, and put in as misclosures of one
linearisation, where the program starts from; every draw is estimated by the program. Bounds are 4 standard errors of
the study, from the scatter of the draws themselves. A component that runs to nothing counts as nothing, which lifts the
mean of a weak one: then the mean is only told.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import adjust
from adjust.judge.budget import budget, station_budget
from adjust.judge.components import BETTER, DEGREES_LEAST, WORSE, components, estimated_for, verdict_of
from adjust.judge.critical import job_level
from adjust.judge.groupings import Grouping, groupings
from adjust.judge.moments import Problem
from adjust.solver.threads import one_thread
from tests.networks import random_job
from tests.statistics.jobs import Clean, Sketch, clean, network

Array = NDArray[np.float64]
SEED = 20260620
LEVEL = 0.05
ERRORS = 4.0
"""Standard errors of the study allowed."""


@dataclass(frozen=True)
class Drawn:
    """What came out of d draws for G groups."""

    labels: tuple[str, ...]
    truth: Array
    theta: Array
    """(d, G)."""
    sd: Array
    """(d, G) stated standard deviations of theta, NaN where none."""
    flagged: NDArray[np.bool_]
    """(d, G) verdict worse or better than stated."""
    estimated: NDArray[np.bool_]

    @property
    def nothing(self) -> Array:
        """(G,) share of draws in which a component could not be told from nothing."""
        return np.asarray(np.isnan(self.sd).mean(axis=0))

    @property
    def mean_error(self) -> Array:
        """(G,) mean less truth, in standard errors of the study."""
        scatter = np.where(self.estimated, self.theta.std(axis=0), np.nan)
        return np.asarray((self.theta.mean(axis=0) - self.truth) / (scatter / len(self.theta) ** 0.5))

    @property
    def sd_ratio(self) -> tuple[Array, Array]:
        """(G,) stated over scatter, both as shares of theta, and the standard error of that."""
        told = ~np.isnan(self.sd)
        shares = np.where(told, self.sd, 0.0) / np.where(told, self.theta, 1.0)
        share = shares.sum(axis=0) / np.maximum(told.sum(axis=0), 1) * self.truth
        off = self.theta - self.theta.mean(axis=0)
        scatter = np.where(self.estimated, np.sqrt((off**2).mean(axis=0)), np.nan)
        kurtosis = (off**4).mean(axis=0) / scatter**4
        return share / scatter, share / scatter * np.sqrt((kurtosis - 1) / (4 * len(off)))

    @property
    def rate(self) -> tuple[float, float]:
        """Share of draws with any verdict but "as stated", and its standard error."""
        p = float(self.flagged.any(axis=1).mean())
        return p, max(p * (1 - p) / len(self.flagged), 1e-12) ** 0.5

    def faults(self) -> list[str]:
        """What lies outside its bounds."""
        out = []
        ratio, error = self.sd_ratio
        for g, name in enumerate(self.labels):
            if not self.estimated[g] or self.nothing[g] > 0.001:
                continue
            if abs(self.mean_error[g]) > ERRORS:
                out.append(f"{name}: mean {self.theta[:, g].mean():.3f} for {self.truth[g]:g}")
            if abs(ratio[g] - 1) > ERRORS * error[g] + SD_ALLOWED:
                out.append(f"{name}: stated standard deviation {ratio[g]:.3f} of the scatter")
        p, error_of_rate = self.rate
        low, high = LEVEL_BETWEEN
        if (self.truth == 1).all() and not low - ERRORS * error_of_rate <= p <= high + ERRORS * error_of_rate:
            out.append(f"verdicts on clean data: {p:.4f} for {LEVEL}")
        return out


SD_ALLOWED = 0.05
"""The standard deviation is that of large networks; this much it may be off at redundancies of 5 to 20."""
LEVEL_BETWEEN = (0.02, 0.055)
"""Where the level of the approximate test may lie: it is on the safe side where groups are hard to tell apart."""


def draws(law: Clean, grouping: Grouping | None, truth: dict[str, float], count: int, larger: float = 1.0) -> Drawn:
    """Estimates for ``count`` draws; groups not in ``truth`` are as stated; all errors ``larger`` times as large."""
    solution = adjust.solve(law.job)
    grouping = grouping or groupings(solution.design)[-1]
    problem = Problem.of(solution, grouping)
    size = np.array([truth.get(name, 1.0) for name in grouping.labels])
    own = np.sqrt(np.append(size[: len(grouping.names)], 1.0))[grouping.of_row]
    scaled = replace(law, sd=law.sd * own * larger,
                     vectors=law.vectors * larger * (size[-1] ** 0.5 if grouping.centring else 1.0))  # fmt: skip
    theta, sd, flagged = [], [], []
    with one_thread():
        for e in scaled.errors(np.random.default_rng(SEED), count):
            found = estimated_for(replace(problem, numbers=replace(problem.numbers, misclosure=e)))
            degrees = found.degrees
            told = degrees >= DEGREES_LEAST
            level = job_level(LEVEL, max(int(told.sum()), 1))
            theta.append(np.where(found.vanished, 0.0, found.theta))
            sd.append(np.where(told, found.theta * np.sqrt(2 / np.maximum(degrees, 1e-9)), np.nan))
            flagged.append([bool(t) and verdict_of(x, nu, level) in (WORSE, BETTER)
                            for x, nu, t in zip(found.theta, found.degrees_tested, told, strict=True)])  # fmt: skip
    return Drawn(grouping.labels, size, np.array(theta), np.array(sd), np.array(flagged), found.estimated)


def two_levels(folder: Path) -> tuple[Clean, Grouping]:
    """A level net of 49 points whose lines were run by two levels in turn."""
    rng = np.random.default_rng(SEED)
    place = np.array([(300.0 * (i % 7), 300.0 * (i // 7)) for i in range(49)]) + rng.uniform(-60, 60, (49, 2))
    sketch = Sketch([f"P{i}" for i in range(49)], np.column_stack([place, rng.uniform(100, 130, 49)]), rng)
    for line in sketch.lines(450.0):
        sketch.put("levelled", *line)
    law = clean("two levels", sketch, folder)
    rows = np.arange(len(law.sd))
    return law, Grouping("instrument", ("first level", "second level"), rows % 2)


Made = tuple[Clean, Grouping | None]


def of_study(name: str) -> Callable[[Path], Made]:
    """A network of the calibration study with the last of its own groupings."""
    return lambda folder: (network(name, folder), None)


CASES: tuple[tuple[str, Callable[[Path], Made], dict[str, float]], ...] = (
    ("level net, two levels", two_levels, {}),
    ("level net, second level 4", two_levels, {"second level": 4.0}),
    ("braced plane", of_study("plane, held"), {}),
    ("braced plane, distances 4", of_study("plane, held"), {"distances of i": 4.0}),
    ("plane and levelled lines", of_study("plane and heights apart, check marks"), {}),
    ("plane and levelled lines, directions 4", of_study("plane and heights apart, check marks"),
     {"directions of i": 4.0}),
    ("centring", of_study("plane, held, centring"), {}),
    ("centring 4", of_study("plane, held, centring"), {"centring": 4.0}),
)  # fmt: skip
"""What it is, how it is made, and the true variances that are not as stated."""


def table(name: str, found: Drawn) -> list[str]:
    """Lines of the study's table."""
    ratio, error = found.sd_ratio
    lines = []
    for g, label in enumerate(found.labels):
        if found.estimated[g]:
            se = found.theta[:, g].std() / len(found.theta) ** 0.5
            lines.append(
                f"| {name} | {label} | {found.truth[g]:g} | {found.theta[:, g].mean():.3f} +- {se:.3f} | "
                f"{ratio[g]:.3f} +- {error[g]:.3f} | {found.nothing[g]:.3f} |"
            )
    p, error_of_rate = found.rate
    what = "on clean data" if (found.truth == 1).all() else "where one is worse"
    return [*lines, f"| {name} | verdicts {what} | | {p:.4f} +- {error_of_rate:.4f} | | |"]


def main(count: int) -> None:
    """The full study."""
    print(f"seed {SEED}, {count} draws")
    print("| network | group | truth | mean theta | stated sd / scatter | nothing |\n|---|---|---|---|---|---|")
    for name, make, truth in CASES:
        with tempfile.TemporaryDirectory() as folder:
            found = draws(*make(Path(folder)), truth, count)
        print("\n".join(table(name, found)), flush=True)
        for fault in found.faults():
            print("OUTSIDE:", name, fault, flush=True)


def seconds(run: Callable[[], object]) -> float:
    """Processor time of a run in seconds, the best of three: the machine may have other things to do."""
    times = []
    for _ in range(3):
        begin = time.process_time()
        run()
        times.append(time.process_time() - begin)
    return min(times)


def timed(stations: int = 300) -> None:
    """Components of four groupings and budgets in plain adjustments of the same network."""
    with tempfile.TemporaryDirectory() as folder:
        kinds = ("distances", "directions", "angles", "levelled_lengths")
        made = random_job(np.random.default_rng(SEED), Path(folder) / "job", stations, kinds)
        text = (made.folder / "job.toml").read_text("utf-8")
        text = text.replace("[instruments.station]", '[instruments.station]\ncentring = "1 mm"\ntarget = "1 mm"')
        (made.folder / "job.toml").write_text(text, "utf-8")
        job = adjust.read(made.folder)
    blocks = tuple(
        replace(b, labels={**b.labels, "day": tuple("ab"[i % 2] for i in range(len(b))),
                           "crew": tuple("xy"[i // 2 % 2] for i in range(len(b)))})
        for b in job.network.blocks
    )  # fmt: skip
    job = replace(job, network=replace(job.network, blocks=blocks))
    one = seconds(lambda: adjust.solve(job))
    solution = adjust.solve(job)
    print(f"{stations} stations, {len(solution.residuals)} scalar rows, {solution.design.unknowns.count} unknowns")
    for what, run in (
        ("components of four groupings", lambda: components(solution)),
        ("budgets of all readings", lambda: budget(solution)),
        ("budgets of all coordinates", lambda: station_budget(solution)),
    ):
        t = seconds(run)
        print(f"{what}: {t:.2f} s, {t / one:.1f} adjustments of {one:.2f} s")


if __name__ == "__main__":
    if sys.argv[1:2] == ["time"]:
        timed(*map(int, sys.argv[2:]))
    else:
        main(int(sys.argv[1]) if sys.argv[1:] else 2000)
