"""Closures: misclosures and standard deviations against an independent computation, verdicts, what is not tested."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge.closures import MET, NOT_MET, UNTESTED, Closure, closures
from adjust.judge.critical import job_level, normal_critical
from adjust.network import Cluster
from adjust.units import RHO_SEC
from tests.helpers import close
from tests.judge.closing import SHAPES, closed
from tests.judge.closures_study import differences, levels, traverse

HEAD = (
    '[units]\nlength = "m"\nangle = "dms"\n[instruments.one]\ndistance = "2 mm"\ndirection = "3 sec"\n'
    'azimuth = "5 sec"\n'
)


def job(folder: Path, settings: str = HEAD, **tables: str) -> adjust.Job:
    folder.mkdir(exist_ok=True)
    (folder / "job.toml").write_text(settings)
    for name, text in tables.items():
        (folder / f"{name}.csv").write_text(text)
    return adjust.read(folder)


@pytest.mark.parametrize("seed", range(len(SHAPES) * 2))
def test_traverses_agree_with_an_independent_computation(seed: int, tmp_path: Path) -> None:
    """Standard deviations differ by the places where the partials of the centring are taken, 1e-4 of themselves."""
    made, one = traverse(seed, tmp_path)
    found = differences(made, one)
    assert found["angle"] < 1e-11
    assert found["linear"] < 1e-8
    assert found["sd"] < 5e-4
    w, z = closed(made, [reading.value for reading in made.readings])
    assert abs(z) > 1e-4
    assert math.isnan(w) or abs(w) > 1e-7


def test_centring_is_in_the_standard_deviations(tmp_path: Path) -> None:
    """Negative control: the pointings alone would give three quarters of it."""
    made, one = traverse(0, tmp_path)
    pointing = math.sqrt(2 * one.count) * 3 / RHO_SEC
    assert one.sd["angle"] > 1.3 * pointing
    assert made.shape == "loop sheet"


@pytest.mark.parametrize("seed", range(4))
def test_level_nets_agree_line_by_line(seed: int, tmp_path: Path) -> None:
    w, sd, number = levels(seed, tmp_path)
    assert number > 0
    assert w < 1e-12
    assert sd < 1e-12


CONTROL = "station,height,sd_height,role\nA,10,,held\nB,11,0.004,weighted\nC,12,0.003,check\n"


def test_marks_that_may_move_bring_their_own_share(tmp_path: Path) -> None:
    levelled = "from,to,rise,sd\nA,P,0.5,0.001\nP,B,0.502,0.002\nP,C,1.5,0.001\n"
    found = {tuple(one.stations): one for one in closures(job(tmp_path, control=CONTROL, levelled=levelled))}
    assert len(found) == 2
    one = found[0, 3, 1]
    close(one.misclosure["height"], 0.002, atol=1e-12)
    close(one.sd["height"], math.sqrt(0.001**2 + 0.002**2 + 0.004**2), atol=1e-12)


def test_common_covariances_are_in_the_standard_deviation(tmp_path: Path) -> None:
    read = job(tmp_path, levelled="from,to,rise,sd\nA,B,1,0.001\nB,A,-1.002,0.002\n",
               control="station,height\nA,10\n")  # fmt: skip
    common = np.array([[1e-6, -1.5e-6], [-1.5e-6, 4e-6]])
    network = replace(read.network, clusters=(Cluster(np.array([0, 1]), common),))
    (one,) = closures(replace(read, network=network))
    close(one.sd["height"], math.sqrt(1e-6 + 4e-6 - 3e-6), atol=1e-12)


SQUARE = {"A": (1000, 1000), "B": (1200, 1010), "C": (1190, 1205), "D": (995, 1180)}


def square(folder: Path, without: str = "", wrong: float = 0.0, bearing: bool = False) -> adjust.Job:
    """A loop A-B-C-D-A in a booked sheet; the angle at ``without`` missing; seconds added to that at C."""
    places = {name: complex(*p) for name, p in SQUARE.items()}
    names, lines = list(places), ["at,back,fore,angle,distance,bearing"]
    for k, at in enumerate(names):
        back, fore = names[k - 1], names[(k + 1) % 4]
        ahead, behind = places[fore] - places[at], places[back] - places[at]
        angle = (azimuth(ahead) - azimuth(behind)) % 360 + (wrong / 3600 if at == "C" else 0.0)
        held = text(azimuth(ahead)) if bearing and k == 0 else ""
        lines.append(f"{at},{back},{fore},{'' if at == without else text(angle)},{abs(ahead):.4f},{held}")
    return job(folder, control="station,east,north\nA,1000,1000\n", traverse="\n".join(lines) + "\n")


def azimuth(z: complex) -> float:
    return math.degrees(math.atan2(z.real, z.imag)) % 360


def text(degrees: float) -> str:
    seconds = round(degrees % 360 * 36000) / 10
    return f"{int(seconds // 3600)} {int(seconds // 60 % 60):02d} {seconds % 60:04.1f}"


def test_a_sound_loop_is_met_and_says_by_what(tmp_path: Path) -> None:
    (one,) = closures(square(tmp_path))
    assert (one.kind, one.count, one.verdict, one.sentence) == ("loop traverse", 4, MET, "")
    assert one.rule == "its own standard deviation, at a significance of 0.05 for all closures together"
    level = job_level(0.05, 2)
    close(one.allowable["angle"], normal_critical(level) * one.sd["angle"], atol=1e-12)
    assert one.ratio is not None
    assert one.length is not None
    close(one.ratio, one.length / one.misclosure["linear"], atol=1e-6)


def test_a_missing_closing_angle_cannot_be_tested_but_the_lengths_can(tmp_path: Path) -> None:
    read = square(tmp_path, without="B")
    (one,) = closures(read)
    assert one.verdict == UNTESTED
    assert one.verdicts == {"linear": MET, "angle": UNTESTED}
    assert one.sentence == "the closing angle at B was never turned"
    assert read.network.stations.names[one.stations[0]] == "B"
    assert "angle" not in one.misclosure


def test_what_fails_outweighs_what_cannot_be_tested(tmp_path: Path) -> None:
    (one,) = closures(square(tmp_path, without="B", wrong=900))
    assert (one.verdict, one.verdicts["angle"]) == (NOT_MET, UNTESTED)
    assert one.sentence.startswith("the closing angle at B was never turned; the perpendicular bisector")


def test_a_rule_is_asked_first(tmp_path: Path) -> None:
    def strict(one: Closure) -> tuple[dict[str, float], str]:
        assert one.length is not None
        return {"angle": 1e-9, "linear": one.length / 1000}, "a rule of the test"

    (one,) = closures(square(tmp_path, wrong=5), strict)
    assert one.rule == "a rule of the test"
    assert one.verdicts == {"angle": NOT_MET, "linear": MET}
    (other,) = closures(square(tmp_path, wrong=5), lambda _: ({}, ""))
    assert other.rule.startswith("its own standard deviation")


LINK = "station,east,north\nR,900,1000\nA,1000,1000\nB,1300,1000\nS,1400,1000\n"
SHEET = "at,back,fore,angle,distance\nA,R,P,180 00 00,100.003\nP,A,Q,180 00 04,100\nQ,P,B,180 00 05,100\n"


def test_a_link_carries_its_bearing_to_the_known_one(tmp_path: Path) -> None:
    (one,) = closures(job(tmp_path, control=LINK, traverse=SHEET + "B,Q,S,180 00 03,\n"))
    assert (one.kind, one.count, one.verdict) == ("link traverse", 4, MET)
    close(one.misclosure["angle"] * RHO_SEC, 12.0, atol=1e-6)
    close(one.misclosure["east"], 0.003, atol=1e-6)
    # balanced by 3 seconds an angle: bearings -3, -2, 0 seconds beside the line
    close(one.misclosure["north"], 100 * (3 + 2 + 0) / RHO_SEC, atol=1e-6)
    close(one.sd["angle"] * RHO_SEC, math.sqrt(4 * 2) * 3, atol=1e-6)


def test_a_link_without_a_closing_direction_says_so(tmp_path: Path) -> None:
    (one,) = closures(job(tmp_path, control=LINK, traverse=SHEET))
    assert one.verdict == UNTESTED
    assert one.sentence == "no known direction was sighted at B"
    close(one.misclosure["angle" if "angle" in one.misclosure else "east"], 0.003, atol=1e-5)


def test_a_link_is_walked_from_the_end_that_has_a_direction(tmp_path: Path) -> None:
    sheet = SHEET.replace("A,R,P,180 00 00", "A,,P,") + "B,Q,S,180 00 03,\n"
    (one,) = closures(job(tmp_path, control=LINK, traverse=sheet))
    assert one.sentence == "no known direction was sighted at A"
    assert "angle" not in one.misclosure


def test_a_link_between_two_known_stations_without_directions_has_only_its_length(tmp_path: Path) -> None:
    (one,) = closures(job(tmp_path, control=LINK, traverse=SHEET.replace("A,R,P,180 00 00", "A,,P,")))
    assert one.sentence == "no known direction was sighted at A or at B"
    close(one.misclosure["linear"], 0.003, atol=1e-6)
    close(one.sd["linear"], 0.002 * math.sqrt(3), atol=1e-6)
    close(one.allowable["linear"], normal_critical(job_level(0.05, 1)) * one.sd["linear"], atol=1e-9)


def test_a_closing_bearing_that_was_derived_cannot_be_tested(tmp_path: Path) -> None:
    """The bearing of the last line is the carried one to the last digit; five seconds off it was measured."""
    for last, verdict in (("90 00 09", UNTESTED), ("90 00 14", MET)):
        read = job(tmp_path, control=LINK.rpartition("S")[0], traverse=SHEET, azimuths=f"from,to,azimuth\nQ,B,{last}\n")
        (one,) = closures(read)
        assert one.verdicts["angle"] == verdict
        assert ("derived from the angles, not measured" in one.sentence) == (verdict == UNTESTED)


def test_both_ways_of_a_leg_are_meaned(tmp_path: Path) -> None:
    rows = (SHEET + "B,Q,S,180 00 00,\n").split("\n")[1:-1]
    booked = [f"{row},{back}\n" for row, back in zip(rows, ("", "100.009", "", ""), strict=True)]
    sheet = "at,back,fore,angle,distance,back_distance\n" + "".join(booked)
    (one,) = closures(job(tmp_path, control=LINK, traverse=sheet))
    close(one.misclosure["east"], (100.003 + 100.009) / 2 - 100, atol=1e-6)
    close(one.sd["east"], 0.002 * math.sqrt(2.5), atol=1e-6)


def test_slopes_are_brought_to_the_plane(tmp_path: Path) -> None:
    """Two stations 30 m apart in height: the slopes are those of the plane's 100 m to the digits booked."""
    control = "station,east,north,height\nR,900,1000,0\nA,1000,1000,0\nB,1200,1000,0\nS,1400,1000,0\nP,,,30\n"
    frame = HEAD.replace("[instruments", "[frame]\nplane_height = 0\n[instruments") + 'zenith = "3 sec"\n'
    books = '[[book]]\nfile = "control.csv"\n[[book]]\nfile = "angles.csv"\n'
    books += '[[book]]\nfile = "distances.csv"\nsurface = "slope"\n'
    slope = math.hypot(100, 30)
    read = job(tmp_path, frame + books, control=control,
               angles="at,first,second,angle\nA,R,P,180 00 00\nP,A,B,180 00 00\nB,P,S,180 00 00\n",
               distances=f"from,to,distance\nA,P,{slope + 0.003:.5f}\nP,B,{slope:.5f}\n")  # fmt: skip
    (one,) = closures(read)
    close(one.misclosure["east"], 0.003 * slope / 100 - 2 * 15 * 100 / 6371008.8, atol=2e-5)
    close(one.sd["east"], 0.002 * math.sqrt(2) * slope / 100, atol=1e-6)


def test_the_same_of_a_job_and_of_its_solution(tmp_path: Path) -> None:
    read = square(tmp_path, bearing=True)
    (of_job,), (of_solution,) = closures(read), closures(adjust.solve(read))
    close(of_solution.misclosure["linear"], of_job.misclosure["linear"], atol=1e-12)
    assert of_solution.stations == of_job.stations


def test_triangles_of_a_network(tmp_path: Path) -> None:
    directions = "at,to,direction\n" + "".join(
        f"{a},{b},{text(azimuth(complex(*SQUARE[b]) - complex(*SQUARE[a])) + (5 / 3600 if a + b == 'AC' else 0))}\n"
        for a in "ABC" for b in "ABC" if a != b
    )  # fmt: skip
    read = job(tmp_path, control="station,east,north\nA,1000,1000\nB,1200,1010\n", directions=directions)
    (one,) = closures(read)
    assert (one.kind, one.count, one.verdict) == ("triangle", 3, MET)
    close(abs(one.misclosure["angle"]) * RHO_SEC, 5.0, atol=0.3)
    close(one.sd["angle"] * RHO_SEC, 3 * math.sqrt(6), atol=1e-6)
