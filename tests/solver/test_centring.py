"""Centring vectors: sizes known in closed form, and the same adjustment as with eccentricities as unknowns."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

import adjust
from tests.helpers import close

Array = NDArray[np.float64]
SEC = np.pi / 648000
TOML = """[units]
length = "m"
angle = "deg"
[instruments.i]
direction = "{direction}"
distance = "2 mm"
centring = "{centring}"
{more}
"""


def job(
    folder: Path, tables: dict[str, str], direction: str = "2 sec", centring: str = "1.5 mm", more: str = ""
) -> adjust.Job:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "job.toml").write_text(TOML.format(direction=direction, centring=centring, more=more))
    for name, text in tables.items():
        (folder / f"{name}.csv").write_text(text)
    return adjust.read(folder)


def angle_job(
    folder: Path, degrees: float, repeats: int = 1, setups: bool = False, direction: str = "2 sec"
) -> adjust.Job:
    """An angle at S between A, known, and B, 50 m away, turned ``repeats`` times; its line S-B is what it fixes."""
    a = np.radians(degrees)
    b = f"{float(50 * np.sin(a))!r},{float(50 * np.cos(a))!r}"
    rows = "".join(f"S,A,B,{degrees!r}{f',{i}' if setups else ''}\n" for i in range(repeats))
    return job(
        folder,
        {
            "control": "station,east,north\nS,0,0\nA,0,50\n",
            "stations": f"station,east,north\nB,{b}\n",
            "angles": f"at,first,second,angle{',setup' if setups else ''}\n{rows}",
            "distances": "from,to,distance,sd\nS,B,50,2\n",
        },
        direction,
    )


def sd_of_line(solution: adjust.Solution) -> float:
    """Standard deviation of the azimuth S-B in seconds."""
    judgement = adjust.assess(solution)
    names = solution.names
    lines = {
        (names[i], names[j]): sd
        for i, j, sd in zip(judgement.lines.start, judgement.lines.end, judgement.lines.sd_azimuth, strict=True)
    }
    return float(lines["S", "B"] / SEC)


@pytest.mark.parametrize(("degrees", "seconds"), [(10, 1.1), (180, 12.4)])
def test_centring_of_an_angle_at_50_m(tmp_path: Path, degrees: float, seconds: float) -> None:
    """sigma d12 / (d1 d2) at 50 m and 1.5 mm: 1.1" for 10 degrees, 12.4" for 180 (closed form)."""
    solution = adjust.solve(angle_job(tmp_path, degrees, direction="0.001 sec"))
    close(sd_of_line(solution), seconds, atol=0.05)
    exact = 1.5e-3 * 2 * 50 * np.sin(np.radians(degrees) / 2) / 50**2 / SEC
    close(sd_of_line(solution), exact, atol=1e-5)


def test_repeats_from_one_set_up_do_not_improve_centring(tmp_path: Path) -> None:
    """Four angles of 90 degrees from one set-up: sqrt(8.75^2 + 2.83^2 / 4) = 8.9"; from four set-ups 4.6"."""
    close(sd_of_line(adjust.solve(angle_job(tmp_path / "one", 90, 4))), 8.9, atol=0.05)
    close(sd_of_line(adjust.solve(angle_job(tmp_path / "four", 90, 4, setups=True))), 4.6, atol=0.05)


def test_count_improves_the_pointing_and_not_the_centring(tmp_path: Path) -> None:
    """Four readings meaned in one row are the same as four rows of one set-up."""
    one = angle_job(tmp_path, 90)
    (tmp_path / "angles.csv").write_text("at,first,second,angle,count\nS,A,B,90.0,4\n")
    close(sd_of_line(adjust.solve(adjust.read(one.folder))), 8.9, atol=0.05)


def test_a_row_with_its_own_sd_has_its_centring_in_it(tmp_path: Path) -> None:
    one = angle_job(tmp_path, 90)
    (tmp_path / "angles.csv").write_text("at,first,second,angle,sd\nS,A,B,90.0,3\n")
    close(sd_of_line(adjust.solve(adjust.read(one.folder))), 3.0, atol=1e-9)


POINTS = {"M1": (0.0, 0.0), "M2": (130.0, 20.0), "P": (60.0, 90.0), "Q": (70.0, -50.0), "R": (150.0, 110.0)}


def braced(folder: Path, seed: int) -> adjust.Job:
    """A braced network with directions in two sets, distances and angles, all from the same set-ups or their own."""
    rng = np.random.default_rng(seed)
    distances, directions, angles = ["from,to,distance,setup"], ["at,to,direction,set,setup"], ["at,first,second,angle"]
    for a, (ea, na) in POINTS.items():
        others = [b for b in POINTS if b != a]
        azimuths = {b: np.degrees(np.arctan2(POINTS[b][0] - ea, POINTS[b][1] - na)) for b in others}
        for s in (1, 2):
            turn = rng.uniform(0, 360)
            for b in others:
                directions.append(f"{a},{b},{float((azimuths[b] - turn + rng.normal(0, 0.003)) % 360)!r},{s},main")
        for b in others[:2]:
            d = np.hypot(POINTS[b][0] - ea, POINTS[b][1] - na) + rng.normal(0, 0.003)
            distances.append(f"{a},{b},{float(d)!r},main")
        x, y = others[:2]
        angles.append(f"{a},{x},{y},{float((azimuths[y] - azimuths[x] + rng.normal(0, 0.003)) % 360)!r}")
    control = "station,east,north\n" + "".join(f"{m},{POINTS[m][0]},{POINTS[m][1]}\n" for m in ("M1", "M2"))
    tables = {"control": control, "distances": distances, "directions": directions, "angles": angles}
    return job(folder, {k: v if isinstance(v, str) else "\n".join(v) + "\n" for k, v in tables.items()},
               "5 sec", "1.0 mm", 'target = "1.5 mm"')  # fmt: skip


def with_eccentricities(solution: adjust.Solution) -> tuple[Array, Array, Array]:
    """Coordinates' step, their cofactors and v'Pv with every vector as two unknowns with their own observations.

    Written out by hand: the sight from a to b is b + t - a - c; partials by hand.
    """
    network, names = solution.network, solution.names
    xyz = solution.positions
    unknown = {("x", i, k): None for i in range(len(names)) for k in (0, 1) if names[i] not in ("M1", "M2")}
    rows: list[tuple[dict[object, float], float, float]] = []

    def sight(a: int, b: int, setup: int, kind: str) -> tuple[float, dict[object, float]]:
        de, dn = xyz[b, :2] - xyz[a, :2]
        d2 = de * de + dn * dn
        value, pe, pn = (
            (np.sqrt(d2), de / np.sqrt(d2), dn / np.sqrt(d2))
            if kind == "distance"
            else (np.arctan2(de, dn), dn / d2, -de / d2)
        )
        out: dict[object, float] = {}
        for k, p in ((0, pe), (1, pn)):
            out["x", b, k] = out["t", setup, b, k] = p
            out["x", a, k] = out["c", setup, k] = -p
        return float(value), out

    for block in network.blocks:
        for i in range(len(block)):
            stations, setup = block.stations[i].tolist(), int(block.setup[i])
            value, partials = sight(stations[0], stations[-1], setup, block.kind)
            if block.kind == "angle":
                first, by = sight(stations[0], stations[1], setup, "azimuth")
                value -= first
                for key, p in by.items():
                    partials[key] = partials.get(key, 0.0) - p
            if block.kind == "direction":
                partials["o", int(block.group[i])] = -1.0
                value -= solution.groups[block.group[i]]
            l = block.values[i, 0] - value
            if block.kind != "distance":
                l = (l + np.pi) % (2 * np.pi) - np.pi
            rows.append((partials, float(l), float(block.sd[i, 0])))
    sizes = {"c": 1.0e-3, "t": 1.5e-3}
    for key in dict.fromkeys(key for partials, _, _ in rows for key in partials):
        assert isinstance(key, tuple)
        if key[0] in sizes:
            rows.append(({key: 1.0}, 0.0, sizes[key[0]]))
        if key[0] != "x":
            unknown[key] = None
    place = {key: j for j, key in enumerate(unknown)}
    a, l = np.zeros((len(rows), len(place))), np.zeros(len(rows))
    for r, (partials, misclosure, sd) in enumerate(rows):
        l[r] = misclosure / sd
        for key, p in partials.items():
            if key in place:
                a[r, place[key]] += p / sd
    q = np.linalg.inv(a.T @ a)
    x = q @ (a.T @ l)
    count = sum(key[0] == "x" for key in place)
    v = a @ x - l
    return x[:count], q[:count, :count], v @ v


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_block_covariance_equals_eccentricities_as_unknowns(tmp_path: Path, seed: int) -> None:
    solution = adjust.solve(braced(tmp_path, seed))
    step, q, square_sum = with_eccentricities(solution)
    numbers = solution.design.unknowns.coordinate
    order = np.argsort(numbers[numbers >= 0])
    columns = numbers[numbers >= 0][order][None]
    got = solution.cofactors.blocks(columns)[0]
    close(got, q, atol=1e-10 * np.abs(q).max())
    close(step, np.zeros(len(step)), atol=1e-9)  # the program stands at the solution of the other form
    close(solution.total.square_sum, square_sum, atol=1e-10 * square_sum)


def test_leaving_the_vectors_out_is_seen(tmp_path: Path) -> None:
    """Negative control: without the target's vectors the cofactors differ by far more than the tolerance."""
    solution = adjust.solve(braced(tmp_path, 1))
    text = (tmp_path / "job.toml").read_text().replace('target = "1.5 mm"', "")
    (tmp_path / "job.toml").write_text(text)
    other = adjust.solve(adjust.read(tmp_path))
    assert np.nanmax(np.abs(solution.covariance - other.covariance)) > 1e-3 * np.nanmax(other.covariance)


def test_the_sum_of_redundancy_holds_with_centring(tmp_path: Path) -> None:
    judgement = adjust.assess(adjust.solve(braced(tmp_path, 4)))
    close(judgement.reliability.redundancy.sum(), judgement.solution.total.degrees_of_freedom, atol=1e-9)
