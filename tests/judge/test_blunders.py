"""Several blunders: the algebra against adjusting again, masking and swamping, limits, and the job without them."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from scipy.linalg import block_diag

import adjust
from adjust.cli import main
from adjust.judge.assess import Judgement
from adjust.judge.leaving_out import Model
from adjust.judge.rows import without_rows
from adjust.judge.set_aside import without_suspects
from adjust.judge.suspects import cleared, log, mended
from adjust.network import CHECK, PARTS
from tests.helpers import close
from tests.judge.blunders_study import clean, named, outcome, planted, shifted
from tests.judge.test_control import halves
from tests.solver.test_leave_one_out import CASES, linear

HEAD = '[units]\nlength = "m"\nangle = "deg"\n[tests]\nvariance_factor = "{factor}"\n'


def repeated(folder: Path, values: list[float], factor: str = "given", sd: float = 0.001) -> Judgement:
    """One height levelled many times from a bench mark: the smallest network."""
    folder.mkdir(exist_ok=True)
    (folder / "job.toml").write_text(HEAD.format(factor=factor))
    (folder / "control.csv").write_text("station,height\nBM,0\n")
    rows = "\n".join(f"BM,P,{x},{sd * 1000}" for x in values)
    (folder / "levelled.csv").write_text(f"from,to,rise,sd\n{rows}\n".replace(",sd\n", ",sd\n", 1))
    text = (folder / "levelled.csv").read_text().split("\n")
    text[1:-1] = [",".join([*line.split(",")[:3], f"{sd}"]) for line in text[1:-1]]
    (folder / "levelled.csv").write_text("\n".join(text))
    return adjust.assess(adjust.solve(adjust.read(folder)))


@pytest.mark.parametrize(("seed", "kinds", "control", "correlated"), CASES[::2])
def test_leaving_a_set_out_is_the_fit_with_a_shift_for_each(
    seed: int, kinds: tuple[str, ...], control: str, correlated: bool, tmp_path: Path
) -> None:
    p = linear(seed, kinds, control, correlated, tmp_path)
    j = p.judgement
    model = Model.of(j.solution, j.reliability)
    rows = model.independent([int(r) for r in np.flatnonzero(j.reliability.tested)[[0, 3, 4]]])
    assert len(rows) > 1
    without = model.without(rows)
    E = np.eye(len(p.l))[:, rows]
    x, Q = p.fit(np.column_stack([p.J, E]), p.l, p.C, block_diag(p.D, np.zeros((len(rows), 0))))
    k = len(rows)
    sd = np.sqrt(np.diagonal(Q)[-k:])
    close(without.blunder / sd, x[-k:] / sd, atol=1e-6)
    close(without.covariance / np.outer(sd, sd), Q[-k:, -k:] / np.outer(sd, sd), atol=1e-8)
    rest = p.l - np.column_stack([p.J, E]) @ x
    W = np.linalg.inv(p.C)
    close(without.square_sum, rest @ W @ rest, atol=1e-6 * (1 + rest @ W @ rest))
    close(without.pv * np.sqrt(np.diagonal(p.C)), -(W @ rest) * np.sqrt(np.diagonal(p.C)), atol=1e-6)
    A = np.column_stack([p.J, E])
    m = np.diagonal(W - W @ A @ Q @ A.T @ W)
    close(without.m[without.tested] / m[without.tested], np.ones(without.tested.sum()), atol=1e-6)


@pytest.mark.parametrize("number", [0, 1, 4, 8])
def test_the_job_without_suspects_is_the_adjustment_that_was_promised(number: int, tmp_path: Path) -> None:
    job, rows = planted(clean(number, tmp_path), number, 2)
    judgement = adjust.assess(adjust.solve(job))
    assert set(judgement.blunders.rows) == set(rows)
    promised = mended(judgement)
    assert promised
    again = adjust.assess(adjust.solve(without_suspects(judgement)))
    there = ~np.isnan(promised.shifts)
    close((again.solution.positions - judgement.solution.positions)[there], promised.shifts[there], atol=1e-9)
    close(again.solution.total.square_sum, promised.square_sum, atol=1e-4)
    assert again.solution.total.degrees_of_freedom == promised.degrees
    assert again.overall[-1].verdict == promised.overall.verdict == "met"
    assert not any(s.at_job_level for s in again.suspects)
    assert [a.observation for a in again.solution.job.left_out] == [judgement.ids[r] for r in judgement.blunders.rows]
    assert all("--without-suspects" in a.reason for a in again.solution.job.left_out)


def test_the_log_tells_each_step_with_before_and_after(tmp_path: Path) -> None:
    job, rows = planted(clean(0, tmp_path), 0, 3)
    judgement = adjust.assess(adjust.solve(job))
    steps = log(judgement)
    assert [s.action for s in steps] == ["left out", "left out", "left out", "adjusted without them"]
    assert {r for s in steps[:-1] for r in s.rows} == set(rows)
    assert steps[0].rows[0] == steps[0].before.largest == int(np.nanargmax(np.abs(judgement.statistic)))
    stage = judgement.solution.free or judgement.solution
    close(steps[0].before.variance_factor, stage.total.variance_factor, atol=1e-6)
    for one, following in pairwise(steps[:-1]):
        assert one.after == following.before
    factors = [s.after.variance_factor for s in steps[:-1]]
    assert factors == sorted(factors, reverse=True)
    promised = mended(judgement)
    last = steps[-1]
    assert promised
    assert last.shift
    close(last.shift.value, promised.shifts[last.shift.station, last.shift.part], atol=1e-12)
    close(abs(last.shift.value), np.nanmax(np.abs(promised.shifts)), atol=1e-12)
    # the first step alone, by really leaving the reading out
    network = without_rows(job.network, np.array(steps[0].rows))
    alone = adjust.solve(replace(job, network=network))
    moved = alone.positions - judgement.solution.positions
    assert steps[0].shift
    close(moved[steps[0].shift.station, steps[0].shift.part], steps[0].shift.value, atol=5e-5)


def test_readings_that_only_the_blunders_made_look_bad_are_cleared(tmp_path: Path) -> None:
    job, rows = planted(clean(4, tmp_path), 4, 3)
    judgement = adjust.assess(adjust.solve(job))
    failing = set(np.flatnonzero(judgement.suspect).tolist())
    assert failing > set(rows)
    told = cleared(judgement)
    assert {c.row for c in told} == failing - set(rows)
    assert all(abs(c.without) < 3.3 < abs(c.statistic) for c in told)


def test_two_equal_blunders_that_hide_each_other_are_found_together(tmp_path: Path) -> None:
    """From residuals two equal blunders among ten spoil the scale so much that no tau is large: a robust start sees."""
    values = [10.0003, 9.9998, 10.0001, 9.9996, 10.0002, 10.0005, 9.9997, 10.0000, 10.051, 10.0514]
    judgement = repeated(tmp_path, values, "from-residuals")
    assert not judgement.suspect_of_job.any()
    assert set(judgement.blunders.rows) == {8, 9}
    assert judgement.blunders.together
    assert log(judgement)[0].action == "set apart by a robust estimate"
    assert judgement.failed
    assert not repeated(tmp_path, values[:8], "from-residuals").blunders.rows


# NIST/SEMATECH e-Handbook of Statistical Methods, section 1.3.5.17 (data of Tietjen and Moore 1972); confidence: read
def test_the_published_planted_blunder_is_found_and_alone(tmp_path: Path) -> None:
    values = [199.31, 199.53, 200.19, 200.82, 201.92, 201.95, 202.18, 245.57]
    judgement = repeated(tmp_path, values, "from-residuals", 1.0)
    assert judgement.blunders.rows == (7,)
    close(abs(judgement.statistic[7]) * np.sqrt(7 / 8), 2.4687, atol=0.00011)
    (suspect,) = judgement.suspects
    close(suspect.blunder, 245.57 - np.mean(values[:7]), atol=1e-9)


def test_a_gross_error_that_bends_the_figure_hides_no_second_one(tmp_path: Path) -> None:
    """A distance in feet among metres, and a pointing a minute off: at the bent figure nothing would be found."""
    job = clean(0, tmp_path)
    before = adjust.assess(adjust.solve(job))
    kinds = [job.network.blocks[b].kind for b in job.network.rows.block]
    share = before.reliability.checked_share
    distance = next(r for r, k in enumerate(kinds) if k == "distance" and share[r] > 0.5)
    pointing = next(r for r, k in enumerate(kinds) if k == "direction" and share[r] > 0.5)
    metres = float(before.solution.design.observed[distance])
    bad = shifted(job, np.array([distance, pointing]), np.array([metres * (1 / 0.3048 - 1), np.radians(1 / 60)]))
    judgement = adjust.assess(adjust.solve(bad))
    assert np.abs(judgement.solution.positions - before.solution.positions)[:, :2].max() > 1
    assert set(judgement.blunders.rows) == {distance, pointing}
    close(judgement.suspects[0].blunder, metres * (1 / 0.3048 - 1), atol=0.02)
    assert log(judgement)[0].rows == (distance,)


def test_a_first_choice_that_two_blunders_forced_is_taken_back(tmp_path: Path) -> None:
    """Two blunders of one sign pull a sound reading of few others out; with both out it fits and returns."""
    values = [10.0, 10.0005, 9.9995, 10.02, 10.0205, 10.0002, 9.9998]
    judgement = repeated(tmp_path, values)
    assert set(judgement.blunders.rows) == {3, 4}


def test_a_scatter_larger_than_stated_is_not_taken_for_blunders(tmp_path: Path) -> None:
    rng = np.random.default_rng(5)
    judgement = repeated(tmp_path, (10 + rng.normal(0, 0.006, 40)).tolist())
    assert judgement.blunders.too_many
    assert not judgement.blunders.rows
    assert len(judgement.suspects) > 4
    assert mended(judgement) is None
    assert log(judgement) == cleared(judgement) == ()


def test_an_effect_that_leaves_the_rest_unfitting_explains_nothing(tmp_path: Path) -> None:
    """Five distances and angles of two different figures: the constant that fits best hid every suspect."""
    (tmp_path / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "deg"\n[instruments.t]\ndistance = "2 mm"\ndirection = "3 sec"\n'
    )
    (tmp_path / "control.csv").write_text("station,east,north\nA,100,100\nB,220,100\n")
    (tmp_path / "distances.csv").write_text(
        "from,to,distance\nA,P,86.602\nB,P,103.235\nA,Q,111.803\nB,Q,86.023\nP,Q,55.109\n"
    )
    (tmp_path / "angles.csv").write_text(
        "at,first,second,angle\nA,P,B,54.7356\nB,A,P,43.2333\nA,Q,B,26.565\nB,A,Q,35.5378\nP,A,Q,101\n"
    )
    judgement = adjust.assess(adjust.solve(adjust.read(tmp_path)))
    assert any(e.verdict == "significant" for e in judgement.systematic)
    assert not judgement.searched.shared
    assert judgement.blunders.too_many
    assert judgement.suspects
    assert judgement.failed


def test_nothing_is_found_where_nothing_can_be_tested(tmp_path: Path) -> None:
    judgement = repeated(tmp_path, [10.0, 10.1])
    assert {s.row for s in judgement.suspects} == {0, 1}  # one degree of freedom: either could be it
    assert not judgement.blunders.rows
    alone = repeated(tmp_path, [10.0])
    assert not alone.suspects


def test_a_wrong_weighted_coordinate_is_blamed_and_no_reading(tmp_path: Path) -> None:
    number = 6  # weighted control
    job = clean(number, tmp_path)
    at = job.network.rows
    control = [r for r in range(len(at)) if job.network.blocks[at.block[r]].kind == "control"]
    judgement = adjust.assess(adjust.solve(job))
    row = max(control, key=lambda r: judgement.reliability.checked_share[r])
    bad = shifted(job, np.array([row]), np.array([8 * judgement.smallest_detectable[row]]))
    judgement = adjust.assess(adjust.solve(bad))
    station = int(bad.network.blocks[at.block[row]].stations[at.row[row], 0])
    name = judgement.solution.names[station]
    assert judgement.blunders.rows == ()
    report = judgement.control_report
    assert name in report.released or any(name in group for group in report.cannot_tell)
    assert judgement.failed
    # a coordinate left out all the same is compared afterwards
    part = int(at.part[row])
    network = without_rows(bad.network, np.array([row]))
    assert network.stations.role[station, part] == CHECK
    solved = adjust.solve(replace(bad, network=network))
    (mark,) = [m for m in adjust.assess(solved).control if m.station == name and m.part == PARTS[part]]
    assert mark.misfit is not None


def test_one_wrong_mark_beats_two_wrong_readings_where_there_is_no_free_stage(tmp_path: Path) -> None:
    judgement = adjust.assess(adjust.solve(halves(tmp_path, 0.5)))
    assert judgement.solution.free is None
    assert judgement.blunders.rows == ()
    assert judgement.control_report.released == ("M1",)


def test_the_command_leaves_suspects_out_and_says_so(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    values = [10.0003, 9.9998, 10.0001, 9.9996, 10.0002, 10.0005, 9.9997, 10.0000, 10.21]
    repeated(tmp_path / "job", values)
    assert main(["adjust", str(tmp_path / "job")]) == 1
    assert "Without it (--without-suspects)" in capsys.readouterr().out
    assert main(["adjust", str(tmp_path / "job"), "--without-suspects"]) == 0
    out = capsys.readouterr().out
    assert "No suspect readings" in out
    assert "levelled.csv:10 (suspect with a statistic of" in out


@pytest.mark.parametrize("blunders", [0, 1, 2, 3])
def test_the_study_in_small(blunders: int, tmp_path: Path) -> None:
    """The figures of docs/measured.md are for 200 networks each; of three none may fail."""
    for number in range(3):
        assert outcome(number, blunders, tmp_path / str(number)) in ("found", "quiet", "in the groups")


def test_the_study_can_fail(tmp_path: Path) -> None:
    job, rows = planted(clean(2, tmp_path), 2, 2)
    judgement = adjust.assess(adjust.solve(job))
    assert named(judgement, rows) == "found"
    assert named(judgement, [*rows[:1], (rows[1] + 1) % len(judgement.ids)]) == "another named"
    assert named(judgement, rows[:1]) == "found, and more"
