"""Readings that no test can tell apart: correlation of the one-reading statistics, and the chance of blaming the wrong.

With the columns of M (adjust.judge.influence) the statistics of two readings have the correlation
rho_ij = M_ij / sqrt(M_ii M_jj). An error of size d (in standard deviations of its estimate) in reading i moves w_i by d
and w_j by rho d. The other one is then blamed, |w_j| > |w_i|, where u = w_i - w_j and s = w_i + w_j have different
signs. u and s are independent with means d (1 - rho), d (1 + rho) and variances 2 (1 - rho), 2 (1 + rho), so

    P = Phi(-a) Phi(b) + Phi(a) Phi(-b),      a = d sqrt((1 - rho)/2),   b = d sqrt((1 + rho)/2)

(an error of the third kind, Hawkins 1980, chapter 5; Foerstner 1983). rho = 1 gives one half.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special
from scipy.sparse.csgraph import connected_components

from adjust.judge.influence import Influence
from adjust.judge.reliability import Reliability
from adjust.network import Array, Bools, Ints

if TYPE_CHECKING:
    from adjust.judge.blunders import Found

TOLD_APART = 0.9
"""Correlation of two statistics above which the readings are named together (design of the program; the chance of
blaming the wrong one of two at the smallest detectable size, 4.13, is 18 per cent there)."""

ROWS_MOST = 3000
"""Scalar rows up to which groups are looked for among all readings: the correlations are one matrix of 72 MB there."""
ALIKE = 1e-9
"""Statistics with a correlation nearer to one than this are one and the same: rounding left 1e-12 in level loops."""
DRAWS, SEED = 40_000, 5


def confusable(found: Found, row: int) -> dict[int, float]:
    """Rows whose statistics correlate with that of a suspect by more than TOLD_APART, the other suspects left out."""
    others = [r for r in found.rows if r != row]
    rho = found.model.correlation(row, others)
    rho[row] = 0.0
    near = np.flatnonzero(np.abs(rho) > TOLD_APART)
    return {int(r): float(rho[r]) for r in near[np.argsort(-np.abs(rho[near]), kind="stable")]}


def wrong_of_two(rho: float, size: float) -> float:
    """Probability that the wrong one of two readings has the larger statistic, for an error of this size."""
    a = size * math.sqrt(max(1 - abs(rho), 0.0) / 2)
    b = size * math.sqrt((1 + abs(rho)) / 2)
    return float(special.ndtr(-a) * special.ndtr(b) + special.ndtr(a) * special.ndtr(-b))


@dataclass(frozen=True)
class Group:
    """Readings of which every two correlate by more than TOLD_APART."""

    rows: tuple[int, ...]
    correlation: float
    """The smallest of its pairs, absolute."""
    wrong: float
    """Chance of blaming a wrong one for a smallest detectable error in the worst placed of them."""


def groups(influence: Influence, figures: Reliability, shift: float) -> tuple[Group, ...]:
    """Groups among all tested readings, in the order of the book; ``shift``: smallest detectable size in sds.

    |M_ij| is at most sqrt((p_i - m_i)(p_j - m_j)) for readings that are not correlated, so rho > 0.9 needs one of the
    two with a checked share below 1/1.9: only the columns of these are formed. Groups come from complete linkage, so
    every pair of a group correlates by more than TOLD_APART.
    """
    if len(figures.m) > ROWS_MOST:
        return ()
    rho = _correlations(influence, figures)
    linked = np.abs(rho) > TOLD_APART
    _, label = connected_components(linked, directed=False)
    found = []
    for k in np.flatnonzero(np.bincount(label) > 1):
        rows = np.flatnonzero(label == k)
        found += [rows[part] for part in _complete(np.abs(rho[np.ix_(rows, rows)]))]
    return tuple(sorted((_group(rho, rows, shift) for rows in found), key=lambda g: g.rows))


def _correlations(influence: Influence, figures: Reliability) -> Array:
    """(R, R) correlations of the statistics as far as they may exceed TOLD_APART, 0 elsewhere and for the untested."""
    tested = figures.tested & ~influence.held
    alone = np.zeros(len(tested), dtype=bool)
    for w in influence.whitened:
        alone[w.batch.rows] = w.l.shape[1] == 1
    weak = np.flatnonzero(tested & (~alone | (np.nan_to_num(figures.checked_share) <= 1 / (1 + TOLD_APART))))
    out = np.zeros((len(tested), len(tested)))
    if len(weak):
        root = np.where(tested, 1 / np.sqrt(np.where(tested, figures.m, 1.0)), 0.0)
        out[:, weak] = influence.columns(weak) * root[:, None] * root[weak]
        out[weak] = out[:, weak].T
    np.fill_diagonal(out, 0.0)
    return out


def _complete(rho: Array) -> list[Ints]:
    """Places of the members of each group of two or more by complete linkage of absolute correlations (k, k)."""
    if len(rho) == 2:
        return [np.arange(2)]
    from scipy.cluster.hierarchy import fcluster, linkage  # seldom needed, and slow to load
    from scipy.spatial.distance import squareform

    apart = 1 - rho
    np.fill_diagonal(apart, 0.0)
    apart = np.minimum(apart, apart.T)  # rounding leaves the two halves unlike
    tree = linkage(np.maximum(squareform(apart, checks=False), 0.0), "complete")
    label = fcluster(tree, 1 - TOLD_APART, "distance")
    return [np.flatnonzero(label == k) for k in range(1, label.max() + 1) if (label == k).sum() > 1]


def _group(rho: Array, rows: Ints, shift: float) -> Group:
    pairs = rho[np.ix_(rows, rows)] + np.eye(len(rows))
    return Group(tuple(int(r) for r in rows), float(np.abs(pairs).min()), wrong_of_many(pairs, shift))


def wrong_of_many(rho: Array, size: float) -> float:
    """Chance that another reading of a group has the larger statistic, for an error in the worst placed one.

    ``rho`` (k, k) correlations with ones on the diagonal. Exact where all are alike (1 - 1/k) and for two; else from
    DRAWS seeded draws, good to half a per cent.
    """
    k = len(rho)
    if np.abs(rho).min() > 1 - ALIKE:
        return 1 - 1 / k
    if k == 2:
        return wrong_of_two(float(rho[0, 1]), size)
    values, vectors = np.linalg.eigh(rho)
    values = np.where(values > ALIKE, values, 0.0)
    noise = np.random.default_rng(SEED).standard_normal((DRAWS, k)) * np.sqrt(values) @ vectors.T
    right = [_right(noise + size * rho[i], np.abs(rho[i]) > 1 - ALIKE) for i in range(k)]
    return 1 - min(right)


def _right(statistic: Array, alike: Bools) -> float:
    """Share of the draws (n, k) in which a reading is blamed rightly; those alike with it share the blame."""
    size = np.abs(statistic)
    others = size[:, ~alike].max(axis=1, initial=0.0)
    return float((size[:, alike].max(axis=1) > others).mean() / alike.sum())
