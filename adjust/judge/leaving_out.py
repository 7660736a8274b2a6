"""What leaving sets of readings out does to all others, without adjusting again: the algebra of several blunders.

At a place where the readings are linearised with misclosures l (R,) let S be a set of rows and E_S their unit columns.
With M as in adjust.judge.influence, the errors of the rows of S as extra unknowns are

    K = E_S'M E_S    b = K^-1 E_S'M l    cov b = K^-1    (P v)_S = -M (l - E_S b)    m_S = m - diag(M E_S K^-1 E_S'M)
    Omega_S = (l - E_S b)'M (l - E_S b)    which is -l'(P v)_S, since (P v)_S vanishes in the rows of S

so the statistic of a row outside is (Pv)_S / sqrt(m_S), and of a row s inside, *tried back*, b_s / sqrt((K^-1)_ss): it
is the one-reading statistic of s in the network without the rest of S. All this equals leaving the rows out and
adjusting again (Cook and Weisberg 1982, section 2.2.3; Koch 1999, section 4.5), at this linearisation.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from adjust.judge.influence import Influence
from adjust.judge.reliability import UNCHECKED_BELOW, Reliability, figures
from adjust.network import Array, Bools
from adjust.solver.design import State
from adjust.solver.gauss import Linear
from adjust.solver.solution import Solution


@dataclass(frozen=True)
class Without:
    """The readings without some of them."""

    rows: tuple[int, ...]
    blunder: Array
    """(k,) errors of the rows left out: reading minus its estimate from all that are kept."""
    covariance: Array
    """(k, k) of these, before scaling."""
    pv: Array
    m: Array
    tested: Bools
    """(R,) rows that are kept and whose statistic can be formed."""
    square_sum: float
    degrees: int
    gains: Array
    """(R, k) M E_S K^-1."""

    def scale(self, given: bool) -> float:
        """Variance factor by which statistics are scaled: 1 where the standard deviations are trusted."""
        return 1.0 if given else self.square_sum / self.degrees if self.degrees > 0 else np.nan

    @cached_property
    def statistic(self) -> Array:
        """(R,) statistics of the rows kept, unscaled; NaN where there is none."""
        return self.pv / np.sqrt(np.where(self.tested, self.m, np.nan))

    @property
    def tried_back(self) -> Array:
        """(k,) statistics of the rows left out, each in the network without the others, unscaled."""
        return np.asarray(self.blunder / np.sqrt(np.diagonal(self.covariance)))

    def largest(self) -> int:
        """The row kept with the largest statistic; -1 where none can be formed."""
        return _largest(self.statistic)

    def with_back(self, k: int) -> Array:
        """(R,) unscaled statistics where the k-th row left out is back in.

        With g its column of ``gains`` and c = (K^-1)_kk, putting it back makes Pv to Pv - g b_k / c and m to m + g^2/c.
        """
        g, c = self.gains[:, k], self.covariance[k, k]
        back = self.tested.copy()
        back[self.rows[k]] = True
        statistic: Array = (self.pv - g * (self.blunder[k] / c)) / np.sqrt(np.where(back, self.m + g**2 / c, np.nan))
        return statistic

    def better_than(self, k: int, among: Sequence[int] | None = None) -> int:
        """The row with the largest statistic where the k-th row left out is back in, ``among`` those given."""
        statistic, r = self.with_back(k), self.rows[k]
        best = _largest(statistic) if among is None else max(among, key=lambda o: np.nan_to_num(abs(statistic[o])))
        return best if abs(statistic[best]) > abs(statistic[r]) * (1 + 1e-9) else r


@dataclass(frozen=True)
class Model:
    """The readings linearised at a place with all their weights."""

    state: State
    influence: Influence
    misclosure: Array
    """(R,) observed minus computed."""
    pv: Array
    m: Array
    p: Array
    """(R,) diagonal of P."""
    degrees: int
    _columns: dict[int, Array] = field(default_factory=dict, repr=False)

    @classmethod
    def of(cls, solution: Solution, known: Reliability) -> Model:
        """At the solution itself."""
        held = solution.design.held
        l = np.where(held, 0.0, -solution.residuals)
        state = State(solution.positions, solution.groups)
        return cls(state, Influence.of(solution), l, np.where(held, 0.0, known.pv), *_weights(known),
                   solution.total.degrees_of_freedom)  # fmt: skip

    @classmethod
    def at(cls, solution: Solution, state: State) -> Model:
        """At another place."""
        iteration, held = solution.setting.iteration, solution.design.held
        here: Linear = iteration.at(state)
        influence = Influence(here.whitened, iteration.cofactors(here), held)
        l = np.where(held, 0.0, here.numbers.misclosure)
        pv = -influence.times(l[:, None])[:, 0]
        known = figures(here.whitened, influence.cofactors, held)
        return cls(state, influence, l, pv, *_weights(known), solution.total.degrees_of_freedom)

    def columns(self, rows: Sequence[int]) -> Array:
        """Columns (R, k) of M."""
        new = [r for r in rows if r not in self._columns]
        if new:
            found = self.influence.columns(np.array(new, dtype=np.int64))
            self._columns.update({r: found[:, k] for k, r in enumerate(new)})
        return np.stack([self._columns[r] for r in rows], axis=1) if rows else np.zeros((len(self.m), 0))

    def without(self, rows: Sequence[int]) -> Without:
        """The readings without the rows; they must be independent (see ``independent``)."""
        chosen = list(rows)
        columns = self.columns(chosen)
        covariance = np.asarray(np.linalg.inv(columns[chosen]), dtype=np.float64)
        b = covariance @ (columns.T @ self.misclosure)
        pv = self.pv + columns @ b
        pv[chosen] = 0.0
        gains = columns @ covariance
        m = self.m - (gains * columns).sum(axis=1)
        tested = m >= UNCHECKED_BELOW * self.p
        tested[chosen] = False
        square_sum = max(float(-(self.misclosure @ pv)), 0.0)
        return Without(tuple(chosen), b, covariance, pv, m, tested, square_sum, self.degrees - len(chosen),
                       gains)  # fmt: skip

    def independent(self, rows: Sequence[int]) -> list[int]:
        """Those of the rows, in their order, whose errors the readings kept can still tell apart."""
        k = self.columns(rows)[list(rows)]
        kept: list[int] = []
        for i, r in enumerate(rows):
            left = k[i, i]
            if kept:
                left -= k[i, kept] @ np.linalg.solve(k[np.ix_(kept, kept)], k[kept, i])
            if left >= UNCHECKED_BELOW * self.p[r]:
                kept.append(i)
        return [int(rows[i]) for i in kept]

    def correlation(self, row: int, others: Sequence[int] = ()) -> Array:
        """(R,) correlation of a row's statistic with those of all rows, ``others`` being left out; 0 where none."""
        columns, m = self.columns([row])[:, 0], self.m
        if others:
            left = self.columns(list(others))
            inverse = np.linalg.inv(left[list(others)])
            columns = columns - left @ (inverse @ left[row])
            m = self.without(others).m
        known = m >= UNCHECKED_BELOW * self.p
        known[list(others)] = False
        return np.where(known, columns / np.sqrt(np.where(known, m, 1.0) * m[row]), 0.0)

    def movement(self, rows: Sequence[int]) -> Array:
        """(u,) how the errors found in the rows move the unknowns while they are left in: Q A'P E b."""
        whitened = self.influence.whitened
        errors = np.zeros(len(self.m))
        errors[list(rows)] = self.without(rows).blunder
        load = np.zeros(len(self.influence.cofactors.reduced) + 1)
        for w in whitened:
            z = np.linalg.solve(w.factor, errors[w.batch.rows][:, :, None])
            np.add.at(load, w.batch.columns, (w.reduced.transpose(0, 2, 1) @ z)[:, :, 0])
        return np.asarray(self.influence.cofactors.times(load[:-1, None])[:, 0])


def _largest(statistic: Array) -> int:
    sizes = np.abs(statistic)
    return -1 if np.isnan(sizes).all() else int(np.nanargmax(sizes))


def _weights(known: Reliability) -> tuple[Array, Array]:
    """m and p (R,); 0 and 1 for conditions, so that they are never tested."""
    m = np.nan_to_num(known.m)
    share = np.where(known.tested, known.checked_share, 1.0)
    p = np.where(known.tested, m / share, 1.0)
    return np.where(known.tested, m, 0.0), p
