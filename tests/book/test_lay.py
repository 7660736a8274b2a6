"""Surfaces, heights of instrument and target, zenith angles, refraction: what is read and what comes of it."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.lay import REDUCED, horizontal
from adjust.errors import Unsolvable
from adjust.record.build import build
from adjust.solver.solution import Solution
from tests.book.jobs import HEAD, job, one
from tests.helpers import close

R = 6371008.8
SLOPE = HEAD + '[[book]]\nkind = "distances"\nsurface = "slope"\n'
MARKS = "station,east,north,height\nA,0,0,{}\nB,{},,\n"


def book(surface: str, *kinds: str, frame: str = "") -> str:
    """job.toml with distances on a surface and other tables as they are."""
    blocks = "".join(f'[[book]]\nkind = "{kind}"\n' for kind in kinds)
    return f'{HEAD}{frame}[[book]]\nkind = "distances"\nsurface = "{surface}"\n{blocks}'


def sphere(d: float, h1: float, h2: float, k: float) -> tuple[float, float]:
    """Slope and zenith angle between heights above the plane, by the triangle with the centre of the Earth."""
    theta = 2 * math.asin(d / (2 * R))
    r1, r2 = R + h1, R + h2
    slope = math.sqrt((r2 - r1) ** 2 + 4 * r1 * r2 * math.sin(theta / 2) ** 2)
    return slope, math.atan2(r2 * math.sin(theta), r2 * math.cos(theta) - r1) - k * theta / 2


def solved(folder: Path, toml: str, **tables: str) -> tuple[Solution, dict[str, np.ndarray]]:
    """The adjustment and the positions by name."""
    solution = adjust.solve(job(folder, toml, **tables))
    return solution, dict(zip(solution.names, solution.positions, strict=True))


# ---- what is read


def test_a_slope_distance_with_a_zenith_angle_is_reduced_and_says_so(tmp_path: Path) -> None:
    slope, z = sphere(1000.0, 0.0, 87.0, 0.13)
    rows = f"from,to,distance,zenith_angle,instrument_height,target_height\nA,B,{slope!r},{math.degrees(z)!r},1.5,1.5\n"
    block = one(tmp_path, SLOPE.replace('"dms"', '"deg"'), distances=rows)
    assert block.surface == "ground-from"
    close(block.values, [[1000.0]], atol=1e-7)
    ((name, amount),) = block.corrections
    assert name == REDUCED
    close(amount, [1000.0 - slope], atol=1e-7)
    close(block.above, [[1.5, 1.5]], atol=1e-12)


def test_the_convergence_of_the_verticals_is_13_7_mm_at_one_kilometre_and_87_m() -> None:
    slope, z = sphere(1000.0, 0.0, 87.0, 0.0)
    close(slope * math.sin(z) - horizontal(np.array([slope]), np.array([z]), 0.0)[0], 0.0137, atol=0.00005)
    close(horizontal(np.array([slope]), np.array([z]), 0.0), [1000.0], atol=1e-7)


def test_the_reduction_stands_in_the_record(tmp_path: Path) -> None:
    rows = "from,to,distance,zenith_angle\nA,B,{0},60 00 00\nA,B,{0},60 00 00\n".format("100.000")
    toml = book("slope", "control", "azimuths")
    found = adjust.solve(job(tmp_path, toml, distances=rows, control="station,east,north\nA,0,0\n",
                             azimuths="from,to,azimuth\nA,B,90 00 00\n"))  # fmt: skip
    record = build(adjust.assess(found))
    entry = record["observations"][0]
    assert (entry["booked"], entry["id"]) == ("100.000", "distances.csv:2")
    (correction,) = entry["corrections"]
    assert correction["name"] == "slope to horizontal at the instrument"
    close(correction["value"], 100 * math.sin(math.radians(60)) - 100, atol=0.001)
    close(entry["observed"], 100.0 + correction["value"], atol=1e-8)
    assert record["settings"]["books"][0]["surface"] == "slope"
    assert record["frame"] == {"kind": "local plane", "origin": None, "plane_height": 0, "radius": R}


def test_the_reduced_distance_has_the_error_of_its_zenith_angle_too(tmp_path: Path) -> None:
    """sin 30 times 2.3 mm and 100 m cos 30 times 3 seconds; the row's own sd is final; no figure, no share."""
    rows = "from,to,distance,zenith_angle,sd\nA,B,100,30 00 00,\nA,C,100,30 00 00,0.004\n"
    share = 100.0 * math.cos(math.radians(30)) * math.radians(3 / 3600)
    level = horizontal(np.array([100.0]), np.array([math.radians(30)]), 0.13)[0]
    own = 0.5 * (0.002 + 3e-6 * level)
    close(one(tmp_path / "a", SLOPE, distances=rows).sd[:, 0], [math.hypot(own, share), 0.004], atol=1e-9)
    toml = SLOPE.replace('zenith = "3 sec"\n', "")
    close(one(tmp_path / "b", toml, distances=rows).sd[:, 0], [own, 0.004], atol=1e-9)


def test_without_a_zenith_angle_a_slope_distance_stays_in_space(tmp_path: Path) -> None:
    block = one(tmp_path, SLOPE, distances="from,to,distance,instrument_height,target_height\nA,B,10,1.5,\nA,C,9,,\n"
                .replace("1.5,", "1.5,1.2"))  # fmt: skip
    assert (block.surface, block.corrections) == ("slope", ())
    close(block.above, [[1.5, 1.2], [0.0, 0.0]], atol=1e-12)


@pytest.mark.parametrize(("surface", "kept"), [("grid", ""), ("ground", "ground"), ("ground-from", "ground-from")])
def test_other_surfaces_are_kept(surface: str, kept: str, tmp_path: Path) -> None:
    assert one(tmp_path, book(surface), distances="from,to,distance\nA,B,10\n").surface == kept


def test_elevations_are_zenith_angles_the_other_way_round(tmp_path: Path) -> None:
    rows = "from,to,zenith_angle,elevation\nA,B,80 00 00,\nA,B,,10 00 00\nA,C,95 30 00,\nA,C,,-5 30 00\n"
    block = one(tmp_path, zenith_angles=rows)
    close(np.degrees(block.values[:, 0]), [80, 80, 95.5, 95.5], atol=1e-12)
    assert block.surface == "slope"
    assert block.above is None
    close(block.constant, np.full(4, 0.13), atol=1e-15)


@pytest.mark.parametrize(
    ("text", "value", "sd"),
    [('"0.13 +- 0.05"', 0.13, 0.05), ('"0.2 ± 0.1"', 0.2, 0.1), ("0.07", 0.07, None), ("0", 0, None)],
)
def test_refraction_is_a_number_or_an_estimate(text: str, value: float, sd: float | None, tmp_path: Path) -> None:
    found = job(tmp_path, f"{HEAD}[frame]\nrefraction = {text}\n", zenith_angles="from,to,zenith_angle\nA,B,80 00 00\n")
    assert (found.settings.frame.refraction.value, found.settings.frame.refraction.sd) == (value, sd)
    kinds = [block.kind for block in found.network.blocks]
    assert kinds == (["refraction", "zenith_angle"] if sd else ["zenith_angle"])
    assert found.network.blocks[-1].group.tolist() == [0 if sd else -1]


def test_an_estimate_that_no_reading_needs_is_no_observation(tmp_path: Path) -> None:
    found = job(tmp_path, HEAD + '[frame]\nrefraction = "0.13 +- 0.05"\n', distances="from,to,distance\nA,B,10\n")
    assert [block.kind for block in found.network.blocks] == ["distance"]
    assert found.network.groups == ()


@pytest.mark.parametrize(
    ("frame", "control", "height"),
    [
        ("[frame]\nplane_height = 212.5\n", "A,0,0,100\n", 212.5),
        ('[frame]\nplane_height = "1000 ft"\n', "A,0,0,100\n", 304.8),
        ("", "A,0,0,100\nB,,,160\n", 130.0),
        ("", "A,0,0,\n", 50.0),
    ],
    ids=["given", "given in feet", "mean of the known", "mean of the starting"],
)
def test_the_height_of_the_plane(frame: str, control: str, height: float, tmp_path: Path) -> None:
    found, _ = solved(tmp_path, HEAD + frame, control="station,east,north,height\n" + control,
                      stations="station,east,north,height\nC,0,50,50\n", distances="from,to,distance\nA,C,50\n",
                      azimuths="from,to,azimuth\nA,C,0 00 00\n")  # fmt: skip
    close(found.design.frame.plane_height, height, atol=1e-9)


# ---- what comes of it


@pytest.mark.parametrize("plane", [None, 0.0, 1000.0])
def test_heights_by_zenith_angles_are_exact_to_a_tenth_of_a_millimetre(plane: float | None, tmp_path: Path) -> None:
    """1 km, 87 m of rise, at 1,000 m: on a plane at height 0 the plane formulas would be 14.8 mm short."""
    _, z = sphere(
        1000.0, 1000.0 - (1000.0 if plane is None else plane), 1087.0 - (1000.0 if plane is None else plane), 0.13
    )
    frame = "" if plane is None else f"[frame]\nplane_height = {plane}\n"
    _, at = solved(tmp_path, HEAD.replace('"dms"', '"deg"') + frame,
                   control="station,east,north,height\nA,0,0,1000\nB,0,1000,\n",
                   zenith_angles=f"from,to,zenith_angle\nA,B,{math.degrees(z)!r}\n")  # fmt: skip
    close(at["B"][2] - 1000.0, 87.0, atol=0.0001)
    naive = 1000.0 / math.tan(z) + 0.87 * 1000.0**2 / (2 * R)
    if plane == 0.0:
        assert 0.0137 < 87.0 - naive < 0.015


def test_reciprocal_zenith_angles_free_the_height_of_refraction(tmp_path: Path) -> None:
    """Both ends bend alike: with k wrong by 0.3 the mean of both is right, one of them alone is 23.5 mm off."""
    there, back = sphere(1000.0, 0.0, 50.0, 0.43)[1], sphere(1000.0, 50.0, 0.0, 0.43)[1]
    heights = []
    for n, rows in enumerate(
        (f"A,B,{math.degrees(there)!r}\n", f"A,B,{math.degrees(there)!r}\nB,A,{math.degrees(back)!r}\n")
    ):
        _, at = solved(
            tmp_path / str(n),
            HEAD.replace('"dms"', '"deg"'),
            control="station,east,north,height\nA,0,0,0\nB,0,1000,\n",
            zenith_angles="from,to,zenith_angle\n" + rows,
        )
        heights.append(at["B"][2])
    close(heights[1], 50.0, atol=0.0001)
    close(heights[0] - 50.0, 0.3 * 1000.0**2 / (2 * R), atol=0.0002)


def test_instrument_and_target_heights_count_along_the_verticals(tmp_path: Path) -> None:
    slope, z = sphere(400.0, 1.6, 41.25, 0.13)
    _, at = solved(
        tmp_path, book("slope", "control", "zenith_angles", "azimuths").replace('"dms"', '"deg"'),
        control="station,east,north,height\nA,0,0,0\n", azimuths="from,to,azimuth\nA,B,0\n",
        distances=f"from,to,distance,instrument_height,target_height\nA,B,{slope!r},1.6,1.25\n",
        zenith_angles=f"from,to,zenith_angle,instrument_height,target_height\nA,B,{math.degrees(z)!r},1.6,1.25\n",
    )  # fmt: skip
    close(at["B"], [0.0, 400.0, 40.0], atol=1e-6)


def test_heights_of_instrument_and_target_have_errors_of_their_own(tmp_path: Path) -> None:
    """One zenith angle of 3 seconds over 500 m, level: sqrt((500 m * 3")^2 + 2 * (2 mm)^2) in the height of B."""
    toml = HEAD.replace('zenith = "3 sec"', 'zenith = "3 sec"\nheight = "2 mm"')
    solution, _ = solved(
        tmp_path,
        toml,
        control="station,east,north,height\nA,0,0,100\nB,0,500,\n",
        zenith_angles="from,to,zenith_angle,instrument_height,target_height\nA,B,90 00 00,1.5,1.5\n",
    )
    wanted = math.sqrt((500.0 * math.radians(3 / 3600)) ** 2 + 2 * 0.002**2)
    close(solution.sd[solution.names.index("B"), 2], wanted, atol=1e-6)


@pytest.mark.parametrize(("surface", "scale"), [("ground", 1 + 1100 / R), ("ground-from", 1 + 1000 / R), ("grid", 1.0)])
def test_lengths_at_ground_level_are_longer_than_on_the_plane(surface: str, scale: float, tmp_path: Path) -> None:
    """Known heights scale them; they are no readings of heights, and levelling is adjusted apart."""
    solution, at = solved(
        tmp_path, book(surface, "control", "azimuths", "levelled", frame="[frame]\nplane_height = 0\n"),
        control="station,east,north,height\nA,0,0,1000\n", azimuths="from,to,azimuth\nA,B,0 00 00\n",
        distances=f"from,to,distance\nA,B,{2000 * scale!r}\n",
        levelled="from,to,rise,length\nA,B,200,100\nA,B,200,100\n",
    )  # fmt: skip
    close(at["B"], [0.0, 2000.0, 1200.0], atol=1e-6)
    assert [part.what for part in solution.parts] == ["plane", "heights"]


def test_without_heights_a_length_at_ground_level_lies_at_the_plane(tmp_path: Path) -> None:
    toml = book("ground", "control", "azimuths", frame="[frame]\nplane_height = 1500\n")
    _, at = solved(tmp_path, toml, control="station,east,north\nA,0,0\n", azimuths="from,to,azimuth\nA,B,0 00 00\n",
                   distances="from,to,distance\nA,B,2000\n")  # fmt: skip
    close(at["B"][:2], [0.0, 2000.0], atol=1e-9)
    assert math.isnan(at["B"][2])


def test_marks_of_the_plane_and_marks_of_height_need_not_be_the_same(tmp_path: Path) -> None:
    points = {"A": (0.0, 0.0, 10.0), "B": (300.0, 20.0, 40.0), "C": (120.0, 260.0, 75.0), "BM": (0.0, 0.0, 12.0)}
    slopes, zeniths = ["from,to,distance"], ["from,to,zenith_angle"]
    for i, j in ("AB", "BC", "CA", "BA"):
        d = math.dist(points[i][:2], points[j][:2])
        s, z = sphere(d, points[i][2] - 12.0, points[j][2] - 12.0, 0.13)
        slopes.append(f"{i},{j},{s!r}")
        zeniths.append(f"{i},{j},{math.degrees(z)!r}")
    solution, at = solved(
        tmp_path, book("slope", "control", "stations", "zenith_angles", "levelled").replace('"dms"', '"deg"'),
        control="station,east,north,height\nA,0,0,\nB,300,20,\nBM,,,12\n", stations="station,east,north\nC,119,261\n",
        distances="\n".join(slopes) + "\n", zenith_angles="\n".join(zeniths) + "\n",
        levelled="from,to,rise,length\nBM,A,-2,50\n",
    )  # fmt: skip
    for name in "ABC":
        close(at[name], points[name], atol=1e-5)
    assert [part.what for part in solution.parts] == ["plane and heights"]


def test_two_slopes_leave_a_station_loose_in_space_and_say_so(tmp_path: Path) -> None:
    toml = book("slope", "control", "stations")
    with pytest.raises(Unsolvable, match="P1 is held by two distances only: nothing fixes it in space"):
        solved(
            tmp_path,
            toml,
            control="station,east,north,height\nA,0,0,50\nB,100,0,51\n",
            stations="station,east,north,height\nP1,60,80,50\n",
            distances="from,to,distance\nA,P1,100\nB,P1,89\n",
        )


def test_the_valley_side_finds_its_true_heights() -> None:
    """The demo's truth, networks/simulate.py: within four of its own standard deviations."""
    truth = {"S1": 98.420, "S2": 112.935, "S3": 147.310, "S4": 168.772, "TOP": 214.058}
    solution = adjust.solve(adjust.read(Path(__file__).parents[2] / "networks" / "valley-side"))
    for name, height in truth.items():
        i = solution.names.index(name)
        assert abs(solution.positions[i, 2] - height) < 4 * solution.sd[i, 2] < 0.02
