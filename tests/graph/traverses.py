"""Traverses at random: closed, between two known lines, and between two known stations without an orientation."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from tests.graph.sketch import Sketch
from tests.graph.starts_study import Trial, made, spoilt

SHAPES = ("closed", "link", "link without orientation")


def traverse(seed: int, shape: str, blunder: bool) -> Trial:
    """A traverse of 4 to 24 stations with one set a station (2 seconds) and one distance a leg (2 mm)."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(4, 25))
    sketch, known = _closed(rng, n) if shape == "closed" else _link(rng, n, oriented=shape == "link")
    network = sketch.network(known)
    blocks = []
    for block in network.blocks:
        sd = 1e-5 if block.kind == "direction" else 0.002
        values = block.values + rng.normal(0.0, sd, block.values.shape)
        blocks.append(replace(block, values=values, sd=np.full(block.sd.shape, sd), precision=("sd",) * len(block)))
    network, what = replace(network, blocks=tuple(blocks)), ""
    if blunder:
        network, what = spoilt(network, rng)
    job = made(0, blunder=False).job
    settings = replace(job.settings, datum_kind="control")
    return Trial(replace(job, network=network, settings=settings), sketch.truth, f"{shape} {n}", what)


def _closed(rng: np.random.Generator, n: int) -> tuple[Sketch, str]:
    names = [f"T{k}" for k in range(n)]
    radius = rng.uniform(150.0, 250.0, n)
    angle = 2 * math.pi * np.arange(n) / n
    sketch = Sketch(**{name: (1000 + r * math.sin(a), 1000 + r * math.cos(a))
                       for name, r, a in zip(names, radius, angle, strict=True)})  # fmt: skip
    sketch.sets(*[f"{names[k]}: {names[k - 1]} {names[(k + 1) % n]}" for k in range(n)])
    return sketch.distances(*[f"{names[k]}-{names[(k + 1) % n]}" for k in range(n)]), "T0 T1"


def _link(rng: np.random.Generator, n: int, oriented: bool) -> tuple[Sketch, str]:
    names, azimuth, place = [f"T{k}" for k in range(n)], float(rng.uniform(0, 2 * math.pi)), complex(1000, 1000)
    places = {}
    for name in names:
        places[name] = (place.real, place.imag)
        azimuth += float(rng.normal(0.0, 0.6))
        place += float(rng.uniform(60, 200)) * complex(math.sin(azimuth), math.cos(azimuth))
    legs = [f"{names[k]}-{names[k + 1]}" for k in range(n - 1)]
    if oriented:
        places = {"P": (900.0, 900.0), **places, "Q": (place.real + 50, place.imag + 80)}
        names = ["P", *names, "Q"]
    sketch = Sketch(**places).distances(*legs)
    sketch.sets(*[f"{b}: {a} {c}" for a, b, c in zip(names, names[1:], names[2:], strict=False)])
    return sketch, f"P T0 T{n - 1} Q" if oriented else f"T0 T{n - 1}"
