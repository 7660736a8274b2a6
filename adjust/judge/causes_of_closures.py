"""Everyday slips of the book weighed where something does not close.

Of a closure that is not met every reading r is suspected, in every form h of every slip of text (adjust.judge.
slips_asked), and with "some other amount". K(r) are the closures that r goes into, met ones too, and w their
misclosures. With r as it would be read, smaller by c, they are w(c) with the covariance C(c) (adjust.judge.
changed_closures), which should be ordinary errors:

    L(r, c) = N(w(c); 0, C(c)) / (prod of N(w_k; 0, C_k) of the met ones, prod of U_k of those that fail)

What is divided by is how K(r) looks without a slip in r: a met closure as it is, a failing one by some slip elsewhere,
of the density U_k = ELSEWHERE / (2 |w| ln(largest / s)) of a height, an angle or, squared by 2 pi for the area, the end
of a walk. So readings are compared although each goes into closures of its own: one that explains two failing
closures at once beats two slips, and one that would break a met closure is out. With the prior weights p_h,

    S(r, h) = p_h L(r, c_h)
    S(r, 0) = p_0 integral of L(r, c) dc / (2 |c| ln(largest / s_c)) = p_0 L(r, c^) sqrt(2 pi) s_c / (2 |c^| ln ...)

with c^ the best amount and s_c its standard deviation, and support = S(r, h) / sum of all S over the readings of the
closure (Bayes' rule for a closed list: Jeffreys 1961, chapter 5). A form counts that misses c^ by no more than FARTHEST
standard deviations and leaves misclosures that chance leaves once in 1 / UNLIKELY. Said is what comes to a support of
0.5, and only where the forms are not crowded: of [c^/2, 2 c^] those of the plausible readings may cover the share
CROWDED at most, else an arbitrary amount would fit one of them.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import chdtri

from adjust.book.job import Job
from adjust.judge.booked import Booked, Form
from adjust.judge.causes import LARGEST_M, Cause, slips
from adjust.judge.changed_closures import Key, Made
from adjust.judge.slip_forms import FARTHEST
from adjust.judge.slips_asked import Books, Weighed, cause, forms, listed, other, reading
from adjust.judge.where import NOT_MET
from adjust.kinds import KINDS
from adjust.network import Array, Ints
from adjust.units import TURN, wrap

if TYPE_CHECKING:
    from adjust.judge.closures import Closure

ELSEWHERE = 0.05
"""Weight of a slip elsewhere in a failing closure: of a few tens of readings one in a thousand is a slip."""
UNLIKELY = 0.002
"""Chance of the misclosures that may be left at the most."""
CROWDED = 0.4
"""Measured on 280 slips of digits, minutes and round steps and 120 arbitrary amounts:
at 0.1, at 0.4 and without it 100, 44 and 7 slips have no cause, 2, 3 and 7 a wrong one, and 1, 4 and 6 amounts one."""
PLAUSIBLE = 0.1
"""Share of the best reading's weight, by its amount alone, from which a reading's forms count as crowding."""
DEPENDENT = 0.05
"""Share of each standard deviation that is added on its own: closures may follow from one another."""
GRID = 72
"""Trial amounts round the circle for an angle of a walk, every 5 degrees; Newton's method finds the rest."""
STEPS = 6
MOST_FAILING, MOST_KEYS = 30, 600
"""Failing closures up to which they are weighed (many fail by no one slip), and readings in and beside those that
share readings: a second's work."""


def likely(job: Job, booked: Booked, found: Sequence[tuple[Closure, Made]]) -> list[tuple[Cause, ...]]:
    """Likely slips of each closure, the best first; none of those that are met, or where nothing fits."""
    failing = [k for k, (one, _) in enumerate(found) if one.verdict == NOT_MET]
    out: list[tuple[Cause, ...]] = [()] * len(found)
    for some in _together(failing, found) if len(failing) <= MOST_FAILING else []:
        touched = {key for k in some for key in found[k][1].keys if isinstance(key, int)}
        near = [*some, *(k for k, (_, made) in enumerate(found) if k not in failing and touched & set(made.keys))]
        keys = list(dict.fromkeys(key for k in near for key in found[k][1].keys))
        if len(keys) <= MOST_KEYS:
            unit = [Form(0.0, {key: 1.0}) if isinstance(key, int) else Form(0.0, {}, {key: 1.0}) for key in keys]
            weighing = _Weighing(job, keys, booked.covariance(unit), [found[k] for k in near])
            for n, k in enumerate(some):
                out[k] = weighing.causes(n)
    return out


def _together(failing: list[int], found: Sequence[tuple[Closure, Made]]) -> list[list[int]]:
    """The failing closures in groups that share no reading with one another."""
    groups: list[tuple[list[int], set[Key]]] = []
    for k in failing:
        keys: set[Key] = {key for key in found[k][1].keys if isinstance(key, int)}
        mine = [one for one in groups if one[1] & keys]
        groups = [one for one in groups if not one[1] & keys]
        groups.append((sorted([k, *(n for some, _ in mine for n in some)]), set().union(keys, *(of for _, of in mine))))
    return [some for some, _ in groups]


@dataclass(frozen=True)
class _Reading:
    """What was found of one reading: its weight by some other amount, that amount, and the weights of its forms."""

    amount: float
    sd: float
    by_other: float
    by_form: list[tuple[Weighed, float]]
    crowd: float
    """Share of the amounts about as large that some form of it fits."""


@dataclass(frozen=True)
class _Weighing:
    """Closures that fail and those beside them, with the covariance Q (v, v) of what they depend on."""

    job: Job
    keys: list[Key]
    q: Array
    found: list[tuple[Closure, Made]]

    @cached_property
    def _place(self) -> dict[Key, int]:
        return {key: n for n, key in enumerate(self.keys)}

    @cached_property
    def _books(self) -> Books:
        return Books(self.job)

    @cached_property
    def _columns(self) -> list[Ints]:
        """Of every closure the places of what it depends on."""
        return [np.array([self._place[key] for key in made.keys]) for _, made in self.found]

    @cached_property
    def _plain(self) -> list[float]:
        """Log density of each closure as it stands: of a met one by its covariance, of a failing one of a slip."""
        return [self._elsewhere(k) if one.verdict == NOT_MET else self._fits([k], *self._stacked([k], None))[1][0]
                for k, (one, _) in enumerate(self.found)]  # fmt: skip

    def _elsewhere(self, k: int) -> float:
        made = self.found[k][1]
        (w,), (cov,) = self._stacked([k], None)
        s = np.sqrt(np.diag(cov))
        out, plane = math.log(ELSEWHERE), []
        for size, sd, angle in zip(w.tolist(), s.tolist(), made.wraps.tolist(), strict=True):
            if len(w) > 1 and not angle:
                plane.append((size, sd))
                continue
            largest = TURN / 2 if angle else LARGEST_M
            out -= math.log(2 * max(abs(size), sd) * math.log(max(largest / sd, 10.0)))
        if plane:
            far, sd = math.hypot(*(size for size, _ in plane)), math.hypot(*(sd for _, sd in plane))
            out -= math.log(TURN * max(far, sd) ** 2 * math.log(max(LARGEST_M / sd, 10.0)))
        return out

    @cached_property
    def _of_row(self) -> dict[int, list[int]]:
        """The closures that each reading goes into; those that are met only by a wide limit say nothing."""
        out: dict[int, list[int]] = defaultdict(list)
        for k, (one, made) in enumerate(self.found):
            if one.verdict != NOT_MET:
                chi2 = self._fits([k], *self._stacked([k], None))[0][0]
                if not chi2 <= chdtri(len(made.wraps), UNLIKELY):
                    continue
            for key in made.keys:
                if isinstance(key, int):
                    out[key].append(k)
        return out

    # ---- misclosures with a reading changed

    def _stacked(self, some: list[int], row: int | None, c: Array | None = None) -> tuple[Array, Array]:
        """Misclosures (m, d) and covariances (m, d, d) of some closures with a reading smaller by each of c (m,)."""
        values, partials = [], []
        amounts = np.zeros(1) if c is None else c
        used = np.unique(np.concatenate([self._columns[k] for k in some]))
        for k in some:
            made = self.found[k][1]
            mine = next(key for key in made.keys if isinstance(key, int)) if row is None else row
            value, by = made.at(mine, amounts)
            wide = np.zeros((*by.shape[:2], len(used)))
            wide[:, :, np.searchsorted(used, self._columns[k])] = by
            values.append(np.where(made.wraps, _wrapped(value), value))
            partials.append(wide)
        b = np.concatenate(partials, axis=1)
        cov = b @ self.q[np.ix_(used, used)] @ b.transpose(0, 2, 1)
        d = np.arange(b.shape[1])
        cov[:, d, d] *= 1 + DEPENDENT**2
        return np.concatenate(values, axis=1), cov

    def _fits(self, some: list[int], w: Array, cov: Array) -> tuple[Array, Array]:
        """Weighted square sums (m,) and log densities (m,)."""
        chi2 = np.einsum("md,md->m", w, np.linalg.solve(cov, w[:, :, None])[:, :, 0])
        logdet = np.linalg.slogdet(cov)[1]
        return chi2, -chi2 / 2 - logdet / 2 - w.shape[1] / 2 * math.log(TURN)

    def _best(self, some: list[int], row: int) -> tuple[float, float, float]:
        """The amount that leaves the least, its standard deviation, and the square sum it leaves."""
        turns = any(len(self.found[k][1].wraps) > 1 for k in some) and KINDS[self._kind(row)].dimension == "angle"
        c = np.linspace(-TURN / 2, TURN / 2, GRID, endpoint=False) if turns else np.zeros(1)
        at = float(c[np.argmin(self._fits(some, *self._stacked(some, row, c))[0])])
        step = 1e-6 if KINDS[self._kind(row)].dimension == "angle" else 1e-4
        info = 0.0
        for _ in range(STEPS):
            w, cov = self._stacked(some, row, np.array([at, at - step, at + step]))
            away = (w[2] - w[1]) / (2 * step)
            towards = np.linalg.solve(cov[0], away)
            info = float(away @ towards)
            if info < 1e-12:
                return 0.0, math.inf, math.inf
            at -= float(w[0] @ towards) / info
        if KINDS[self._kind(row)].wraps:
            at = wrap(at)
        return at, 1 / math.sqrt(info), float(self._fits(some, *self._stacked(some, row, np.array([at])))[0][0])

    def _kind(self, row: int) -> str:
        return str(self.job.network.blocks[self.job.network.rows.block[row]].kind)

    # ---- weights

    def _weighed(self, row: int) -> _Reading | None:
        """The weights of a reading; None where none of its amounts mends what it goes into."""
        some, rows = self._of_row[row], self.job.network.rows
        at, sd, chi2 = self._best(some, row)
        w, cov = self._stacked(some, row, np.array([at]))
        worst = float(chdtri(w.shape[1], UNLIKELY))
        if not chi2 <= worst:
            return None
        base = sum(self._plain[k] for k in some)
        by_other = slips()[0] * other(self._kind(row), at, sd) * math.sqrt(TURN) * sd
        by_other *= math.exp(float(self._fits(some, w, cov)[1][0]) - base)
        block, i = self.job.network.blocks[rows.block[row]], int(rows.row[row])
        weighed = forms(self._books, block, i)
        near = [one for one in weighed if abs(self._miss(row, one, at)) <= (FARTHEST + 1) * sd]
        found = []
        if near:
            square, density = self._fits(some, *self._stacked(some, row, np.array([one.form.change for one in near])))
            found = [(one, one.prior * math.exp(min(l - base, 600.0)))
                     for one, s, l in zip(near, square.tolist(), density.tolist(), strict=True)
                     if s <= worst and s - chi2 <= FARTHEST**2]  # fmt: skip
        return _Reading(at, sd, by_other, found, _crowd([one.form.change for one in weighed], at, sd))

    def _miss(self, row: int, one: Weighed, at: float) -> float:
        miss = one.form.change - at
        return wrap(miss) if KINDS[self._kind(row)].wraps else miss

    @cached_property
    def _readings(self) -> dict[int, _Reading | None]:
        return {}

    def _reading(self, row: int) -> _Reading | None:
        if row not in self._readings:
            self._readings[row] = self._weighed(row)
        return self._readings[row]

    def causes(self, k: int) -> tuple[Cause, ...]:
        """The likely slips of a failing closure."""
        rows = [key for key in self.found[k][1].keys if isinstance(key, int)]
        found = [one for one in (self._reading(row) for row in rows) if one]
        total = sum(one.by_other + sum(weight for _, weight in one.by_form) for one in found)
        best = listed([(form, weight / total) for one in found for form, weight in one.by_form]) if total else []
        if not best or self._crowded(found) > CROWDED:
            return ()
        names = self.job.network.stations.names
        return tuple(cause(one, reading(names, one.asked.block, one.asked.i), support) for one, support in best)

    def _crowded(self, found: list[_Reading]) -> float:
        """Chance that an arbitrary amount about as large fits a form of some plausible reading."""
        most = max(one.by_other for one in found)
        return 1 - math.prod(1 - one.crowd for one in found if one.by_other >= PLAUSIBLE * most)


def _wrapped(angle: Array) -> Array:
    return np.asarray((angle + TURN / 2) % TURN - TURN / 2)


def _crowd(changes: list[float], at: float, sd: float) -> float:
    """Share of [at/2, 2 at] that lies within FARTHEST standard deviations of some change."""
    low, high = sorted((at / 2, 2 * at))
    covered, end = 0.0, low
    for change in sorted(changes):
        first, last = max(change - FARTHEST * sd, end), min(change + FARTHEST * sd, high)
        if last > first:
            covered, end = covered + last - first, last
    return covered / (high - low) if high > low else 1.0
