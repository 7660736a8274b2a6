"""Variance components: how much larger than stated the errors of a group of readings are, by the readings themselves.

With C = V_0 + sum_g theta_g V_g and the sums of adjust.judge.moments at the present theta, one round is

    theta <- theta (1 + S^-1 (q - t))

each V_g taken in its present size: iterated best invariant quadratic unbiased estimation (Koch 1999, section 3.6), the
same as Fisher's scoring of the restricted likelihood (Patterson and Thompson 1971); it rests where q_g = t_g, the
condition of Helmert (1907) and Foerstner (1979), and then cov theta = 2 theta S^-1 theta'. S chooses the way and tells
the standard deviation; where it rests does not depend on it. The readings stay linearised at the solution.
What would fall below nothing is held at LEAST as long as q_g < t_g there.

nu theta_g / E theta_g has about the chi-square distribution with nu = 2 theta_g^2 / var theta_g degrees of freedom
(Satterthwaite 1946), exactly so for one group, nu being the redundancy: that gives the interval, and the test of
theta_g = 1 with nu no larger than it would be if all were as stated. What is small by chance seems less sure than it
is, what is large surer; so the test keeps its level where groups are hard to tell apart (docs/measured.md).
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from scipy import special

from adjust.judge.critical import job_level
from adjust.judge.groupings import CENTRING, PLURALS, Grouping, groupings
from adjust.judge.moments import Moments, Problem
from adjust.judge.paste import lines_to_paste
from adjust.network import Array, Bools
from adjust.solver.solution import Solution
from adjust.solver.threads import one_thread

REDUNDANCY_LEAST = 5.0
"""Redundancy below which a group is not judged: at 5 the 95 % interval of sd_factor runs from 0.62 to 2.5 times it."""
ROWS_MOST = 20_000
"""Scalar rows above which nothing is estimated; the record of larger jobs is cut as well."""
APART_LEAST = 0.02
"""Smallest eigenvalue of S, scaled to a unit diagonal, at which groups can be told apart; two of them would then have
seven times the standard deviation that each has alone."""
ROUNDS_MOST = 60
SETTLED = 5e-3
"""Rounds end where no component moves by more than this share of its standard deviation."""
SHARE_LEAST = 0.25
"""Smallest share of a round that is taken where full ones go to and fro."""
LEAST, NOTHING = 1e-4, 1.5e-4
"""What runs to nothing is held at LEAST, a hundredth of the stated standard deviation, and counts as nothing below
NOTHING."""
DEGREES_LEAST = 1.0
"""Degrees of freedom behind a component below which it cannot be told from nothing: it is less than 0.7 of its own
standard deviation."""
SINGULAR = (CENTRING, PLURALS["refraction"])
"""Names of groups that are one thing."""
BY_ITSELF = "; no line of job.toml scales them alone: give them a table or an instrument of their own"
BY_COLUMNS = "; their standard deviations stand in the control table: scale its columns sd_east, sd_north, sd_height"
"""What to do where there are no lines to paste."""
AS_STATED, WORSE, BETTER, UNTOLD = "as stated", "worse than stated", "better than stated", "cannot be told"


@dataclass(frozen=True)
class Component:
    """One group's component; lengths and angles play no part, all is relative to the stated standard deviations."""

    by: str
    """instrument, day, crew, or centring (the instruments' groups and the centring vectors together)."""
    group: str
    readings: int
    redundancy: float
    factor: float
    """theta: variance over the stated one; 1 where it is not estimated."""
    sd_factor: float
    sd: float | None
    """Of ``sd_factor``; None where it is not estimated."""
    interval: tuple[float, float] | None
    """Of ``sd_factor`` at the job's confidence."""
    verdict: str
    sentence: str
    paste: tuple[str, ...]
    """Lines for job.toml, () where the verdict asks for none or no line says it."""


@dataclass(frozen=True)
class Estimate:
    """Components of one grouping: theta (G,), which groups are estimated, and the sums where it rests."""

    grouping: Grouping
    theta: Array
    estimated: Bools
    moments: Moments
    stated: Moments
    """The sums at the stated sizes."""
    rounds: tuple[Array, ...]
    """theta after every round."""
    reasons: dict[int, str] = field(default_factory=dict)
    """Why a group is not estimated."""

    @property
    def factors(self) -> tuple[Array, ...]:
        """By what every round multiplied theta."""
        before = (np.ones_like(self.theta), *self.rounds[:-1])
        return tuple(now / was for now, was in zip(self.rounds, before, strict=True))

    @property
    def vanished(self) -> Bools:
        """(G,) components that ran to nothing."""
        return np.asarray(self.estimated & (self.theta < NOTHING))

    @property
    def degrees(self) -> Array:
        """(G,) nu = 2 theta^2 / var theta; 0 where theta is not estimated or nothing."""
        return _degrees(self.moments, self.estimated & ~self.vanished)

    @property
    def degrees_tested(self) -> Array:
        """(G,) nu of the test: no more than there would be if all were as stated."""
        return np.minimum(self.degrees, _degrees(self.stated, self.estimated))

    @property
    def covariance(self) -> Array:
        """(G, G) covariance of theta, NaN where it has none."""
        out = np.full((len(self.theta),) * 2, np.nan)
        here = np.flatnonzero(self.estimated & ~self.vanished)
        if len(here):
            out[np.ix_(here, here)] = 2 * np.linalg.inv(self.moments.s[np.ix_(here, here)])
        return np.asarray(out * self.theta[:, None] * self.theta)


def _degrees(moments: Moments, here: Bools) -> Array:
    """nu (G,) = 1 / (S^-1)_gg of the groups ``here`` (G,), each V_g in its present size; 0 elsewhere."""
    out, at = np.zeros(len(here)), np.flatnonzero(here)
    if len(at):
        out[at] = 1 / np.diagonal(np.linalg.inv(moments.s[np.ix_(at, at)]))
    return out


def components(solution: Solution) -> tuple[Component, ...]:
    """Every grouping's components, each grouping estimated on its own; () above ROWS_MOST scalar rows."""
    if len(solution.residuals) > ROWS_MOST:
        return ()
    with one_thread():
        return tuple(one for g in groupings(solution.design) for one in _told(solution, estimate(solution, g)))


def estimate(
    solution: Solution, grouping: Grouping, least: float = REDUNDANCY_LEAST, settled: float = SETTLED
) -> Estimate:
    """The components of a grouping; groups with a redundancy below ``least`` keep their stated sizes."""
    return estimated_for(Problem.of(solution, grouping), least, settled)


def estimated_for(problem: Problem, least: float = REDUNDANCY_LEAST, settled: float = SETTLED) -> Estimate:
    """The same for a problem set up."""
    grouping = problem.grouping
    stated = problem.moments(np.ones(grouping.count))
    reasons = _too_few(grouping, stated, least)
    reasons |= _not_apart(grouping, stated, reasons)
    estimated = np.array([g not in reasons for g in range(grouping.count)], dtype=bool)
    theta, moments, rounds = at_rest(problem, stated, estimated, settled)
    return Estimate(grouping, theta, estimated, moments, stated, rounds, reasons)


def at_rest(
    problem: Problem, stated: Moments, estimated: Bools, settled: float = SETTLED
) -> tuple[Array, Moments, tuple[Array, ...]]:
    """theta (G,) where the rounds end that move the groups ``estimated`` (G,), the sums before the last of them, which
    moved nothing to speak of, and all rounds."""
    theta, moments = np.ones(len(estimated)), stated
    rounds: list[Array] = []
    share, last = 1.0, np.zeros(len(estimated))
    while estimated.any() and len(rounds) < ROUNDS_MOST:
        step = _round(theta, moments, estimated, share)
        move = np.log(step / theta)
        if move @ last < 0 and np.abs(move).max() > np.abs(last).max() / 2:
            share = max(share / 2, SHARE_LEAST)  # to and fro without coming closer
        last, theta = move, step
        rounds.append(theta)
        sd = np.sqrt(2 / np.maximum(np.diagonal(moments.s), 1e-12))
        if (np.abs(move) <= settled * sd).all() and _resting(theta, moments, estimated):
            break
        moments = problem.moments(theta)
    return theta, moments, tuple(rounds)


def _round(theta: Array, moments: Moments, estimated: Bools, share: float) -> Array:
    """theta after one round; nothing falls below a hundredth of itself in one round, nor below LEAST."""
    rest = moments.q - moments.t
    here = np.flatnonzero(estimated & ((theta > NOTHING) | (rest > 0)))
    factor = np.ones_like(theta)
    if len(here):
        factor[here] += share * np.linalg.solve(moments.s[np.ix_(here, here)], rest[here])
    return np.maximum(theta * np.maximum(factor, 0.01), np.where(estimated, LEAST, 0.0))


def _resting(theta: Array, moments: Moments, estimated: Bools) -> bool:
    """Whether what is held at nothing belongs there."""
    return not (estimated & (theta < NOTHING) & (moments.q > moments.t)).any()


def _too_few(grouping: Grouping, stated: Moments, least: float) -> dict[int, str]:
    return {
        g: f"a redundancy of {max(t, 0.0):.1f} is too little to judge by; {least:g} is the least"
        for g, t in enumerate(stated.t.tolist()) if not t >= max(least, 1e-6)
    }  # fmt: skip


def _not_apart(grouping: Grouping, stated: Moments, known: dict[int, str]) -> dict[int, str]:
    """Groups whose readings enter the residuals in one and the same way, worst first, until the rest can be told."""
    found: dict[int, str] = {}
    while True:
        here = np.array([g for g in range(grouping.count) if g not in known and g not in found], dtype=int)
        if len(here) < 2:
            return found
        s = stated.s[np.ix_(here, here)]
        scale = 1 / np.sqrt(np.diagonal(s))
        size, vector = np.linalg.eigh(s * scale[:, None] * scale)
        if size[0] >= APART_LEAST:
            return found
        together = here[np.abs(vector[:, 0]) > 0.3]
        names = [grouping.labels[g] for g in together]
        for g in together:
            others = " and ".join(n for n in names if n != grouping.labels[g])
            found[int(g)] = f"the residuals cannot tell {grouping.labels[g]} and {others} apart"


def _told(solution: Solution, found: Estimate) -> list[Component]:
    tested = int((found.degrees >= DEGREES_LEAST).sum())
    level = job_level(solution.job.settings.tests.significance, max(tested, 1))
    return [_component(solution, found, g, level) for g in range(found.grouping.count)]


def _component(solution: Solution, found: Estimate, g: int, level: float) -> Component:
    grouping = found.grouping
    readings = _readings(solution, grouping, g)
    theta = 0.0 if found.vanished[g] else float(found.theta[g])
    redundancy = max(float(found.moments.t[g]), 0.0)
    sd = interval = None
    nu = found.degrees[g]
    verdict = UNTOLD
    if nu >= DEGREES_LEAST:
        sd = float(np.sqrt(theta / (2 * nu)))
        interval = _interval(theta, nu, solution.job.settings.tests.confidence)
        verdict = verdict_of(theta, found.degrees_tested[g], level)
    paste = lines_to_paste(solution, grouping, g, theta**0.5) if verdict in (WORSE, BETTER) else ()
    sentence = _sentence(grouping.labels[g], readings, redundancy, theta**0.5, interval, verdict, found.reasons.get(g))
    if verdict in (WORSE, BETTER) and not paste:
        of_control = grouping.labels[g] == PLURALS["control"]
        sentence += BY_COLUMNS if of_control else BY_ITSELF
    return Component(grouping.by, grouping.labels[g], readings, redundancy, theta, theta**0.5, sd, interval, verdict,
                     sentence, paste)  # fmt: skip


def _readings(solution: Solution, grouping: Grouping, g: int) -> int:
    if g < len(grouping.names):
        return int((grouping.of_row == g).sum())
    return int((solution.design.vectors.of_row >= 0).any(axis=1).sum())


def _interval(theta: float, nu: float, confidence: float) -> tuple[float, float]:
    tail = (1 - confidence) / 2
    low, high = (float(special.gammainccinv(nu / 2, t)) * 2 / nu for t in (tail, 1 - tail))
    return float(np.sqrt(theta / low)), float(np.sqrt(theta / high))


def verdict_of(theta: float, nu: float, level: float) -> str:
    """Verdict on a component with nu degrees of freedom behind it, tested at a level, two-sided."""
    if special.gammaincc(nu / 2, nu * theta / 2) < level / 2:
        return WORSE
    return BETTER if special.gammainc(nu / 2, nu * theta / 2) < level / 2 else AS_STATED


def _sentence(
    name: str, readings: int, redundancy: float, factor: float, interval: tuple[float, float] | None, verdict: str,
    reason: str | None,
) -> str:  # fmt: skip
    one = name in SINGULAR
    many = f"{readings} reading{'s' * (readings != 1)}"
    if reason:
        return f"{name} keep{'s' * one} {'its' if one else 'their'} stated size ({many}): {reason}"
    behind = f"from {many} with a redundancy of {redundancy:.1f}"
    if interval is None:
        return f"{name} cannot be told from nothing ({behind})"
    fit, span = f"{name} fit{'s' * one}", f"({times(interval[0])} to {times(interval[1])}, {behind})"
    if verdict == WORSE:
        return f"{fit} {times(factor)} times worse than stated {span}"
    return f"{fit} {verdict}: {times(factor)} times {span}"


def times(x: float) -> str:
    """A factor with two figures, three near one: 0.48, 1.04, 2.1, 31."""
    if 0.9 < x < 1.1:
        return f"{x:.2f}"
    return f"{x:.0f}" if x >= 9.95 else f"{x:.1f}" if x >= 0.995 else f"{x:.2g}"
