"""Where to look: every sort of slip in a sound traverse or level net is named, and silence where nothing fits."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge.closures import NOT_MET, Closure, closures

HEAD = '[units]\nlength = "m"\nangle = "dms"\n[instruments.one]\ndistance = "2 mm"\ndirection = "3 sec"\n'
LOOP = {"A": (1000, 1000), "B": (1210, 1060), "C": (1290, 1270), "D": (1105, 1395), "E": (930, 1210)}
LINK = {"R": (900, 930), "A": (1000, 1000), "B": (1160, 1080), "C": (1250, 1010), "D": (1430, 1060), "E": (1500, 1200),
        "S": (1610, 1290)}  # fmt: skip


@dataclass
class Sheet:
    """A booked sheet of a traverse; slips by station, in degrees or metres."""

    places: dict[str, tuple[float, float]]
    loop: bool
    angle: dict[str, float] = field(default_factory=dict)
    """Degrees added to an angle; NaN: turned the other way round."""
    length: dict[str, float] = field(default_factory=dict)
    ends: bool = True
    """False: no closing angle, or no closing direction."""

    def write(self, folder: Path) -> adjust.Job:
        z = {name: complex(*p) for name, p in self.places.items()}
        names, rows = list(z), ["at,back,fore,angle,distance"]
        rng = np.random.default_rng(4)
        for k, at in enumerate(names):
            if not self.loop and k in (0, len(names) - 1):
                continue
            back, fore = names[k - 1], names[(k + 1) % len(names)]
            true = azimuth(z[fore] - z[at]) - azimuth(z[back] - z[at]) + rng.normal(0, 4 / 3600)
            slip = self.angle.get(at, 0.0)
            booked = text(-true if math.isnan(slip) else true + slip)
            if not self.ends and k == (0 if self.loop else len(names) - 2):
                booked = ""
            last = not self.loop and k == len(names) - 2
            distance = "" if last else f"{abs(z[fore] - z[at]) + rng.normal(0, 0.002) + self.length.get(at, 0.0):.4f}"
            rows.append(f"{at},{back},{fore},{booked},{distance}")
        known = names[:1] if self.loop else [*names[:2], *names[-2:]]
        control = "".join(f"{n},{self.places[n][0]},{self.places[n][1]}\n" for n in known)
        (folder / "job.toml").write_text(HEAD)
        (folder / "control.csv").write_text("station,east,north\n" + control)
        (folder / "traverse.csv").write_text("\n".join(rows) + "\n")
        return adjust.read(folder)

    def closed(self, folder: Path) -> Closure:
        (one,) = closures(self.write(folder))
        return one


def azimuth(z: complex) -> float:
    return math.degrees(math.atan2(z.real, z.imag)) % 360


def text(degrees: float) -> str:
    seconds = round(degrees % 360 * 36000) % (360 * 36000) / 10
    return f"{int(seconds // 3600)} {int(seconds // 60 % 60):02d} {seconds % 60:04.1f}"


SHAPES = pytest.mark.parametrize(("places", "loop"), [(LOOP, True), (LINK, False)], ids=["loop", "link"])


@SHAPES
def test_nothing_is_said_of_what_closes(places: dict[str, tuple[float, float]], loop: bool, tmp_path: Path) -> None:
    assert Sheet(places, loop).closed(tmp_path).sentence == ""


@SHAPES
@pytest.mark.parametrize("at", ["B", "C", "D"])
def test_a_wrong_angle_is_where_forwards_and_backwards_meet(
    places: dict[str, tuple[float, float]], loop: bool, at: str, tmp_path: Path
) -> None:
    one = Sheet(places, loop, angle={at: 11 / 60}).closed(tmp_path)
    assert one.verdicts["angle"] == NOT_MET
    assert one.sentence.startswith(f"forwards and backwards the traverse meets at {at}, to ")
    minutes, seconds = one.sentence.partition("the angle there may be wrong by 0 ")[2].split()[:2]
    assert abs(60 * int(minutes) + float(seconds) - 660) < 25  # the other angles have their share in it
    assert one.sentence.count("forwards") == 1


@SHAPES
@pytest.mark.parametrize("at", ["A", "B", "C", "D"])
def test_a_wrong_length_is_along_its_leg(
    places: dict[str, tuple[float, float]], loop: bool, at: str, tmp_path: Path
) -> None:
    ahead = list(places)[list(places).index(at) + 1]
    one = Sheet(places, loop, length={at: 0.837}).closed(tmp_path)
    assert one.verdicts == {"angle": "met", "linear": NOT_MET}
    first, _, _ = one.sentence.partition(";")
    assert first.startswith(f"the misclosure runs along {at}-{ahead}: its length may be ")
    size = float(first.partition("may be ")[2].split()[0])
    assert abs(size - 0.837) < 0.015
    assert " m too long (to " in first


def test_a_short_leg_is_called_short(tmp_path: Path) -> None:
    one = Sheet(LOOP, True, length={"C": -0.537}).closed(tmp_path)
    assert one.sentence.startswith("the misclosure runs along C-D: its length may be 0.")
    assert "too short" in one.sentence


@SHAPES
@pytest.mark.parametrize("at", ["B", "D"])
def test_an_angle_turned_the_other_way(
    places: dict[str, tuple[float, float]], loop: bool, at: str, tmp_path: Path
) -> None:
    one = Sheet(places, loop, angle={at: math.nan}).closed(tmp_path)
    names = list(places)
    ends = f"{names[names.index(at) - 1]} to {names[names.index(at) + 1]}"
    assert one.sentence.startswith(f"likeliest slip: in the angle {ends} at {at} the angle was turned the other way ")
    assert [cause.slip for cause in one.likely] == ["other-way"]
    assert f"meets at {at}" in one.sentence


def test_an_angle_counted_twice(tmp_path: Path) -> None:
    z = {name: complex(*p) for name, p in LOOP.items()}
    angle = (azimuth(z["D"] - z["C"]) - azimuth(z["B"] - z["C"])) % 360
    one = Sheet(LOOP, True, angle={"C": -angle}).closed(tmp_path)
    assert "meets at C" in one.sentence
    one = Sheet(LOOP, True, angle={"E": angle}).closed(tmp_path)
    assert "the angles misclose by the angle at C: it may have been dropped or counted twice" in one.sentence


def test_half_a_circle(tmp_path: Path) -> None:
    one = Sheet(LINK, False, angle={"C": 180.0}).closed(tmp_path)
    assert one.sentence.startswith("likeliest slip: in the angle B to D at C the reading is of the other face, half a")
    assert "half a circle" not in one.sentence.partition("; ")[2]  # once is enough


def test_half_a_circle_that_no_angle_explains_alone(tmp_path: Path) -> None:
    """Three angles are half a circle off: the sum is so too, but no one of them closes the traverse."""
    one = Sheet(LINK, False, angle={"B": 180.0, "C": 180.0, "D": 180.0}).closed(tmp_path)
    assert "the angles misclose by half a circle: a direction read backwards, a face mixed up" in one.sentence
    assert one.likely == ()


@SHAPES
@pytest.mark.parametrize("at", ["B", "C", "D"])
def test_without_a_closing_angle_the_bisector_leads_there(
    places: dict[str, tuple[float, float]], loop: bool, at: str, tmp_path: Path
) -> None:
    one = Sheet(places, loop, angle={at: 0.5}, ends=False).closed(tmp_path)
    assert "angle" not in one.misclosure
    assert f"the perpendicular bisector of the closing line passes by {at}: the angle there may be wrong by 0 " in (
        one.sentence
    )


def test_the_size_on_the_bisector_is_that_of_the_slip(tmp_path: Path) -> None:
    one = Sheet(LINK, False, angle={"C": 0.5}, ends=False).closed(tmp_path)
    (hint,) = [part for part in one.sentence.split("; ") if "passes by C" in part]
    degrees, minutes, _ = hint.partition("wrong by ")[2].split(" ")[:3]
    assert (int(degrees), int(minutes)) in ((0, 29), (0, 30))


LEVELS = ("A,B,1.2345", "B,C,-0.4321", "C,D,2.1111", "D,E,-1.7531", "E,A,-1.1604", "B,E,-0.0741", "A,C,0.8024")


def levels(folder: Path, wrong: dict[int, float], unit: str = "m", turned: int = -1) -> tuple[Closure, ...]:
    rows = ["from,to,rise,length"]
    for k, row in enumerate(LEVELS):
        i, j, rise = row.split(",")
        i, j = (j, i) if k == turned else (i, j)
        rows.append(f"{i},{j},{float(rise) + wrong.get(k, 0.0):.4f},{100 + 10 * k}")
    (folder / "job.toml").write_text(
        f'[units]\nlength = "{unit}"\nangle = "dms"\n[instruments.level]\nlevelling = "1 mm*sqrt(km)"\n'
    )
    (folder / "control.csv").write_text("station,height\nA,50\n")
    (folder / "levelled.csv").write_text("\n".join(rows) + "\n")
    return closures(adjust.read(folder))


def failing(found: tuple[Closure, ...]) -> list[Closure]:
    return [one for one in found if one.verdict == NOT_MET]


def test_levels_that_close_are_silent(tmp_path: Path) -> None:
    found = levels(tmp_path, {})
    assert len(found) == 3
    assert {one.sentence for one in found} == {""}


@pytest.mark.parametrize(("wrong", "words"), [(-3.0, "3 whole metres"), (0.4, "4 whole decimetres")])
def test_a_staff_misread_by_a_whole_amount(wrong: float, words: str, tmp_path: Path) -> None:
    bad = failing(levels(tmp_path, {3: wrong}))
    assert len(bad) == 1  # D-E is in one loop only
    assert f"the misclosure is {words}: a staff misread by that, on any of its lines (within " in bad[0].sentence


@pytest.mark.parametrize(("wrong", "unit"), [(1.0, "m"), (0.1, "m"), (1.0, "ft")])
def test_a_step_of_the_staff_is_said_of_the_lines_that_only_this_loop_has(
    wrong: float, unit: str, tmp_path: Path
) -> None:
    """C-D and D-E are in no other loop; of the two nothing tells which. The step is not said once more."""
    (bad,) = failing(levels(tmp_path, {3: wrong}, unit=unit))
    c_d, d_e = (f"in the rise {ends} a misreading by {wrong:g} {unit}, " for ends in ("C to D", "D to E"))
    assert bad.sentence.startswith("likeliest slips: ")
    assert f"{c_d}2.1111 for {2.1111 - wrong:.4f} (levelled.csv:4)" in bad.sentence
    assert f"{d_e}{-1.7531 + wrong:.4f} for -1.7531 (levelled.csv:5)" in bad.sentence
    assert "whole" not in bad.sentence
    assert sorted(cause.place for cause in bad.likely) == ["levelled.csv:4", "levelled.csv:5"]


def test_a_staff_in_feet(tmp_path: Path) -> None:
    (bad,) = failing(levels(tmp_path, {3: 2.0}, unit="ft"))
    assert "the misclosure is 2 whole feet: " in bad.sentence


def test_a_line_booked_backwards_has_the_wrong_sign(tmp_path: Path) -> None:
    (bad,) = failing(levels(tmp_path, {}, turned=3))
    told = "the sign is the wrong one or the ends are turned round, -1.7531 for 1.7531 (levelled.csv:5)"
    assert bad.sentence == f"likeliest slip: in the rise E to D {told}"


@SHAPES
def test_minutes_misread_are_named_with_reading_text_and_place(
    places: dict[str, tuple[float, float]], loop: bool, tmp_path: Path
) -> None:
    one = Sheet(places, loop, angle={"C": 10 / 60}).closed(tmp_path)
    row = next(n for n, line in enumerate((tmp_path / "traverse.csv").read_text().splitlines(), 1) if line[0] == "C")
    booked = (tmp_path / "traverse.csv").read_text().splitlines()[row - 1].split(",")[3]
    d, m, s = booked.split()
    back = (60 * int(d) + int(m) - 10) % 21600
    assert one.sentence.startswith(
        f"likeliest slip: in the angle B to D at C the minutes were misread, {booked} for "
        f"{back // 60} {back % 60:02d} {s} (traverse.csv:{row}); forwards and backwards the traverse meets at C, to "
    )
    (cause,) = one.likely
    assert (cause.slip, cause.place) == ("minute-slip", f"traverse.csv:{row}")
    assert cause.support > 0.9


def test_a_line_common_to_all_that_fail(tmp_path: Path) -> None:
    found = levels(tmp_path, {5: 0.0137})
    bad = failing(found)
    assert len(bad) == 2
    assert len(found) == 3
    for one in bad:
        assert one.sentence == "line B-E (levelled.csv:7) is common to all 2 that fail and in none that closes"


def test_an_odd_amount_in_one_loop_is_silent(tmp_path: Path) -> None:
    (bad,) = failing(levels(tmp_path, {3: 0.0137}))
    assert bad.sentence == ""


def test_a_leg_common_to_failing_traverses(tmp_path: Path) -> None:
    """Two loops share the cross leg B-E, whose length is wrong."""
    z = {name: complex(*p) for name, p in LOOP.items()} | {"F": 1000 + 1330j}
    rows = ["from,to,distance"]
    for i, j in ("AB", "BC", "CD", "DF", "FE", "EA", "BE"):
        rows.append(f"{i},{j},{abs(z[j] - z[i]) + (0.7 if i + j == 'BE' else 0):.4f}")
    sights = {"A": "BE", "B": "ACE", "C": "BD", "D": "CF", "F": "DE", "E": "AFB"}
    directions = ["at,to,direction"] + [f"{i},{j},{text(azimuth(z[j] - z[i]))}" for i, js in sights.items() for j in js]
    (tmp_path / "job.toml").write_text(HEAD)
    (tmp_path / "control.csv").write_text("station,east,north\nA,1000,1000\n")
    (tmp_path / "distances.csv").write_text("\n".join(rows) + "\n")
    (tmp_path / "directions.csv").write_text("\n".join(directions) + "\n")
    found = [one for one in closures(adjust.read(tmp_path)) if one.kind == "loop traverse"]
    assert [one.verdicts for one in found] == [{"angle": "met", "linear": NOT_MET}] * 2
    for one in found:
        assert one.sentence.startswith("leg B-E is common to all 2 that fail and in none that closes; the misclosure ")
        assert "0.7" in one.sentence
