"""How far free movements stand off from what is fixed: the measurements behind NULL_LEAST and STILL.

    PYTHONPATH=. python tests/judge/null_study.py [COUNT]

prints, for COUNT (200) jobs with constructed defects, the largest singular value (share of the scaled readings) that a
free movement leaves, by both ways of finding it, and the largest share by which a station that rests seems to move;
and the smallest singular value of networks that hold: sound ones, and open traverses.
"""

from __future__ import annotations

import sys
import tempfile
from itertools import pairwise
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import Unsolvable
from adjust.solver import defects
from adjust.solver.settle import Setting, beside
from adjust.solver.solve import prepare
from tests.judge.defects_study import Sheet, defective, sound

GAP = 1e-6
"""Between what is printed as free and as fixed; nothing was found within a factor of ten of it."""


def setting(sheet: Sheet) -> Setting | None:
    """The job made ready, or None where it is refused before."""
    with tempfile.TemporaryDirectory() as folder:
        try:
            return prepare(adjust.read(sheet.write(Path(folder))))
        except Unsolvable:
            return None


def singular_values(ready: Setting, iterated: bool) -> tuple[np.ndarray, np.ndarray]:
    """Singular values of the scaled readings a little beside the start, ascending, and the free movements (u, d)."""
    iteration, unknowns = ready.iteration, ready.design.unknowns
    whitened = iteration.at(beside(ready)).whitened
    scale = defects._scale(iteration.pattern, unknowns, iteration.kept, whitened)
    find = defects._iterated if iterated else defects._dense
    vectors = find(iteration.pattern, scale, whitened)
    seen, _ = defects._judged(iteration.pattern, scale, whitened, np.eye(len(scale)))
    free, _ = defects._judged(iteration.pattern, scale, whitened, vectors)
    return np.concatenate([np.sort(free), np.sort(seen)[vectors.shape[1] :]]), vectors


def traverse(n: int) -> Sheet:
    """An open traverse of n stations from two known marks, a set of two pointings at each."""
    sheet = Sheet(np.random.default_rng(n))
    walk = [sheet.new(complex(100 * k, 40 * (k % 2))) for k in range(n)]
    sheet.known = walk[:2]
    sheet.distances = list(pairwise(walk))
    sheet.sets = [(b, [a, c]) for a, b, c in zip(walk, walk[1:], walk[2:], strict=False)]
    return sheet


def study(count: int) -> None:
    """Print the figures."""
    free, fixed, rests = {True: 0.0, False: 0.0}, np.inf, 0.0
    jobs = 0
    for seed in range(count):
        ready = setting(defective(seed)[1])
        if ready is None or len(ready.iteration.kept) > defects.DENSE_MOST:
            continue
        jobs += 1
        for iterated in (False, True):
            s, vectors = singular_values(ready, iterated)
            d = vectors.shape[1]
            free[iterated] = max(free[iterated], float(s[:d].max(initial=0.0)))
            fixed = min(fixed, float(s[d:].min(initial=np.inf)))
            share = np.abs(vectors) / np.abs(vectors).max(axis=0, initial=1e-300)
            rests = max(rests, float(share[share < GAP].max(initial=0.0)))
    print(f"{jobs} jobs with defects: free at most {free[False]:.1e} (all vectors), {free[True]:.1e} (iterated); "
          f"fixed at least {fixed:.1e}; stations at rest move by {rests:.1e} at the most")  # fmt: skip
    least = min(singular_values(r, False)[0][0] for seed in range(count) if (r := setting(sound(seed))))
    print(f"{count} sound jobs: fixed at least {least:.1e}")
    for n in (30, 60, 150, 600, 1500):
        ready = setting(traverse(n))
        assert ready is not None
        s, vectors = singular_values(ready, n > 100)
        print(f"open traverse of {n}: {vectors.shape[1]} free, fixed at least {s.min():.1e}")


if __name__ == "__main__":
    study(int(sys.argv[1]) if len(sys.argv) > 1 else 200)
