"""Fifty random jobs, one a seed, that the comparisons with other least-squares codes run through."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from tests.networks import Made, random_job

SEEDS = range(50)
KIND_SETS = (
    ("distances", "directions", "angles"), ("distances", "directions"), ("distances", "angles"),
    ("directions", "angles"), ("distances",), ("levelled_lengths", "levelled_setups"), ("levelled_lengths",),
    ("distances", "directions", "levelled_lengths"), ("distances", "directions", "azimuths"),
)  # fmt: skip


def random_case(seed: int, folder: Path, correlated: bool = False, **more: str) -> Made:
    """The job of a seed: 5 to 9 stations, held or weighted marks, the kinds of the seed's turn."""
    rng = np.random.default_rng([2026, seed])
    n = int(rng.integers(5, 10))
    control, unit = ("held", "weighted")[seed % 2], ("deg", "gon")[seed // 2 % 2]
    print(f"seed [2026, {seed}], {n} stations, {control}")
    return random_job(rng, folder, n, KIND_SETS[seed % len(KIND_SETS)], control, correlated, unit, **more)
