"""Networks of slope distances alone, without starting coordinates, against scipy on independently written equations.

    python -m tests.solver.any_slopes [COUNT [FIRST]] [--blunder]

makes COUNT random networks of 6 to 20 stations in space: slope distances between near stations, no zenith angle, no
levelled line, a third of them with directions from some stations; three to five known stations, of which some are known
in the plane or in height only; from hilly (300 m) to flat (1 m). Their starting coordinates are taken away. Each must
agree with the reference, which must not know another solution then; or be said to have two solutions, which the
reference confirms from both places; or be said to be fixed only just, which is so if v'Pv of the reference does not
grow by 1 within a standard deviation of the height; or not to be fixed at all. With --blunder one distance is wrong by
0.1 m to 10 km, and what counts is whether it settles where it should.
"""

from __future__ import annotations

import re
import shutil
import sys
import tempfile
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError
from adjust.graph.starts import find_start
from tests.solver.space import PLANE, Array, Rows, Space, _fit, arrays, model, reference, write
from tests.solver.space import SD as SDS

SEED = 20261205
COORDINATES_M, SHARE_OF_SD, SQUARE_SUM = 1e-6, 1e-4, 1e-6
"""Differences that count as none: a micrometre, or where a flat network leaves metres of play in height a
ten-thousandth of the standard deviation. The derivatives of the reference are differences of readings over a
millimetre; with thirty times that step its differences from the adjustment in networks 14 and 22 fall from 6.1 and 1.6
to 0.9 and 0.4 um."""
BAD = ("differs", "refused wrongly", "refused wrongly, two solutions", "refused wrongly, fixed only just",
       "chosen silently", "settled elsewhere")  # fmt: skip
TRUSTED = (0.67, 1.5)
EQUAL, BESIDE, SMALL = 10.0, 5.0, 12
"""v'Pv by which another solution of the study is no worse, standard deviations by which it is another,
and stations of a small network."""
RELIEF = (300.0, 100.0, 30.0, 5.0, 1.0)


def random_slopes(rng: np.random.Generator) -> Space:
    """A network: stations 250 m apart, slopes to the five to eight nearest, directions in every third network."""
    n = int(rng.integers(6, 21))
    side = int(np.ceil(np.sqrt(1.3 * n)))
    cells = rng.permutation(side * side)[:n]
    plane = np.stack([cells % side, cells // side], axis=1) * 250.0 + rng.uniform(-70, 70, (n, 2)) + [4000, 7000]
    relief = RELIEF[int(rng.integers(len(RELIEF)))]
    truth = np.column_stack([plane, 200 + rng.uniform(0, relief, n)])
    known = np.zeros((n, 3), dtype=bool)
    marks = rng.permutation(n)[: int(rng.integers(3, 6))]
    known[marks] = True
    if rng.random() < 0.3:
        known[marks[0], 2] = False
        known[marks[1], :2] = False
        known[rng.permutation(n)[:2], 2] = True
    rows, sets = Rows(), 0
    pointed = rng.random() < 1 / 3
    for i in range(n):
        hi = round(float(rng.uniform(1.4, 1.7)), 3)
        near = np.argsort(np.hypot(*(plane - plane[i]).T))[1 : int(rng.integers(5, 9))].tolist()
        for j in near:
            above = (hi, round(float(rng.uniform(1.3, 2.0)), 3))
            if rng.random() < 0.7:
                rows.put("slope", (i, j), above, 0.0)
        if pointed and rng.random() < 0.5:
            for j in near:
                rows.put("direction", (i, j), (hi, 1.5), 0.0, sets)
            sets += 1
    kind, ends, above_all, _, group = arrays(rows)
    zero = rng.uniform(0, 2 * np.pi, max(sets, 1))
    value = model(kind, ends, above_all, truth, 0.13) - np.where(group >= 0, zero[group], 0.0)
    value = value + rng.normal(0, [SDS[k] for k in kind])
    rows.value = np.where(kind == "direction", value % (2 * np.pi), value).tolist()
    return Space(
        [f"P{i}" for i in range(n)],
        truth,
        truth.copy(),
        known,
        rows,
        sets,
        (0.13, None),
        truth.copy(),
        np.zeros((n, 3)),
    )


def with_blunder(space: Space, rng: np.random.Generator) -> None:
    """One distance wrong by 0.1 m to 10 km."""
    r = int(rng.choice(np.flatnonzero(np.array(space.rows.kind) == "slope")))
    space.rows.value[r] += float(10 ** rng.uniform(-1, 4))


def written(space: Space, folder: Path) -> Path:
    """The job without starting coordinates."""
    job = write(space, folder)
    toml = (job / "job.toml").read_text()
    (job / "job.toml").write_text(toml.replace('[[book]]\nfile = "stations.csv"\n', ""))
    (job / "stations.csv").unlink()
    return job


def singular(space: Space) -> float:
    """Least singular value of the reference's design at the truth, columns scaled, as a share of the largest."""
    kind, ends, above, _, group = arrays(space.rows)
    sd = np.array([SDS[k] for k in kind])
    columns = []
    for s, c in np.argwhere(~space.known).tolist():
        step = np.zeros_like(space.truth)
        step[s, c] = 0.01
        d = model(kind, ends, above, space.truth + step, 0.13) - model(kind, ends, above, space.truth - step, 0.13)
        columns.append(np.where(kind == "direction", np.remainder(d + np.pi, 2 * np.pi) - np.pi, d) / sd)
    columns += [(group == g) / sd for g in range(space.sets)]
    a = np.array(columns).T
    a = a / np.maximum(np.linalg.norm(a, axis=0), 1e-300)
    if a.shape[0] < a.shape[1]:
        return 0.0
    s = np.linalg.svd(a, compute_uv=False)
    return float(s[-1] / s[0])


def both_fit(space: Space, job: Path) -> bool:
    """Whether both places named are solutions of the reference: each as good as the degrees of freedom allow."""
    network = adjust.read(job).network
    start = find_start(network, PLANE)
    order = [network.stations.index[name] for name in space.names]
    sums = []
    shapes: list[Array] = []
    for x in (start.positions, *start.images):
        xyz, _, square_sum = reference(replace(space, start=np.where(space.known, space.truth, x[order])))
        sums.append(square_sum)
        shapes.append(xyz)
    apart = min(float(np.abs(shapes[0] - other).max()) for other in shapes[1:]) if len(shapes) > 1 else 0.0
    return len(sums) > 1 and apart > 0.01 and max(sums) < 2 * min(sums) + 40


def fitted(space: Space) -> tuple[Array, Array, float]:
    """Positions and standard deviations (n, 3) of the reference, and v'Pv."""
    found, unpack = _fit(space, None)
    scale = 1 / np.linalg.norm(found.jac, axis=0)
    _, s, vt = np.linalg.svd(found.jac * scale, full_matrices=False)
    sd = np.zeros_like(space.truth)
    sd[~space.known] = (np.linalg.norm(vt / s[:, None], axis=0) * scale)[: int((~space.known).sum())]
    return unpack(found.x)[0], sd, 2 * float(found.cost)


def growth(space: Space, station: int) -> list[float]:
    """Growth of v'Pv when the height of a station is one standard deviation above and below its best: 1 if the
    standard deviation means anything."""
    xyz, sd, least = fitted(space)
    known = space.known.copy()
    known[station, 2] = True
    out = []
    for sign in (1.0, -1.0):
        start = xyz.copy()
        start[station, 2] += sign * sd[station, 2]
        out.append(reference(replace(space, start=start, known=known))[2] - least)
    return out


def only_just(space: Space, text: str) -> bool:
    """Whether one of the stations that are said to be fixed only just is so by the reference: within one standard
    deviation of its height v'Pv grows by a third more or less than 1, or more, or not at all."""
    named = [space.names.index(name) for name in re.findall(r"(\w+) is fixed only just", text)]
    return any(not TRUSTED[0] < g < TRUSTED[1] for s in named for g in growth(space, s))


def elsewhere(space: Space, xyz: Array, sd: Array, square_sum: float) -> bool:
    """Whether the reference has an equal solution elsewhere: the image in plan beyond the line through two stations
    known there, or in small networks all heights the other way up (in large ones scipy takes minutes from there). A
    silent choice between two would show here."""
    new, plan = ~space.known.all(axis=1), np.flatnonzero(space.known[:, :2].all(axis=1))
    plan_image, height_image = xyz.copy(), xyz.copy()
    a, b = (complex(*xyz[k, :2]) for k in plan[:2])
    turn = (b - a) / abs(b - a)
    z = a + turn * ((xyz[:, 0] + 1j * xyz[:, 1] - a) / turn).conj()
    plan_image[new, :2] = np.stack([z.real, z.imag], axis=1)[new]
    height_image[new, 2] = 2 * space.truth[space.known[:, 2], 2].mean() - xyz[new, 2]
    starts = [plan_image] if not space.sets else []  # directions know their hand
    starts += [height_image] if len(space.names) <= SMALL else []
    for start in starts:
        other, _, another = reference(replace(space, start=np.where(space.known, space.truth, start)))
        if another < square_sum + EQUAL and float((np.abs(other - xyz) / np.maximum(sd, 0.002)).max()) > BESIDE:
            return True
    return False


def outcome(number: int, folder: Path, blunder: bool = False) -> tuple[str, float, str]:
    """What happened to the network of a number; largest difference of coordinates in standard deviations (of 1 cm at
    the least); words of a refusal."""
    rng = np.random.default_rng([SEED, number])
    space = random_slopes(rng)
    if blunder:
        with_blunder(space, rng)
    job = written(space, folder)
    sound = singular(space)
    try:
        solution = adjust.solve(adjust.read(job))
    except BrasscapError as refusal:
        text = "; ".join(refusal.sentences)
        if "equally" in text:
            good = blunder or both_fit(space, job)
            return ("refused, two solutions" if good else "refused wrongly, two solutions"), sound, text
        if "only just" in text:
            good = blunder or only_just(space, text)
            return ("refused, fixed only just" if good else "refused wrongly, fixed only just"), sound, text
        free = bool(re.search("nothing fixes|held by|too few|row in stations", text)) and sound < 1e-7
        return ("refused, not fixed" if free else "refused wrongly"), sound, text
    xyz, sd, square_sum = fitted(space)
    got = solution.positions[[solution.network.stations.index[name] for name in space.names]]
    off = float((np.abs(got - xyz) / np.maximum(sd, COORDINATES_M / SHARE_OF_SD)).max())
    if blunder:
        return (
            (
                "settled at the least"
                if off < 0.1 or solution.total.square_sum < square_sum * 1.001
                else "settled elsewhere"
            ),
            off,
            "",
        )
    if elsewhere(space, xyz, sd, square_sum):
        return "chosen silently", off, ""
    good = off < SHARE_OF_SD and abs(solution.total.square_sum - square_sum) < SQUARE_SUM * (1 + square_sum)
    return ("agrees" if good else "differs"), off, f"v'Pv {solution.total.square_sum:.4g} reference {square_sum:.4g}"


def main() -> None:
    """Run the study and print its table."""
    blunder = "--blunder" in sys.argv
    numbers = [int(a) for a in sys.argv[1:] if a.isdigit()]
    count, first = (numbers + [200, 0][len(numbers) :])[:2]
    tally: Counter[str] = Counter()
    with tempfile.TemporaryDirectory() as place:
        for number in range(first, first + count):
            folder = Path(place) / str(number)
            what, off, text = outcome(number, folder, blunder)
            tally[what] += 1
            if what in BAD:
                print(f"network {number}: {what} {off:.1e} {text[:300]}", flush=True)
            if number % 10 == 9:
                print(f"  {number + 1 - first}: " + ", ".join(f"{n} {w}" for w, n in tally.most_common()), flush=True)
            shutil.rmtree(folder, ignore_errors=True)
    print(f"{count} networks of slope distances, seed {SEED}: " + ", ".join(f"{n} {w}" for w, n in tally.most_common()))


if __name__ == "__main__":
    main()
