"""Control against the readings: leaving a mark out, by the formula and by doing it; the free stage; the fit's scale."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge import critical
from adjust.judge.consistent import Levels
from adjust.judge.control import yardstick
from adjust.network import HELD
from tests.helpers import close

MARKS = {"M1": (0.0, 0.0), "M2": (400.0, 30.0), "M3": (380.0, 350.0), "M4": (-20.0, 330.0)}
NEW = {"P": (120.0, 130.0), "Q": (260.0, 90.0), "R": (240.0, 250.0), "S": (90.0, 240.0)}
TOML = '[units]\nlength = "m"\nangle = "deg"\n[instruments.i]\ndistance = "2 mm"\ndirection = "3 sec"\n{more}\n'


def plane_job(folder: Path, seed: int, scale: float = 1.0, moved: dict[str, tuple[float, float]] | None = None,
              roles: dict[str, str] | None = None, more: str = "") -> adjust.Job:  # fmt: skip
    """A braced network among four marks; ``moved`` are errors of the known coordinates, metres."""
    rng = np.random.default_rng(seed)
    print("seed", seed)
    places = MARKS | NEW
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "job.toml").write_text(TOML.format(more=more))
    control = ["station,east,north,role,sd_east,sd_north"]
    for name, (e, n) in MARKS.items():
        de, dn = (moved or {}).get(name, (0.0, 0.0))
        control.append(f"{name},{e + de!r},{n + dn!r},{(roles or {}).get(name, 'held')},0.002,0.002")
    distances, directions = ["from,to,distance"], ["at,to,direction"]
    for a, (ea, na) in places.items():
        for b, (eb, nb) in places.items():
            if a != b and np.hypot(eb - ea, nb - na) < 330:
                azimuth = np.degrees(np.arctan2(eb - ea, nb - na)) + rng.normal(0, 3 / 3600)
                directions.append(f"{a},{b},{float(azimuth % 360)!r}")
                if a < b:
                    distances.append(f"{a},{b},{float(np.hypot(eb - ea, nb - na) * scale + rng.normal(0, 0.002))!r}")
    for name, rows in (("control", control), ("distances", distances), ("directions", directions)):
        (folder / f"{name}.csv").write_text("\n".join(rows) + "\n")
    return adjust.read(folder)


def marks_of(judgement: adjust.Judgement) -> dict[tuple[str, str], tuple[float | None, float | None, str]]:
    return {(m.station, m.part): (m.misfit, m.sd, m.verdict) for m in judgement.control}


@pytest.mark.parametrize("mark", sorted(MARKS))
def test_leaving_a_mark_out_by_doing_it(tmp_path: Path, mark: str) -> None:
    """The readings and the other marks put the mark where an adjustment without it does.

    The tolerance is that of two linearisations a millimetre or two apart.
    """
    judged = marks_of(adjust.assess(adjust.solve(plane_job(tmp_path / "all", 8))))
    without = adjust.solve(plane_job(tmp_path / "without", 8, roles={mark: "check"}))
    i = without.names.index(mark)
    for part, component in (("east", 0), ("north", 1)):
        misfit, sd, _ = judged[mark, part]
        assert misfit is not None
        close(
            misfit, without.positions[i, component] - without.network.stations.known[i, component], atol=1e-7
        )  # the two stand at linearisations a millimetre apart
        close(sd, without.sd[i, component], atol=1e-7)


def test_a_mark_that_the_datum_needs_is_not_judged(tmp_path: Path) -> None:
    job = plane_job(tmp_path, 3, roles={"M3": "check", "M4": "check"})
    judged = marks_of(adjust.assess(adjust.solve(job)))
    # two held marks: with one left out the network can turn about the other, so nothing fixes it across the line
    assert judged["M1", "east"][2] == "cannot be judged"
    assert judged["M1", "east"][0] is None
    assert judged["M3", "east"][2] == "agrees"


@pytest.mark.parametrize("seed", [11, 12, 13])
def test_a_moved_mark_is_named_and_no_other(tmp_path: Path, seed: int) -> None:
    judgement = adjust.assess(adjust.solve(plane_job(tmp_path, seed, moved={"M3": (0.043, 0.0)})))
    bad = {m.station for m in judgement.control if m.verdict == "disagrees"}
    worst = max(judgement.control, key=lambda m: abs(m.misfit or 0) / (m.sd or 1))
    assert worst.station == "M3"
    assert "M3" in bad
    assert "disagrees" in worst.sentence
    assert "mm" in worst.sentence
    assert judgement.failed


def test_the_free_stage_knows_nothing_of_a_moved_mark(tmp_path: Path) -> None:
    good = adjust.solve(plane_job(tmp_path / "good", 5))
    bad = adjust.solve(plane_job(tmp_path / "bad", 5, moved={"M3": (0.5, 0.0)}))
    assert good.free is not None
    assert bad.free is not None
    close(bad.free.total.square_sum, good.free.total.square_sum, atol=1e-6)
    assert bad.total.square_sum > 100 * good.total.square_sum
    judgement = adjust.assess(bad)
    assert judgement.overall_free[-1].verdict == "met"
    assert judgement.overall[-1].verdict == "not met"


def test_no_free_stage_where_control_is_just_enough(tmp_path: Path) -> None:
    """Two marks fix shift and turn and leave one coordinate to spare; with one mark and an azimuth nothing is."""
    job = plane_job(tmp_path, 5, roles=dict.fromkeys(("M2", "M3", "M4"), "check"))
    (tmp_path / "azimuths.csv").write_text("from,to,azimuth,sd\nM1,P,42.7093899573615,1\n")
    assert adjust.solve(adjust.read(job.folder)).free is None


def test_a_resection_has_no_free_stage_and_its_marks_are_judged_where_they_can_be(tmp_path: Path) -> None:
    """Readings that do not hold together without the control cannot be adjusted free; that is no fault."""
    (tmp_path / "job.toml").write_text(TOML.format(more=""))
    (tmp_path / "control.csv").write_text(
        "station,east,north\n" + "".join(f"{m},{e},{n}\n" for m, (e, n) in MARKS.items())
    )
    (tmp_path / "stations.csv").write_text("station,east,north\nP,120,130\n")
    rows = [f"P,{m},{float(np.degrees(np.arctan2(e - 120.0, n - 130.0)) % 360)!r}\n" for m, (e, n) in MARKS.items()]
    (tmp_path / "directions.csv").write_text("at,to,direction\n" + "".join(rows))
    solution = adjust.solve(adjust.read(tmp_path))
    assert solution.free is None
    # one reading to spare checks each mark across its sight, but in no mark both coordinates
    assert {m.verdict for m in adjust.assess(solution).control} == {"cannot be judged"}


@pytest.mark.parametrize("ppm", [0.0, 25.0, -60.0])
def test_the_scale_of_the_fit(tmp_path: Path, ppm: float) -> None:
    """Distances too long by ppm: the control is smaller than the readings say."""
    judgement = adjust.assess(adjust.solve(plane_job(tmp_path, 21, scale=1 + ppm * 1e-6)))
    fit = judgement.similarity
    assert fit is not None
    assert fit.marks == 4
    assert fit.sd_scale_ppm is not None
    assert 0.5 < fit.sd_scale_ppm < 20
    close(fit.scale_ppm, -ppm, atol=3.3 * fit.sd_scale_ppm) if ppm else None
    clean = adjust.assess(adjust.solve(plane_job(tmp_path / "clean", 21))).similarity
    assert clean is not None
    close(fit.scale_ppm - clean.scale_ppm, -ppm, atol=0.02 * abs(ppm) + 1e-9)


def test_height_marks_are_left_out_one_by_one(tmp_path: Path) -> None:
    (tmp_path / "job.toml").write_text('[units]\nlength = "ft"\nangle = "dms"\n')
    (tmp_path / "control.csv").write_text("station,height\nA,10\nB,12\nC,15.5\n")
    (tmp_path / "levelled.csv").write_text("from,to,rise,sd\nA,P,1,0.01\nB,P,-1,0.01\nC,P,-4,0.01\n")
    judgement = adjust.assess(adjust.solve(adjust.read(tmp_path)))
    got = marks_of(judgement)
    foot = 0.3048
    misfit, sd, verdict = got["C", "height"]
    assert misfit is not None
    # A and B put P at 11.0 ft, so C would be at 15.0: half a foot below its known height; sd sqrt(1 + 1/2) 0.01 ft
    close(misfit, -0.5 * foot, atol=1e-12)
    close(sd, np.sqrt(1.5) * 0.01 * foot, atol=1e-12)
    assert verdict == "disagrees"
    assert "-0.500 ft" in next(m.sentence for m in judgement.control if m.station == "C")
    assert (judgement.solution.network.stations.role[:3, 2] == HELD).all()


def halves(folder: Path, moved: float) -> adjust.Job:
    """Two new points tied to marks of their own and one common mark; M1 is known ``moved`` metres too far east."""
    places = {"M1": (0, 0), "M2": (10, 160), "M3": (150, 170), "M4": (310, 180), "M5": (300, 10), "P": (90, 80),
              "Q": (220, 90)}  # fmt: skip
    (folder / "job.toml").write_text(TOML.format(more='[tests]\nvariance_factor = "from-residuals"'))
    (folder / "control.csv").write_text("station,east,north\n" + "".join(
        f"{m},{e + (moved if m == 'M1' else 0)},{n}\n" for m, (e, n) in places.items() if m[0] == "M"))  # fmt: skip
    rng = np.random.default_rng(31)
    print("seed", 31)
    distances, directions = ["from,to,distance"], ["at,to,direction"]
    for at, marks in (("P", ("M1", "M2", "M3")), ("Q", ("M3", "M4", "M5"))):
        for to in marks:
            de, dn = places[to][0] - places[at][0], places[to][1] - places[at][1]
            distances.append(f"{at},{to},{float(np.hypot(de, dn) + rng.normal(0, 0.002))!r}")
            directions.append(f"{at},{to},{float((np.degrees(np.arctan2(de, dn)) + rng.normal(0, 3 / 3600)) % 360)!r}")
    (folder / "distances.csv").write_text("\n".join(distances) + "\n")
    (folder / "directions.csv").write_text("\n".join(directions) + "\n")
    return adjust.read(folder)


def test_a_moved_mark_is_found_from_residuals_without_a_free_stage(tmp_path: Path) -> None:
    """The misfit is among the residuals that scale it: the ratio is a tau, which Student's limit would never let fail.

    Measured before: 0 of 48,000 such coordinates disagreed, where 205 should have by chance (tests/statistics).
    """
    judgement = adjust.assess(adjust.solve(halves(tmp_path, 0.5)))
    r = judgement.solution.total.degrees_of_freedom
    assert judgement.solution.free is None
    assert r == 6
    ratio = {(m.station, m.part): abs(m.misfit or 0) / (m.sd or 1) for m in judgement.control}
    assert max(ratio.values()) <= np.sqrt(r) * (1 + 1e-6)  # no tau is larger
    assert marks_of(judgement)["M1", "east"][2] == "disagrees"
    clean = adjust.assess(adjust.solve(halves(tmp_path, 0.0)))
    assert {m.verdict for m in clean.control} == {"agrees"}


def test_a_weighted_mark_is_judged_from_residuals_by_student(tmp_path: Path) -> None:
    """Its scale is that of the free stage, so what is known of it is Student's with the degrees of the free stage.

    Measured before: 78 of 32,000 coordinates disagreed, where 25 should have by chance (tests/statistics). Marks are
    now judged together as F, one coordinate as its square root, and share the job's significance among the marks,
    not among all readings.
    """
    roles, more = dict.fromkeys(MARKS, "weighted"), '[tests]\nvariance_factor = "from-residuals"'
    solution = adjust.solve(plane_job(tmp_path, 5, roles=roles, more=more))
    assert solution.free is not None
    by = yardstick(solution, given=False)
    r = solution.free.total.degrees_of_freedom
    assert by.apart
    assert by.limit(0.01) == critical.student_critical(0.01, r)
    levels = Levels(by.scale, by.degrees, by.apart, 0.05, 8, 1)
    t = critical.student_critical(levels.of_unit, r)
    close(levels.probability(t**2 * by.scale, 1, (0.0, 0)), levels.of_unit, atol=1e-9)
    within = replace(levels, apart=False)
    tau = critical.tau_critical(levels.of_unit, r)
    assert tau is not None
    close(within.probability(tau**2 * by.scale, 1, (0.0, 0)), levels.of_unit, atol=1e-9)
