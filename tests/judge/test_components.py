"""Variance components: other programs, dense likelihoods, refusals, and lines to paste."""

from __future__ import annotations

import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from statsmodels.regression.mixed_linear_model import MixedLM

import adjust
from adjust.judge import components as judged
from adjust.judge.components import Component, components, estimate, estimated_for
from adjust.judge.groupings import Grouping, groupings
from adjust.judge.moments import Problem
from adjust.solver.solution import Solution
from tests.cases.worked import Case, Result
from tests.helpers import close
from tests.judge import components_study as study
from tests.judge.dense_components import Dense
from tests.networks import random_job
from tests.statistics.jobs import Clean, network

SEED = 20260611


def solution_of(name: str, folder: Path, factor: float = 1.0) -> tuple[Clean, Solution]:
    """A network of the study with errors, those of distances ``factor`` times as large as stated."""
    print("seed", SEED)
    clean = network(name, folder)
    kinds = np.array([b.kind for b in clean.job.network.blocks])[clean.job.network.rows.block]
    larger = replace(clean, sd=np.where(kinds == "distance", factor * clean.sd, clean.sd))
    return clean, adjust.solve(clean.with_errors(larger.errors(np.random.default_rng(SEED), 1)[0]))


def last(solution: Solution) -> Grouping:
    return groupings(solution.design)[-1]


DENSE = ("plane, held", "plane, weighted", "plane, free, centring", "plane, held, given covariances", "levels, free")


@pytest.mark.parametrize("name", DENSE)
def test_moments_are_those_of_dense_matrices(name: str, tmp_path: Path) -> None:
    _, solution = solution_of(name, tmp_path)
    grouping = last(solution)
    theta = np.random.default_rng(SEED).uniform(0.5, 2.5, grouping.count)
    q, t, s = Dense.of(solution, grouping).moments(theta)
    got = Problem.of(solution, grouping).moments(theta)
    close(got.q, q, atol=1e-5 * q.max())
    close(got.t, t, atol=1e-8 * t.max())
    close(got.s, s, atol=1e-8 * s.max())
    if not grouping.centring:
        close(got.t.sum(), solution.total.degrees_of_freedom, atol=1e-8)


@pytest.mark.parametrize("name", ["plane, held, centring", "plane, held, given covariances", "plane, weighted"])
def test_components_maximise_the_restricted_likelihood(name: str, tmp_path: Path) -> None:
    """Against a general search with dense matrices."""
    _, solution = solution_of(name, tmp_path, 2.0)
    grouping = last(solution)
    found = estimate(solution, grouping, least=0.0, settled=1e-7)
    assert found.estimated.all()
    alive = ~found.vanished
    assert alive.sum() >= 2
    wanted = Dense.of(solution, grouping).most_likely()
    close(found.theta[alive], wanted[alive], atol=2e-3)
    close(wanted[~alive], 0 * wanted[~alive], atol=1e-2)


def test_components_at_rest_of_two_groups(tmp_path: Path) -> None:
    """Computed beside the published rounds; an independent solution."""
    found = Case("variance_components_two_groups").run(tmp_path).components
    close(found.theta, [0.9611586327134717, 1.6877873040343407], atol=1e-7)


def one_way(sizes: list[int], folder: Path) -> tuple[Solution, pd.DataFrame]:
    """A random unbalanced one-way layout: set-ups as batches, their centring between them."""
    print("seed", SEED)
    rng = np.random.default_rng(SEED)
    batch = np.repeat(np.arange(len(sizes)), sizes)
    y = 100.0 + rng.normal(0, 0.003, len(sizes))[batch] + rng.normal(0, 0.002, len(batch))
    rows = "\n".join(f"A,B,{float(v)!r},batch {b}" for v, b in zip(y, batch, strict=True))
    folder.mkdir(exist_ok=True)
    (folder / "job.toml").write_text(
        'title = "One way"\nunits = { length = "m", angle = "dms" }\n'
        'instruments.e = { distance = "2 mm", centring = "2 mm" }\n', "utf-8")  # fmt: skip
    (folder / "control.csv").write_text("station,east,north\nA,0,0\n", "utf-8")
    (folder / "azimuths.csv").write_text("from,to,azimuth,role\nA,B,90 00 00,held\n", "utf-8")
    (folder / "distances.csv").write_text(f"from,to,distance,setup\n{rows}\n", "utf-8")
    return adjust.solve(adjust.read(folder)), pd.DataFrame({"y": (y - 100.0) * 1000, "batch": batch})


def test_an_unbalanced_layout_agrees_with_a_mixed_model(tmp_path: Path) -> None:
    solution, frame = one_way([2, 7, 4, 3, 9, 5, 2, 6, 4, 8], tmp_path)
    model = MixedLM(frame["y"], np.ones((len(frame), 1)), groups=frame["batch"]).fit(reml=True, gtol=1e-9)
    found = estimate(solution, last(solution), settled=1e-8)
    wanted = [model.scale / 4.0, float(np.asarray(model.cov_re)[0, 0]) / 4.0]
    assert found.grouping.labels == ("distances of e", "centring")
    close(found.theta, wanted, atol=1e-3)


def test_random_signs_come_to_the_same_rest(tmp_path: Path) -> None:
    _, solution = solution_of("plane, held", tmp_path, 2.0)
    problem = Problem.of(solution, last(solution))
    signs = replace(problem, dense_most=0)
    exact, probed = problem.moments(np.ones(3)), signs.moments(np.ones(3))
    close(probed.q, exact.q, atol=1e-7)
    close(probed.t, exact.t, atol=1e-9)
    assert not np.array_equal(probed.s, exact.s)
    close(np.diagonal(probed.s), np.diagonal(exact.s), atol=0.25 * exact.s.max())
    close(estimated_for(signs, settled=1e-5).theta, estimated_for(problem, settled=1e-5).theta, atol=1e-3)


def by_name(found: tuple[Component, ...], by: str = "instrument") -> dict[str, Component]:
    return {c.group: c for c in found if c.by == by}


def test_one_group_is_the_variance_factor(tmp_path: Path) -> None:
    _, solution = solution_of("levels, free", tmp_path)
    (one,) = components(solution)
    assert solution.total.variance_factor is not None
    close(one.factor, solution.total.variance_factor, atol=1e-9)
    close(one.redundancy, solution.total.degrees_of_freedom, atol=1e-9)
    close(one.sd or 0, one.sd_factor / np.sqrt(2 * one.redundancy), atol=1e-9)
    assert one.group == "levelled lines"
    assert one.verdict == "as stated"


def test_too_little_redundancy_keeps_the_stated_size(tmp_path: Path) -> None:
    _, solution = solution_of("quadrilateral, few to spare", tmp_path)
    for c in components(solution):
        assert (c.factor, c.sd, c.interval, c.verdict, c.paste) == (1.0, None, None, "cannot be told", ())
    assert [c.sentence for c in components(solution)] == [
        "distances of i keep their stated size (6 readings): a redundancy of 3.9 is too little to judge by; 5 is the "
        "least",
        "angles of i keep their stated size (5 readings): a redundancy of 3.1 is too little to judge by; 5 is the "
        "least",
    ]


def plain(folder: Path, tables: dict[str, str], toml: str = "") -> Solution:
    """A small job in metres with held marks A, B, C."""
    folder.mkdir(exist_ok=True)
    (folder / "job.toml").write_text(f'title = "t"\nunits = {{ length = "m", angle = "deg" }}\n{toml}', "utf-8")
    marks = "station,east,north\nA,0,0\nB,100,0\nC,50,120\nD,-30,80\n"
    for name, text in ({"control.csv": marks} | tables).items():
        (folder / name).write_text(text, "utf-8")
    return adjust.solve(adjust.read(folder))


def test_no_redundancy_and_few_readings_do_not_fail(tmp_path: Path) -> None:
    toml = 'instruments.e = { distance = "2 mm" }\n'
    two = "from,to,distance\nA,P,64.031\nB,P,78.103\n"
    found = components(plain(tmp_path, {"distances.csv": two, "stations.csv": "station,east,north\nP,40,50\n"}, toml))
    assert [(c.readings, c.redundancy < 1e-9, c.verdict) for c in found] == [(2, True, "cannot be told")]
    five = two + "C,P,70.712\nD,P,76.159\nA,P,64.032\n"
    (one,) = components(plain(tmp_path, {"distances.csv": five}, toml))
    close(one.redundancy, 3.0, atol=1e-9)


def test_a_share_of_nothing_is_said(tmp_path: Path) -> None:
    """Readings without any error, and set-ups that agree better than their readings."""
    clean = network("levels, free", tmp_path)
    (one,) = components(adjust.solve(clean.job))
    assert one.verdict == "cannot be told"
    assert one.sentence.startswith("levelled lines cannot be told from nothing (from ")
    solution, _ = one_way([3] * 12, tmp_path / "batches")
    problem = Problem.of(solution, last(solution))
    alike = np.tile([0.002, -0.002, 0.0], 12)
    numbers = replace(problem.numbers, misclosure=np.append(0.0, alike))
    found = estimated_for(replace(problem, numbers=numbers))
    assert found.vanished.tolist() == [False, True]
    close(found.theta[0], np.sum(alike**2) / 0.002**2 / 35, atol=1e-3)  # the redundancy of all, since centring is nil


def test_groups_that_look_alike_are_refused(tmp_path: Path) -> None:
    """With a set-up for every distance its centring and the distance cannot be told apart."""
    rows = "".join(
        f"A,B,{100 + e},{i}\n" for i, e in enumerate([0.001, -0.002, 0.003, 0.0, -0.001, 0.002, 0.001, 0, 0])
    )
    toml = 'instruments.e = { distance = "2 mm", centring = "2 mm" }\n'
    tables = {"distances.csv": f"from,to,distance,setup\n{rows}", "control.csv": "station,east,north\nA,0,0\n",
              "azimuths.csv": "from,to,azimuth,role\nA,B,90,held\n"}  # fmt: skip
    found = components(plain(tmp_path, tables, toml))
    assert [c.sentence for c in found if c.by == "centring"] == [
        "distances of e keep their stated size (9 readings): a redundancy of 4.0 is too little to judge by; 5 is the "
        "least",
        "centring keeps its stated size (9 readings): a redundancy of 4.0 is too little to judge by; 5 is the least",
    ]
    again = estimate(adjust.solve(adjust.read(tmp_path)), last(adjust.solve(adjust.read(tmp_path))), least=2.0)
    assert again.reasons == {
        0: "the residuals cannot tell distances of e and centring apart",
        1: "the residuals cannot tell centring and distances of e apart",
    }
    assert not again.estimated.any()


def test_days_and_crews_where_two_are_booked(tmp_path: Path) -> None:
    rng = np.random.default_rng(SEED)
    xy = {"A": (0, 0), "B": (100, 0), "C": (50, 120), "D": (-30, 80)}
    rows = []
    for k in range(24):
        mark = "ABCD"[k % 4]
        length = np.hypot(40 - xy[mark][0], 50 - xy[mark][1]) + rng.normal(0, 0.002 if k < 12 else 0.010)
        rows.append(f"{mark},P,{float(length)!r},{'2026-05-01' if k < 12 else '2026-05-02'},{'' if k % 2 else 'Reed'}")
    table = "from,to,distance,day,crew\n" + "\n".join(rows) + "\n"
    solution = plain(tmp_path, {"distances.csv": table}, 'instruments.e = { distance = "2 mm" }\n')
    found = components(solution)
    assert [c.by for c in found] == ["instrument", "day", "day"]
    days = by_name(found, "day")
    assert days["distances of the day 2026-05-01"].verdict == "as stated"
    assert days["distances of the day 2026-05-02"].verdict == "worse than stated"
    named = replace(solution.network.blocks[0], labels={"crew": ("Reed", "Moss", "") * 8})
    design = replace(solution.design, network=replace(solution.network, blocks=(named,)))
    assert groupings(design)[-1].names == ("distances of the crew Reed", "distances of the crew Moss",
                                           "distances without a crew")  # fmt: skip


def test_above_a_number_of_rows_nothing_is_estimated(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    _, solution = solution_of("levels, free", tmp_path)
    assert components(solution)
    monkeypatch.setattr(judged, "ROWS_MOST", 3)
    assert components(solution) == ()


def pasted(text: str, lines: tuple[str, ...]) -> str:
    """job.toml with lines put where their heads say: into the [[book]] block of the file, or over an error model."""
    head, file = "", ""
    for line in lines:
        if line.startswith("["):
            head = line
        elif line.startswith("file = "):
            file = line
        elif head == "[[book]]":
            assert text.count(file) == 1
            text = text.replace(file, f"{file}\n{line}")
        else:
            key = line.split(" = ")[0]
            before, after = text.split(head + "\n", 1)
            own, mark, rest = after.partition("\n[")
            kept = [x for x in own.split("\n") if x.split(" = ")[0] != key]
            text = before + head + "\n" + "\n".join([line, *kept]) + mark + rest
    tomllib.loads(text)
    return text


def test_pasted_factors_make_everything_fit_as_stated(tmp_path: Path) -> None:
    made = random_job(np.random.default_rng(SEED), tmp_path, 14, ("distances", "directions", "levelled_lengths"))
    job = adjust.read(made.folder)
    bad = {"distance": 2.5, "levelled": 0.3}
    blocks = tuple(replace(b, sd=b.sd / bad.get(b.kind, 1.0)) for b in job.network.blocks)
    first = components(adjust.solve(replace(job, network=replace(job.network, blocks=blocks))))
    assert {c.group: c.verdict for c in first} == {
        "distances of station": "worse than stated", "directions of station": "as stated",
        "levelled lines of level-km": "better than stated",
    }  # fmt: skip
    text = (made.folder / "job.toml").read_text("utf-8")
    for block in job.network.blocks:
        if block.kind in bad:
            text = text.replace(f'file = "{block.file}"', f'file = "{block.file}"\nsd_factor = {1 / bad[block.kind]!r}')
    (made.folder / "job.toml").write_text(text, "utf-8")
    stated = components(adjust.solve(adjust.read(made.folder)))
    close([c.factor for c in stated], [c.factor for c in first], atol=1e-6)
    lines = [c.paste for c in stated if c.paste]
    assert lines[0][:2] == ("[[book]]", 'file = "distances.csv"')
    assert len(lines) == 2
    for block in job.network.blocks:
        if block.kind in bad:
            text = text.replace(f"sd_factor = {1 / bad[block.kind]!r}\n", "")
    for one in lines:
        text = pasted(text, one)
    (made.folder / "job.toml").write_text(text, "utf-8")
    again = by_name(components(adjust.solve(adjust.read(made.folder))))
    close(again["distances of station"].factor, 1.0, atol=0.012)
    close(again["levelled lines of level-km"].factor, 1.0, atol=0.012)
    assert all(c.verdict == "as stated" and c.paste == () for c in again.values())


MIXED = """[instruments.total-station]
direction = "2 sec"
distance = "1 mm + 2 ppm"
centring = "0.5 mm"
target = "0.5 mm"
[[book]]
file = "control.csv"
[[book]]
file = "traverse.csv"
"""


def mixed(folder: Path, toml: str) -> Solution:
    """Angles and distances in one table, distances 4 times as bad as stated, with centring."""
    print("seed", SEED)
    rng = np.random.default_rng(SEED)
    xy = {"A": (0.0, 0.0), "B": (300.0, 0.0), "C": (250.0, 320.0), "D": (-30.0, 280.0), "P": (140.0, 150.0)}
    rows = []
    for k in range(60):
        at, back, fore = rng.permutation(list(xy))[:3] if k % 2 else ("P", *rng.permutation(list("ABCD"))[:2])
        d = np.subtract([xy[back], xy[fore]], xy[at])
        a = np.degrees(np.arctan2(d[1, 0], d[1, 1]) - np.arctan2(d[0, 0], d[0, 1]) + rng.normal(0, 1.4e-5)) % 360
        rows.append(f"{at},{back},{fore},{float(a)!r},{float(np.hypot(*d[1]) + rng.normal(0, 0.006))!r},s{k % 20}")
    table = "at,back,fore,angle,distance,setup\n" + "\n".join(rows) + "\n"
    marks = "station,east,north\n" + "".join(f"{n},{x},{y}\n" for n, (x, y) in xy.items() if n != "P")
    return plain(folder, {"traverse.csv": table, "control.csv": marks}, toml)


def test_a_table_that_mixes_groups_has_its_error_models_scaled(tmp_path: Path) -> None:
    solution = mixed(tmp_path, MIXED)
    one = by_name(components(solution))["distances of total-station"]
    assert one.verdict == "worse than stated"
    assert one.paste[0] == "[instruments.total-station]"
    assert len(one.paste) == 2
    (tmp_path / "job.toml").write_text(pasted((tmp_path / "job.toml").read_text("utf-8"), one.paste), "utf-8")
    again = by_name(components(adjust.solve(adjust.read(tmp_path))))["distances of total-station"]
    close(again.factor, 1.0, atol=0.03)
    assert again.verdict == "as stated"
    assert one.sentence.startswith("distances of total-station fit 3.8 ")
    assert f"times worse than stated ({judged.times(one.interval[0])} to " in one.sentence  # type: ignore[index]  # it has one


def test_pasted_centring_is_scaled_as_a_whole(tmp_path: Path) -> None:
    solution, _ = one_way([4] * 20, tmp_path)
    found = judged._component(solution, estimate(solution, last(solution)), 1, 0.9999)
    assert found.verdict != "cannot be told"
    assert found.sentence.startswith(f"centring fits {judged.times(found.sd_factor)} times worse than stated")
    assert found.paste == ("[instruments.e]", f'centring = "{2 * found.sd_factor:.3g} mm"')
    text = (tmp_path / "job.toml").read_text("utf-8").replace('"2 mm" }', found.paste[1].split(" = ")[1] + " }")
    (tmp_path / "job.toml").write_text(text, "utf-8")
    again = estimate(adjust.solve(adjust.read(tmp_path)), last(solution))
    close(again.theta[1], 1.0, atol=0.01)


def test_what_no_line_scales_alone_has_none(tmp_path: Path) -> None:
    """Angles and directions read the same figure, and a column sd in a mixed table has no key."""
    solution = mixed(tmp_path, MIXED)
    block = solution.network.blocks[1]
    own = replace(block, precision=("sd",) * len(block))
    network = replace(solution.network, blocks=(solution.network.blocks[0], own))
    told = replace(solution, setting=replace(solution.setting, network=network))
    grouping = groupings(solution.design)[0]
    assert judged.lines_to_paste(solution, grouping, 1, 2.0)
    assert judged.lines_to_paste(told, grouping, 1, 2.0) == ()
    found = estimate(told, grouping)
    assert judged._component(told, found, 1, 0.05).sentence.endswith(
        "; no line of job.toml scales them alone: give them a table or an instrument of their own"
    )


def test_weighted_control_is_scaled_in_its_table(tmp_path: Path) -> None:
    _, solution = solution_of("plane, weighted", tmp_path)
    found = estimate(solution, last(solution), least=0.0)
    g = found.grouping.labels.index("control coordinates")
    told = judged._component(solution, found, g, 0.9999)
    assert told.paste == ()
    assert told.sentence.endswith("scale its columns sd_east, sd_north, sd_height")


def test_what_is_estimated_changes_nothing(tmp_path: Path) -> None:
    """What is estimated is offered: the solution itself is not touched."""
    _, solution = solution_of("plane, held", tmp_path, 3.0)
    before = solution.residuals.copy(), solution.sd_readings.copy()
    assert any(c.verdict == "worse than stated" for c in components(solution))
    assert np.array_equal(before[0], solution.residuals)
    assert np.array_equal(before[1], solution.sd_readings)
    assert Result.of(solution.job).solution.total.square_sum == solution.total.square_sum


DRAWS = 120


@pytest.fixture(scope="module")
def levels(tmp_path_factory: pytest.TempPathFactory) -> tuple[Clean, Grouping, study.Drawn]:
    """A level net, its two levels, and the components of many draws."""
    print("seed", study.SEED)
    law, grouping = study.two_levels(tmp_path_factory.mktemp("levels"))
    return law, grouping, study.draws(law, grouping, {}, DRAWS)


def test_components_of_many_draws_are_right_on_the_average(levels: tuple[Clean, Grouping, study.Drawn]) -> None:
    """The study in small: mean, standard deviation, level of the verdict."""
    law, grouping, found = levels
    assert found.estimated.all()
    assert found.faults() == []
    assert found.rate[0] > 0
    worse = study.draws(law, grouping, {"second level": 4.0}, DRAWS)
    assert worse.faults() == []
    assert worse.flagged[:, 1].all()


def test_the_study_sees_a_sigma_wrong_by_5_per_cent_and_a_biased_estimate(
    levels: tuple[Clean, Grouping, study.Drawn],
) -> None:
    law, grouping, right = levels
    assert any("mean" in fault for fault in study.draws(law, grouping, {}, DRAWS, larger=1.05).faults())
    # plain maximum likelihood divides by the number of readings where the redundancy belongs
    share = Problem.of(adjust.solve(law.job), grouping).moments(np.ones(2)).t / np.bincount(grouping.of_row)
    assert any("mean" in fault for fault in replace(right, theta=right.theta * share).faults())
    assert any("stated" in fault for fault in replace(right, sd=right.sd * 1.5).faults())
    assert any("verdicts" in fault for fault in replace(right, flagged=right.sd > 0).faults())
