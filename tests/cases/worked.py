"""Worked examples: one TOML file a case, run through the whole program (read, solve, assess).

A case names its source and confidence, whether it is evidence from outside (``outside``), a job as text, and checks:

    [[check]]
    what = "height"                    one of QUANTITIES
    printed = { D = "11.9976" }        by station or reading ("all": of the job): digits as printed in the source
    derived = { D = 825.22062 }        instead of printed: exact algebra or a second computation, no outside evidence
    tolerance = 1e-9                   left out: half the last digit; numbers that are no text need it
"""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from dataclasses import dataclass
from decimal import Decimal
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np

import adjust
from adjust.judge.assess import Judgement
from adjust.judge.components import Estimate, estimate
from adjust.judge.ellipses import ellipses
from adjust.judge.groupings import groupings
from adjust.judge.moments import Problem
from adjust.solver.solution import Solution
from adjust.units import LENGTHS, RHO_SEC
from tests.helpers import close

FOLDER = Path(__file__).resolve().parent


@dataclass(frozen=True)
class Check:
    """One value of a case."""

    case: str
    what: str
    of: str
    wanted: float
    tolerance: float

    def __str__(self) -> str:
        return f"{self.case}-{self.what}-{self.of}".replace(" ", "_")

    def passes(self, got: float) -> None:
        """Assert the value; the citation is printed, so that it stands beside a failure."""
        print(f"{self}: {got!r}, wanted {self.wanted!r} within {self.tolerance:g}; {Case(self.case).citation}")
        close(got, self.wanted, atol=self.tolerance)


@dataclass(frozen=True)
class Case:
    """A worked example by the name of its file."""

    name: str

    @cached_property
    def data(self) -> dict[str, Any]:
        """The file as read."""
        return tomllib.loads((FOLDER / f"{self.name}.toml").read_text("utf-8"))

    @property
    def citation(self) -> str:
        """Source, confidence and whether it is outside evidence, in one line."""
        outside = "published results" if self.data["outside"] else "not outside evidence"
        return f"{self.data['source']} (confidence: {self.data['confidence']}; {outside})"

    @cached_property
    def checks(self) -> list[Check]:
        """All checks of the file, a value each."""
        return [
            Check(self.name, group["what"], of, float(value), group.get("tolerance") or half_last_digit(value))
            for group in self.data.get("check", [])
            for of, value in group.get("printed", group.get("derived")).items()
        ]

    def run(self, folder: Path) -> Result:
        """Write the job folder and adjust it."""
        return Result.of(adjust.read(self.write(folder)))

    def write(self, folder: Path) -> Path:
        """Write job.toml and the tables."""
        job = self.data["job"]
        (folder / "job.toml").write_text(job["toml"], "utf-8")
        for table, text in job["tables"].items():
            (folder / f"{table}.csv").write_text(text, "utf-8")
        return folder


def half_last_digit(printed: str) -> float:
    """Half a unit of the last printed digit."""
    assert isinstance(printed, str), "a number that is not printed needs its tolerance"
    exponent = Decimal(printed).as_tuple().exponent
    assert isinstance(exponent, int)
    # Decimal digits and binary numbers may differ in the last bit where a value lies half a digit away.
    return 0.5 * 10.0**exponent * (1 + 1e-9)


@dataclass(frozen=True)
class Result:
    """What the program says of a job."""

    solution: Solution
    judgement: Judgement

    @classmethod
    def of(cls, job: adjust.Job) -> Result:
        """Adjust and assess."""
        solution = adjust.solve(job)
        return cls(solution, adjust.assess(solution))

    @property
    def length(self) -> float:
        """Metres in the job's unit of length."""
        return LENGTHS[self.solution.job.settings.units.length]

    def station(self, name: str) -> int:
        """Number of a station."""
        return self.solution.network.stations.index[name]

    def row(self, name: str) -> int:
        """Scalar row of a reading by its id."""
        rows, blocks = self.solution.network.rows, self.solution.network.blocks
        return [blocks[b].name(i) for b, i in zip(rows.block.tolist(), rows.row.tolist(), strict=True)].index(name)

    def coordinate(self, name: str, part: int) -> float:
        """Adjusted coordinate in the job's unit."""
        return float(self.solution.positions[self.station(name), part]) / self.length

    def ellipse(self, name: str) -> tuple[float, float, float]:
        """Semi-axes in the job's unit and azimuth of the major one in degrees."""
        a, b, azimuth = ellipses(self.judgement.covariance[[self.station(name)], :2, :2])
        return float(a[0]) / self.length, float(b[0]) / self.length, float(np.degrees(azimuth[0]))

    @cached_property
    def components(self) -> Estimate:
        """Components of the last grouping, all rounds, however small the redundancy of a group is."""
        return estimate(self.solution, groupings(self.solution.design)[-1], least=0.0, settled=1e-9)

    def sd_east(self, name: str) -> float:
        """Standard deviation of an east coordinate by the components, in the job's unit."""
        found = self.components
        problem = Problem.of(self.solution, found.grouping)
        number = self.solution.design.unknowns.coordinate[[self.station(name)], 0]
        variance = problem.cofactors(problem.whitened(found.theta)).entries(number, number)
        return float(np.sqrt(variance[0])) / self.length

    def component(self, group: str, of_round: int | None = None) -> float:
        """Component of a group at rest, or the factor of one round."""
        found = self.components
        theta = found.theta if of_round is None else found.factors[of_round - 1]
        return float(theta[found.grouping.labels.index(group)])

    def variance_factor(self) -> float:
        """v'Pv over the degrees of freedom."""
        assert self.solution.total.variance_factor is not None
        return self.solution.total.variance_factor


QUANTITIES: dict[str, Callable[[Result, str], float]] = {
    "east": lambda r, of: r.coordinate(of, 0),
    "north": lambda r, of: r.coordinate(of, 1),
    "height": lambda r, of: r.coordinate(of, 2),
    "sd height": lambda r, of: float(np.sqrt(r.judgement.covariance[r.station(of), 2, 2])) / r.length,
    "residual": lambda r, of: float(r.solution.residuals[r.row(of)]) / r.length,
    "adjusted angle in seconds": lambda r, of: float(r.solution.adjusted[r.row(of)]) * RHO_SEC,
    "redundancy": lambda r, of: float(r.judgement.reliability.redundancy[r.row(of)]),
    "semi-major": lambda r, of: r.ellipse(of)[0],
    "semi-minor": lambda r, of: r.ellipse(of)[1],
    "azimuth of major axis in degrees": lambda r, of: r.ellipse(of)[2],
    "reference sd": lambda r, of: float(np.sqrt(r.variance_factor())),
    "weighted square sum": lambda r, of: r.solution.total.square_sum,
    "degrees of freedom": lambda r, of: r.solution.total.degrees_of_freedom,
    "sum of heights": lambda r, of: float(np.nansum(r.solution.positions[:, 2])) / r.length,
    "component in round 1": lambda r, of: r.component(of, 1),
    "component in round 2": lambda r, of: r.component(of, 2),
    "component in round 3": lambda r, of: r.component(of, 3),
    "component": lambda r, of: r.component(of),
    "component times 1000": lambda r, of: r.component(of) * 1000,
    "sd east with components": lambda r, of: r.sd_east(of),
    "trace of cofactors": lambda r, of: float(np.nansum(r.solution.sd**2)),
}
"""How each checked quantity is taken from a result, in the units of the case's job."""


def checks_of(*names: str) -> list[Check]:
    """The checks of several cases for parametrisation."""
    found = [check for name in names for check in Case(name).checks]
    assert len(found) >= len(names)
    return found
