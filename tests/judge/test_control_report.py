"""The largest consistent set of marks: by the formula and by adjusting again; what cannot be told; a common scale."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.errors import NotConverged, Unsolvable
from adjust.judge import consistent, control
from adjust.judge.scale_words import FOOT, recognise, scale_finding, scale_of, size_words
from adjust.judge.shifts import Shifts
from adjust.units import US_FOOT
from tests.helpers import close
from tests.judge.control_study import drawn, judged, moved, network, prepared
from tests.judge.test_control import MARKS, marks_of, plane_job


def report_of(job: adjust.Job) -> control.ControlReport:
    return adjust.assess(adjust.solve(job)).control_report


@pytest.mark.parametrize("role", ["held", "weighted"])
def test_two_marks_released_at_once_are_where_an_adjustment_without_them_puts_them(tmp_path: Path, role: str) -> None:
    """M1 and M3 are wrong: both are released, and the misfits are those of a job where both are check marks.

    The tolerance is that of two linearisations a centimetre or two apart.
    """
    errors, roles = {"M3": (0.03, 0.01), "M1": (-0.02, 0.025)}, dict.fromkeys(MARKS, role)
    report = report_of(plane_job(tmp_path / "all", 8, moved=errors, roles=roles))
    assert set(report.released) == {"M1", "M3"}
    assert report.consistent == ("M2", "M4")
    assert report.cannot_tell == ()
    assert report.failed
    without = adjust.solve(
        plane_job(tmp_path / "without", 8, moved=errors, roles=roles | {"M1": "check", "M3": "check"})
    )
    own = 0.002 if role == "weighted" else 0.0  # the known place of a weighted mark has an error of its own
    for mark in report.marks:
        if mark.station not in report.released:
            continue
        i, part = without.names.index(mark.station), ("east", "north").index(mark.part)
        assert mark.misfit is not None
        assert mark.verdict == "disagrees"
        close(mark.misfit, without.positions[i, part] - without.network.stations.known[i, part], atol=5e-6)
        close(mark.sd, np.hypot(without.sd[i, part], own), atol=1e-6)
    said = [
        s for s in report.sentences if s.startswith("Control: M3 disagrees with the readings and the other two marks")
    ]
    assert len(said) == 1
    assert "to the west of its known place" in said[0] or "to the south-west of its known place" in said[0]
    assert said[0].endswith("without what is named here they agree")


def test_members_of_the_set_are_judged_without_the_released_mark(tmp_path: Path) -> None:
    """With M3 wrong by a metre the others are judged as if it were a check mark: the free stage is not bent."""
    errors = {"M3": (1.0, -0.4)}
    with_it = marks_of(adjust.assess(adjust.solve(plane_job(tmp_path / "all", 8, moved=errors))))
    without = marks_of(
        adjust.assess(adjust.solve(plane_job(tmp_path / "less", 8, moved=errors, roles={"M3": "check"})))
    )
    assert {v for (name, _), (_, _, v) in with_it.items() if name == "M3"} == {"disagrees"}
    for key, (misfit, sd, verdict) in without.items():
        if key[0] == "M3":
            continue  # a check mark has an sd of its own
        got = with_it[key]
        assert got[2] == verdict
        assert misfit is not None
        close(got[0], misfit, atol=2e-5)
        close(got[1], sd, atol=1e-6)


def test_a_moved_mark_in_words(tmp_path: Path) -> None:
    report = report_of(plane_job(tmp_path, 8, moved={"M3": (0.043, 0.0)}))
    assert report.released == ("M3",)
    assert report.consistent == ("M1", "M2", "M4")
    assert len(report.sentences) == 1
    assert re.fullmatch(
        r"Control: M3 disagrees with the readings and the other three marks: they put it 4\d\.\d mm to the west of its "
        r"known place, \d\d\.\d times its uncertainty; without it they agree", report.sentences[0])  # fmt: skip


def test_clean_control_says_nothing_more(tmp_path: Path) -> None:
    report = report_of(plane_job(tmp_path, 8))
    assert report.consistent == ("M1", "M2", "M3", "M4")
    assert (report.released, report.cannot_tell, report.scale, report.sentences) == ((), (), None, ())
    assert not report.failed


def heights(folder: Path, known: dict[str, float], rises: dict[str, float]) -> adjust.Job:
    """Known heights, and a new point by a rise of +- 1 mm from each."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "job.toml").write_text('[units]\nlength = "m"\nangle = "dms"\n')
    (folder / "control.csv").write_text("station,height\n" + "".join(f"{m},{h!r}\n" for m, h in known.items()))
    rows = "".join(f"{m},P,{r!r},0.001\n" for m, r in rises.items())
    (folder / "levelled.csv").write_text("from,to,rise,sd\n" + rows)
    return adjust.read(folder)


def test_of_two_heights_nobody_can_be_blamed(tmp_path: Path) -> None:
    report = report_of(heights(tmp_path, {"A": 10.0, "B": 12.0}, {"A": 1.0, "B": -0.98}))
    assert report.released == ()
    assert report.cannot_tell == (("A height", "B height"),)
    assert report.sentences == (
        "Control: A height or B height is wrong: nothing here tells which; too few marks are left to compare",
    )
    assert [m.verdict for m in report.marks] == ["cannot be judged"] * 2
    assert "A height: A height or B height is wrong, nothing here tells which (estimate of all others" in (
        report.marks[0].sentence)  # fmt: skip
    assert report.failed


def test_three_heights_of_which_one_is_wrong_and_of_which_none_agree(tmp_path: Path) -> None:
    """Two that agree make the third one wrong; where no two agree, nothing tells."""
    rises = {"A": 1.0, "B": -1.0, "C": -4.0}
    one = report_of(heights(tmp_path / "one", {"A": 10.0, "B": 12.0, "C": 15.02}, rises))
    assert one.released == ("C height",)
    assert one.sentences == (
        "Control: C height disagrees with the readings and the other two heights: they put it 20.0 mm below its known "
        "height, 16.3 times its uncertainty; without it they agree",
    )
    none = report_of(heights(tmp_path / "none", {"A": 10.0, "B": 12.03, "C": 15.06}, rises))
    assert none.released == ()
    assert none.cannot_tell == (("A height", "B height", "C height"),)


def test_two_marks_in_the_plane_have_only_their_distance(tmp_path: Path) -> None:
    roles = {"M3": "check", "M4": "check"}
    report = report_of(plane_job(tmp_path, 8, moved={"M2": (0.1, 0.0)}, roles=roles))
    assert report.cannot_tell == (("M1", "M2", "a common scale"),)
    assert len(report.sentences) == 1
    assert report.sentences[0].startswith("Control: the distance between M1 and M2 is 9")
    assert "shorter by the readings than by the known coordinates" in report.sentences[0]
    assert report.sentences[0].endswith("nothing here tells which")
    held = [m for m in report.marks if m.station in ("M1", "M2")]
    assert {m.verdict for m in held} == {"cannot be judged"}


def test_a_mark_wrong_in_height_keeps_its_place(tmp_path: Path) -> None:
    """The plane part and the height of one mark are judged by themselves."""
    seed = 3
    print("seed", seed)
    rng = np.random.default_rng(seed)
    net = next(n for n in (network(rng) for _ in range(50)) if n.levelled and not n.weighted)
    known = net.known.copy()
    known[net.marks[1], 2] += 0.05
    report = judged(replace(net, known=known)).control_report
    name = f"S{net.marks[1]}"
    assert report.released == (f"{name} height",)
    assert name in report.consistent


@pytest.mark.parametrize(
    ("lengths", "cause"),
    [(1 + 80e-6, "ground-and-grid"), (1 - 80e-6, "ground-and-grid"), (0.3048, "feet-and-metres"),
     (1 / US_FOOT, "feet-and-metres"), (1 + 9e-4, "")],
)  # fmt: skip
def test_a_common_scale_is_recognised_and_no_mark_is_blamed(tmp_path: Path, lengths: float, cause: str) -> None:
    report = report_of(plane_job(tmp_path, 9, scale=lengths))
    assert report.scale is not None
    close(report.scale.ratio, 1 / lengths, atol=5 * report.scale.sd_ppm * 1e-6)
    assert report.scale.cause == cause
    assert (report.released, report.cannot_tell) == ((), ())
    assert report.consistent == tuple(MARKS)
    assert report.sentences == (report.scale.sentence,)
    assert all("agrees once the common scale is allowed for" in m.sentence for m in report.marks)
    assert report.failed


def test_heights_in_feet_and_rises_in_metres(tmp_path: Path) -> None:
    known = {"A": 10.0, "B": 12.0, "C": 15.0, "D": 19.0}
    rises = {m: (14.0 - h) * FOOT for m, h in known.items()}
    report = report_of(heights(tmp_path, known, rises))
    assert report.scale is not None
    assert report.scale.cause == "feet-and-metres"
    assert "the known heights agree with the readings once a common scale of 3.28084 times" in report.scale.sentence


@pytest.mark.parametrize(
    ("ppm", "sd", "cause"),
    [(2.0, 0.3, "foot-and-us-foot"), (-2.2, 0.3, "foot-and-us-foot"), (3.5, 0.3, ""), (2.0, 1.0, ""),
     (-157.0, 5.0, "ground-and-grid"),
     (-396.0, 5.0, "ground-and-grid"), (-600.0, 5.0, ""), (12.0, 1.0, ""),
     (31.0, 2.0, "ground-and-grid"), (20.0, 9.0, ""),
     ((0.3048 - 1) * 1e6, 5.0, "feet-and-metres"), ((1 / 0.3048 - 1) * 1e6, 5.0, "feet-and-metres"),
     ((US_FOOT - 1) * 1e6, 0.1, "feet-and-metres"), (2e6, 10.0, "")],
)  # fmt: skip
def test_what_is_recognised(ppm: float, sd: float, cause: str) -> None:
    """Within three standard deviations of one figure, and of no other."""
    assert recognise(ppm, sd)[0] == cause


def test_the_words_of_a_scale() -> None:
    """157 ppm for each 1,000 m of height: 10^6 / 6,371 km."""
    said = scale_finding(-157.0, 2.0).sentence
    assert "a common scale of -157.0 ppm (standard deviation 2.0 ppm; known lengths are shorter than measured)" in said
    assert "a scale factor of 0.999843 or lengths not reduced from a height of about 1000 m" in said
    assert "height" not in recognise(100.0, 2.0)[1]
    assert "known lengths are longer than measured" in size_words(12.0, 1.0)
    assert recognise(12.0, 1.0)[1].startswith("cause not recognised")
    assert recognise((US_FOOT - 1) * 1e6, 0.1)[1].startswith(
        "the known coordinates are in metres but the lengths in US"
    )
    both = recognise((FOOT - 1) * 1e6, 5.0)[1]
    assert both == ("the known coordinates are in metres but the lengths in feet (international or US survey, too "
                    "near to tell); check [units] of both")  # fmt: skip
    assert "+198 ppm besides" in recognise((FOOT * 1.0002 - 1) * 1e6, 5.0)[1]


def test_a_refusal_names_the_scale(tmp_path: Path) -> None:
    """Control in metres and lengths in feet bend a network until it does not settle; the readings alone tell why.

    Before, the refusal named stations that nothing fixes along some azimuth.
    """
    seed = 51
    print("seed", seed)
    job = replace(network(np.random.default_rng([20, seed])), scale=1 / FOOT).write(tmp_path)
    with pytest.raises((NotConverged, Unsolvable)) as stopped:
        adjust.solve(job)
    assert len(stopped.value.sentences) == 1
    assert stopped.value.sentences[0].startswith(
        "the readings hold together by themselves, and the known coordinates differ from them by a common scale of "
        "0.3048 times (known over measured length; standard deviation 1e-06): the known coordinates are in metres but "
        "the lengths in feet"
    )


def test_no_scale_is_named_where_there_is_none(tmp_path: Path) -> None:
    assert scale_of(plane_job(tmp_path / "sound", 8)) is None
    one_mark = plane_job(tmp_path / "one", 8, roles=dict.fromkeys(("M2", "M3", "M4"), "check"))
    assert scale_of(one_mark) is None


@pytest.mark.parametrize("errors", [{}, {"M3": (0.043, 0.0)}, {"M3": (0.03, 0.01), "M1": (-0.02, 0.025)}])
def test_very_many_marks_are_judged_one_by_one_first(
    tmp_path: Path, errors: dict[str, tuple[float, float]], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Only those that fail by themselves are looked at together; the same marks disagree."""
    solution = adjust.solve(plane_job(tmp_path, 8, moved=errors))
    together = adjust.assess(solution).control_report
    monkeypatch.setattr(control, "JOINT_MOST", 7)
    by_themselves = adjust.assess(solution).control_report
    assert set(by_themselves.released) == set(together.released) == set(errors)
    assert [(m.station, m.part) for m in by_themselves.marks] == [(m.station, m.part) for m in together.marks]


def test_beyond_twelve_units_the_worst_is_released_and_others_tried_back() -> None:
    """The way of many marks finds what all sets of few find, in networks where both can be gone."""
    seed = 9
    print("seed", seed)
    rng, same, wrong = np.random.default_rng(seed), 0, 0
    for k in range(3):
        for shifts in prepared(k):
            levels = consistent.Levels(1.0, None, False, 0.05, *control._count([shifts]))
            for _ in range(6):
                z = rng.standard_normal(shifts.rank)
                for unit in rng.choice(len(shifts.units), 2, replace=False).tolist():
                    z = z + 12 * rng.choice([-1, 1], len(shifts.rows[unit])) @ (
                        shifts.rows[unit] / np.linalg.norm(shifts.rows[unit], axis=1)[:, None])  # fmt: skip
                one = replace(shifts, z=z)
                best = consistent.find_consistent(one, levels).released
                found = consistent._one_by_one(one, levels)
                assert consistent.is_consistent(one, found[0], levels)
                same, wrong = same + (best in found), wrong + (best not in found)
    print(same, "the same,", wrong, "not")
    assert same >= 9 * wrong > -1


def shares(sigma: float, size: float, draws: int = 60) -> dict[str, float]:
    """Shares of what is said in draws of five networks."""
    rng = np.random.default_rng(77)
    said = Counter(drawn(parts, rng, size, sigma) for parts in frames() for _ in range(draws))
    return {word: k / said.total() for word, k in said.items()}


@cache
def frames() -> list[list[Shifts]]:
    return [prepared(s) for s in range(5)]


def test_levels_and_names_in_a_reduced_study() -> None:
    """Clean control is quiet at the stated 0.95, four standard errors aside, and not where sigma is larger by a fifth.

    One mark moved by five of its standard deviations is named in 0.95 (reduced: 0.92), no other is blamed in 0.95.
    """
    print("seed", 77)
    n = 60 * len(frames())
    bound = 4 * np.sqrt(0.05 * 0.95 / n)
    quiet = shares(1.0, 0.0)["quiet"]
    assert abs(quiet - 0.95) < bound or quiet > 0.95
    assert shares(1.25, 0.0)["quiet"] < 0.95 - bound
    one = shares(1.0, 5.0)
    assert sum(v for word, v in one.items() if word.startswith("named")) > 0.92
    assert sum(v for word, v in one.items() if "another" in word) < 0.05
    little = shares(1.0, 2.0)
    assert sum(v for word, v in little.items() if word.startswith("named")) < 0.6


def test_a_study_case_by_adjustment() -> None:
    """The case of the study whose mark is named alone: moved in the job, adjusted and judged again."""
    rng = np.random.default_rng([20, 3])
    net = network(rng)
    base = judged(net)
    made = moved(net, base.solution, rng, 1)
    assert made is not None
    report = judged(made[0]).control_report
    assert report.released == tuple(made[1])
    assert base.control_report.released == ()
