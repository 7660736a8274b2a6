"""What the starting coordinates found wrong, and what contradicts where there are none."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.job import Job
from adjust.errors import Unsolvable
from adjust.judge.causes_of_refusals import start_causes
from adjust.judge.started import _Contradictions, doubtful_sentences, start_words
from adjust.solver.solve import solve
from tests.judge.unsettled_study import case

PLACES = {"A": (1000.0, 1000.0), "B": (1300.0, 1000.0), "C": (1000.0, 1300.0), "P": (1150.0, 1100.0),
          "Q": (1250.0, 1250.0), "R": (1080.0, 1210.0)}  # fmt: skip


def azimuth(i: str, j: str) -> float:
    return math.degrees(math.atan2(PLACES[j][0] - PLACES[i][0], PLACES[j][1] - PLACES[i][1]))


def job(folder: Path, known: str, distances: dict[str, float], angles: dict[str, float] | None = None,
        settings: str = "") -> Job:  # fmt: skip
    """Distances 'A P' in metres and angles 'A B P' in degrees, with the errors given added."""
    folder.mkdir(exist_ok=True)
    (folder / "job.toml").write_text(f'[units]\nlength = "m"\nangle = "deg"\n{settings}', "utf-8")
    rows = [f"{k},{PLACES[k][0]},{PLACES[k][1]},held\n" for k in known]
    (folder / "control.csv").write_text("station,east,north,role\n" + "".join(rows), "utf-8")
    rows = [f"{','.join(k.split())},{math.dist(*(PLACES[e] for e in k.split())) + wrong:.3f},0.003\n"
            for k, wrong in distances.items()]  # fmt: skip
    (folder / "distances.csv").write_text("from,to,distance,sd\n" + "".join(rows), "utf-8")
    if angles:
        rows = []
        for key, wrong in angles.items():
            at, first, second = key.split()
            rows.append(f"{at},{first},{second},{(azimuth(at, second) - azimuth(at, first) + wrong) % 360:.5f},5\n")
        (folder / "angles.csv").write_text("at,first,second,angle,sd\n" + "".join(rows), "utf-8")
    return adjust.read(folder)


def refused(one: Job) -> list[str]:
    """What is said more of a job that has no start."""
    with pytest.raises(Unsolvable) as refusal:
        solve(one)
    said = start_words(one, refusal.value)
    assert said[: len(refusal.value.sentences)] == refusal.value.sentences
    return said[len(refusal.value.sentences) :]


def test_readings_that_the_start_disagreed_with_are_told_with_size_and_sense(tmp_path: Path) -> None:
    one = job(tmp_path, "ABC", {"A P": 0.0, "B P": 0.0, "C P": 12.3, "A Q": 0.0, "B Q": 0.0, "C Q": 0.0},
              {"A B P": 0.0, "P A B": 0.0, "P B C": 0.0, "A B Q": 0.0, "B Q A": 0.0, "C A Q": 40.0})  # fmt: skip
    solution = solve(one)
    said = doubtful_sentences(solution, one)
    assert [text for _, text in said] == [
        "Already the starting coordinates disagree with distances.csv:4 (distance C to P, 262.300 m): it is about 12 m "
        "too long for where the other readings lead.",
        "Already the starting coordinates disagree with angles.csv:7 (angle A to Q at C, 321.30993): it is about "
        "40 degrees off for where the other readings lead.",
    ]
    rows = solution.network.rows
    assert [solution.network.blocks[rows.block[r]].name(int(rows.row[r])) for r, _ in said] == [
        "distances.csv:4", "angles.csv:7"]  # fmt: skip


def test_a_clean_job_has_nothing_doubtful(tmp_path: Path) -> None:
    one = job(tmp_path, "ABC", {"A P": 0.0, "B P": 0.0, "C P": 0.0})
    assert doubtful_sentences(solve(one), one) == []


def test_rows_are_those_of_the_solution_where_a_free_datum_sets_control_aside(tmp_path: Path) -> None:
    free = '[datum]\nkind = "free"\n'
    one = job(tmp_path, "ABC", {"A P": 0.0, "B P": 0.0, "C P": 50.0, "A B": 0.0, "A C": 0.0, "B C": 0.0},
              settings=free)  # fmt: skip
    ((row, text),) = doubtful_sentences(solve(one), one)
    solution = solve(one)
    assert solution.design.observed[row] == pytest.approx(300.0, abs=1e-3)
    assert "distances.csv:4 (distance C to P, 300.000 m): it is about 50 m too long" in text


@pytest.mark.parametrize(
    ("wrong", "lacks"), [(-100.0, "39.44 m is lacking"), (500.0, "200.00 m is lacking")], ids=["short", "long"]
)
def test_two_lengths_that_do_not_meet_are_told(wrong: float, lacks: str, tmp_path: Path) -> None:
    """A and B stand 300 m apart, the lengths are 180.28 m, one of them wrong: 300 - 180.278 - 80.278 = 39.444 m;
    680.278 - 180.278 - 300 = 200 m."""
    (said,) = refused(job(tmp_path, "AB", {"A P": wrong, "B P": 0.0}))
    booked = f"{math.dist(PLACES['A'], PLACES['P']) + wrong:.3f}"
    assert said.startswith(
        f"distances.csv:2 (distance A to P, {booked} m) and distances.csv:3 (distance B to P, 180.278 m) do not meet "
        f"at P: A and B stand 300.00 m apart, and {lacks[:-11]}"
    )
    assert said.endswith("to a triangle; one of them, or a coordinate, is wrong")


def test_mirror_images_do_not_hide_a_reading_that_disagrees(tmp_path: Path) -> None:
    """P and Q could stand on either side of A-B, and one distance contradicts both."""
    said = refused(job(tmp_path, "AB", {"A P": 0.0, "B P": 0.0, "P Q": 0.0, "B Q": 500.0, "A Q": 0.0}))
    assert said == [
        "Already the starting coordinates disagree with distances.csv:5 (distance B to Q, 754.951 m): it is about "
        "500 m too long for where the other readings lead."
    ]


def test_a_reading_that_disagrees_gets_its_slip(tmp_path: Path) -> None:
    """The same with 254.951 m booked as 524.951 m; what the others leave open stays as begun."""
    said = refused(job(tmp_path, "AB", {"A P": 0.0, "B P": 0.0, "P Q": 0.0, "B Q": 270.0, "A Q": 0.0}))
    assert said == [
        "Already the starting coordinates disagree with distances.csv:5 (distance B to Q, 524.951 m): it is about "
        "270 m too long for where the other readings lead. Likeliest slip: two digits were swapped, 524.951 for "
        "254.951. Look at distances.csv:5."
    ]


def test_a_reading_left_out_gets_its_slip(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Network 307 of the study with one of its errors mended: half a circle. (The error is in the value only, so the
    text that is proposed is the value.)"""
    wrong = case(307, 2, tmp_path)
    blocks = list(wrong.job.network.blocks)
    b, i = next((b, i) for b, one in enumerate(blocks) for i in range(len(one)) if one.name(i) == "azimuths.csv:7")
    values = blocks[b].values.copy()
    values[i, 0] = math.radians(float(wrong.job.booked("azimuths.csv")[7][0]))
    blocks[b] = replace(blocks[b], values=values)
    wanted = next((k, i) for k, one in enumerate(blocks) for i in range(len(one)) if one.name(i) == "angles.csv:23")
    monkeypatch.setattr(_Contradictions, "_candidates", lambda self: [wanted])  # every other one takes a second
    (said,) = refused(replace(wrong.job, network=replace(wrong.job.network, blocks=tuple(blocks))))
    assert said.endswith(
        "check it in the book. Likeliest slip: the reading is of the other face, half a circle off, 142.78286068127224 "
        "for 322.78286068127227. Look at angles.csv:23."
    )


SOUND = {"A P": 0.0, "B P": 0.0, "C P": 0.0, "A Q": 0.0, "B Q": 0.0, "C Q": 0.0, "P Q": 0.0}


@pytest.mark.parametrize(
    ("key", "wrong", "slips"),
    [("C P", 1.0, [("round-step", "250.000")]), ("B Q", 270.0, [("digits-swapped", "254.951")]), ("C P", 7.31, [])],
    ids=["step", "swap", "odd"],
)
def test_the_amount_is_that_from_the_others_without_it(
    key: str, wrong: float, slips: list[tuple[str, str]], tmp_path: Path
) -> None:
    one = job(tmp_path, "ABC", SOUND | {key: wrong})
    network, i = one.network, list(SOUND).index(key)
    (b,) = (b for b, block in enumerate(network.blocks) if block.kind == "distance")
    less = network.blocks[b].take(np.delete(np.arange(len(SOUND)), i))
    blocks = (*network.blocks[:b], less, *network.blocks[b + 1 :])
    found = start_causes(one, (b, i), replace(network, blocks=blocks))
    assert [(cause.slip, cause.would_read) for cause in found] == slips


def test_what_is_refused_for_other_reasons_is_told_as_it_was(tmp_path: Path) -> None:
    one = job(tmp_path, "AB", {"A P": 0.0})
    with pytest.raises(Unsolvable) as refusal:
        solve(one)
    assert start_words(one, refusal.value) == refusal.value.sentences
    assert not [line for line in refusal.value.sentences if "disagree" in line or "do not meet" in line]


def test_without_a_start_the_reading_left_out_that_gives_one_is_named(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Azimuths and angles of seven stations, one of each wrong: number 307 of the study; it is the fourth one tried."""
    monkeypatch.setattr("adjust.judge.started.TRIED", 4)
    wrong = case(307, 2, tmp_path)
    (said,) = refused(wrong.job)
    assert said == (
        "without angles.csv:23 (angle Ga to Ba at Da, 142.78286068127224) the other readings lead to starting "
        "coordinates, for which it is about 180 degrees off: check it in the book"
    )
    assert "angles.csv:23" in wrong.names
