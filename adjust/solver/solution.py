"""What came out of an adjustment, as arrays. Tests and precision are formed from it in adjust.judge."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from adjust.book.job import Job
from adjust.network import Array, Bools, Network
from adjust.solver.cofactors import Cofactors
from adjust.solver.datum import PartDatum
from adjust.solver.design import Design
from adjust.solver.elements import Whitened
from adjust.solver.settle import Setting


@dataclass(frozen=True)
class PartResult:
    """The figures of one uncoupled part (or of all parts together, with ``datum`` None)."""

    what: str
    rows: Bools
    """(R,) its scalar rows, conditions included."""
    observations: int
    unknowns: int
    conditions: int
    datum_missing: int
    square_sum: float
    """v'Pv."""
    datum: PartDatum | None = None

    @property
    def degrees_of_freedom(self) -> int:
        """Observations + conditions - unknowns + missing datum."""
        return self.observations + self.conditions - self.unknowns + self.datum_missing

    @property
    def variance_factor(self) -> float | None:
        """v'Pv over the degrees of freedom; None without any."""
        return self.square_sum / self.degrees_of_freedom if self.degrees_of_freedom > 0 else None


@dataclass(frozen=True)
class Solution:
    """An adjusted network."""

    job: Job
    setting: Setting
    """What the iteration was made of: network, design, datum and starting values."""
    positions: Array
    """(n, 3) adjusted east, north, height, metres; NaN where nothing was observed."""
    groups: Array
    """(g,) group unknowns, radians."""
    whitened: list[Whitened]
    cofactors: Cofactors
    coefficients: Array
    """(R, e) partials by every slot of ``design.places`` at the answer, known coordinates included."""
    residuals: Array
    """(R,) adjusted minus observed, metres and radians."""
    adjusted: Array
    """(R,) adjusted readings."""
    parts: tuple[PartResult, ...]
    total: PartResult
    iterations: int
    free: Solution | None = None
    """The free stage before this one: the readings alone, fitted to the control; None where it adds nothing."""

    @property
    def network(self) -> Network:
        """The network as adjusted (without control that a free datum sets aside)."""
        return self.setting.network

    @property
    def design(self) -> Design:
        """The pattern of its observation equations."""
        return self.setting.design

    @property
    def assumed(self) -> tuple[str, ...]:
        """Sentences on what the program chose where nothing was given: origin, north, scale, height."""
        return self.setting.start.assumed

    @property
    def doubtful(self) -> tuple[tuple[tuple[int, int], float], ...]:
        """((block, row), computed minus observed in metres or radians) of readings that starting routes disagreed
        about."""
        return self.setting.start.doubtful

    @property
    def names(self) -> tuple[str, ...]:
        """Station names in the order of ``positions``."""
        return self.network.stations.names

    @cached_property
    def covariance(self) -> Array:
        """(n, 3, 3) covariance of each station, before any scaling by the variance factor; NaN where not determined."""
        numbers = self.design.unknowns.coordinate
        out = self.cofactors.blocks(numbers)
        missing = np.isnan(self.positions)
        out[missing[:, :, None] | missing[:, None, :]] = np.nan
        return out

    @cached_property
    def sd_readings(self) -> Array:
        """(R,) stated standard deviations of the readings with their share of centring; 0 for conditions."""
        out = np.zeros(len(self.residuals))
        for w in self.whitened:
            out[w.batch.rows] = np.sqrt((w.factor**2).sum(axis=2))
        out[self.design.held] = 0.0
        return out

    @property
    def sd(self) -> Array:
        """(n, 3) standard deviations of the coordinates, metres."""
        return np.asarray(np.sqrt(np.maximum(np.einsum("nii->ni", self.covariance), 0.0)))

    def frame(self) -> Any:
        """Stations as a pandas data frame in metres; needs pandas."""
        import pandas as pd

        columns: dict[str, Any] = {"station": self.names}
        for i, part in enumerate(("east", "north", "height")):
            columns[f"{part}_m"] = self.positions[:, i]
        for i, part in enumerate(("east", "north", "height")):
            columns[f"sd_{part}_m"] = self.sd[:, i]
        return pd.DataFrame(columns).set_index("station")

    def __repr__(self) -> str:
        t = self.total
        factor = "none" if t.variance_factor is None else f"{t.variance_factor:.4g}"
        return (f"<Solution of {self.job.settings.title!r}: {t.observations} readings, {t.unknowns} unknowns, "
                f"{t.degrees_of_freedom} degrees of freedom, variance factor {factor}>")  # fmt: skip

    def _repr_html_(self) -> str:
        from adjust.notebook import cell, html_table

        head = ("station", "east m", "north m", "height m", "sd east m", "sd north m", "sd height m")
        rows = [
            (name, *(cell(x) for x in (*xyz, *sd)))
            for name, xyz, sd in zip(self.names, self.positions, self.sd, strict=True)
        ]
        return html_table(repr(self), head, rows)
