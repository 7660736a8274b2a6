"""Rates of the judge's statements over many draws, what they should be, and how far chance may take them.

A job's statements are correlated, so a job is the unit of sampling: with the share s_d of draw d, the rate is the mean
of s_d and its standard error std(s_d) / sqrt(draws) (the ratio estimator of a cluster sample; Cochran 1977, chapter
9A; from memory). It is not taken smaller than that of as many independent statements at the nominal rate.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy import special

from adjust.judge import critical
from adjust.judge.assess import Judgement
from adjust.judge.control import AGREES, DISAGREES, UNJUDGED, yardstick
from adjust.judge.ellipses import ellipses
from adjust.judge.lines import Lines
from adjust.judge.overall import NOT_MET
from adjust.judge.shifts import parts_of
from adjust.network import CHECK, PARTS
from tests.statistics.draws import MODES, Array, Bench, Draws

Bools = NDArray[np.bool_]

ERRORS = 4.0
"""Standard errors that chance may take: 1 in 16,000 rates lies farther off, and a full study has some 350."""
VERDICTS = (AGREES, DISAGREES, UNJUDGED)
FIVE = 0.05
"""By how much sigma is wrong in the negative controls, and the other level of the one-reading test."""


@dataclass(frozen=True)
class Rate:
    """A rate, its standard error, how many statements it is of, and the interval it should lie in."""

    rate: float
    error: float
    count: int
    low: float
    high: float

    @classmethod
    def of(cls, hits: NDArray[np.bool_], low: float, high: float | None = None) -> Rate:
        """From statements (d,) or (d, k); ``low`` to ``high`` is the nominal rate."""
        high = low if high is None else high
        share = hits.reshape(len(hits), -1).mean(axis=1)
        least = math.sqrt(high * (1 - high) / hits.size)
        return cls(float(share.mean()), max(float(share.std() / math.sqrt(len(share))), least), hits.size, low, high)

    @classmethod
    def all_of(cls, rates: list[Rate]) -> Rate:
        """The mean of independent rates."""
        n = len(rates)
        mean = [sum(of(r) for r in rates) / n for of in (lambda r: r.rate, lambda r: r.low, lambda r: r.high)]
        return cls(mean[0], math.sqrt(sum(r.error**2 for r in rates)) / n, sum(r.count for r in rates), *mean[1:])

    @property
    def off(self) -> float:
        """Standard errors between the rate and its interval, 0 inside."""
        outside = self.rate - min(max(self.rate, self.low), self.high)
        return outside / self.error

    @property
    def holds(self) -> bool:
        """Whether chance explains the rate."""
        return abs(self.off) <= ERRORS


Rates = dict[str, Rate]


def coverage(base: Judgement, degrees: int | None, moves: Array, scale: Array) -> Rates:
    """Shares of confidence figures that hold the truth: ``moves`` (d, n, 3) are the errors of the coordinates.

    Figures are those of the record: semi-axes and azimuth, radius, and standard deviations times the multiplier for
    ``degrees``, of the job without errors with the scale given, and the variance factors ``scale`` (d,) of the draws.
    """
    found = {"ellipse": [], "circle": [], "relative ellipse": [], "one dimension": []}  # type: dict[str, list[Bools]]
    cov, lines, root = base.solution.covariance, base.lines, np.sqrt(scale)[:, None]
    confidence = base.tests.confidence
    several, one = (m(confidence, degrees) for m in (critical.ellipse_multiplier, critical.line_multiplier))
    assert several is not None
    assert one is not None
    adjusted = np.flatnonzero(cov[:, 0, 0] > 0)
    if len(adjusted):
        a, b, azimuth = ellipses(cov[adjusted, :2, :2])
        east, north = moves[:, adjusted, 0], moves[:, adjusted, 1]
        found["ellipse"].append(_inside(a, b, azimuth, east, north, several * root))
        found["circle"].append(np.hypot(east, north) <= critical.circle_radius(a, b, confidence, degrees) * root)
    sd = base.solution.sd
    for part in range(3):
        some = np.flatnonzero(sd[:, part] > 0)
        found["one dimension"].append(np.abs(moves[:, some, part]) <= sd[some, part] * one * root)
    d = moves[:, lines.end] - moves[:, lines.start]
    plane = np.flatnonzero(lines.sd_distance > 0)
    if len(plane):
        shape = ellipses(lines.covariance[plane])
        found["relative ellipse"].append(_inside(*shape, d[:, plane, 0], d[:, plane, 1], several * root))
    found["one dimension"] += _of_lines(lines, d, plane, one * root)
    return {name: Rate.of(np.concatenate(hits, axis=1), confidence) for name, hits in found.items() if hits}


def _inside(a: Array, b: Array, azimuth: Array, east: Array, north: Array, times: Array) -> Bools:
    """Whether points (d, k) lie in ellipses (k,) whose axes are lengthened (d, 1)."""
    along = east * np.sin(azimuth) + north * np.cos(azimuth)
    across = east * np.cos(azimuth) - north * np.sin(azimuth)
    return np.asarray((along / a) ** 2 + (across / b) ** 2 <= times**2)


def _of_lines(lines: Lines, d: Array, plane: NDArray[np.int64], times: Array) -> list[Bools]:
    """Whether distances, azimuths and height differences of lines are as near to the truth as their intervals say."""
    distance, azimuth = lines.distance[plane], lines.azimuth[plane]
    east = distance * np.sin(azimuth) + d[:, plane, 0]
    north = distance * np.cos(azimuth) + d[:, plane, 1]
    turned = np.remainder(np.arctan2(east, north) - azimuth + math.pi, 2 * math.pi) - math.pi
    out = [np.abs(np.hypot(east, north) - distance) <= lines.sd_distance[plane] * times,
           np.abs(turned) <= lines.sd_azimuth[plane] * times]  # fmt: skip
    rises = np.flatnonzero(lines.sd_height > 0)
    return [*out, np.abs(d[:, rises, 2]) <= lines.sd_height[rises] * times]


def study(bench: Bench, draws: Draws, mode: str, shrunk: float = 1.0) -> Rates:
    """All rates but that of detection; ``shrunk``: by how much too small the judge takes sigma from the residuals."""
    out = of_readings(bench, draws, mode, shrunk)
    return out | of_jobs(bench, draws, mode, shrunk, out["suspect in the job"].high)


def of_readings(bench: Bench, draws: Draws, mode: str, shrunk: float = 1.0) -> Rates:
    """Coverage, and the one-reading test at its own levels and at the job's."""
    base, readings = bench.base[mode], bench.readings(draws, mode, shrunk)
    tested = base.reliability.tested
    out = coverage(bench.base[MODES[0]], base.degrees, draws.moves, bench.scale(draws, mode, shrunk))
    for level in (base.tests.outlier, FIVE):
        at_level = replace(readings, critical=_critical(base, level))
        out[f"false alarm {level:g}"] = Rate.of(at_level.suspect[:, tested], level)
    of_job = readings.suspect_of_job
    out["reading at the job's level"] = Rate.of(of_job[:, tested], job_level(base))
    out["suspect in the job"] = Rate.of(of_job.any(axis=1), *share_of_jobs(bench, mode))
    return out


def of_jobs(bench: Bench, draws: Draws, mode: str, shrunk: float, most: float) -> Rates:
    """Overall tests, marks, and exit code 1; ``most`` is the share of jobs that may have a suspect."""
    base = bench.base[mode]
    over, under, verdict, times, scale, found, failed = [], [], [], [], [], [], []
    for judged in bench.judged(draws, mode, shrunk):
        report = judged.control_report
        found.append(bool(report.released or report.cannot_tell or report.scale))
        scale.append(yardstick(judged.solution, mode == "given").scale * (1.0 if mode == "given" else shrunk**2))
        over.append([test.verdict == NOT_MET for test in (*judged.overall, *judged.overall_free)])
        under.append([test.better_than_stated for test in (*judged.overall, *judged.overall_free)])
        verdict.append([VERDICTS.index(m.verdict) for m in judged.control])
        times.append([abs(m.misfit or 0.0) / (m.sd or np.inf) for m in judged.control])
        failed.append(judged.failed)
    out = _checks(bench, mode, np.array(verdict, dtype=np.int64), np.array(times))
    out |= _left_out(bench, mode, draws.g, np.array(scale), np.array(found))
    most += sum(rate.high for name, rate in out.items() if name.startswith("any"))
    if mode == "given":
        tail = base.tests.significance / 2
        out["overall, too large"] = Rate.of(np.array(over), tail)
        out["overall, better than stated"] = Rate.of(np.array(under), tail)
        # the total of one part is that part's test, not another
        most += tail * sum(len(s.parts) + (len(s.parts) > 1) for s in (base.solution, base.solution.free) if s)
    return out | {"exit 1": Rate.of(np.array(failed), 0.0, most)}


def _checks(bench: Bench, mode: str, verdict: NDArray[np.int64], times: Array) -> Rates:
    """Check marks: each at 0.05, each at its share of the job's significance, and any.

    ``verdict`` (d, marks) are places in VERDICTS, ``times`` (d, marks) misfits over their standard deviations.
    """
    base = bench.base[mode]
    roles, names = base.solution.network.stations.role, base.solution.names
    role = np.array([roles[names.index(m.station), PARTS.index(m.part)] for m in base.control])
    some = (verdict < 2).all(axis=0) & (role == CHECK) if len(role) else np.zeros(0, dtype=bool)
    if not some.any():
        return Rates()
    level = critical.job_level(base.tests.significance, int(some.sum()))
    limit = yardstick(base.solution, mode == "given").limit(FIVE, checked=True)
    assert limit is not None
    hits = verdict[:, some] == 1
    return {f"check mark at {FIVE:g}": Rate.of(times[:, some] > limit, FIVE),
            "check mark at its level": Rate.of(hits, level),
            "any check mark": Rate.of(hits.any(axis=1), 0.0, level * int(some.sum()))}  # fmt: skip


def _left_out(bench: Bench, mode: str, g: Array, scale: Array, found: Bools) -> Rates:
    """Held and weighted marks: each left out alone at 0.05, from g (d, h) and scales (d,), and any finding (d,)."""
    base, marks, out = bench.base[mode], bench.response.marks[0], Rates()
    limit, times = yardstick(base.solution, mode == "given").limit(FIVE), np.full(g.shape, np.nan)
    assert limit is not None
    for shifts in parts_of(marks):
        for unit, at in enumerate(shifts.units):
            if shifts.shift(unit, shifts.basis(())):
                inverse = np.linalg.inv(marks.k[np.ix_(at, at)])
                times[:, at] = np.abs(g[:, at] @ inverse) / np.sqrt(np.diagonal(inverse) * scale[:, None])
    for what, here in (("held", marks.row < 0), ("weighted", marks.row >= 0)):
        some = here & np.isfinite(times).all(axis=0)
        if some.any():
            out[f"{what} mark at {FIVE:g}"] = Rate.of(times[:, some] > limit, FIVE)
            out["any held or weighted mark"] = Rate.of(found, 0.0, base.tests.significance)
    return out


def detection(bench: Bench, errors: Array, mode: str, each: int, rng: np.random.Generator) -> Rate:
    """Share of blunders found that have just the smallest detectable size, in ``each`` readings of every draw in turn.

    From residuals the size is that for the true sigma, which is 1 here: the printed one carries the job's own estimate.
    """
    base = bench.base[mode]
    tested = np.flatnonzero(base.reliability.tested)
    assert base.shift is not None
    size, found, draw = base.reliability.root * base.shift, [], np.arange(len(errors))
    for _ in range(each):
        row = rng.choice(tested, len(errors))
        wrong = errors.copy()
        wrong[draw, row] += rng.choice([-1.0, 1.0], len(row)) * size[row]
        found.append(bench.readings(bench.of(wrong), mode).suspect[draw, row])
    return Rate.of(np.array(found).T, base.tests.power)


def _critical(base: Judgement, level: float) -> float:
    limit = (critical.normal_critical(level) if base.degrees is None
             else critical.tau_critical(level, base.degrees))  # fmt: skip
    assert limit is not None
    return limit


def job_level(base: Judgement) -> float:
    """Level of one reading at which the job has its significance."""
    return critical.job_level(base.tests.significance, int(base.reliability.tested.sum()))


def share_of_jobs(bench: Bench, mode: str) -> tuple[float, float]:
    """Between which the share of clean jobs with a suspect at the job's level must lie, whatever ties the statistics.

    With p of one statistic and p_ij of two together, n p - sum p_ij <= P(any) (Bonferroni 1936) and P(any) <= n p - the
    p_ij along any tree through all of them (Hunter 1976), here the tree of the largest; given normal statistics P(any)
    is at most the significance itself (Sidak 1967). The correlations are those of the study's own covariance.
    """
    base = bench.base[mode]
    tested = base.reliability.tested
    map_ = (bench.response.pv * base.reliability.root[:, None])[tested]
    cov = map_ @ bench.clean.covariance @ map_.T
    size = np.sqrt(np.diag(cov))
    rho = np.clip(cov / size / size[:, None], -1.0, 1.0)
    assert base.critical_job is not None
    pairs = both_above(base.critical_job, rho, base.degrees)
    level, n = job_level(base), int(tested.sum())
    low = n * level - float(np.triu(pairs, 1).sum())
    high = n * level - _largest_tree(pairs)
    return max(low, level), min(high, base.tests.significance) if mode == MODES[0] else high


def both_above(limit: float, rho: Array, r: int | None) -> Array:
    """P(|w_i| > limit and |w_j| > limit) for correlations (k, k), normal, or tau of r degrees.

    tau / sqrt(r) is one coordinate x of a point spread evenly over the sphere in r dimensions: x^2 ~ Beta(1/2,
    (r-1)/2); another one is rho x + sqrt(1 - rho^2) sqrt(1 - x^2) z with z the like in r - 1 dimensions. By Gauss
    and Legendre over x.
    """
    nodes, weights = np.polynomial.legendre.leggauss(80)
    if r is None:
        low, high = limit, limit + 7.0
    else:
        low, high = limit / math.sqrt(r), 1.0
    x = (low + high) / 2 + (high - low) / 2 * nodes
    if r is None:
        density = np.exp(-(x**2) / 2) / math.sqrt(2 * math.pi)
        spread = np.ones_like(x)
    else:
        density = (1 - x**2) ** ((r - 3) / 2) / special.beta(0.5, (r - 1) / 2)
        spread = np.sqrt(1 - x**2)
    along = rho[..., None] * x
    across = np.sqrt(np.maximum(1 - rho**2, 1e-18))[..., None] * spread
    tail = _upper((low - along) / across, r) + _upper((low + along) / across, r)
    return np.asarray(2 * (tail * density * weights).sum(axis=-1) * (high - low) / 2)


def _upper(z: Array, r: int | None) -> Array:
    """P(Z > z): normal, or one coordinate of a point spread evenly over the sphere in r - 1 dimensions."""
    if r is None:
        return np.asarray(special.ndtr(-z))
    half = special.betainc(0.5, (r - 2) / 2, np.minimum(z**2, 1.0)) / 2
    return np.where(z > 0, 0.5 - half, 0.5 + half)


def _largest_tree(weight: Array) -> float:
    """Sum of the weights along the tree of largest weight through all (Prim 1957)."""
    best, inside, total = weight[0].copy(), np.zeros(len(weight), dtype=bool), 0.0
    inside[0] = True
    for _ in range(len(weight) - 1):
        k = int(np.where(inside, -1.0, best).argmax())
        total += float(best[k])
        inside[k] = True
        best = np.maximum(best, weight[k])
    return total
