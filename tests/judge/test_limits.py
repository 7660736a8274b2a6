"""What an error could do unseen: the sentences, and their figures by adjusting again with the error in."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType

import numpy as np
import pytest

import adjust
from adjust.judge.assess import Judgement
from adjust.judge.limits import limits
from adjust.units import LENGTHS, rough, rough_angle, rough_length
from tests.helpers import close
from tests.judge.test_chains import levels

NETWORKS = Path(__file__).parents[2] / "networks"

CONTROL = "station,east,north,role\nA,1000,1000,held\nB,1300,1000,held\nC,1150,1250,held\n"
PLACES = {"A": (1000.0, 1000.0), "B": (1300.0, 1000.0), "C": (1150.0, 1250.0), "P": (1160.0, 1120.0),
          "Q": (1400.0, 1200.0), "R": (1250.0, 1350.0)}  # fmt: skip


def length(i: str, j: str) -> float:
    return math.dist(PLACES[i], PLACES[j])


def turned(at: str, first: str, second: str) -> float:
    a, b = (math.atan2(PLACES[k][0] - PLACES[at][0], PLACES[k][1] - PLACES[at][1]) for k in (first, second))
    return math.degrees(b - a) % 360


def job(folder: Path, distances: dict[str, float], angles: dict[str, float], length_unit: str = "m", angle: str = "deg",
        tests: str = "", sds: Mapping[str, float] = MappingProxyType({})) -> Judgement:  # fmt: skip
    """Distances 'A B' and angles 'A B C' with errors added, metres and seconds."""
    folder.mkdir(exist_ok=True)
    per = LENGTHS[length_unit]
    text = f'[units]\nlength = "{length_unit}"\nangle = "{angle}"\n[tests]\n{tests}\n'
    (folder / "job.toml").write_text(text, "utf-8")
    rows = [f"{n},{e / per!r},{h / per!r},held" for n, (e, h) in PLACES.items() if n in "ABC"]
    (folder / "control.csv").write_text("\n".join(["station,east,north,role", *rows, ""]), "utf-8")
    rows = [",".join([*k.split(), repr((length(*k.split()) + wrong) / per), repr(sds.get(k, 0.002) / per)])
            for k, wrong in distances.items()]  # fmt: skip
    (folder / "distances.csv").write_text("\n".join(["from,to,distance,sd", *rows, ""]), "utf-8")
    scale, sd = {"deg": (1.0, 5.0), "gon": (10 / 9, 1.5)}[angle]
    rows = [",".join([*k.split(), repr((turned(*k.split()) + wrong / 3600) * scale), repr(sd)])
            for k, wrong in angles.items()]  # fmt: skip
    (folder / "angles.csv").write_text("\n".join(["at,first,second,angle,sd", *rows, ""]), "utf-8")
    return adjust.assess(adjust.solve(adjust.read(folder)))


HANGING = ({"A Q": 0.0, "A P": 0.0, "B P": 0.0, "C P": 0.0}, {"A B Q": 0.0, "A B P": 0.0, "C A R": 0.0, "B R A": 0.0})
"""P well checked, Q on a distance and an angle, R on two angles."""


def said(judgement: Judgement) -> dict[str, str]:
    return dict(zip(judgement.ids, limits(judgement), strict=True))


def test_an_unchecked_distance_goes_into_its_station_metre_for_metre(tmp_path: Path) -> None:
    got = said(job(tmp_path, *HANGING))
    assert got["distances.csv:2"] == (
        "No error in this distance could be seen, however large; it goes into Q metre for metre, "
        "because Q hangs on it and one angle alone."
    )


@pytest.mark.parametrize(
    ("length_unit", "angle", "words"),
    [("m", "deg", "moves Q by 2.2 mm for every sec"), ("ft", "gon", "moves Q by 0.023 ft for every mgon")],
)
def test_an_unchecked_angle_moves_its_station_sideways(
    length_unit: str, angle: str, words: str, tmp_path: Path
) -> None:
    """447 m x 1 sec = 2.17 mm; x 1 mgon = 7.02 mm = 0.023 ft."""
    got = said(job(tmp_path, *HANGING, length_unit, angle))
    assert got["angles.csv:2"] == (
        f"No error in this angle could be seen, however large; it {words}, "
        "because Q hangs on it and one distance alone."
    )
    assert ("foot for foot" if length_unit == "ft" else "metre for metre") in got["distances.csv:2"]


def test_the_movement_of_an_unchecked_reading_is_that_of_adjusting_again(tmp_path: Path) -> None:
    distances, angles = HANGING
    before = job(tmp_path / "a", distances, angles)
    after = job(tmp_path / "b", distances, {**angles, "C A R": 10.0})
    k = before.solution.names.index("R")
    moved = np.hypot(*(after.solution.positions - before.solution.positions)[k, :2]) / 10
    words = said(before)["angles.csv:4"]
    match = re.search(r"moves R by ([\d.]+) mm for every sec", words)
    assert match, words
    close(float(match[1]), 1000 * moved, atol=0.06 * 1000 * moved)


def test_a_checked_reading_moves_its_station_by_no_more_than_is_said(tmp_path: Path) -> None:
    """Every checked reading of P with an error of the smallest detectable size put in."""
    distances, angles = HANGING
    before = job(tmp_path / "a", distances, angles)
    sentences, moved = said(before), {}
    for n, key in enumerate(["A P", "B P", "C P"], 3):
        match = re.fullmatch(
            r"An error below ([\d.]+) mm in this distance may go unseen; it would move P by up to ([\d.]+) mm in "
            r"(east|north)\.", sentences[f"distances.csv:{n}"],
        )  # fmt: skip
        assert match, sentences[f"distances.csv:{n}"]
        after = job(tmp_path / str(n), {**distances, key: float(match[1]) / 1000}, angles)
        k, part = before.solution.names.index("P"), ("east", "north").index(match[3])
        moved[key] = 1000 * abs(after.solution.positions - before.solution.positions)[k, part]
        close(float(match[2]), moved[key], atol=0.06 * moved[key])
    assert len({round(m, 2) for m in moved.values()}) == 3


def test_a_weakly_checked_reading_says_why(tmp_path: Path) -> None:
    """R by two angles of 5 seconds and, only as a rough check, a distance good to 0.2 m."""
    distances, angles = HANGING
    got = said(job(tmp_path, {**distances, "C R": 0.0}, angles, sds={"C R": 0.2}))
    words = (
        r"it would move R .*, because R hangs on it, one distance and one angle: [\d.e-]+ per cent of an error shows\."
    )
    assert re.search(words, got["angles.csv:4"]), got["angles.csv:4"]
    assert "because" not in got["distances.csv:6"]


def test_a_reading_that_many_others_check_weakly_says_so() -> None:
    """The coefficient of refraction of the demo."""
    got = said(adjust.assess(adjust.solve(adjust.read(NETWORKS / "valley-side"))))
    assert got["job.toml:17"] == (
        "An error below 0.70 in this coefficient of refraction may go unseen; it would move TOP by up to 0.63 mm in "
        "height, because the others check it only weakly, 9 per cent of an error shows."
    )


def test_levels_name_the_closure_and_the_only_way(tmp_path: Path) -> None:
    lines = [("A,B", 0.001), ("B,C", 0.001), ("C,D", 0.001), ("D,A", 0.001), ("C,E", 0.001), ("E,F", 0.001)]
    got = said(adjust.assess(levels(tmp_path, lines, "A")))
    assert got["levelled.csv:2"] == (
        "An error below 8.3 mm in this levelled line may go unseen; it would move B by up to 6.2 mm in height, "
        "because only the closure of A-B-C-D-A checks it."
    )
    assert got["levelled.csv:6"] == (
        "No error in this levelled line could be seen, however large; it goes into the height of E metre for metre, "
        "because it is the only way to E, F."
    )


def test_given_coordinates_are_called_so() -> None:
    got = list(limits(adjust.assess(adjust.solve(adjust.read(NETWORKS / "access-road")))))
    assert got[0].startswith("An error below 13 mm in the given east of M3 may go unseen; it would move M3 by up to")


def test_a_line_between_held_marks_moves_no_station(tmp_path: Path) -> None:
    distances, angles = HANGING
    got = said(job(tmp_path, {**distances, "A B": 0.0}, angles))
    assert got["distances.csv:6"] == "An error below 8.3 mm in this distance may go unseen; it would move no station."


def test_without_readings_to_spare_nothing_is_seen_and_with_one_it_cannot_be_told(tmp_path: Path) -> None:
    """From residuals a single reading to spare gives a variance factor, but no test of single readings."""
    residuals = 'variance_factor = "from-residuals"'
    one = job(tmp_path / "one", {"A P": 0.001, "B P": 0.0, "C P": 0.0}, {"A B Q": 0.0, "B Q A": 0.0}, tests=residuals)
    assert said(one)["distances.csv:2"] == (
        "What error in this distance could be seen cannot be told: there are too few readings to spare."
    )
    none = job(tmp_path / "none", {"A P": 0.0}, {"A B P": 0.0})
    assert all(line.startswith("No error in this") for line in limits(none))


def test_a_pointing_alone_in_its_set_moves_nothing(tmp_path: Path) -> None:
    folder = tmp_path / "job"
    job(folder, *HANGING)
    (folder / "directions.csv").write_text("at,to,set,direction,sd\nA,P,1,0.0,5\n")
    got = said(adjust.assess(adjust.solve(adjust.read(folder))))
    assert got["directions.csv:2"] == (
        "No error in this pointing could be seen, however large; it moves no station, because it is alone in its set "
        "and gives that set its orientation and nothing else."
    )


def test_conditions_have_no_sentence_and_all_other_rows_have_one() -> None:
    for name in ("loop-traverse-feet", "valley-side", "river-levels"):
        judgement = adjust.assess(adjust.solve(adjust.read(NETWORKS / name)))
        got = limits(judgement)
        assert [line == "" for line in got] == judgement.solution.design.held.tolist()
        assert got == limits(adjust.assess(adjust.solve(adjust.read(NETWORKS / name))))


def test_rough_sizes() -> None:
    assert [rough(x) for x in (0.137, 8.16, 132.0, 9.97, 0.0996, 0.0, 5.0, 1e-3)] == [
        "0.14", "8.2", "130", "10", "0.10", "0", "5.0", "0.0010"]  # fmt: skip
    assert [rough_length(x, "m") for x in (0.00816, -0.137, 0.0997, 0.0949, 12.4)] == [
        "8.2 mm", "0.14 m", "0.10 m", "95 mm", "12 m"]  # fmt: skip
    assert rough_length(0.3048, "ft") == "1.0 ft"
    sec = math.pi / 648000
    assert [rough_angle(x * sec, "dms") for x in (4.21, 59.4, 59.9, 138, 5400, 648000)] == [
        "4.2 sec", "59 sec", "1.0 minutes", "2.3 minutes", "1.5 degrees", "180 degrees"]  # fmt: skip
    assert [rough_angle(x * math.pi / 200, "gon") for x in (0.0037, 1.24)] == ["3.7 mgon", "1.2 gon"]
