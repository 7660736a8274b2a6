"""Common effects against dense adjustments that have them; planted ones found and sized; clean jobs quiet."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.settings import Tests as Levels
from adjust.judge.assess import Judgement
from adjust.judge.critical import tau_critical
from adjust.judge.effect_columns import MOST, effects
from adjust.judge.effect_words import Systematic
from adjust.judge.influence import Influence
from adjust.judge.systematic import Problem, Stage, constants_twice, expected_by_chance, search, systematic
from adjust.judge.systematic import _finding as finding
from tests.helpers import close
from tests.judge import systematic_study
from tests.judge.sharing import DAYS, EFFECTS, booked, job, judged, planted, shared
from tests.networks import Array
from tests.solver.space import SEC
from tests.solver.test_leave_one_out import CASES, Linear, linear

ROOT = Path(__file__).parents[2]
SEED = 1
APPLIED = "applied = []"


def one(found: tuple[Systematic, ...], what: str, of: str) -> Systematic:
    """The only result of this name."""
    (only,) = (s for s in found if (s.what, s.of) == (what, of))
    return only


# -- against dense adjustments


def unknowns(p: Linear, columns: Array) -> tuple[Array, Array]:
    """Extra unknowns (k,) with columns (R, k) in one dense adjustment, and their covariance."""
    k = columns.shape[1]
    D = np.vstack([p.D, np.zeros((k, p.D.shape[1]))])
    size = np.linalg.norm(columns / np.sqrt(np.diagonal(p.C))[:, None], axis=0)
    x, Q = p.fit(np.column_stack([p.J, columns / size]), p.l, p.C, D)
    return x[-k:] / size, Q[-k:, -k:] / np.outer(size, size)


def problem_of(judgement: Judgement) -> Problem:
    """What the tests of a judgement are made of."""
    columns, _ = effects(
        judgement.solution.network, judgement.solution.coefficients[:, -1], judgement.solution.adjusted
    )
    return Problem.of(judgement.solution, judgement.reliability, columns)


def column(p: Linear, problem: Problem, c: int) -> Array:
    """(R, 1) the column of an effect from the dense job's own readings."""
    e, values = problem.effects[c], p.judgement.solution.adjusted
    out = np.zeros((len(p.l), 1))
    out[e.rows, 0] = values[e.rows] if e.what in ("scale", "staff scale") else 1.0
    return out


@pytest.mark.parametrize(("seed", "kinds", "control", "correlated"), [*CASES[:6], *CASES[18:]])
def test_an_effect_is_that_of_an_adjustment_with_it(
    seed: int, kinds: tuple[str, ...], control: str, correlated: bool, tmp_path: Path
) -> None:
    p = linear(seed, kinds, control, correlated, tmp_path)
    problem = problem_of(p.judgement)
    stage = Stage.of(problem, [])
    assert problem.effects
    told = 0
    for c, e in enumerate(problem.effects):
        if not problem.checked[c]:
            assert (e.what in ("scale", "staff scale") and control != "held") or e.what == "orientation"
            continue
        g, m = stage.effect(e, float(problem.m[c]))
        b, Q = unknowns(p, column(p, problem, c))
        sd = float(np.sqrt(Q[0, 0]))
        close(1 / math.sqrt(m) / sd, 1.0, atol=1e-7)
        close(-g / m / sd, float(b[0]) / sd, atol=1e-5)
        told += 1
    assert told


def test_with_others_in_it_is_that_of_an_adjustment_with_all(tmp_path: Path) -> None:
    """A constant and a single reading in; figures of the scale, of every row and the square sum beside them."""
    p = linear(0, ("distances", "directions", "angles"), "held", False, tmp_path)
    problem = problem_of(p.judgement)
    by = {e.what: c for c, e in enumerate(problem.effects)}
    row = int(np.flatnonzero(p.judgement.reliability.tested)[4])
    E, unit = column(p, problem, by["constant"]), np.eye(len(p.l))
    taken = systematic_study.taken(problem, [by["constant"]], [row])
    stage = Stage.of(problem, taken)
    g, m = stage.effect(problem.effects[by["scale"]], float(problem.m[by["scale"]]))
    scale = column(p, problem, by["scale"])
    b, Q = unknowns(p, np.column_stack([E, unit[:, [row]], scale]))
    sd = float(np.sqrt(Q[-1, -1]))
    close([-g / m / sd, 1 / math.sqrt(m) / sd], [float(b[-1]) / sd, 1.0], atol=1e-5)
    other = int(np.flatnonzero(p.judgement.reliability.tested)[7])
    b, Q = unknowns(p, np.column_stack([E, unit[:, [row, other]]]))
    close(stage.rows_w[other], abs(float(b[-1])) / float(np.sqrt(Q[-1, -1])), atol=1e-5)
    assert stage.rows_w[row] == 0.0
    b, Q = unknowns(p, np.column_stack([E, unit[:, [row]]]))
    fall = float(b @ np.linalg.solve(Q, b))
    close(problem.square_sum - stage.square_sum, fall, atol=1e-5 * max(fall, 1.0))


def test_from_residuals_it_is_student_s_t_of_an_adjustment_with_it(tmp_path: Path) -> None:
    """s^2 from the square sum with the effect in, over one degree less."""
    p = linear(0, ("distances", "directions", "angles"), "held", False, tmp_path)
    problem = problem_of(p.judgement)
    r = problem.degrees
    tests = Levels(variance_factor="from-residuals")
    for c, f in enumerate(search(problem, tests)):
        b, Q = unknowns(p, column(p, problem, c))
        w = float(b[0] / np.sqrt(Q[0, 0]))
        assert f.verdict == "none seen"
        assert f.statistic is not None
        close(f.statistic, w / math.sqrt((problem.square_sum - w * w) / (r - 1)), atol=1e-5 * abs(w))


def test_the_limit_from_residuals_is_pope_s_tau(tmp_path: Path) -> None:
    """Of errors drawn anew a third are called significant by tau at this level, and just these by t."""
    p = linear(0, ("distances", "directions", "angles"), "held", False, tmp_path)
    problem, r = problem_of(p.judgement), problem_of(p.judgement).degrees
    tests, limit = Levels(variance_factor="from-residuals", outlier=0.3), tau_critical(0.3, r)
    assert limit is not None
    rng, seen = np.random.default_rng([20261217, 1]), set()
    for _ in range(40):
        drawn = problem.with_errors(rng.normal(size=len(p.l)) * np.sqrt(np.diagonal(p.C)))
        stage = Stage.of(drawn, [])
        for c, e in enumerate(drawn.effects):
            g, m = stage.effect(e, float(drawn.m[c]))
            tau = g / math.sqrt(m) / math.sqrt(drawn.square_sum / r)
            above = finding(stage, c, tests).above
            assert above == (abs(tau) > limit)
            seen.add(above)
    assert seen == {True, False}


def test_the_comparison_sees_a_column_that_is_one_per_cent_off(tmp_path: Path) -> None:
    p = linear(0, ("distances", "directions", "angles"), "held", False, tmp_path)
    problem = problem_of(p.judgement)
    E = column(p, problem, 0)
    E[np.flatnonzero(E)[0]] *= 1.01
    _, Q = unknowns(p, E)
    assert abs(1 / math.sqrt(problem.m[0]) / float(np.sqrt(Q[0, 0])) - 1) > 1e-5


def test_weights_are_those_of_the_dense_matrix(tmp_path: Path) -> None:
    p = linear(1, ("distances", "directions", "angles"), "held", True, tmp_path)
    E = np.random.default_rng(3).normal(size=(len(p.l), 3))
    wanted = np.einsum("rp,rs,sp->p", E, np.linalg.inv(p.C), E)
    influence = Influence.of(p.judgement.solution)
    close(influence.weights(E) / wanted, np.ones(3), atol=1e-9)
    close(influence.variances(E) / np.einsum("rp,rs,sp->p", E, p.C, E), np.ones(3), atol=1e-9)


# -- planted effects in real jobs


@pytest.fixture(scope="module")
def clean_job(tmp_path_factory: pytest.TempPathFactory) -> Judgement:
    """The job without effects."""
    return judged(job(tmp_path_factory.mktemp("clean") / "job", SEED, applied=APPLIED))


@pytest.mark.parametrize("effect", EFFECTS)
def test_a_planted_effect_is_found_and_sized(effect: str, clean_job: Judgement, tmp_path: Path) -> None:
    """12 standard deviations of it: significant under its own name, no other is, within 4 sd of what was planted."""
    name = EFFECTS[effect][0]
    clean = one(clean_job.systematic, *name)
    assert clean.sd is not None
    size = 12 * clean.sd
    found = judged(job(tmp_path / "job", SEED, planted(effect, size), applied=APPLIED)).systematic
    got = one(found, *name)
    assert [(s.what, s.of) for s in found if s.verdict == "significant"] == [name]
    assert got.value is not None
    assert got.sd is not None
    assert abs(got.value - size) < 4 * got.sd
    close(got.sd, clean.sd, atol=0.02 * clean.sd)
    assert {s.verdict for s in found} <= {"significant", "none seen", f"explained by {got.what} of {got.of}"}


def test_the_sign_and_words_of_each(tmp_path: Path) -> None:
    """Sizes in the job's units, and what is asked."""
    wanted = {
        "constant of a reflector": (-0.03, "The 26 distances to reflector round are 30.1", "mm too short",
                                    "Known differences of constants are near 17.5, 30 and 34.4 mm"),
        "scale of an instrument": (60e-6, "distances of station-3 are ", "ppm too long", "ground, at sea level"),
        "scale of a day": (12e-6, "distances of station-3 on 2026-05-15 are 1", "ppm too long", "the atmosphere?"),
        "refraction": (0.4, "zenith angles ask for a coefficient of refraction of 0.5", "in place of 0.13", "the air"),
        "index error": (40 * SEC, "zenith angles of station-3 are ", "sec too large", "an index error"),
        "staff scale": (-200e-6, "levelled rises of level-1 are ", "ppm too small", "the scale of the staff"),
        "orientation of azimuths": (0.02, "azimuths in azimuth.csv are ", "sec too large", "(grid, true, magnetic)?"),
    }  # fmt: skip
    for effect, (size, *words) in wanted.items():
        found = judged(job(tmp_path / effect, SEED, planted(effect, size), applied=APPLIED)).systematic
        text = one(found, *EFFECTS[effect][0]).sentence
        assert [w for w in words if w not in text] == [], text


def test_a_large_scale_and_one_between_feet(tmp_path: Path) -> None:
    found = judged(job(tmp_path / "a", SEED, planted("scale of an instrument", 3e-3), applied=APPLIED)).systematic
    assert "another unit, or known points of another system?" in one(found, "scale", "station-3").sentence
    folder = job(tmp_path / "b", SEED, planted("scale of an instrument", 2e-6), noise=0.0, applied=APPLIED)
    slopes = folder / "slope.csv"
    slopes.write_text(slopes.read_text("utf-8").replace(",0.002,", ",0.0005,"), "utf-8")
    got = one(judged(folder).systematic, "scale", "station-3")
    assert got.value is not None
    close(got.value, 2e-6, atol=1e-8)
    assert "international and US survey feet are 2.0 ppm apart: which are these?" in got.sentence


# -- what the job itself says of its corrections


def corrected(folder: Path, wrong: float, instrument: float, applied: str = "[]") -> tuple[Systematic, ...]:
    """A job with a constant of -30 mm for the reflector round; ``wrong`` metres are left in its distances."""
    head = '[reflectors.round]\nconstant = "-30 mm"\n[reflectors.small]\nconstant = "0 mm"\n'
    in_book = shared("slope", wrong, "one", reflector="round")
    return judged(job(folder, SEED, in_book, head=head, applied=f"applied = {applied}")).systematic


def test_a_constant_applied_twice_with_the_wrong_sign_or_not_at_all(tmp_path: Path) -> None:
    """The distance meter shows true + raw; -30 mm is added here where applied says that it was not."""
    for name, shown, applied, cause, value in (
        ("sound", 0.03, "[]", "", None),
        ("twice", 0.0, "[]", "constant applied twice", -0.03),
        ("sign", -0.03, "[]", "constant with the wrong sign", -0.06),
        ("not", 0.03, '["reflector"]', "constant not applied", 0.03),
    ):  # fmt: skip
        got = one(corrected(tmp_path / name, shown, 0.0, applied), "constant", "reflector round")
        assert got.cause == cause, got.sentence
        assert (got.verdict == "significant") == bool(cause)
        if value is not None:
            assert got.value is not None
            assert got.sd is not None
            assert abs(got.value - value) < 4 * got.sd
            assert "-30.0 mm" in got.sentence


def test_only_a_constant_applied_twice_is_a_warning(tmp_path: Path) -> None:
    found = corrected(tmp_path / "twice", 0.0, 0.0)
    (text,) = constants_twice(found)
    assert "was the constant applied twice? If the instrument had applied it already, say so in applied." in text
    assert constants_twice(corrected(tmp_path / "sign", -0.03, 0.0)) == []


def test_the_atmosphere_corrected_twice(tmp_path: Path) -> None:
    """ppm = 40 is corrected here, and was in the instrument."""
    folder = job(tmp_path / "job", SEED, applied='applied = ["reflector"]')
    rows = (folder / "slope.csv").read_text("utf-8").splitlines()
    text = "\n".join([f"{rows[0]},ppm", *(f"{row},40" for row in rows[1:])]) + "\n"
    (folder / "slope.csv").write_text(text, "utf-8")
    found = [s for s in judged(folder).systematic if s.what == "scale" and s.verdict == "significant"]
    assert {s.cause for s in found} == {"atmosphere applied twice"}
    assert any("the atmosphere of +40.0 ppm was corrected here: was it applied twice?" in s.sentence for s in found)


# -- what is not a common effect


def test_the_same_readings_are_one_effect_named_together(tmp_path: Path) -> None:
    """Every slope of station-3 goes to round, every one of station-5 to small; one day only: no effects of days."""
    folder = job(tmp_path / "job", SEED, applied=APPLIED)
    for file in ("slope.csv", "zenith_angle.csv"):
        text = (folder / file).read_text("utf-8").replace(DAYS[1], DAYS[0])
        rows = [
            r.replace("round", "small") if "station-5" in r else r.replace("small", "round") for r in text.split("\n")
        ]
        (folder / file).write_text("\n".join(rows), "utf-8")
    found = judged(folder).systematic
    names = [(s.what, s.of) for s in found]
    assert len(names) == len(set(names))
    assert sorted(of for what, of in names if what == "constant") == [
        "reflector round, which only station-3 measured to", "reflector small, which only station-5 measured to",
    ]  # fmt: skip
    assert not any(DAYS[0] in of or DAYS[1] in of for _, of in names)
    assert sum(what == "scale" for what, _ in names) == 2


def test_one_wrong_reading_is_no_common_effect(tmp_path: Path) -> None:
    """A slope to round is 60 mm off: what it makes significant rests on it, and nothing is called systematic."""
    found = booked(SEED)
    row = next(n for n, r in enumerate(found) if r.kind == "slope" and r.labels["reflector"] == "round")
    line = 2 + [n for n, r in enumerate(found) if r.kind == "slope"].index(row)
    got = judged(job(tmp_path / "job", SEED, blunders={row: 0.06}, applied=APPLIED)).systematic
    resting = [s for s in got if s.verdict == "rests on one reading"]
    assert one(got, "constant", "reflector round") in resting
    assert {s.rests_on for s in resting} == {(f"slope.csv:{line}",)}
    assert all(
        f"but this rests on one reading, slope.csv:{line}: without it nothing is seen." in s.sentence for s in resting
    )
    assert not any(s.verdict == "significant" for s in got)


def test_two_wrong_readings_and_a_real_effect_are_told_apart(tmp_path: Path) -> None:
    found = booked(SEED)
    slopes = [n for n, r in enumerate(found) if r.kind == "slope" and r.labels["reflector"] == "small"][:2]
    wrong = dict(zip(slopes, (0.06, 0.05), strict=True))
    got = judged(job(tmp_path / "job", SEED, planted("constant of a reflector", 0.02), blunders=wrong,
                     applied=APPLIED)).systematic  # fmt: skip
    assert [(s.what, s.of) for s in got if s.verdict == "significant"] == [("constant", "reflector round")]
    constant = one(got, "constant", "reflector round")
    assert constant.value is not None
    assert constant.sd is not None
    assert abs(constant.value - 0.02) < 4 * constant.sd
    resting = [s for s in got if s.verdict.startswith("rests on")]
    assert resting
    assert all(len(s.rests_on) in (1, 2) for s in resting)


def test_a_free_network_takes_a_scale_up(tmp_path: Path) -> None:
    """Without known points a scale of all distances cannot be told; one of two instruments can, against the other."""
    folder = job(tmp_path / "job", SEED, applied=APPLIED, known=0, without=("levelled",))
    text = (folder / "slope.csv").read_text("utf-8")
    found = judged(folder).systematic
    assert all(one(found, "scale", f"station-{k}").statistic is not None for k in (3, 5))
    (folder / "slope.csv").write_text(text.replace("station-5", "station-3"), "utf-8")
    got = one(judged(folder).systematic, "scale", "station-3")
    assert got.verdict == "cannot be told"
    assert (got.value, got.sd, got.statistic, got.critical) == (None, None, None, None)
    assert got.sentence.endswith("cannot be told; the size of the network takes it up; known points, or distances of "
                                 "another instrument, would tell.")  # fmt: skip


def test_no_reading_to_spare_is_said(tmp_path: Path) -> None:
    judgement = adjust.assess(adjust.solve(adjust.read(ROOT / "networks" / "weir-levels")))
    few = replace(
        judgement.solution, total=replace(judgement.solution.total, unknowns=judgement.solution.total.observations - 1)
    )
    tests = replace(judgement.tests, variance_factor="from-residuals")
    (got,) = systematic(few, judgement.reliability, tests)
    assert got.verdict == "cannot be told"
    assert got.sentence.endswith("no reading is to spare for it.")


def test_two_readings_are_not_called_common(tmp_path: Path) -> None:
    folder = job(tmp_path / "job", SEED, applied=APPLIED)
    rows = (folder / "levelled.csv").read_text("utf-8").splitlines()
    other = [row.replace("level-1", "level-2") for row in rows[3:]]
    (folder / "levelled.csv").write_text(
        "\n".join([rows[0], *(r.replace("level-2", "level-1") for r in rows[1:3]), *other])
    )
    assert [s.of for s in judged(folder).systematic if s.what == "staff scale"] == ["level-2"]


def test_more_effects_than_are_tested_are_counted(tmp_path: Path) -> None:
    """Thirty-five reflectors of three distances each and as many days: the days go first."""
    lines = ["from,to,distance,reflector,day,instrument,sd"]
    lines += [f"A,B,{100 + 1e-4 * k!r},r{k % 35},2026-06-{1 + k % 28:02d},s,1" for k in range(210)]
    (tmp_path / "distances.csv").write_text("\n".join(lines), "utf-8")
    (tmp_path / "stations.csv").write_text("station,east,north\nA,0,0\nB,100,0\n", "utf-8")
    reflectors = "".join(f'[reflectors.r{k}]\nconstant = "0 mm"\n' for k in range(35))
    (tmp_path / "job.toml").write_text(
        f'[units]\nlength = "m"\nangle = "dms"\n{reflectors}[instruments.s]\ndistance = "1 mm"\n'
        '[[book]]\nfile = "stations.csv"\n[[book]]\nfile = "distances.csv"\napplied = []\n', "utf-8",
    )  # fmt: skip
    found = judged(tmp_path).systematic
    assert len(found) == MOST + 1
    last = found[-1]
    assert (last.verdict, last.of) == ("not looked at", "5 more")
    assert last.sentence.startswith("5 more common effects")
    assert sum("on 2026" in s.of for s in found) == 28 - 5


# -- how often


def test_clean_jobs_are_quiet_at_the_stated_rate(tmp_path: Path) -> None:
    """Share of significant ones before and after the search; five per cent more error is seen."""
    rates = systematic_study.false_alarms(tmp_path, draws=8000, searched=250, level=0.01, count=1)
    for rate in rates["plain"]:
        assert rate.within, rate
    assert not all(rate.within for rate in rates["5 per cent larger errors"])


def test_most_effects_of_five_standard_deviations_are_found(tmp_path: Path) -> None:
    """The reduced study: 8 jobs an effect."""
    for effect, row in systematic_study.detection(tmp_path, 8).items():
        assert row.named + row.alike >= 5, (effect, row)
        assert row.false <= 2, (effect, row)


def test_expected_by_chance_counts_what_was_tested() -> None:
    judgement = adjust.assess(adjust.solve(adjust.read(ROOT / "networks" / "loop-traverse-feet")))
    found = judgement.systematic
    assert [s.verdict for s in found] == ["none seen", "cannot be told"]
    close(expected_by_chance(found, judgement.tests), 0.001, atol=1e-12)


def test_a_job_without_such_readings_has_none(tmp_path: Path) -> None:
    (tmp_path / "job.toml").write_text('[units]\nlength = "m"\nangle = "deg"\n[instruments.i]\ndirection = "2 sec"\n')
    (tmp_path / "control.csv").write_text("station,east,north\nA,0,0\nB,100,0\nC,100,100\nD,0,100\n")
    (tmp_path / "directions.csv").write_text("at,to,direction\nP,A,225\nP,B,135\nP,C,45\nP,D,315\n")
    assert judged(tmp_path).systematic == ()
