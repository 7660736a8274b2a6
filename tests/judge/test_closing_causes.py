"""Likely slips of what does not close: the study in small, by hand, and silence. The whole study is
tests/judge/closing_causes_study.py."""

from __future__ import annotations

import math
import re
import shutil
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge import causes_of_closures
from adjust.judge.booked import Booked, Form
from adjust.judge.causes import slips
from adjust.judge.changed_closures import Summed, Walk
from adjust.judge.closures import NOT_MET, closures, computed_traverses
from adjust.judge.slips_asked import Books, forms, other
from tests.helpers import close
from tests.judge import closing
from tests.judge.closing import closed, random_traverse
from tests.judge.closing_causes_study import ASKED, NOTHING, SOME, outcome
from tests.judge.slipped import SORTS

RIGHT = ("right", "right among the listed")


@pytest.mark.parametrize("what", list(ASKED))
def test_the_study_in_small(what: str, tmp_path: Path) -> None:
    """Of two jobs a slip no other reading is blamed, and most are named."""
    found = []
    for sort in (s for s in SORTS if s.slip in ASKED[what]):
        some = (outcome(what, sort, number, tmp_path / f"{sort.slip}{number}") for number in range(30))
        found += [one[0] for _, one in zip(range(2), (one for one in some if one), strict=False)]
    assert len(found) == 2 * len(ASKED[what])
    assert not [verdict for verdict in found if verdict not in (*RIGHT, "silent")], found
    assert sum(verdict in RIGHT for verdict in found) >= 0.6 * len(found), found


@pytest.mark.parametrize("what", list(ASKED))
def test_neither_sound_readings_nor_odd_amounts_have_a_cause(what: str, tmp_path: Path) -> None:
    for number in range(3):
        assert outcome(what, NOTHING, number, tmp_path / f"sound{number}") == ("silent", 0.0, False)
    odd = [outcome(what, SOME, number, tmp_path / f"odd{number}") for number in range(6)]
    assert [one[0] for one in odd if one].count("silent") >= sum(one is not None for one in odd) - 1


def test_a_changed_walk_is_the_walk_of_the_changed_book(tmp_path: Path) -> None:
    """A reading made smaller by a lot, against complex numbers from the readings; every row, loops and links."""
    for seed, shape in enumerate(("loop sheet", "loop sets", "link sheet", "link sets", "link open", "loop gap")):
        made = random_traverse(np.random.default_rng(seed), shape, tmp_path / str(seed))
        booked = Booked.of(adjust.read(tmp_path / str(seed)))
        (done,) = computed_traverses(booked)
        walk, rows = Walk.of(booked, done), booked.network.rows
        tested = 0
        for key in walk.keys:
            if not isinstance(key, int):
                continue
            block, i = booked.network.blocks[rows.block[key]], int(rows.row[key])
            if block.kind == "azimuth":
                continue
            ends = tuple(int(booked.network.stations.names[s][1:]) for s in block.stations[i])
            n = next(n for n, one in enumerate(made.readings) if (one.kind, one.ends) == (block.kind, ends))
            c = 7.5 if block.kind == "distance" else 0.7
            values = [one.value - c * (k == n) for k, one in enumerate(made.readings)]
            got, by = walk.at(key, np.array([c]))
            turn, end = closed(made, values)
            if done.angle:
                close(math.remainder(got[0, 0] - turn, 2 * math.pi) + 1, 1, atol=1e-9)
                end = _unbalanced(made, values)
            close(got[0, -2:], [end.real, end.imag], atol=1e-6)
            assert by.shape == (1, len(walk.wraps), len(walk.keys))
            tested += 1
        assert tested >= 6, shape


def _unbalanced(made: closing.Made, values: list[float]) -> complex:
    """The end of a walk with its angles as they are: ``closed`` balances them."""
    loop = made.shape.startswith("loop")
    angle: dict[tuple[int, ...], float] = {}
    circle: dict[tuple[int, ...], float] = {}
    length: dict[frozenset[int], list[float]] = {}
    for one, value in zip(made.readings, values, strict=True):
        if one.kind == "distance":
            length.setdefault(frozenset(one.ends), []).append(value)
        else:
            (angle if one.kind == "angle" else circle)[one.ends] = value
    for at, back, fore in closing.corners(made):
        if (at, back) in circle:
            angle[at, back, fore] = circle[at, fore] - circle[at, back]
    turned = [angle[c] for c in closing.corners(made)]
    first = made.places[made.walk[0]]
    bearing = made.bearing if loop else closing.azimuth(made.places[made.back] - first) + turned[0]
    z = 0j
    for k, (i, j) in enumerate(pairwise(made.walk)):
        if k:
            bearing += turned[k] + math.pi
        z += float(np.mean(length[frozenset((i, j))])) * complex(math.sin(bearing), math.cos(bearing))
    return z if loop else first + z - made.places[made.walk[-1]]


LEVELS = "from,to,rise,length\nA,B,1.2345,100\nB,C,-0.4327,120\nC,A,-0.8018,150\nB,D,0.5122,90\nD,A,-1.7467,110\n"


def levels(folder: Path, text: str) -> adjust.Job:
    (folder / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "dms"\n[instruments.level]\nlevelling = "1 mm*sqrt(km)"\n'
    )
    (folder / "control.csv").write_text("station,height\nA,50\n")
    (folder / "levelled.csv").write_text(text)
    return adjust.read(folder)


def test_support_is_the_rule_of_bayes(tmp_path: Path) -> None:
    """A-B, in both loops, is booked with two digits swapped. By hand, loop by loop and reading by reading."""
    job = levels(tmp_path, LEVELS.replace("1.2345", "2.1345"))
    found = closures(job)
    assert [one.verdict for one in found] == [NOT_MET, NOT_MET]
    for one in found:
        assert one.sentence == (
            "likeliest slip: in the rise A to B two digits were swapped, 2.1345 for 1.2345 (levelled.csv:2)"
        )
    first = found[0]
    sums = np.array([[one.misclosure["height"]] for one in found])
    rows = sorted({r for one in found for r in one.rows})
    variance = np.diag([1e-6 * length / 1000 for length in (100, 120, 150, 90, 110)])
    signs = np.array([[_sign(one.stations, job, r) if r in one.rows else 0.0 for r in rows] for one in found])
    elsewhere = [0.05 / (2 * abs(w) * math.log(1e5 / one.sd["height"])) for (w,), one in zip(sums, found, strict=True)]
    weights, block = {}, job.network.blocks[[b.kind for b in job.network.blocks].index("levelled")]
    for r in first.rows:
        mine = [k for k, one in enumerate(found) if r in one.rows]
        b, w = signs[np.ix_(mine, rows)], sums[mine, 0]
        cov = b @ variance @ b.T
        cov[np.diag_indices(len(mine))] *= 1 + 0.05**2
        inverse = np.linalg.inv(cov)

        def density(v, cov=cov, inverse=inverse):  # type: ignore[no-untyped-def] # a closure over one reading
            return math.exp(-v @ inverse @ v / 2) / math.sqrt(np.linalg.det(2 * math.pi * cov))

        by, base = signs[mine, rows.index(r)], math.prod(elsewhere[k] for k in mine)
        info = by @ inverse @ by
        best = float(by @ inverse @ w / info)
        left = w - by * best
        if left @ inverse @ left > 12.429:  # chi-square at 0.002 with two degrees: 12.429
            continue
        some = slips()[0] * other("levelled", best, info**-0.5) * math.sqrt(2 * math.pi / info) * density(left) / base
        weights[r, "other"] = some
        for one in forms(Books(job), block, r):
            v = w - by * one.form.change
            if v @ inverse @ v - left @ inverse @ left <= 2.5**2:
                weights[r, f"{one.slip['key']} {one.form.would}"] = one.prior * density(v) / base
    (cause,) = first.likely
    close(cause.support, weights[0, "digits-swapped 1.2345"] / sum(weights.values()), atol=1e-6)


def _sign(stations: tuple[int, ...], job: adjust.Job, row: int) -> float:
    """+1 where a loop walks a line as booked."""
    block = next(b for b in job.network.blocks if b.kind == "levelled")
    pairs = list(pairwise(stations))
    return 1.0 if tuple(block.stations[row].tolist()) in pairs else -1.0


def test_a_met_loop_clears_its_lines(tmp_path: Path) -> None:
    """C-A is in one loop only; A-B, which could be a metre wrong as well, is in another that is met."""
    (bad, _) = sorted(
        closures(levels(tmp_path, LEVELS.replace("-0.8018", "-1.8018"))), key=lambda c: c.verdict != NOT_MET
    )
    assert bad.verdict == NOT_MET
    assert {cause.place for cause in bad.likely} == {"levelled.csv:3", "levelled.csv:4"}


def test_one_face_of_a_pointing_explains_four_triangles(tmp_path: Path) -> None:
    """Ten minutes in the first face are five in the mean; with the job's limits it would not even come to a mean."""
    job = tmp_path / "job"
    shutil.copytree(Path(__file__).parents[2] / "networks" / "spillway-pillars", job,
                    ignore=shutil.ignore_patterns("record"))  # fmt: skip
    toml = (job / "job.toml").read_text("utf-8")
    assert "[rejection]" in toml
    (job / "job.toml").write_text(re.sub(r"\[rejection\][^\n]*\n(?:[^\[\n].*\n|\n)*", "", toml), "utf-8")
    text = (job / "rounds.csv").read_text("utf-8")
    (job / "rounds.csv").write_text(text.replace("322 41 33.8", "322 51 33.8"), "utf-8")
    bad = [one for one in closures(adjust.read(job)) if one.verdict == NOT_MET]
    assert len(bad) == 4
    told = "in the pointing K1 to S1 the minutes were misread, 322 51 33.8 for 322 41 33.8 (rounds.csv:7)"
    assert {one.sentence for one in bad} == {f"likeliest slip: {told}"}


def test_a_staff_of_a_raw_level_book(tmp_path: Path) -> None:
    """A fore sight read a metre too large; nothing tells it from the other sights of the loop that could be so."""
    folder = tmp_path / "staff"
    folder.mkdir()
    (folder / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "dms"\n[instruments.level]\nlevelling = "1 mm*sqrt(km)"\n'
    )
    (folder / "control.csv").write_text("station,height\nA,50\n")
    rows = ("L,A,1.4215,,40,", "L,B,1.2034,2.7317,35,40", "L,A,,0.8932,,35")  # true: 1.7317
    head = "line,station,back,fore,back_length,fore_length\n"
    (folder / "staff.csv").write_text(head + "\n".join(rows) + "\n")
    (bad,) = [one for one in closures(adjust.read(folder)) if one.verdict == NOT_MET]
    assert {cause.slip for cause in bad.likely} == {"round-step"}
    assert "staff.csv:3" in {cause.place for cause in bad.likely}


def test_crowded_forms_are_not_said(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Six millimetres: some swap of the last digits fits nearly always."""
    text = LEVELS.replace("-0.8018", "-0.8081")
    (bad,) = [one for one in closures(levels(tmp_path, text)) if one.verdict == NOT_MET]
    assert bad.likely == ()
    monkeypatch.setattr(causes_of_closures, "CROWDED", 2.0)
    (bad,) = [one for one in closures(levels(tmp_path, text)) if one.verdict == NOT_MET]
    assert bad.likely != ()


def test_many_that_fail_are_not_weighed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    job = levels(tmp_path, LEVELS.replace("1.2345", "2.1345"))
    assert closures(job)[0].likely
    monkeypatch.setattr(causes_of_closures, "MOST_FAILING", 1)
    assert [one.likely for one in closures(job)] == [(), ()]


def test_a_book_that_was_moved_away_has_no_causes(tmp_path: Path) -> None:
    job = levels(tmp_path, LEVELS.replace("1.2345", "2.1345"))
    (tmp_path / "levelled.csv").unlink()
    assert [(one.verdict, one.likely) for one in closures(job)] == [(NOT_MET, ())] * 2


def test_a_zenith_angle_changes_a_rise_by_its_cosine(tmp_path: Path) -> None:
    """Ten degrees too many at 80 degrees: 200 (cos 80 - cos 70) = -33.674 m; a straight line would say -34.377 m."""
    folder = tmp_path / "job"
    folder.mkdir()
    (folder / "job.toml").write_text('[units]\nlength = "m"\nangle = "deg"\n')
    (folder / "zenith_angles.csv").write_text("from,to,zenith_angle,sd\nA,B,80.0,5\n")
    network = adjust.read(folder).network
    z = math.radians(80)
    form = Form(200 * math.cos(z), {0: -200 * math.sin(z)})
    values, by = Summed.of(network, form, False).at(0, np.radians([10.0]))
    close(values[0, 0], 200 * math.cos(math.radians(70)), atol=1e-9)
    close(by[0, 0, 0], -200 * math.sin(math.radians(70)), atol=1e-9)
