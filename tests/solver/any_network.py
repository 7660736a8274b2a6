"""Any network that can be solved is solved: random networks without starting coordinates against a dense reference.

    python -m tests.solver.any_network [COUNT] [--blunder]

makes COUNT random networks (6 to 60 stations; distances, directions, angles, azimuths, levelled lines; held, weighted,
free), takes their starting coordinates away, adjusts them, and compares with an independent dense adjustment that
starts from the truth: coordinates, variance factor, redundancy numbers, statistics, ellipses. A network that is
refused must be refused rightly: the dense reference then has a free movement, or a second solution fits as well.
With --blunder one reading of each network has a gross error of any size.
"""

from __future__ import annotations

import shutil
import sys
import tempfile
from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from scipy.special import chdtri

import adjust
from adjust.errors import NotConverged, Unsolvable
from adjust.graph.starts import find_start
from adjust.judge.ellipses import ellipses
from tests.networks import Array, Made, Row, random_job, write_job
from tests.solver.oracle import Dense, order

KIND_SETS = (
    ("distances", "directions", "angles"), ("distances", "directions"), ("distances", "angles"),
    ("directions", "angles", "distances", "levelled_lengths"), ("distances",), ("levelled_lengths", "levelled_setups"),
    ("distances", "directions", "azimuths"), ("directions", "azimuths"), ("angles", "distances", "azimuths"),
)  # fmt: skip
CONTROL = ("held", "weighted", "free")
COORDINATES_M = 1e-6
FIGURES = 1e-6
SEED = 20261201


@dataclass(frozen=True)
class Reference:
    """A dense adjustment: positions (n, 3), covariance of the unknowns, figures of the readings, and its soundness."""

    positions: Array
    covariance: Array
    square_sum: float
    redundancy: Array
    statistic: Array
    smallest: float
    """Smallest singular value of the scaled design beyond the datum, as a share of the largest."""


def case(number: int, folder: Path) -> Made:
    """The network of a number."""
    rng = np.random.default_rng([SEED, number])
    n = int(rng.integers(6, 61))
    return random_job(rng, folder, n, KIND_SETS[number % len(KIND_SETS)], CONTROL[number // len(KIND_SETS) % 3])


def without_starts(made: Made) -> Made:
    """The same job with its stations table taken away."""
    tables = [t for t in made.tables if t.kind != "stations"]
    shutil.rmtree(made.folder)
    write_job(made.folder, tables, free=made.free, settings=made.settings)
    return replace(made, tables=tables)


def with_blunder(made: Made, number: int) -> tuple[Made, str]:
    """One reading with a gross error of any size: 0.1 to 100,000 m in a length, any angle; and where it is."""
    rng = np.random.default_rng([SEED, 1, number])
    places = [(t, r) for t, table in enumerate(made.tables) if table.kind not in ("control", "stations")
              for r in range(len(table.rows))]  # fmt: skip
    t, r = places[int(rng.integers(len(places)))]
    table = made.tables[t]
    column = next(c for c in ("distance", "direction", "angle", "azimuth", "rise") if c in table.rows[r])
    row: Row = dict(table.rows[r])
    old = float(row[column])  # type: ignore[arg-type]  # the value column of a made table is a number
    if column in ("distance", "rise"):
        new = (
            abs(old) + 10 ** rng.uniform(-1, 5)
            if column == "distance"
            else old + rng.choice([-1, 1]) * 10 ** rng.uniform(-1, 5)
        )
    else:
        new = (old + rng.uniform(0.01, 2 * np.pi - 0.01)) % (2 * np.pi)
    row[column] = float(new)
    rows = [*table.rows[:r], row, *table.rows[r + 1 :]]
    tables = [*made.tables[:t], replace(table, rows=rows), *made.tables[t + 1 :]]
    return replace(made, tables=tables), f"{table.file}:{r + 2}"


def reference(made: Made, start: Array | None = None) -> Reference:
    """Gauss-Newton from the truth, or from ``start``, on the dense equations; minimum norm where the datum is free."""
    dense = Dense.of(made)
    xyz = made.truth.copy() if start is None else start.copy()
    inside = dense.coordinate >= 0
    groups = dense.groups_at(xyz)
    w = 1 / made.readings.sd
    for _ in range(30):
        J = dense.jacobian(xyz) * w[:, None]
        scale = np.linalg.norm(J, axis=0)
        scale[scale == 0] = 1.0
        v = dense.residuals(xyz, groups) * w
        dx = -np.linalg.lstsq(J / scale, v, rcond=1e-9)[0] / scale
        xyz[inside] += dx[dense.coordinate[inside]]
        groups = groups + dx[dense.first_group :]
        if np.abs(dx).max() < 1e-10:
            break
    J = dense.jacobian(xyz) * w[:, None]
    scale = np.linalg.norm(J, axis=0)
    scale[scale == 0] = 1.0
    u, s, vt = np.linalg.svd(J / scale, full_matrices=False)
    missing = dense.free_movements(xyz, groups=False).shape[1] if made.free else 0
    rank = len(s) - missing
    hat = (u[:, :rank] ** 2).sum(axis=1)
    v = dense.residuals(xyz, groups) * w
    r = 1 - hat
    with np.errstate(invalid="ignore", divide="ignore"):
        statistic = np.where(r > 1e-6, v / np.sqrt(r), np.nan)
    q = (vt[:rank].T / s[:rank] ** 2) @ vt[:rank] / scale[:, None] / scale
    return Reference(xyz, q, float(v @ v), r, statistic, float(s[rank - 1] / s[0]))


def differences(made: Made, judgement: adjust.Judgement, ref: Reference) -> dict[str, float]:
    """Largest differences from the reference, lengths in metres, the rest relative or absolute where of size one."""
    solution = judgement.solution
    rows = np.argsort(_row_order(made, solution))
    got = {
        "square sum": abs(solution.total.square_sum - ref.square_sum) / (1 + ref.square_sum),
        "redundancy": float(np.nanmax(np.abs(judgement.reliability.redundancy[rows] - ref.redundancy))),
        "statistic": float(np.nanmax(np.abs(judgement.statistic[rows] - ref.statistic), initial=0.0)),
    }
    if not made.free:
        places = order(made, solution)
        inside = Dense.of(made).coordinate >= 0
        d = np.abs(solution.positions[places] - ref.positions)
        got["coordinates"] = float(d[inside].max(initial=0.0))
        got["ellipses"] = _ellipses(made, solution.covariance[places], ref)
    return got


def both_fit(made: Made) -> bool:
    """Whether the solution said to be mirrored has another beside it: each fits, and their shapes differ."""
    network = adjust.read(made.folder).network
    start = find_start(network)
    places = np.array([network.stations.index[name] for name in made.names])
    found = []
    for east_north in (start.positions[:, :2], *start.mirrors):
        xyz = np.column_stack([east_north, start.positions[:, 2]])[places]
        found.append(reference(made, np.where(np.isnan(xyz), made.truth, xyz)))
    limit = chdtri(max(1, len(made.readings) - 1), 1e-6)
    apart = [_apart(found[0].positions, other.positions) for other in found[1:]]
    return len(found) > 1 and all(one.square_sum < limit for one in found) and min(apart) > 0.01


def _apart(one: Array, other: Array) -> float:
    """Largest distance between two figures, metres, once the second is shifted and turned onto the first."""
    a, b = ((xyz[:, 0] + 1j * xyz[:, 1]) for xyz in (one, other))
    a, b = a - a.mean(), b - b.mean()
    turn = np.vdot(b, a)
    return float(np.abs(a - b * turn / abs(turn)).max())


def _row_order(made: Made, solution: adjust.Solution) -> Array:
    """Rows of the solution in the order of the made readings: both follow the book."""
    assert len(made.readings) == len(solution.residuals)
    return np.arange(len(made.readings))


def _ellipses(made: Made, got: Array, ref: Reference) -> float:
    """Largest difference of semi-axes, metres."""
    coordinate = Dense.of(made).coordinate
    inside = (coordinate[:, :2] >= 0).all(axis=1)
    if not inside.any():
        return 0.0
    blocks = np.array([ref.covariance[np.ix_(c, c)] for c in coordinate[inside, :2]])
    a, b, _ = ellipses(got[inside][:, :2, :2])
    c, d, _ = ellipses(blocks)
    return float(max(np.abs(a - c).max(), np.abs(b - d).max()))


def outcome(number: int, folder: Path, blunder: bool = False) -> tuple[str, dict[str, float], str]:
    """What happened to the network of a number: agrees, differs, converged, refused in some way; and the figures."""
    made = case(number, folder)
    full = made
    place = ""
    if blunder:
        made, place = with_blunder(made, number)
    made = without_starts(made)
    try:
        judgement = adjust.assess(adjust.solve(adjust.read(made.folder)))
    except (Unsolvable, NotConverged) as refusal:
        text = "; ".join(refusal.sentences)
        if blunder:
            if "fit" in text and "equally" in text:
                return "refused, two solutions", {}, text
            return ("refused, culprit named" if f"{place} " in text else "refused"), {}, f"{place}: {text}"
        sound = reference(full).smallest > 1e-7
        twofold = "fit" in text and "equally" in text
        if twofold and not both_fit(made):
            return "refused wrongly", {}, text
        return ("refused, two solutions" if twofold else "refused wrongly" if sound else "refused rightly"), {}, text
    if blunder:
        return "converged", {}, place
    found = differences(full, judgement, reference(full))
    bad = {k: v for k, v in found.items() if v > (COORDINATES_M if k in ("coordinates", "ellipses") else FIGURES)}
    return ("differs" if bad else "agrees"), found, str(bad) if bad else ""


def main() -> None:
    """Run the study and print its table."""
    blunder = "--blunder" in sys.argv
    count = next((int(a) for a in sys.argv[1:] if a.isdigit()), 1000)
    tally: Counter[str] = Counter()
    worst: dict[str, float] = {}
    with tempfile.TemporaryDirectory() as place:
        for number in range(count):
            folder = Path(place) / str(number)
            what, found, text = outcome(number, folder, blunder)
            tally[what] += 1
            worst = {
                k: max(v, worst.get(k, 0.0)) for k, v in (worst | found).items() for v in [max(v, found.get(k, v))]
            }
            if what in ("differs", "refused wrongly", "refused", "refused, culprit named"):
                kinds, control = KIND_SETS[number % len(KIND_SETS)], CONTROL[number // len(KIND_SETS) % 3]
                print(f"network {number} ({kinds}, {control}): {what}: {text[:300]}")
            shutil.rmtree(folder, ignore_errors=True)
    print(f"{count} networks, seed {SEED}: " + ", ".join(f"{n} {what}" for what, n in tally.most_common()))
    for name, value in worst.items():
        print(f"  largest difference, {name}: {value:.1e}")


if __name__ == "__main__":
    main()
